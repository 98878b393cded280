"""Targets of many changes at once: what they share is evaluated once."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from steelyard.answers.reweigh import unknown_supports
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.changes import Change, Target, form_target
from steelyard.changes.edits import SwapPrior
from steelyard.changes.merging import PriorTarget
from steelyard.changes.target import has_weight, prior_delta
from steelyard.densities import Distribution
from steelyard.densities.cumulative import Elementwise
from steelyard.densities.distribution import _quiet
from steelyard.errors import SteelyardError
from steelyard.verdicts import Finding, judge
from steelyard.weighing.matched import Matched, gamma_or_beta_widened, may_match
from steelyard.weighing.preflight import (
    distance_from_mean,
    precision_lost,
    preflight,
    root_covariance,
    slower_precision,
    tail_precision,
)
from steelyard.weighing.supports import support_findings

__all__ = ["Targets"]

# Densities evaluated together: bounds the work array.
_WIDTH = 128
# Values of log ratios that are remembered, 64 MB.
_MOST_KEPT = 1 << 23
# One prior term and its new density.
Swap = tuple[str, Distribution]


@dataclass(frozen=True, eq=False)
class _Swapped:
    """What one new density of one term does: its Δ (None for none) and what algebra says of it."""

    delta: Array | None
    findings: tuple[Finding, ...]
    # How much normal tail precision the term loses, and about what; None where not known.
    loosened: Array | None


# What a change becomes: swaps put together, each with its label, or a target formed by itself.
Made = Target | tuple[tuple[str, _Swapped], ...]


@dataclass(frozen=True, eq=False)
class Formed:
    """Log ratios ``(B, n)`` of several changes; None, and the error, where one is refused."""

    ratios: Array
    made: list[Made | None]
    errors: dict[int, SteelyardError]


@dataclass
class Targets:
    """
    Targets over one base, remembering what single densities gave.

    A change that only swaps priors for distributions is put together from its densities, each
    evaluated once however many changes share it, and those of one family evaluated together. Any
    other change, and any that may have to be refused, is formed by `form_target`.
    """

    base: Base
    _swaps: dict[Swap, _Swapped] = field(default_factory=dict)
    _gaps: dict[tuple[str, float, float], tuple[Finding, ...]] = field(default_factory=dict)
    _roots: dict[tuple[str, ...], tuple[Array | None, Array]] = field(default_factory=dict)
    _matched: dict[str, Matched | None] = field(default_factory=dict)

    def form(self, changes: Sequence[Change]) -> Formed:
        """Log ratios of several changes, the same to the last bit as those of `form_target`."""
        keys = [self._swaps_of(change) for change in changes]
        self._evaluate(dict.fromkeys(swap for key in keys if key is not None for swap in key))
        ratios = np.zeros((len(changes), self.base.draws.size))
        made: list[Made | None] = []
        errors: dict[int, SteelyardError] = {}
        for place, (change, key) in enumerate(zip(changes, keys, strict=True)):
            try:
                made.append(self._form(change, key, ratios[place]))
            except SteelyardError as error:
                errors[place] = error
                made.append(None)
                ratios[place] = 0.0
        self._refuse_empty(ratios, made, errors)
        return Formed(ratios, made, errors)

    def _form(self, change: Change, key: tuple[Swap, ...] | None, out: Array) -> Made:
        swapped = [] if key is None else [self._swaps.get(swap) for swap in key]
        if key is None or None in swapped:
            target = form_target(self.base, change)
            out[:] = target.log_ratio
            return target
        made = [(swap[0], one) for swap, one in zip(key, swapped, strict=True) if one is not None]
        if len(made) > 1:
            made.sort(key=_label)  # the order of `form_target`: the same bits
        for place, (_, one) in enumerate(made):
            if one.delta is not None and place:
                out += one.delta
            elif one.delta is not None:
                out[:] = one.delta
        return tuple(made)

    def _refuse_empty(
        self, ratios: Array, made: list[Made | None], errors: dict[int, SteelyardError]
    ) -> None:
        """Targets without any draw are refused, as in a single answer."""
        base, given = self.base, self.base.reference
        tops = ratios.max(axis=1) if given is None else (ratios + given).max(axis=1)
        for place in np.flatnonzero(~np.isfinite(tops)):
            try:
                refuse_bad_ratio(ratios[place], base.draws, "log ratio")
                if given is not None:
                    total = ratios[place] + given
                    refuse_bad_ratio(total, base.draws, "log ratio with base weights")
            except SteelyardError as error:
                errors[int(place)] = error
                made[place] = None
                ratios[place] = 0.0

    def _swaps_of(self, change: Change) -> tuple[Swap, ...] | None:
        """The swaps of a change that has no other edits; else None."""
        if self.base.draws.pooling is not None:
            return None  # what algebra says depends on which of the fits reaches furthest
        stated = self.base.prior or {}
        found: list[Swap] = []
        for edit in change.edits:
            if type(edit) is not SwapPrior or not isinstance(edit.density, Distribution):
                return None
            if edit.label not in stated or not stated[edit.label].is_distribution:
                return None
            found.append((edit.label, edit.density))
        if len(found) > 1 and len({label for label, _ in found}) < len(found):
            return None
        return tuple(found)

    def _evaluate(self, swaps: Mapping[Swap, None]) -> None:
        """Remember new densities, those of one family and term together."""
        if (len(self._swaps) + len(swaps)) * self.base.draws.size > _MOST_KEPT:
            self._swaps = {key: kept for key, kept in self._swaps.items() if key in swaps}
        together: dict[tuple[str, type], list[Distribution]] = {}
        for label, density in swaps:
            if (label, density) not in self._swaps:
                together.setdefault((label, type(density)), []).append(density)
        for (label, family), densities in together.items():
            term = self.base.prior[label]  # type: ignore[index]
            for start in range(0, len(densities), _WIDTH):
                part = densities[start : start + _WIDTH]
                deltas = _together(self.base, term, family, part)
                if deltas is not None:
                    described = self._described_together(term, part, deltas)
                else:
                    alone = [_alone(self.base, term, density) for density in part]
                    described = [
                        self._described(term, *one) for one in zip(part, alone, strict=True)
                    ]
                for density, one in zip(part, described, strict=True):
                    # What is not a ratio is refused, with words, where the target is formed.
                    if one.delta is None or one.delta.max() < np.inf:
                        self._swaps[label, density] = one

    def _described_together(
        self, term: PriorTerm, densities: Sequence[Distribution], deltas: Array
    ) -> list[_Swapped]:
        """`_described` of densities of one family whose hyperparameters are numbers."""
        base, label = self.base, term.label
        if base.log_weights is not None:
            deltas = np.where(has_weight(base), deltas, 0.0)
        many = type(densities[0])(*(hyper[:, 0] for hyper in _columns(densities)))
        tails = many.tails((len(densities),))
        if label not in self._matched:
            self._matched[label] = Matched.of(base, term)
        matched = self._matched[label] if may_match(many) else None
        shapes = np.full(len(densities), -np.inf)
        if matched is not None:
            shapes[:] = matched.tail_shape(tails, 1.0)
        lost = np.full(len(densities), np.nan)
        one = PriorTarget(term, PriorTerm(term.key, densities[0]))
        about = distance_from_mean(one, base)
        before = None if about is None else tail_precision(term.density, about, base)
        if before is not None:
            after = slower_precision(tails)
            lost[:] = np.where(np.isfinite(after), before - after, np.nan)
        limits = [np.broadcast_to(limit, len(densities)).tolist() for limit in many.support()]
        found = []
        for i, density in enumerate(densities):
            one = PriorTarget(term, PriorTerm(term.key, density))
            findings = self._gap_at(one, (limits[0][i], limits[1][i]))
            if matched is not None and shapes[i] > 0:
                findings += (matched.finding(label, float(shapes[i])),)
            known = None if np.isnan(lost[i]) else lost[i : i + 1]
            found.append(_Swapped(deltas[i], findings, known))
        return found

    def _described(self, term: PriorTerm, density: Distribution, delta: Array | None) -> _Swapped:
        base = self.base
        if delta is not None and base.log_weights is not None:
            delta = np.where(has_weight(base), delta, 0.0)
        one = PriorTarget(term, PriorTerm(term.key, density))
        widened = gamma_or_beta_widened(base, {term.label: one})
        findings = (*self._gap(one, density), *widened)
        lost = precision_lost(one, base)
        return _Swapped(delta, findings, None if lost is None else lost[1])

    def _gap(self, one: PriorTarget, density: Distribution) -> tuple[Finding, ...]:
        """Findings about supports, which depend on the new density's limits alone."""
        hyper = [getattr(density, name) for name in density.numbers]
        if not isinstance(density, Elementwise) or not all(isinstance(h, float) for h in hyper):
            swapped = Target({one.base.label: one}, {}, {}, np.empty(0))
            return tuple(support_findings(self.base, swapped))
        lower, upper = density._support(*map(np.float64, hyper))
        return self._gap_at(one, (float(lower), float(upper)))

    def _gap_at(self, one: PriorTarget, limits: tuple[float, float]) -> tuple[Finding, ...]:
        key = (one.base.label, *limits)
        if key not in self._gaps:
            swapped = Target({one.base.label: one}, {}, {}, np.empty(0))
            self._gaps[key] = tuple(support_findings(self.base, swapped))
        return self._gaps[key]

    def findings(self, made: Sequence[Made | None]) -> list[Finding]:
        """Preflight of every target, and supports that cannot be seen: spoken where they hold."""
        told: list[tuple[int, Finding]] = []
        widened: dict[tuple[str, ...], list[int]] = {}
        for place, one in enumerate(made):
            if one is None:
                continue
            if isinstance(one, Target):
                found = (*preflight(self.base, one), *unknown_supports(one))
                told += [(place, finding) for finding in found]
                continue
            told += [(place, f) for _, swapped in one for f in swapped.findings]
            known = tuple([label for label, swapped in one if swapped.loosened is not None])
            if known:
                widened.setdefault(known, []).append(place)
        for labels, places in widened.items():
            told += self._widened(labels, places, made)
        return _spoken(told, len(made))

    def _widened(
        self, labels: tuple[str, ...], places: list[int], made: Sequence[Made | None]
    ) -> Iterator[tuple[int, Finding]]:
        """`preflight._normal_widened` of several targets that swap the same normal priors."""
        loosened = np.stack([self._loosened(labels, made[place]) for place in places])
        which = np.flatnonzero((loosened > 0).any(axis=1))
        if not len(which):
            return
        root, unit = self._root(labels)
        if root is None:
            return
        for start in range(0, len(which), _WIDTH):
            part = which[start : start + _WIDTH]
            fall = np.einsum("ki,bk,kj->bij", root, loosened[part] * unit**2, root)
            figures = np.linalg.eigvalsh(fall)[:, -1]
            for i, figure in zip(part, figures, strict=True):
                terms = ", ".join(labels)
                found = judge("prior_widened", float(figure), term=terms, posterior="normal")
                yield places[i], found

    def _loosened(self, labels: tuple[str, ...], one: Made | None) -> Array:
        by_label = dict(one) if isinstance(one, tuple) else {}
        parts = [by_label[label].loosened for label in labels]
        return np.concatenate([part for part in parts if part is not None])

    def _root(self, labels: tuple[str, ...]) -> tuple[Array | None, Array]:
        if labels not in self._roots:
            base = self.base
            values = []
            for label in labels:
                term = base.prior[label]  # type: ignore[index]
                about = distance_from_mean(PriorTarget(term, term), base)
                if about is not None:
                    values.append(about.reshape(base.draws.size, -1))
            self._roots[labels] = root_covariance(np.concatenate(values, axis=1), base)
        return self._roots[labels]


def _label(one: tuple[str, _Swapped]) -> str:
    return one[0]


def _alone(base: Base, term: PriorTerm, density: Distribution) -> Array | None:
    """One Δ; NaN stands for what `form_target` refuses."""
    try:
        return prior_delta(PriorTarget(term, PriorTerm(term.key, density)), base)[0]
    except ValueError:
        return np.array([np.nan])


def _together(
    base: Base, term: PriorTerm, family: type, densities: Sequence[Distribution]
) -> npt.NDArray[np.float64] | None:
    """Δ of several densities of one family at once; None where they have to go one by one."""
    if len(densities) < 2 or not issubclass(family, Elementwise):
        return None
    value = term.value(base.draws)
    rows = [getattr(d, name) for d in densities for name in d.numbers]
    if value.ndim != 1 or not all(isinstance(v, float) for v in rows):
        return None
    old = term.log_density_checked(base.draws)
    if not np.isfinite(old[has_weight(base)]).all():
        return None
    hyper = _columns(densities)
    x = np.broadcast_to(np.ascontiguousarray(value), (len(densities), len(value)))
    with _quiet():
        new = densities[0]._log_density(x, *hyper)
        out = np.asarray(new - old)
    for i, density in enumerate(densities):
        if density == term.density:
            out[i] = 0.0  # no change at all, rounding or not
    return out


def _columns(densities: Sequence[Distribution]) -> list[Array]:
    """Each hyperparameter of all densities, as a column."""
    names = densities[0].numbers
    return [np.array([getattr(d, name) for d in densities])[:, None] for name in names]


def _spoken(told: Sequence[tuple[int, Finding]], count: int) -> list[Finding]:
    """One finding for each code and wording, spoken at the targets where it holds."""
    firsts: dict[tuple[str, str], Finding] = {}
    figures: dict[tuple[str, str], Array] = {}
    spoken: dict[tuple[str, str], npt.NDArray[np.bool_]] = {}
    for place, finding in told:
        key = finding.wording
        if key not in firsts:
            firsts[key] = finding
            figures[key] = np.full(count, np.nan)
            spoken[key] = np.zeros(count, dtype=np.bool_)
        figures[key][place] = float(np.max(finding.figure))
        spoken[key][place] = True
    return [
        Finding(f.code, figures[key], f.strained, f.refit, f.words, spoken[key])
        for key, f in firsts.items()
    ]
