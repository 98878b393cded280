"""Several fits of the same data as one weighted base: the multi-sample equations."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.answers import Estimate
from steelyard.arrays import plain_array
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.pooling import Pooling
from steelyard.base.priors import PriorTerm
from steelyard.base.stacking import stack_draws
from steelyard.errors import ArgumentError, RatioError, ShapeError, SteelyardError
from steelyard.repair.agreement import contradictions, linked
from steelyard.repair.multi_sample import Solved, solve
from steelyard.repair.pooled import Pooled, constants_of
from steelyard.repair.pooled_terms import (
    Common,
    densities,
    likelihood_at,
    pooled_likelihood,
    pooled_prior,
    read_common,
    refuse_other_parameters,
)
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import relative_efficiency
from steelyard.weighing.weigh import base_weights

__all__ = ["assemble", "pool_records"]

# Parameters by which the effective size of a fit is judged: the first so many columns.
_MOST_COLUMNS = 64


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
    log_q, same_likelihood = densities(records, labels, draws, shared)
    return assemble(
        records,
        labels,
        draws,
        log_q,
        log_q[:, 0],
        pooled_prior(records, shared),
        pooled_likelihood(records, shared),
        log_constants,
        same_likelihood=same_likelihood,
        common=shared,
    )


def assemble(
    records: Sequence[Base],
    labels: Sequence[str],
    draws: Draws,
    log_q: Array,
    log_target: Array,
    prior: dict[str, PriorTerm] | None,
    likelihood: dict[str, LoglikTerm] | None,
    log_constants: Any = None,
    *,
    same_likelihood: bool = False,
    common: Common | None = None,
    findings: Sequence[Finding] = (),
    is_exact: bool = True,
) -> Pooled:
    """
    The record of a target from draws of several densities.

    Parameters
    ----------
    log_q : numpy.ndarray
        Log densities of the fits at all draws, ``(n, fits)``.
    log_target : numpy.ndarray
        That of the target, ``(n,)``.
    prior, likelihood : dict
        Terms of the target.
    common : Common, optional
        Terms left out of all densities, where the target is the first fit.
    findings : sequence of Finding
        What else is to be said of any answer.
    is_exact : bool
        Whether the densities are those that the draws came from.
    """
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
    found = (*findings, *_findings(pooling, made, sizes, labels, log_q, given, is_exact=is_exact))
    made = replace(draws, pooling=replace(pooling, findings=found))
    if common is not None:
        made = _reaching(made, records[0], log_q, solved, common)
    record = replace(
        records[0],
        draws=made,
        prior=prior,
        loglik=likelihood,
        log_weights=_weights(pooling, log_target, solved),
        stored_log_density=None,
        ordered=any(record.ordered for record in records),
        is_approximate=False,
    )
    mass = pooling.shared_draws / sizes[:, None]
    estimate = constants_of(solved, record, found, labels, given)
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
    reference = _weights(pooling, log_q[:, 0], solved)
    try:
        like = likelihood_at(first, draws.take(there), common)
    except SteelyardError:
        return draws
    with np.errstate(divide="ignore"):
        count = np.log(pooling.counts)
        unit = (count + log_q[:, 0] - solved.log_mixture).max()
    reference[there] = count[there] + total[there] + like - solved.log_mixture[there] - unit
    return replace(draws, pooling=replace(pooling, reference=reference, impossible=impossible))


def _weights(pooling: Pooling, log_target: Array, solved: Solved) -> Array:
    """Log weights of a target, ``c q/Σ_l n_l exp(f_l) q_l``, the largest at 0."""
    with np.errstate(divide="ignore"):
        weights = np.log(pooling.counts) + log_target - solved.log_mixture
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
    draws: Draws,
    sizes: Array,
    labels: Sequence[str],
    log_q: Array,
    given: Array | None,
    *,
    is_exact: bool,
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
    if is_exact:
        found += [
            judge("pool_contradiction", p, fit=who)
            for who, p in contradictions(pooling, draws, sizes, labels, log_q, given)
        ]
    return tuple(found)
