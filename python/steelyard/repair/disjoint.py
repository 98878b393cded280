"""Posteriors of disjoint data: their product, the prior counted once."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm, called_term
from steelyard.base.stacking import stack_draws
from steelyard.errors import ArgumentError, DrawsError, LikelihoodError, PriorError
from steelyard.repair.pooled import Pooled
from steelyard.repair.pooled_terms import (
    Common,
    densities,
    likelihood_at,
    pooled_prior,
    refuse_other_parameters,
)
from steelyard.repair.pooling import assemble
from steelyard.repair.transforms import to_line
from steelyard.verdicts import judge
from steelyard.weighing.weigh import base_weights

__all__ = ["pool_disjoint"]

_NONE = Common(frozenset(), frozenset())


def pool_disjoint(
    records: Sequence[Base], labels: Sequence[str], common: Any = (), log_constants: Any = None
) -> Pooled:
    """
    One record of the posterior of all data; see ``steelyard.pool``.

    Its density is ``π Π_k L_k``. The likelihood of a fit that is an array is known at its own
    draws only: it is taken to be that fit's posterior over its prior, the posterior approximated
    by a normal where the supports of the prior are mapped to the line.
    """
    if common not in ((), [], None, ""):
        raise ArgumentError(
            "common", "nothing, for disjoint data", repr(common), "Parts of data share no term."
        )
    refuse_other_parameters(records, labels)
    _refuse_unstated(records, labels)
    draws = stack_draws(records, labels)
    terms: dict[str, LoglikTerm] = {}
    target, _ = densities([_prior_only(records[0])], labels[:1], draws, _NONE)
    log_target = target[:, 0].copy()
    columns, approximate = [], 0
    for record, label in zip(records, labels, strict=True):
        own, _ = densities([_prior_only(record)], [label], draws, _NONE)
        prior = own[:, 0]
        if all(called_term(term.source) for term in (record.loglik or {}).values()):
            like = _where_possible(record, draws, prior)
            columns.append(prior + like)
            terms |= _named(record, label, records)
        else:
            approximate += 1
            column = _normal(record, label, draws)
            columns.append(column)
            with np.errstate(invalid="ignore"):
                like = np.where(prior > -np.inf, column - prior, -np.inf)
            name = f"{label} (normal approximation)"
            terms[name] = LoglikTerm(name, like, ())
        log_target += like
    extra = [judge("pool_approximate", float(approximate))] if approximate else []
    return assemble(
        records,
        labels,
        draws,
        np.stack(columns, axis=1),
        log_target,
        pooled_prior(records, _NONE),
        terms,
        log_constants,
        findings=extra,
        is_exact=not approximate,
    )


def _refuse_unstated(records: Sequence[Base], labels: Sequence[str]) -> None:
    """The prior can be counted once where prior and likelihood are told apart."""
    for record, label in zip(records, labels, strict=True):
        for kind, held, error in (
            ("prior", record.prior, PriorError),
            ("likelihood", record.loglik, LikelihoodError),
        ):
            if not held:
                raise error(
                    f"fits: {label}",
                    f"a fit whose {kind} is stated, so that the prior can be counted once",
                    "one without",
                    "State it.",
                )


def _prior_only(record: Base) -> Base:
    return Base(record.draws, record.prior)


def _where_possible(record: Base, draws: Draws, prior: Array) -> Array:
    """Log likelihood where the fit's own prior has mass; −inf elsewhere."""
    rows = np.flatnonzero(prior > -np.inf)
    out = np.full(draws.size, -np.inf)
    if len(rows):
        out[rows] = likelihood_at(record, draws.take(rows), _NONE)
    return out


def _named(record: Base, label: str, records: Sequence[Base]) -> dict[str, LoglikTerm]:
    """Terms of one fit, the fit before the name where several fits use it."""
    out = {}
    for name, term in (record.loglik or {}).items():
        several = sum(name in (other.loglik or {}) for other in records) > 1
        own = f"{label}: {name}" if several else name
        out[own] = LoglikTerm(own, term.source, term.obs_shape, dims=term.dims, labels=term.labels)
    return out


def _normal(record: Base, label: str, draws: Draws) -> Array:
    """Log density at all draws of a normal with the moments of one fit's draws on the line."""
    own, _ = _on_the_line(record, record.draws)
    weights = base_weights(record).linear
    mean = weights @ own
    centred = own - mean
    covariance = (centred * weights[:, None]).T @ centred
    try:
        root = np.linalg.cholesky(covariance)
    except np.linalg.LinAlgError as error:
        raise DrawsError(
            f"fits: {label}",
            "draws whose covariance can be inverted",
            f"{own.shape[1]} parameters of which some hang on others",
            "Leave derived quantities out, or give the likelihood as a callable.",
        ) from error
    values, jacobian = _on_the_line(record, draws)
    with np.errstate(invalid="ignore"):
        z = np.linalg.solve(root, (values - mean).T)
        constant = np.log(np.diag(root)).sum() + 0.5 * len(mean) * np.log(2 * np.pi)
        out = -0.5 * (z**2).sum(axis=0) - constant + jacobian
    return np.asarray(np.where(np.isfinite(values).all(axis=1), out, -np.inf))


def _on_the_line(record: Base, draws: Draws) -> tuple[Array, Array]:
    """Parameters mapped from the supports of their priors to the line, and the log Jacobian."""
    limits = _limits(record)
    columns, jacobian = [], np.zeros(draws.size)
    for name in record.parameters:
        x = draws[name].reshape(draws.size, -1)
        low, high = (np.broadcast_to(e, x.shape[1:]) for e in limits.get(name, (-np.inf, np.inf)))
        line = to_line(x, low, high)
        has_low, has_high = np.isfinite(low), np.isfinite(high)
        with np.errstate(divide="ignore", invalid="ignore"):
            between = np.log(high - low) - np.log(x - low) - np.log(high - x)
            beyond_one = np.where(has_low | has_high, -line, 0.0)
        slope = np.where(has_low & has_high, between, beyond_one)
        columns.append(line)
        jacobian += np.where(np.isfinite(slope), slope, 0.0).sum(axis=1)
    return np.concatenate(columns, axis=1), jacobian


def _limits(record: Base) -> dict[str, tuple[Array, Array]]:
    """Supports of whole parameters whose prior is a distribution with limits that stay."""
    found = {}
    draws = record.draws
    for term in (record.prior or {}).values():
        if not (isinstance(term.key, str) and term.key in draws and term.is_distribution):
            continue
        shape = draws[term.key].shape
        limits = term.density.support(shape, look_up=draws.look_up)
        low, high = (np.broadcast_to(e, shape).reshape(draws.size, -1) for e in limits)
        if (low == low[0]).all() and (high == high[0]).all():
            found[term.key] = (low[0], high[0])
    return found
