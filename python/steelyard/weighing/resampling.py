"""Equally weighted draws from weighted ones."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import plain_array
from steelyard.errors import ArgumentError, ArgumentTypeError, ShapeError
from steelyard.weighing.arrays import columns_of, refuse_bad_log_weights, seed_key

__all__ = ["METHODS", "resample"]

# Positions of 8 bytes each: 16 GB.
_MOST = 2**31
METHODS = ("systematic", "stratified", "residual", "multinomial", "without_replacement")
Method = Literal["systematic", "stratified", "residual", "multinomial", "without_replacement"]


def resample(
    log_weights: npt.ArrayLike, size: int, method: Method = "systematic", *, rng: Any = None
) -> npt.NDArray[np.int64]:
    """
    Positions of draws chosen with probability in proportion to their weight.

    Parameters
    ----------
    log_weights : array_like
        Log weights, shape ``(n,)``, need not be normalised.
    size : int
        How many positions, at least 1.
    method : str, optional
        ``"systematic"`` [1]_ (counts differ from ``size·w`` by less than 1), ``"stratified"``
        [1]_, ``"residual"`` [2]_, ``"multinomial"``, or ``"without_replacement"`` [3]_.
    rng : None, int or numpy.random.Generator, optional
        Seed or generator (SPEC 7). The generator advances.

    Returns
    -------
    numpy.ndarray
        Ascending int64 positions, shape ``(size,)``. The same for any number of threads.

    Raises
    ------
    ArgumentError, ArgumentTypeError
        For a size below 1, an unknown method, an `rng` of a wrong type, or more draws without
        replacement than carry weight.
    RatioError
        For NaN, +inf, or −inf for every draw.

    References
    ----------
    .. [1] Kitagawa (1996), J. Comput. Graph. Stat. 5.
    .. [2] Liu, Chen (1998), JASA 93.
    .. [3] Efraimidis, Spirakis (2006), Inf. Process. Lett. 97.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard import weights
    >>> weights.resample(np.log([0.5, 0.25, 0.25]), 4, rng=1).tolist()
    [0, 0, 1, 2]
    """
    if isinstance(size, bool) or not isinstance(size, int | np.integer):
        raise ArgumentTypeError("size", "an integer", repr(size), "Say how many draws.")
    if not 1 <= size <= _MOST:
        raise ArgumentError("size", f"from 1 to {_MOST:,}", str(size), "Say how many draws.")
    if not isinstance(method, str) or method not in METHODS:
        raise ArgumentError("method", f"one of {', '.join(METHODS)}", repr(method), "Choose one.")
    key = seed_key(rng)
    array = plain_array(log_weights, "log_weights", "fiu")
    if array.ndim != 1:
        raise ShapeError("log_weights", "shape (n,)", str(array.shape), "Resample one vector.")
    columns = columns_of(array, None, "log_weights")
    ((_, block),) = columns.blocks()
    refuse_bad_log_weights(block, "log_weights")
    logs = block[:, 0]
    w = np.exp(logs - logs.max())
    # Weights that vanish beside the largest are zero to the kernel, and so to this count.
    positive = int((w > 0).sum())
    if method == "without_replacement" and size > positive:
        raise ArgumentError(
            "size",
            f"at most the {positive} draws that carry weight",
            str(size),
            "Ask for fewer, or choose a method with replacement.",
        )
    return _core.resample(w, int(size), method, key)
