"""Several fits of the same data as one weighted base: the multi-sample equations."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.answers import Estimate
from steelyard.arrays import Frozen, plain_array
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling
from steelyard.base.stacking import stack_draws
from steelyard.checking import Findings, check
from steelyard.errors import ArgumentError, RatioError, ShapeError, SteelyardError
from steelyard.repair.agreement import contradictions, linked
from steelyard.repair.constants import Solved, solve
from steelyard.repair.pooled_terms import (
    Common,
    densities,
    likelihood_at,
    pooled_likelihood,
    pooled_prior,
    read_common,
    refuse_other_parameters,
)
from steelyard.table import Table
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    contributions_of,
    degrees_of,
    long_run_variance,
    relative_efficiency,
    tail_of,
)
from steelyard.weighing.weigh import base_weights

__all__ = ["Pooled", "pool_records"]

# Parameters by which the effective size of a fit is judged: the first so many columns.
_MOST_COLUMNS = 64


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


def pool_records(
    records: Sequence[Base],
    labels: Sequence[str],
    common: Any = (),
    log_constants: Any = None,
) -> Pooled:
    """One record of the draws of all fits; see ``steelyard.pool``."""
    refuse_other_parameters(records, labels)
    shared = read_common(common, records, labels)
    draws = stack_draws(records, labels)
    prior, likelihood = pooled_prior(records, shared), pooled_likelihood(records, shared)
    log_q, same_likelihood = densities(records, labels, draws, shared)
    edges = np.concatenate([[0], np.cumsum([r.draws.size for r in records])]).astype(np.int64)
    own = np.concatenate([base_weights(record).linear for record in records])
    _refuse_impossible(log_q, edges, own, labels)
    given = None if log_constants is None else _given(log_constants, len(records))
    pooling, sizes, solved = _solved(records, log_q, edges, own, given)
    pooling = replace(
        pooling,
        priors=tuple(record.prior or {} for record in records),
        same_likelihood=same_likelihood,
    )
    made = replace(draws, pooling=pooling)
    findings = _findings(pooling, made, sizes, labels, log_q, given)
    made = replace(draws, pooling=replace(pooling, findings=findings))
    made = _reaching(made, records[0], log_q, solved, shared)
    record = replace(
        records[0],
        draws=made,
        prior=prior,
        loglik=likelihood,
        log_weights=_weights_of_first(pooling, log_q, solved),
        stored_log_density=None,
        ordered=any(record.ordered for record in records),
        is_approximate=False,
    )
    mass = (pooling.shares.T * pooling.counts) @ pooling.shares / sizes[:, None]
    estimate = _constants(solved, record, findings, labels, given)
    return Pooled(record, tuple(labels), estimate, mass, sizes, tuple(records))


def _reaching(draws: Draws, first: Base, log_q: Array, solved: Solved, common: Common) -> Draws:
    """
    Draws whose pooling knows how a change may reach where the first fit has no density.

    Prior terms of it that vanish count as one; its likelihood is asked for there, and where it
    cannot be had the draws are left without weight.
    """
    pooling = draws.pooling
    gone = log_q[:, 0] == -np.inf
    if pooling is None or not gone.any():
        return draws
    impossible, total = {}, np.zeros(draws.size)
    for label, term in (first.prior or {}).items():
        if label not in common.prior:
            values = term.log_density_checked(draws)
            nowhere = values == -np.inf
            if nowhere.any():
                impossible[label] = nowhere
            total += np.where(nowhere, 0.0, values)
    there = np.flatnonzero(gone)
    reference = _weights_of_first(pooling, log_q, solved)
    try:
        like = likelihood_at(first, draws.take(there), common)
    except SteelyardError:
        return draws
    with np.errstate(divide="ignore"):
        count = np.log(pooling.counts)
        unit = (count + log_q[:, 0] - solved.log_mixture).max()
    reference[there] = count[there] + total[there] + like - solved.log_mixture[there] - unit
    return replace(draws, pooling=replace(pooling, reference=reference, impossible=impossible))


def _weights_of_first(pooling: Pooling, log_q: Array, solved: Solved) -> Array:
    with np.errstate(divide="ignore"):
        weights = np.log(pooling.counts) + log_q[:, 0] - solved.log_mixture
    return np.asarray(weights - weights.max())


def _given(log_constants: Any, count: int) -> Array:
    values = log_constants.value if isinstance(log_constants, Estimate) else log_constants
    array = plain_array(values, "log_constants", "fiu").astype(np.float64)
    if array.shape != (count,):
        raise ShapeError(
            "log_constants",
            f"one number a fit, shape ({count},)",
            str(array.shape),
            "Pass log normalising constants, up to one common number.",
        )
    if not np.isfinite(array).all():
        raise ArgumentError("log_constants", "finite numbers", str(array), "Leave them out.")
    return np.asarray(array - array[0])


def _refuse_impossible(
    log_q: Array, edges: npt.NDArray[np.int64], own: Array, labels: Sequence[str]
) -> None:
    for fit, label in enumerate(labels):
        rows = slice(int(edges[fit]), int(edges[fit + 1]))
        bad = (log_q[rows, fit] == -np.inf) & (own[rows] > 0)
        if bad.any():
            raise RatioError(
                f"fits: {label}",
                "draws inside the support of the fit's own terms",
                f"log density −inf at {int(bad.sum())} of {len(bad)} draws, first at "
                f"{int(np.argmax(bad))}",
                "The draws did not come from these terms: state those that were fitted.",
            )


def _solved(
    records: Sequence[Base],
    log_q: Array,
    edges: npt.NDArray[np.int64],
    own: Array,
    given: Array | None,
) -> tuple[Pooling, Array, Solved]:
    """Constants with every draw taken as one, then again by effective sizes."""
    lengths = np.diff(edges)
    parts = [own[a:b] for a, b in pairwise(edges.tolist())]
    kish = np.array([1 / float((part**2).sum()) for part in parts])
    first, _ = solve(log_q, edges, own, kish, given)
    sizes = np.empty(len(records))
    for fit, record in enumerate(records):
        rows = slice(int(edges[fit]), int(edges[fit + 1]))
        sizes[fit] = kish[fit] * _efficiency(record, own[rows], first.shares[rows])
    pooling, solved = solve(log_q, edges, own, np.minimum(sizes, lengths), given)
    ordered = tuple(bool(record.ordered) for record in records)
    return replace(pooling, ordered=ordered), np.minimum(sizes, lengths), solved


def _efficiency(record: Base, own: Array, shares: Array) -> float:
    """
    Effective draws of a fit to one of its draws.

    The harmonic mean over the parameters and over the shares of the other fits, which are what
    the equations average.
    """
    held = [record.draws[name].reshape(record.draws.size, -1) for name in record.parameters]
    columns = np.concatenate([*held, shares], axis=1)
    if columns.shape[1] > _MOST_COLUMNS:
        columns = np.concatenate([columns[:, : _MOST_COLUMNS - shares.shape[1]], shares], axis=1)
    z = len(own) * own[:, None] * (columns - own @ columns)
    scale = np.abs(columns).max(axis=0)
    varies = np.sqrt((z**2).mean(axis=0)) > 1e-9 * np.where(scale > 0, scale, 1.0)
    if not varies.any():
        return 1.0
    found = relative_efficiency(np.ascontiguousarray(z[:, varies]), record.draws, record.ordered)
    return float(1 / np.mean(1 / found))


def _findings(
    pooling: Pooling,
    draws: Any,
    sizes: Array,
    labels: Sequence[str],
    log_q: Array,
    given: Array | None,
) -> tuple[Finding, ...]:
    """Fits that hardly overlap with the others, and fits that contradict them."""
    found: list[Finding] = []
    if given is None:
        links = linked(pooling)
        found += [
            judge("pool_overlap", link, fit=label)
            for label, link in zip(labels[1:], links[1:], strict=True)
            if link < math.inf
        ]
    found += [
        judge("pool_contradiction", p, fit=who)
        for who, p in contradictions(pooling, draws, sizes, labels, log_q, given)
    ]
    return tuple(found)


def _constants(
    solved: Solved,
    record: Base,
    findings: Sequence[Finding],
    labels: Sequence[str],
    given: Array | None,
) -> Estimate:
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
