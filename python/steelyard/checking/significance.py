"""How surely a mean over the draws is not zero."""

from __future__ import annotations

import numpy as np

from steelyard import _core
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array

__all__ = ["STRICT", "z_and_p"]

# Over 200 clean fits of ten tests each, 0.02 false alarms are expected; ours.
STRICT = 1e-5


def z_and_p(f: Array, base: Base) -> tuple[Array, Array]:
    """
    z-values and two-sided p-values of the means of columns of `f` ``(n, k)``.

    Errors are those of series in chain order, between-chain part included; the p-value is
    Student's with a third of the effective draws as degrees of freedom, since the error is
    estimated too.
    """
    n, (f, _) = base.draws.size, in_unit(f)
    mean = f.mean(axis=0)
    if base.ordered:
        lrv = _core.long_run_variance(f, base.draws.starts, True)
    else:
        lrv = _core.mean_square(f)
    variance = _core.mean_square(f)
    error = np.sqrt(np.maximum(lrv, variance) / n)
    with np.errstate(divide="ignore", invalid="ignore"):
        z = np.where(error > 0, mean / error, 0.0)
        effective = np.where(error > 0, variance / error**2, n)
    p = _core.f_tail(z**2, 1.0, np.maximum(effective / 3, 1.0))
    return z, p
