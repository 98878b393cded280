"""An answer as a table: one row for each element of each quantity."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, mean_of, sd_of
from steelyard.answers.quantiles import quantile_of
from steelyard.answers.quantities import Quantity
from steelyard.base.draws import Array
from steelyard.base.names import label_texts
from steelyard.errors import ArgumentError
from steelyard.table import Table
from steelyard.verdicts import Verdict

__all__ = ["element_names", "tabulate"]


def tabulate(scale: Scale, quantities: Mapping[str, Quantity], probs: Array) -> Table:
    """Means, errors, sds and quantiles of quantities, with the worst level of each row."""
    probs = probs.reshape(-1)
    shown = [f"{p:g}" for p in probs]
    twice = sorted({text for text in shown if shown.count(text) > 1})
    if twice:
        raise ArgumentError(
            "probs",
            "each probability once, to six digits",
            f"{', '.join(twice)} twice",
            "Drop one.",
        )
    dims = _dimension_columns(quantities)
    quantile_names = [f"q{p:g}" for p in probs]
    names = ["quantity", *dims, "mean", "error", "sd", *quantile_names]
    columns: dict[str, list[Any]] = {n: [] for n in [*names, "tail_shape", "level", "reasons"]}
    # Each figure prints the digits that its own error supports.
    errors: dict[str, list[float]] = {n: [] for n in ["mean", "error", "sd", *quantile_names]}
    for label, quantity in quantities.items():
        mean, sd = mean_of(scale, quantity), sd_of(scale, quantity)
        quantiles = quantile_of(scale, quantity, probs)
        for place in np.ndindex(quantity.shape):
            columns["quantity"].append(label)
            for dim, text in _place(quantity, place, dims).items():
                columns[dim].append(text)
            columns["mean"].append(_at(mean.value, place))
            columns["error"].append(_at(mean.error, place))
            columns["sd"].append(_at(sd.value, place))
            errors["mean"].append(_at(mean.error, place))
            errors["error"].append(_at(mean.error, place))
            errors["sd"].append(_at(sd.error, place))
            for row, name in enumerate(quantile_names):
                columns[name].append(_at(quantiles.value, (row, *place)))
                errors[name].append(_at(quantiles.error, (row, *place)))
            columns["tail_shape"].append(_at(mean.tail_shape, place))
            level, reasons = _row_verdict(mean, sd, quantiles, place, len(probs))
            columns["level"].append(level)
            columns["reasons"].append(reasons)
    return Table(columns, errors)


def _dimension_columns(quantities: Mapping[str, Quantity]) -> list[str]:
    names: list[str] = []
    for quantity in quantities.values():
        names += [n for n in _dim_names(quantity) if n not in names]
    return names


_TAKEN = ("quantity", "mean", "error", "sd", "tail_shape", "level", "reasons")


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


def _row_verdict(
    mean: Estimate, sd: Estimate, quantiles: Estimate, place: tuple[int, ...], count: int
) -> tuple[str, str]:
    verdicts = [_one(mean.verdict, place), _one(sd.verdict, place)]
    verdicts += [_one(quantiles.verdict, (row, *place)) for row in range(count)]
    worst = min(verdicts, key=lambda v: ("refit", "strained", "sound").index(str(v.level)))
    codes = {r.code: None for v in verdicts for r in v.reasons if r.level < "sound"}
    return str(worst.level), ", ".join(codes)


def _one(verdict: Verdict, place: tuple[int, ...]) -> Verdict:
    return verdict[place] if place else verdict
