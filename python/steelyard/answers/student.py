"""Student's t: how far an interval reaches whose error is itself uncertain."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base.draws import Array

__all__ = ["student_cdf", "student_quantile"]

# Beyond so many degrees the quantile is the normal one to six digits at any level in use.
_NORMAL = 1e6
_HALVINGS = 60


def student_quantile(level: float, degrees: npt.ArrayLike) -> Array:
    """
    Where a symmetric interval of probability `level` ends, for each of `degrees` (at least 1).

    Between the normal quantile and that of one degree, ``tan(π level/2)``, which hold it; found
    by halving their ratio. NaN stays NaN.
    """
    freedom = np.asarray(degrees, dtype=np.float64)
    flat = freedom.reshape(-1)
    z = float(_core.normal_quantile(np.array([0.5 + 0.5 * level]))[0])
    low = np.full(flat.shape, z)
    high = np.full(flat.shape, np.tan(0.5 * np.pi * level))
    finite = np.clip(np.where(np.isnan(flat), 1.0, flat), 1.0, _NORMAL)
    for _ in range(_HALVINGS):
        middle = np.sqrt(low * high)
        beyond = _core.f_tail(middle**2, 1.0, finite) > 1 - level
        low, high = np.where(beyond, middle, low), np.where(beyond, high, middle)
    found = np.where(flat >= _NORMAL, z, np.sqrt(low * high))
    return np.where(np.isnan(flat), np.nan, found).reshape(freedom.shape)


def student_cdf(t: Array, degrees: Array) -> Array:
    """Probability below `t` ≥ 0, elementwise."""
    finite = np.clip(np.where(np.isnan(degrees), 1.0, degrees), 1.0, _NORMAL)
    student = 1 - 0.5 * _core.f_tail(np.minimum(t, 1e150) ** 2, 1.0, finite)
    return np.where(degrees >= _NORMAL, _core.normal_cdf(t), student)
