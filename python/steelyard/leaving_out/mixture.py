"""Draws from the mixture of all deletion posteriors: one set that serves every deletion."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.base import Base
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.errors import ArgumentError, ShapeError
from steelyard.leaving_out.grouping import read_groups

__all__ = ["deletion_mixture", "sampled_from"]


def deletion_mixture(loglik: Any) -> Any:
    """
    What a sampler adds to the log posterior to draw from the mixture of all deletions.

    Parameters
    ----------
    loglik : array_like
        Log likelihood by observation, ``(*draws, observations)``.

    Returns
    -------
    numpy.ndarray or float
        ``log Σ_i exp(−L_i)`` over the last axis.

    Raises
    ------
    ArgumentTypeError
        For anything but real numbers.
    ShapeError
        For ragged rows, or no axis of observations.

    Notes
    -----
    Draws from ``posterior · Σ_i exp(−L_i)`` give every deletion bounded weights, whatever its
    leverage [1]_. Tell the fit with ``Fit(…, sampled="deletions")``: it weighs its draws back to
    the posterior, and leaving out then uses the right weights.

    References
    ----------
    .. [1] Silva, Zanella (2022), J. Am. Stat. Assoc. 119.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard.leaving_out import deletion_mixture
    >>> round(float(deletion_mixture([np.log(0.5), np.log(0.25)])), 6)
    1.791759
    """
    values = -plain_array(loglik, "loglik", "fiu").astype(np.float64)
    if values.ndim == 0 or values.shape[-1] == 0:
        raise ShapeError("loglik", "an axis of observations", str(values.shape), "Pass them all.")
    top = values.max(axis=-1, keepdims=True)
    return (top + np.log(np.exp(values - top).sum(axis=-1, keepdims=True)))[..., 0]


def sampled_from(base: Base, sampled: Any, groups: Any = None, term: str | None = None) -> Base:
    """
    The record of draws from what `sampled` names, weighted back to the posterior.

    ``"posterior"`` leaves it alone; ``"deletions"`` adds base log weights ``−log Σ_g exp(−G_g)``.
    """
    if sampled == "posterior":
        return base
    if sampled != "deletions":
        raise ArgumentError(
            "sampled", "'posterior' or 'deletions'", repr(sampled), "Say what the draws came from."
        )
    found = read_groups(base, groups, term)
    total = np.full(base.draws.size, -np.inf)
    for _, held, _ in found.blocks(base.draws, np.arange(found.count, dtype=np.int64)):
        total = np.logaddexp(total, np.logaddexp.reduce(-held, axis=1))
    weights = -total if base.log_weights is None else base.log_weights - total
    refuse_bad_ratio(weights, base.draws, "sampled")
    return replace(base, log_weights=weights - weights.max())
