"""An answer as a table: one row for each element of each quantity."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.answers.bands import batch_edges, batch_sums, joint_level
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, column_blocks, mean_of, sd_of
from steelyard.answers.quantiles import quantile_of
from steelyard.answers.quantities import Quantity
from steelyard.answers.shifts import shift_of
from steelyard.arrays import in_unit
from steelyard.base.draws import Array
from steelyard.base.names import label_texts
from steelyard.errors import ArgumentError
from steelyard.table import Table
from steelyard.verdicts import Verdict

__all__ = ["element_names", "tabulate"]


def tabulate(
    scale: Scale,
    quantities: Mapping[str, Quantity],
    probs: Array,
    *,
    shifted: bool = False,
    decision: tuple[Quantity, float, Estimate] | None = None,
) -> Table:
    """
    Means, errors, sds and quantiles of quantities, with the worst level of each row.

    `shifted` adds the paired shifts of the means; `decision`, an event with its level and its
    probability, adds its row and the probability that it is on the right side.
    """
    probs = probs.reshape(-1)
    _refuse_twice([f"{p:g}" for p in probs])
    dims = _dimension_columns(quantities)
    studied = {label: _Studied.of(scale, q, probs, shifted) for label, q in quantities.items()}
    events = {} if decision is None else {decision[0].label: decision[0]}
    means = {label: s.mean.value for label, s in studied.items()}
    if decision is not None:
        means |= {decision[0].label: decision[2].value}
    together = _level_together(scale, {**quantities, **events}, means)
    rows: list[_Row] = []
    for label, quantity in quantities.items():
        limits = studied[label].mean.error_interval(together)
        for place in np.ndindex(quantity.shape):
            row = studied[label].row(place, limits)
            row.cells.update({"quantity": label, **_place(quantity, place, dims)})
            rows.append(row)
    if decision is not None:
        event, level, probability = decision
        row = _decision_row(scale, event, probability, together, shifted)
        row.cells.update(quantity=event.label, needed=level)
        rows.append(row)
    names = ["quantity", *dims, "mean", "error", "low", "high", "sd"]
    names += [f"q{p:g}" for p in probs] + (["shift", "shift_error"] if shifted else [])
    names += ["needed", "right_side"] if decision is not None else []
    names += ["tail_shape", "level", "reasons"]
    blank: dict[str, Any] = dict.fromkeys(names) | dict.fromkeys(dims, "")
    columns = {n: [row.cells.get(n, blank[n]) for row in rows] for n in names}
    # Each figure prints the digits that its own error supports.
    measured = {n for row in rows for n in row.errors}
    errors = {n: [row.errors.get(n, math.nan) for row in rows] for n in names if n in measured}
    return Table(columns, errors, chances=["right_side"])


def _refuse_twice(shown: list[str]) -> None:
    twice = sorted({text for text in shown if shown.count(text) > 1})
    if twice:
        raise ArgumentError(
            "probs",
            "each probability once, to six digits",
            f"{', '.join(twice)} twice",
            "Drop one.",
        )


def _level_together(
    scale: Scale, quantities: Mapping[str, Quantity], means: Mapping[str, Any]
) -> float:
    """Level of single intervals at which the means of all rows hold together, 95 %."""
    edges = batch_edges(scale.base.draws)
    sums = []
    for label, quantity in quantities.items():
        for part, f in column_blocks(quantity.columns):
            scaled, unit = in_unit(f)
            centred = scaled - np.ravel(means[label])[part] / unit
            sums.append(batch_sums(scale.weights.linear[:, None] * centred, edges))
    known = [s[:, np.isfinite(s).all(axis=0)] for s in sums]
    return joint_level(np.concatenate(known, axis=1)) if known else 0.95


@dataclass(frozen=True, eq=False)
class _Row:
    """Cells of a row, and the errors by which its figures are rounded."""

    cells: dict[str, Any]
    errors: dict[str, float]


@dataclass(frozen=True, eq=False)
class _Studied:
    """What a table shows of one quantity."""

    mean: Estimate
    sd: Estimate
    quantiles: Estimate
    probs: Array
    shift: Estimate | None

    @classmethod
    def of(cls, scale: Scale, quantity: Quantity, probs: Array, shifted: bool) -> _Studied:
        return cls(
            mean_of(scale, quantity),
            sd_of(scale, quantity),
            quantile_of(scale, quantity, probs),
            probs,
            shift_of(scale, quantity, "mean") if shifted else None,
        )

    def row(self, place: tuple[int, ...], limits: Array) -> _Row:
        """The element at `place`."""
        error = _at(self.mean.error, place)
        low, high = (_at(limit, place) for limit in limits)
        cells = {"mean": _at(self.mean.value, place), "error": error, "low": low, "high": high}
        errors = dict.fromkeys(cells, error)
        cells["sd"], errors["sd"] = _pair(self.sd, place)
        for i, p in enumerate(self.probs):
            cells[f"q{p:g}"], errors[f"q{p:g}"] = _pair(self.quantiles, (i, *place))
        verdicts = [_one(e.verdict, place) for e in (self.mean, self.sd)]
        verdicts += [_one(self.quantiles.verdict, (i, *place)) for i in range(len(self.probs))]
        if self.shift is not None:
            cells["shift"], unsure = _pair(self.shift, place)
            cells["shift_error"] = unsure
            errors |= {"shift": unsure, "shift_error": unsure}
            verdicts.append(_one(self.shift.verdict, place))
        told = {"tail_shape": _at(self.mean.tail_shape, place), **_worst(verdicts)}
        return _Row({**cells, **told}, errors)


def _decision_row(
    scale: Scale, event: Quantity, probability: Estimate, together: float, shifted: bool
) -> _Row:
    low, high = (float(limit) for limit in probability.error_interval(together))
    cells = {"mean": float(probability.value), "error": float(probability.error)}
    # Limits of a probability end where probabilities do.
    cells |= {"low": max(low, 0.0), "high": min(high, 1.0)}
    errors = dict.fromkeys(cells, cells["error"])
    verdicts = [probability.verdict]
    if shifted:
        shift = shift_of(scale, event, "mean")
        cells["shift"], cells["shift_error"] = float(shift.value), float(shift.error)
        errors |= dict.fromkeys(("shift", "shift_error"), cells["shift_error"])
        verdicts.append(shift.verdict)
    if probability.decision is not None:
        cells["right_side"] = float(probability.decision.right)
    return _Row({**cells, "tail_shape": float(probability.tail_shape), **_worst(verdicts)}, errors)


def _dimension_columns(quantities: Mapping[str, Quantity]) -> list[str]:
    names: list[str] = []
    for quantity in quantities.values():
        names += [n for n in _dim_names(quantity) if n not in names]
    return names


_TAKEN = (
    *("quantity", "mean", "error", "low", "high", "sd", "shift", "shift_error"),
    *("needed", "right_side", "tail_shape", "level", "reasons"),
)


def _dim_names(quantity: Quantity) -> list[str]:
    """Columns for the dimensions; a dimension called like another column says that it is one."""
    return [f"{n} (dimension)" if n in _TAKEN else n for n in _plain_dim_names(quantity)]


def _plain_dim_names(quantity: Quantity) -> list[str]:
    unnamed = iter(["index", *(f"index {i}" for i in range(2, 2 + len(quantity.shape)))])
    return [dim or next(unnamed) for dim in quantity.dims]


def _place(quantity: Quantity, place: tuple[int, ...], dims: list[str]) -> dict[str, str]:
    texts = dict.fromkeys(dims, "")
    for name, dim, i in zip(_dim_names(quantity), quantity.dims, place, strict=True):
        labels = quantity.labels.get(dim)
        texts[name] = label_texts(labels)[i] if labels is not None else str(i)
    return texts


def element_names(label: str, quantity: Quantity) -> list[str]:
    """A name for every element: the quantity's own, with labels or positions in brackets."""
    if not quantity.shape:
        return [label]
    dims = _dim_names(quantity)
    places = (_place(quantity, place, dims) for place in np.ndindex(quantity.shape))
    return [f"{label}[{', '.join(texts.values())}]" for texts in places]


def _at(values: Any, place: tuple[int, ...]) -> float:
    return float(np.asarray(values)[place])


def _pair(estimate: Estimate, place: tuple[int, ...]) -> tuple[float, float]:
    return _at(estimate.value, place), _at(estimate.error, place)


def _worst(verdicts: list[Verdict]) -> dict[str, str]:
    worst = min(verdicts, key=lambda v: v.level)
    codes = {r.code: None for v in verdicts for r in v.reasons if r.level < "sound"}
    return {"level": str(worst.level), "reasons": ", ".join(codes)}


def _one(verdict: Verdict, place: tuple[int, ...]) -> Verdict:
    return verdict[place] if place else verdict
