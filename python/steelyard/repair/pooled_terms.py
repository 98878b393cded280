"""Terms of several fits at the draws of all of them; terms that all share cancel."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm, called_term
from steelyard.base.names import close_names
from steelyard.base.priors import PriorTerm, same_density
from steelyard.base.stacking import stacked_term
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    LikelihoodError,
    PriorError,
    ShapeError,
    UnknownNameError,
)

__all__ = [
    "Common",
    "densities",
    "likelihood_at",
    "pooled_likelihood",
    "pooled_prior",
    "read_common",
    "refuse_other_parameters",
]

_KINDS = ("prior", "likelihood")


@dataclass(frozen=True)
class Common:
    """Labels of the terms that cancel, prior terms and likelihood terms apart."""

    prior: frozenset[str]
    likelihood: frozenset[str]


def read_common(common: Any, records: Sequence[Base], labels: Sequence[str]) -> Common:
    """Which terms cancel; each name must be one that a fit states, or a kind that none states."""
    names = [common] if isinstance(common, str) else common
    if not isinstance(names, Iterable) or not all(isinstance(name, str) for name in names):
        raise ArgumentTypeError(
            "common", "names of terms", repr(common), 'Write common=("gauge A",).'
        )
    stated = {
        "prior": {label for r in records for label in r.prior or {}},
        "likelihood": {name for r in records for name in r.loglik or {}},
    }
    found: dict[str, set[str]] = {kind: set() for kind in _KINDS}
    for name in names:
        kinds = [kind for kind in _KINDS if name.removeprefix(f"{kind}: ") in stated[kind]]
        kinds += [name] if name in _KINDS and not stated[name] else []
        if not kinds:
            known = [*stated["prior"], *stated["likelihood"]]
            raise UnknownNameError(
                "common", "a term that the fits state", repr(name), close_names(name, known)
            )
        if len(kinds) > 1:
            raise ArgumentError(
                "common",
                "a name that means one term",
                f"{name!r}, a prior and a likelihood term",
                f"Write 'prior: {name}' or 'likelihood: {name}'.",
            )
        found[kinds[0]].add(name.removeprefix(f"{kinds[0]}: "))
    _refuse_unstated(records, labels, found)
    return Common(frozenset(found["prior"]), frozenset(found["likelihood"]))


def _refuse_unstated(
    records: Sequence[Base], labels: Sequence[str], common: Mapping[str, set[str]]
) -> None:
    """A kind that a fit does not state must cancel, and a common term must be in every fit."""
    for kind, error in (("prior", PriorError), ("likelihood", LikelihoodError)):
        held = [(r.prior if kind == "prior" else r.loglik) or {} for r in records]
        asked = {name for terms in held for name in terms} - common[kind]
        for label, terms in zip(labels, held, strict=True):
            if not terms and (asked or kind not in common[kind]) and not _all(held, common[kind]):
                raise error(
                    f"fits: {label}",
                    f"a fit whose {kind} is stated",
                    "one without",
                    f"State it, or say with common= that it is the same in all fits ({kind!r} "
                    "where none states it).",
                )
            lacking = sorted(common[kind] - set(terms)) if terms else []
            if lacking:
                raise UnknownNameError(
                    "common",
                    "terms that every fit states",
                    f"{lacking[0]!r}, which {label} does not",
                    close_names(lacking[0], terms),
                )


def _all(held: Sequence[Mapping[str, Any]], common: set[str]) -> bool:
    """Whether every term that any fit states is a common one."""
    names = {name for terms in held for name in terms}
    return bool(names) and names <= common


def densities(
    records: Sequence[Base], labels: Sequence[str], draws: Draws, common: Common
) -> tuple[Array, bool]:
    """
    Log density of every fit at all draws ``(n, fits)``, common terms left out.

    Also whether the fits differ in prior terms only. A term that several fits hold is evaluated
    once; a likelihood is not asked for where the prior of its fit is zero.
    """
    out = np.zeros((draws.size, len(records)))
    priors: list[tuple[PriorTerm, Array]] = []
    for column, (record, label) in enumerate(zip(records, labels, strict=True)):
        for name, term in (record.prior or {}).items():
            if name not in common.prior:
                out[:, column] += _prior(term, draws, label, priors)
    likelihoods: list[tuple[Any, Array]] = []
    for column, (record, label) in enumerate(zip(records, labels, strict=True)):
        possible = out[:, column] > -np.inf
        for name, like in (record.loglik or {}).items():
            if name not in common.likelihood:
                out[:, column] += _likelihood(like, draws, label, possible, likelihoods)
    own = [{n for n in r.loglik or {} if n not in common.likelihood} for r in records]
    return out, not any(own)


def _prior(
    term: PriorTerm, draws: Draws, label: str, known: list[tuple[PriorTerm, Array]]
) -> Array:
    for other, values in known:
        if other.key == term.key and same_density(other.density, term.density):
            return values
    if isinstance(term.density, np.ndarray):
        raise PriorError(
            f"fits: {label}, prior[{term.label!r}]",
            "a distribution or a callable, which can be evaluated at the draws of the other fits",
            "an array, known at its own draws only",
            "State the term as a distribution, or name it in common= if it is the same in all.",
        )
    values = term.log_density_checked(draws)
    known.append((term, values))
    return values


def _likelihood(
    term: LoglikTerm,
    draws: Draws,
    label: str,
    possible: Any,
    known: list[tuple[Any, Array]],
) -> Array:
    if not called_term(term.source):
        raise LikelihoodError(
            f"fits: {label}, loglik[{term.name!r}]",
            "a callable, which can be evaluated at the draws of the other fits",
            "an array, known at its own draws only",
            "Pass a callable, or name the term in common= if it is the same in all fits.",
        )
    for source, values in known:
        if source is term.source and np.isfinite(values[possible]).all():
            return np.where(possible, values, 0.0)
    rows = np.flatnonzero(possible)
    there = draws if len(rows) == draws.size else draws.take(rows)
    values = np.zeros(draws.size)
    values[rows] = term.total(there)
    if len(rows) == draws.size:
        known.append((term.source, values))
    return values


def likelihood_at(record: Base, draws: Draws, common: Common) -> Array:
    """Log likelihood of a fit at any draws ``(n,)``, common terms left out."""
    out = np.zeros(draws.size)
    for name, term in (record.loglik or {}).items():
        if name not in common.likelihood:
            out += term.total(draws)
    return out


def pooled_prior(records: Sequence[Base], common: Common) -> dict[str, PriorTerm] | None:
    """Prior terms of the first fit, at all draws."""
    terms: dict[str, PriorTerm] = {}
    for label, term in (records[0].prior or {}).items():
        others = [(r.prior or {}).get(label) for r in records]
        if label in common.prior:
            _refuse_unequal(label, term, others)
        if isinstance(term.density, np.ndarray):
            held = [
                other.log_density(record.draws)
                for other, record in zip(others, records, strict=True)
                if other is not None
            ]
            if len(held) == len(records):
                terms[label] = PriorTerm(term.key, np.concatenate(held))
        else:
            terms[label] = term
    return terms or None


def _refuse_unequal(label: str, term: PriorTerm, others: Sequence[PriorTerm | None]) -> None:
    for other in others:
        both = other is not None and term.is_distribution and other.is_distribution
        if both and other is not None and not same_density(term.density, other.density):
            raise PriorError(
                f"common: {label!r}",
                "a prior term that is the same in all fits",
                f"{term.density} and {other.density}",
                "Leave it out of common=.",
            )


def pooled_likelihood(records: Sequence[Base], common: Common) -> dict[str, LoglikTerm] | None:
    """
    Likelihood terms of the first fit, at all draws.

    A common term that is an array has in every fit its values at that fit's own draws.
    """
    terms: dict[str, LoglikTerm] = {}
    for name, term in (records[0].loglik or {}).items():
        held = [stated[name] for stated in (r.loglik or {} for r in records) if name in stated]
        for other in held:
            if other.obs_shape != term.obs_shape:
                raise ShapeError(
                    f"fits: loglik[{name!r}]",
                    f"the same data in all fits, observations of shape {term.obs_shape}",
                    str(other.obs_shape),
                    "Pool fits of the same data, or say data='disjoint' for parts of it.",
                )
        if called_term(term.source):
            terms[name] = term
        elif name in common.likelihood and len(held) == len(records):
            terms[name] = stacked_term(held, [record.draws for record in records])
    return terms or None


def refuse_other_parameters(records: Sequence[Base], labels: Sequence[str]) -> None:
    """All fits must hold the same names in the same shapes."""
    first = records[0].draws
    for record, label in zip(records, labels, strict=True):
        odd = sorted(set(first) ^ set(record.draws))
        if odd:
            holder = labels[0] if odd[0] in first else label
            raise DrawsError(
                f"fits: {label}",
                f"the names of {labels[0]}: {', '.join(first)}",
                f"{odd[0]!r} in {holder} only",
                "Pool fits of the same parameters; leave out what only some have.",
            )
        for name in first:
            if record.draws[name].shape[1:] != first[name].shape[1:]:
                raise ShapeError(
                    f"fits: {label}, {name!r}",
                    f"shape {first[name].shape[1:]}, as in {labels[0]}",
                    str(record.draws[name].shape[1:]),
                    "Pool fits of the same parameters and the same data.",
                )
