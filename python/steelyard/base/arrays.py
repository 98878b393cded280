"""One array of numbers from whatever holds it: numpy, a DLPack exporter, a list, a lazy array."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.errors import ArgumentTypeError, DrawsError, ShapeError

__all__ = ["plain_array"]

# Device types of the DLPack standard whose memory the CPU may read: the CPU's own, and what CUDA
# and ROCm pin or manage for both sides.
_READABLE = {1, 3, 11, 13}
_DEVICES = {2: "CUDA", 4: "OpenCL", 7: "Vulkan", 8: "Metal", 10: "ROCm", 14: "oneAPI"}


def plain_array(source: Any, argument: str) -> npt.NDArray[Any]:
    """
    A numpy array of real numbers, referenced where that is possible and not yet converted.

    Parameters
    ----------
    source : array_like
        A numpy array or list, anything with ``__dlpack__`` in the CPU's memory, or anything that
        numpy converts (dask arrays are computed).
    argument : str
        What an error calls it.

    Returns
    -------
    numpy.ndarray
        Of the source's own dtype; never to be written to.

    Raises
    ------
    ArgumentTypeError
        For complex, text and object arrays, and for arrays on another device.
    ShapeError
        For rows of unequal length.
    DrawsError
        For masked entries, which numpy would fill in silently.
    """
    if isinstance(source, np.ma.MaskedArray):
        source = _unmasked(source, argument)
    if not isinstance(source, np.ndarray | np.generic) and hasattr(source, "__dlpack__"):
        source = _from_dlpack(source, argument)
    try:
        array = np.asarray(source)
    except ValueError as error:
        raise ShapeError(
            argument,
            "an array of equal rows",
            f"ragged rows ({error})",
            "For chains of unequal length stack the draws and pass chain= with the chain of each.",
        ) from error
    if array.dtype.kind not in "fiub":
        raise ArgumentTypeError(
            argument,
            "real numbers",
            f"dtype {array.dtype}",
            "Convert to float64; complex, text and object arrays are refused.",
        )
    return array


def _unmasked(source: np.ma.MaskedArray[Any, Any], argument: str) -> npt.NDArray[Any]:
    masked = int(np.ma.count_masked(source))
    if masked:
        raise DrawsError(
            argument,
            "a number in every entry",
            f"a masked array with {masked} entries masked",
            "Find out why they are missing; what lies under a mask is no draw.",
        )
    return np.asarray(source.data)


def _from_dlpack(source: Any, argument: str) -> npt.NDArray[Any]:
    kind, index = source.__dlpack_device__() if hasattr(source, "__dlpack_device__") else (1, 0)
    if int(kind) not in _READABLE:
        device = _DEVICES.get(int(kind), f"DLPack type {int(kind)}")
        raise ArgumentTypeError(
            argument,
            "an array in the memory of the CPU",
            f"one on device {device}:{index}",
            "Copy it to the CPU first, with the .cpu() or device_get() of its library.",
        )
    try:
        return np.from_dlpack(source)
    except (BufferError, RuntimeError, TypeError, ValueError) as error:
        raise ArgumentTypeError(
            argument,
            "an array that numpy can view through DLPack",
            f"a {type(source).__name__} that refused: {error}",
            "Detach it from gradients, convert it to float32 or float64, and copy it to the CPU.",
        ) from error
