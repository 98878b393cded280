"""Fits pooled into one record, and their constants as an Estimate."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from steelyard.answers import Estimate
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.checking import Findings, check
from steelyard.repair.agreement import linked
from steelyard.repair.multi_sample import Solved
from steelyard.table import Table
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    contributions_of,
    degrees_of,
    long_run_variance,
    relative_efficiency,
    tail_of,
)

__all__ = ["Pooled", "constants_of"]


@dataclass(frozen=True, eq=False)
class Pooled(Frozen):
    """
    Fits pooled into one record.

    Attributes
    ----------
    record : Base
        All draws, weighted to the posterior of the first fit.
    labels : tuple of str
        Names of the fits.
    log_constants : Estimate
        Log normalising constants relative to the first fit's.
    shared_mass : numpy.ndarray
        How much of the mass of a fit (row) lies where another (column) makes draws, ``(K, K)``.
    sizes : numpy.ndarray
        Effective sizes of the fits.
    fits : tuple of Base
        The fits as they came.
    """

    record: Base
    labels: tuple[str, ...]
    log_constants: Estimate
    shared_mass: Array
    sizes: Array
    fits: tuple[Base, ...] = ()

    def check(self) -> Findings:
        """Findings of every fit by itself."""
        found = []
        for label, record in zip(self.labels, self.fits, strict=True):
            found += [replace(one, check=f"{label}: {one.check}") for one in check(record)]
        return Findings(tuple(found))

    def table(self) -> Table:
        """One row for each fit."""
        constants = self.log_constants
        columns: dict[str, Any] = {
            "fit": list(self.labels),
            "draws": [record.draws.size for record in self.fits],
            "effective": [round(float(size), 1) for size in self.sizes],
            "log_constant": [float(v) for v in constants.value],
            "error": [float(e) for e in constants.error],
            "own_mass": [round(float(m), 3) for m in np.diag(self.shared_mass)],
        }
        errors = {"log_constant": columns["error"], "error": columns["error"]}
        return Table(columns, errors)

    @cached_property
    def covariance(self) -> Array:
        """Monte Carlo covariance of the log constants, ``(K, K)``."""
        draws = self.record.draws
        assert draws.pooling is not None
        series = draws.pooling.constants
        count = series.shape[1]
        pairs = [(i, j) for i in range(count) for j in range(i)]
        columns = [series[:, [i]] - series[:, [j]] for i, j in pairs]
        apart = np.zeros((count, count))
        if columns:
            lrv = long_run_variance(np.concatenate(columns, axis=1), draws, True) / draws.size
            for (i, j), variance in zip(pairs, lrv, strict=True):
                apart[i, j] = apart[j, i] = variance
        # 2 cov(i, j) = var i + var j − var(i − j), with the first held at 0.
        both = 0.5 * (apart[:, [0]] + apart[[0], :] - apart)
        values, vectors = np.linalg.eigh(both)
        return np.asarray((vectors * np.maximum(values, 0.0)) @ vectors.T)


def constants_of(
    solved: Solved,
    record: Base,
    findings: Sequence[Finding],
    labels: Sequence[str],
    given: Array | None,
) -> Estimate:
    """Log constants relative to the first fit's, from their influence series."""
    draws = record.draws
    series = solved.series
    lrv = long_run_variance(series, draws, record.ordered)
    error = np.sqrt(lrv / draws.size)
    if given is None and draws.pooling is not None:
        # Fits that share no draw say nothing of each other.
        error = np.where(linked(draws.pooling) < 1, math.inf, error)
    efficiency = relative_efficiency(series, draws, record.ordered)
    shape = tail_of(series, efficiency, draws, record.ordered)
    carried = contributions_of(series, efficiency, draws, record.ordered)
    spread = (series**2).mean(axis=0)
    known = error > 0
    effective = np.where(known, spread / np.where(known, error, 1.0) ** 2, float(draws.size))
    verdict = Verdict([*findings, judge("few_contributions", carried)], error.shape)
    return Estimate(
        0.0 - solved.constants,
        error,
        shape,
        verdict,
        effective,
        degrees=degrees_of(carried, efficiency, draws),
        label="log constants",
        dims=("fit",),
        labels={"fit": np.array(labels, dtype=object)},
    )
