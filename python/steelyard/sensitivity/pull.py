"""How hard prior and likelihood pull at each quantity: power scaling."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.distances import jensen_shannon, marginal_of
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish
from steelyard.answers.quantities import Quantity, asked_for
from steelyard.answers.reweigh import base_answer, reweigh
from steelyard.answers.tabulate import element_names
from steelyard.arrays import Frozen, ReadOnly, in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Change, power
from steelyard.errors import ChangeError
from steelyard.table import Table
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    degrees_of,
    relative_efficiency,
    standard_error,
    tail_of,
)

__all__ = ["Pull", "pull"]

_DELTA = 0.01
# Kallioinen et al. (2024). For comparison: a normal marginal whose mean moves by 0.35 of its sd a
# doubling has a pull of 0.05.
LIMIT = 0.05


@dataclass(frozen=True, eq=False)
class Pull(Frozen):
    """
    Pulls of prior and likelihood on each quantity.

    Attributes
    ----------
    prior, likelihood : Estimate or None
        Pull of all terms together, one entry a quantity element; None where not stated.
    by_term : mapping of str to Estimate
        Pull of each term, ``"prior: tau"`` or ``"likelihood: gauge A"``.
    together : numpy.ndarray of bool
        Whether prior and likelihood move the mean to the same side when strengthened.
    elements : tuple of str
        Names of the quantity elements, in order.
    """

    prior: Estimate | None
    likelihood: Estimate | None
    by_term: Mapping[str, Estimate]
    together: Any
    elements: tuple[str, ...]

    @property
    def reading(self) -> Mapping[str, str]:
        """For each quantity element, what its pulls say, in words."""
        return ReadOnly({name: self._words(i) for i, name in enumerate(self.elements)})

    def _words(self, place: int) -> str:
        strong = [e is not None and e.value[place] >= LIMIT for e in (self.prior, self.likelihood)]
        if strong == [True, True]:
            if self.together[place]:
                return "prior and data carry it together"
            return "prior and data pull it apart"
        if strong[0]:
            return "the prior carries it"
        return "the data carry it" if strong[1] else "neither moves it much"

    def table(self) -> Table:
        """One row for each quantity element."""
        wholes = {"prior": self.prior, "likelihood": self.likelihood}
        shown = {k: v for k, v in wholes.items() if v is not None}
        several = len(self.by_term) > len(shown)
        columns: dict[str, Any] = {"quantity": self.elements}
        errors = {}
        for label, estimate in {**shown, **(self.by_term if several else {})}.items():
            columns[label] = [float(v) for v in estimate.value]
            errors[label] = [float(v) for v in estimate.error]
        levels = [
            min((e.verdict[i].level for e in shown.values()), default="sound")
            for i in range(len(self.elements))
        ]
        columns["level"] = [str(level) for level in levels]
        columns["reading"] = list(self.reading.values())
        return Table(columns, errors)

    def __str__(self) -> str:
        return str(self.table())

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>pulls from {LIMIT:g} on are counted</p>"


def pull(base: Base, quantities: Any = None) -> Pull:
    """Pulls of prior and likelihood; see ``Fit.pull``."""
    if not (base.prior or base.loglik):
        raise ChangeError(
            "pull",
            "a fit whose prior or likelihood is stated",
            "a fit with neither",
            "Pass prior={…} or loglik=… to Fit.",
        )
    asked = asked_for(quantities, base)
    elements = tuple(n for label, q in asked.items() for n in element_names(label, q))
    # A pull does not depend on the unit of its quantity.
    columns, _ = in_unit(np.concatenate([q.columns for q in asked.values()], axis=1))
    columns = np.ascontiguousarray(columns)
    wholes: dict[str, tuple[Estimate, Array]] = {}
    terms: dict[str, Estimate] = {}
    for side, stated in (("prior", base.prior), ("likelihood", base.loglik)):
        if not stated:
            continue
        wholes[side] = _pull_of(base, side, None, columns, elements)
        for label in stated:
            one = len(stated) == 1
            key = None if one else label
            terms[f"{side}: {label}"] = (
                wholes[side][0] if one else _pull_of(base, side, key, columns, elements)[0]
            )
    moves = [move for _, move in wholes.values()]
    together = moves[0] * moves[-1] > 0 if len(moves) == 2 else np.ones(len(elements), np.bool_)
    shown = {side: found[0] for side, found in wholes.items()}
    return Pull(shown.get("prior"), shown.get("likelihood"), ReadOnly(terms), together, elements)


def _change(side: str, term: str | None, factor: float) -> Change:
    value: Any = factor if term is None else {term: factor}
    return power(**{side: value})


def _pull_of(
    base: Base, side: str, term: str | None, columns: Array, elements: tuple[str, ...]
) -> tuple[Estimate, Array]:
    """
    ``½ [D(1/(1+δ)) + D(1+δ)] / log2(1+δ)``, its error from one series for both distances.

    Also how much the mean moves as the power grows, in its own units.
    """
    answers = [
        reweigh(base, _change(side, term, factor)) for factor in (1 / (1 + _DELTA), 1 + _DELTA)
    ]
    # Power scaling by one per cent has no tail; a constant term changes nothing at all.
    scales = [answer._scale for answer in answers]
    unit = 0.5 / math.log2(1 + _DELTA)
    value, ends = np.zeros(columns.shape[1]), np.zeros(columns.shape[1])
    z = np.zeros_like(columns)
    for scale in scales:
        for column in range(columns.shape[1]):
            found, (one, zero), end = jensen_shannon(scale, marginal_of(scale, columns[:, column]))
            value[column] += unit * found
            ends[column] += unit * end
            w, v = scale.weights.linear, scale.base_weights.linear
            z[:, column] += unit * scale.count * (w * one + v * zero)
    base_scale = base_answer(base)._scale
    whole = Quantity(
        f"pull of {side}" if term is None else f"pull of {side} {term}",
        np.broadcast_to(0.0, columns.shape),
        ("quantity",),
        {"quantity": np.array(elements)},
    )
    spread = Scale(base, scales[1].weights, base_scale.weights, scales[1].findings)
    estimate = finish(spread, whole, value, _series(base, z, columns, ends), None)
    low, high = (_core.weighted_mean(columns, s.weights.linear) for s in scales)
    return estimate, high - low


def _series(base: Base, z: Array, columns: Array, ends: Array) -> Series:
    draws, ordered = base.draws, base.ordered
    equal = np.full(draws.size, 1 / draws.size)
    efficiency = relative_efficiency(z, draws, ordered)
    carried = contributions_of(z, efficiency, draws, ordered)
    return Series(
        np.hypot(standard_error(z, draws, ordered), ends),
        tail_of(z, efficiency, draws, ordered),
        chains_p_value(z, equal, draws) if ordered else np.ones(z.shape[1]),
        relative_efficiency(columns - columns.mean(axis=0), draws, ordered),
        carried,
        degrees_of(carried, efficiency, draws),
    )
