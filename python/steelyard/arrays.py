"""Arrays at the door: nothing masked, ragged or of another kind passes unseen; frozen inside."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import fields, is_dataclass
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

from steelyard.errors import ArgumentTypeError, ShapeError

__all__ = ["Frozen", "ReadOnly", "frozen", "in_unit", "plain_array"]

Floats = npt.NDArray[np.float64]
Value = TypeVar("Value")

# Device types of the DLPack standard whose memory the CPU may read: the CPU's own, and what CUDA
# and ROCm pin or manage for both sides.
_READABLE = {1, 3, 11, 13}
_DEVICES = {2: "CUDA", 4: "OpenCL", 7: "Vulkan", 8: "Metal", 10: "ROCm", 14: "oneAPI"}


def plain_array(source: Any, argument: str, kinds: str = "fiub") -> npt.NDArray[Any]:
    """
    A numpy array of numbers, not converted yet.

    Parameters
    ----------
    source : array_like
        Anything that numpy reads, or that offers DLPack in the memory of the CPU.
    argument : str
        What an error calls it.
    kinds : str
        Accepted kinds of dtype, as in ``numpy.dtype.kind``.

    Raises
    ------
    ArgumentTypeError
        For masked values, ragged rows' objects, complex numbers, text, or memory elsewhere.
    ShapeError
        For ragged rows.
    """
    if isinstance(source, np.ma.MaskedArray):
        masked = int(np.ma.getmaskarray(source).sum())
        if masked:
            raise ArgumentTypeError(
                argument, "a value everywhere", f"{masked} masked values", "Fill or leave them out."
            )
        source = source.data
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
    if array.dtype.kind not in kinds:
        raise ArgumentTypeError(
            argument,
            "real numbers",
            f"dtype {array.dtype}",
            "Convert to float64; complex, text and object arrays are refused.",
        )
    return array


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


def frozen(values: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """A view of the array that cannot be written to."""
    view = values.view()
    view.flags.writeable = False
    return view


def in_unit(f: Floats) -> tuple[Floats, Floats]:
    """
    Columns in a unit in which fourth powers neither overflow nor vanish, and that unit.

    The unit is 1 but for columns beyond 1e±60, and a power of two, so that nothing is rounded.
    """
    top = np.maximum(f.max(axis=0), -f.min(axis=0))
    _, exponent = np.frexp(np.where(top > 0, top, 1.0))
    unit = np.where(np.abs(exponent) > 200, np.ldexp(1.0, exponent - 1), 1.0)
    return (f / unit if (unit != 1).any() else f), unit


class Frozen:
    """
    Mixin for frozen dataclasses: their arrays are read-only, also after unpickling.

    numpy forgets the flag when an array is pickled.
    """

    def __post_init__(self) -> None:
        if is_dataclass(self):
            for field in fields(self):
                value = getattr(self, field.name)
                if isinstance(value, np.ndarray) and value.flags.writeable:
                    object.__setattr__(self, field.name, frozen(value))

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update(state)
        for name, value in state.items():
            if isinstance(value, np.ndarray):
                self.__dict__[name] = frozen(value)


class ReadOnly(Mapping[str, Value]):
    """A mapping that cannot be changed, with read-only arrays, and that can be pickled."""

    __slots__ = ("_items",)

    def __init__(self, items: Mapping[str, Value]) -> None:
        self._items = {k: _held(v) for k, v in items.items()}

    def __getitem__(self, name: str) -> Value:
        return self._items[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._items)

    def __len__(self) -> int:
        return len(self._items)

    def __repr__(self) -> str:
        return repr(self._items)

    def __reduce__(self) -> tuple[type[ReadOnly[Value]], tuple[dict[str, Value]]]:
        return ReadOnly, (self._items,)


def _held(value: Value) -> Value:
    return frozen(value) if isinstance(value, np.ndarray) else value  # type: ignore[return-value]
