"""Edits merged into a draft of the target: one density and one factor for each term."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.likelihood import LoglikTerm, read_loglik_term
from steelyard.base.priors import PriorTerm, known_term, read_term, same_density, stated_prior
from steelyard.changes.edits import (
    AddTerm,
    Change,
    Drop,
    LogRatio,
    Power,
    RaiseNoise,
    SwapLoglik,
    SwapPrior,
    WeighData,
)
from steelyard.changes.noise import raised
from steelyard.changes.selection import selected
from steelyard.errors import ChangeError, LikelihoodError, ShapeError

__all__ = ["Draft", "LoglikTarget", "PriorTarget", "merge"]


def _product(factors: tuple[Any, ...]) -> Any:
    """Product in an order that depends on the factors alone: edits commute to the last bit."""
    out: Any = 1.0
    for factor in sorted(factors, key=lambda f: (np.ndim(f), np.asarray(f).tobytes())):
        out = out * factor
    return out


@dataclass(frozen=True, eq=False)
class PriorTarget:
    """
    What becomes of one prior term: another density, a factor, or both.

    `base` and `density` are resolved at the draws; `given` is the new term as it was stated, which
    can be evaluated elsewhere (None where the term is not swapped).
    """

    base: PriorTerm
    density: PriorTerm
    factors: tuple[float, ...] = ()
    given: PriorTerm | None = None

    @property
    def factor(self) -> float:
        """Product of the factors, in an order of their own."""
        return float(_product(self.factors))

    @property
    def is_swapped(self) -> bool:
        return not same_density(self.base.density, self.density.density)


@dataclass(frozen=True, eq=False)
class LoglikTarget:
    """What becomes of one likelihood term; `factor` is one number, or one an observation."""

    base: LoglikTerm | None
    density: LoglikTerm
    factors: tuple[Any, ...] = ()

    @property
    def factor(self) -> Any:
        """Product of the factors, one number or one an observation."""
        return _product(self.factors)


@dataclass
class Draft:
    """The target while edits are merged into it."""

    base: Base
    prior: dict[str, PriorTarget] = field(default_factory=dict)
    loglik: dict[str, LoglikTarget] = field(default_factory=dict)
    swapped: set[str] = field(default_factory=set)
    ratios: list[Any] = field(default_factory=list)
    # Predictive draws whose own ratio the change brings.
    answered: set[str] = field(default_factory=set)

    @property
    def withheld(self) -> frozenset[str]:
        """Predictive draws whose model is changed while their own ratio is missing."""
        predictive = self.base.predictive
        return (
            frozenset(n for n, term in predictive.items() if term in self.swapped) - self.answered
        )


def merge(base: Base, change: Change) -> Draft:
    """Merge the edits of a change; replacements first, then factors, so that order is no matter."""
    draft = Draft(base)
    replacing = (SwapPrior, SwapLoglik, RaiseNoise, AddTerm)
    for edit in sorted(change.edits, key=lambda e: not isinstance(e, replacing)):
        _MERGE[type(edit)](draft, edit)
    return draft


def _merge_swap_prior(draft: Draft, edit: SwapPrior) -> None:
    stated = stated_prior(draft.base.prior, "swap_prior")
    label = edit.label
    known_term(label, stated, "swap_prior", "prior")
    if label in draft.prior:
        raise ChangeError(
            f"swap_prior[{label!r}]", "each term replaced once", "twice", "Keep one replacement."
        )
    draws = draft.base.draws
    given = read_term(stated[label].key, edit.density, draws, "swap_prior")
    old, new = stated[label].resolved(draws), given.resolved(draws)
    draft.prior[label] = PriorTarget(old, new, given=given)
    if stated[label].is_discrete is False and new.is_discrete:
        raise ChangeError(
            f"swap_prior[{label!r}]",
            "a density, as the one it replaces",
            f"{edit.density}, of counts",
            "No weights turn draws from a continuum into counts: refit with the new prior.",
        )


def _merge_power(draft: Draft, edit: Power) -> None:
    prior, likelihood = edit.prior, edit.likelihood
    if isinstance(prior, Mapping) or prior != 1:
        stated = stated_prior(draft.base.prior, "power: prior")
        powers = prior if isinstance(prior, Mapping) else dict.fromkeys(stated, prior)
        for key, factor in powers.items():
            label = key if isinstance(key, str) else ", ".join(key)
            known_term(label, stated, "power: prior", "prior")
            same = stated[label].resolved(draft.base.draws)
            old = draft.prior.get(label, PriorTarget(same, same))
            draft.prior[label] = replace(old, factors=(*old.factors, factor))
    if isinstance(likelihood, Mapping) or likelihood != 1:
        # Added terms belong to the target's likelihood, so a common power takes them too.
        names = {**_stated(draft.base, "power: likelihood"), **draft.loglik}
        powers = likelihood if isinstance(likelihood, Mapping) else dict.fromkeys(names, likelihood)
        for name, factor in powers.items():
            _multiply(draft, name, factor, "power: likelihood")


def _stated(base: Base, argument: str) -> Mapping[str, LoglikTerm]:
    if not base.loglik:
        raise LikelihoodError(
            argument,
            "a fit whose log likelihood is stated",
            "a fit without",
            "Pass loglik=… to Fit.",
        )
    return base.loglik


def _merge_swap_loglik(draft: Draft, edit: SwapLoglik) -> None:
    stated = _stated(draft.base, "swap_loglik")
    if edit.name is None and len(stated) > 1:
        raise ChangeError(
            "swap_loglik",
            f"the term to replace, one of {', '.join(stated)}",
            "an array without a name",
            "Write swap_loglik({term: array}).",
        )
    name = next(iter(stated)) if edit.name is None else edit.name
    known_term(name, stated, "swap_loglik", "likelihood")
    if name in draft.swapped:
        raise ChangeError(
            f"swap_loglik[{name!r}]", "each term replaced once", "twice", "Keep one replacement."
        )
    old = stated[name]
    new = read_loglik_term(name, edit.source, draft.base.draws, f"swap_loglik[{name!r}]")
    if new.obs_shape != old.obs_shape and not (new.is_total or old.is_total):
        raise ShapeError(
            f"swap_loglik[{name!r}]",
            f"the observations of the old term, shape {old.obs_shape}",
            str(new.obs_shape),
            "Give one value an observation, in the same order, or a total.",
        )
    draft.swapped.add(name)
    draft.loglik[name] = LoglikTarget(old, new)


def _merge_raise_noise(draft: Draft, edit: RaiseNoise) -> None:
    stated = _stated(draft.base, "raise_noise")
    known_term(edit.name, stated, "raise_noise", "likelihood")
    if edit.name in draft.swapped:
        raise ChangeError(
            f"raise_noise[{edit.name!r}]",
            "each term replaced once",
            "a term that is replaced already",
            "Put the noise into the replacement.",
        )
    if edit.factor == 1:
        return
    draft.swapped.add(edit.name)
    new = raised(stated[edit.name], edit.factor, edit.sd, draft.base.draws)
    draft.loglik[edit.name] = LoglikTarget(stated[edit.name], new)


def _merge_add(draft: Draft, edit: AddTerm) -> None:
    if edit.name in (draft.base.loglik or {}) or edit.name in draft.loglik:
        raise ChangeError(
            f"add[{edit.name!r}]",
            "a name that no likelihood term has",
            f"{edit.name!r}, which one has",
            "Choose another name, or replace the term with swap_loglik.",
        )
    new = read_loglik_term(edit.name, edit.source, draft.base.draws, f"add[{edit.name!r}]")
    draft.loglik[edit.name] = LoglikTarget(None, new)


def _merge_drop(draft: Draft, edit: Drop) -> None:
    stated = _stated(draft.base, "drop")
    for name, mask in selected(edit, stated).items():
        if mask.all():
            _multiply(draft, name, 0.0, "drop")
        else:
            _multiply(draft, name, np.where(mask, 0.0, 1.0), "drop")


def _merge_weigh_data(draft: Draft, edit: WeighData) -> None:
    _multiply(draft, edit.name, edit.factor, "weigh_data")


def _merge_log_ratio(draft: Draft, edit: LogRatio) -> None:
    if edit.predictive is not None:
        known_term(edit.predictive, draft.base.predictive, "log_ratio", "predictive")
        if edit.predictive in draft.answered:
            raise ChangeError(
                f"log_ratio[{edit.predictive!r}]", "each ratio once", "twice", "Keep one of them."
            )
        draft.answered.add(edit.predictive)
    draft.ratios.append(edit.source)


_MERGE: dict[type, Any] = {
    SwapPrior: _merge_swap_prior,
    SwapLoglik: _merge_swap_loglik,
    RaiseNoise: _merge_raise_noise,
    AddTerm: _merge_add,
    Drop: _merge_drop,
    WeighData: _merge_weigh_data,
    Power: _merge_power,
    LogRatio: _merge_log_ratio,
}


def _multiply(draft: Draft, name: str, factor: Any, argument: str) -> None:
    if name not in draft.loglik:
        stated = _stated(draft.base, argument)
        known_term(name, stated, argument, "likelihood")
        draft.loglik[name] = LoglikTarget(stated[name], stated[name])
    old = draft.loglik[name]
    shape = np.shape(factor)
    wanted = old.density.obs_shape
    if shape and shape != wanted:
        raise ShapeError(
            f"{argument}[{name!r}]",
            f"one factor, or one an observation, shape {wanted}",
            str(shape),
            "Match the observations; a total takes one factor only.",
        )
    draft.loglik[name] = LoglikTarget(old.base, old.density, (*old.factors, factor))
