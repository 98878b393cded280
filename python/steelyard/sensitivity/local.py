"""Derivatives of answers in the hyperparameters of the priors."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from html import escape
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, finish, joined, moments, study
from steelyard.answers.quantities import Quantity, asked_for
from steelyard.answers.reweigh import base_answer
from steelyard.answers.tabulate import element_names
from steelyard.arrays import Frozen, ReadOnly, in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm, stated_prior
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError, PriorError
from steelyard.table import Table

__all__ = ["Local", "local"]

# Hyperparameters that spread the density about its place; one of them is the step of a location.
_SPREADS = ("sd", "scale", "log_sd")


@dataclass(frozen=True, eq=False)
class Local(Frozen):
    """
    Derivatives of quantities in every number that a stated prior holds.

    Attributes
    ----------
    derivative : mapping of str to mapping of str to Estimate
        By prior term and hyperparameter, in the constructor's order; one entry a quantity element,
        and the hyperparameter's own axes first.
    standardised : mapping of str to mapping of str to Estimate
        The same for one natural step of the hyperparameter, in base sds of the quantity.
    step : mapping of str to mapping of str to numpy.ndarray
        The natural step: for a location the spread of its own prior, for a positive
        hyperparameter its own size, otherwise one.
    elements : tuple of str
        Names of the quantity elements, in order.
    skipped : mapping of str to str
        Prior terms without numbers to differentiate in, and why.
    """

    derivative: Mapping[str, Mapping[str, Estimate]]
    standardised: Mapping[str, Mapping[str, Estimate]]
    step: Mapping[str, Mapping[str, Array]]
    elements: tuple[str, ...]
    skipped: Mapping[str, str]

    def table(self) -> Table:
        """One row for each hyperparameter and quantity, the largest standardised ones first."""
        rows = [row for term in self.derivative for row in self._rows(term)]
        rows.sort(key=lambda row: -abs(row[4]))
        names = ["term", "hyperparameter", "quantity", "derivative", "per_step", "step", "level"]
        errors = {"derivative": [row[7] for row in rows], "per_step": [row[8] for row in rows]}
        return Table({n: [row[i] for row in rows] for i, n in enumerate(names)}, errors)

    def _rows(self, term: str) -> Iterator[tuple[Any, ...]]:
        for name, raw in self.derivative[term].items():
            unit = self.standardised[term][name]
            step = self.step[term][name]
            for place in np.ndindex(*step.shape):
                shown = name + (f"[{', '.join(map(str, place))}]" if place else "")
                for column, element in enumerate(self.elements):
                    at = (*place, column)
                    yield (
                        term,
                        shown,
                        element,
                        float(raw.value[at]),
                        float(unit.value[at]),
                        float(step[place]),
                        str(raw.verdict[at].level),
                        float(raw.error[at]),
                        float(unit.error[at]),
                    )

    def __str__(self) -> str:
        lines = [str(self.table())]
        lines += [f"{term}: {reason}" for term, reason in self.skipped.items()]
        return "\n".join(lines)

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        rest = "".join(f"<p>{escape(f'{k}: {v}')}</p>" for k, v in self.skipped.items())
        return self.table()._repr_html_() + rest


def local(base: Base, quantities: Any = None, of: str = "mean") -> Local:
    """Derivatives of quantities in every hyperparameter; see ``Fit.local``."""
    if not isinstance(of, str) or of not in ("mean", "sd"):
        raise ArgumentError("of", "'mean' or 'sd'", repr(of), "Choose one of them.")
    stated = stated_prior(base.prior, "local")
    asked = asked_for(quantities, base)
    elements = tuple(n for label, q in asked.items() for n in element_names(label, q))
    columns = np.concatenate([q.columns for q in asked.values()], axis=1)
    scale = base_answer(base)._scale
    columns, power = in_unit(np.ascontiguousarray(columns))
    influence, unit = _influence(scale, columns, of)
    skipped: dict[str, str] = {}
    raw: dict[str, ReadOnly[Estimate]] = {}
    standard: dict[str, ReadOnly[Estimate]] = {}
    steps: dict[str, ReadOnly[Array]] = {}
    for label, term in stated.items():
        found = _scores(term, base, skipped)
        if not found:
            continue
        resolved: Any = term.resolved(base.draws).density
        estimates = {n: _covariance(scale, influence, s, elements) for n, s in found.items()}
        step = {n: _step(resolved, n, s.shape[1:]) for n, s in found.items()}
        raw[label] = ReadOnly({n: _times(e, power) for n, e in estimates.items()})
        steps[label] = ReadOnly(step)
        standard[label] = ReadOnly(
            {n: _times(e, step[n][..., None] / unit) for n, e in estimates.items()}
        )
    return Local(ReadOnly(raw), ReadOnly(standard), ReadOnly(steps), elements, ReadOnly(skipped))


def _influence(scale: Scale, f: Array, of: str) -> tuple[Array, Array]:
    """Influence of every draw on the mean or sd, and the base sd of the columns."""
    mean, sd = moments(scale, f)
    unit = np.where(sd > 0, sd, np.nan)
    if of == "mean":
        return f - mean, unit
    return ((f - mean) ** 2 - sd**2) / np.where(sd > 0, 2 * sd, 1.0), unit


def _scores(term: PriorTerm, base: Base, skipped: dict[str, str]) -> dict[str, Array]:
    """Derivative of the term's log density in each number it holds: ``(n, *hyperparameter)``."""
    density = term.resolved(base.draws).density
    if not isinstance(density, Distribution):
        skipped[term.label] = "not a distribution, so it has no hyperparameters to move"
        return {}
    value = term.value(base.draws)
    slopes = density.hyper_gradient(value, look_up=base.draws.look_up)
    out = {}
    for name, slope in slopes.items():
        held = _held(density, name)
        if held is None:
            continue
        if not np.isfinite(held).all():
            continue  # an infinite limit does not move by small steps
        score = _reduced(np.asarray(slope, dtype=np.float64), held.shape)
        if base.log_weights is not None:
            score[base.log_weights == -np.inf] = 0.0
        _refuse_undefined(score, term.label, name, base)
        out[name] = score
    if not out:
        skipped[term.label] = "all its hyperparameters are parameters"
    return out


def _held(density: Any, path: str) -> Array | None:
    """The number behind ``"components[0].sd"``; None where it is a parameter's name."""
    for part in path.split("."):
        name, _, index = part.partition("[")
        density = getattr(density, name)
        if index:
            density = density[int(index.rstrip("]"))]
    return None if isinstance(density, str) else np.asarray(density, dtype=np.float64)


def _reduced(slope: Array, shape: tuple[int, ...]) -> Array:
    """Summed over every axis along which the hyperparameter is shared, draws kept."""
    n, trailing = slope.shape[0], slope.shape[1:]
    padded = (1,) * (len(trailing) - len(shape)) + shape
    axes = tuple(i + 1 for i, size in enumerate(padded) if size == 1 and trailing)
    return np.array(slope.sum(axis=axes).reshape((n, *shape)), dtype=np.float64)


def _refuse_undefined(score: Array, label: str, name: str, base: Base) -> None:
    bad = ~np.isfinite(score.reshape(len(score), -1)).all(axis=1)
    if bad.any():
        raise PriorError(
            f"prior[{label!r}]: {name}",
            "a derivative at every draw",
            f"none at {int(bad.sum())}, first {base.draws.where(int(np.argmax(bad)))}",
            "A draw stands outside the support, or on an edge: move it by reweigh() instead.",
        )


def _covariance(
    scale: Scale, influence: Array, score: Array, elements: tuple[str, ...]
) -> Estimate:
    """``Cov(influence, score)`` for each entry of the hyperparameter and each element."""
    lead, width = score.shape[1:], influence.shape[1]
    values, series, spreads = [], [], []
    w = scale.weights.linear
    for raw in score.reshape(len(score), -1).T:
        column, unit = in_unit(np.ascontiguousarray(raw)[:, None])
        product = influence * (column - _core.weighted_mean(column, w))
        value = _core.weighted_mean(product, w)
        psi = product - value
        series.append(study(scale, psi).times(unit))
        spread = np.sqrt(_core.weighted_mean(psi**2, w))
        with np.errstate(over="ignore"):
            values.append(value * unit)
            spreads.append(spread * unit)
    whole = Quantity(
        "derivative",
        np.broadcast_to(0.0, (scale.count, width)),
        ("quantity",),
        {"quantity": np.array(elements)},
    )
    return finish(
        scale,
        whole,
        np.concatenate(values),
        joined(series),
        np.concatenate(spreads),
        lead=lead,
    )


def _step(density: Distribution, name: str, shape: tuple[int, ...]) -> Array:
    owner, _, last = name.rpartition(".")
    part: Any = density
    for piece in filter(None, owner.split(".")):
        inner, _, index = piece.partition("[")
        part = getattr(part, inner)
        part = part[int(index.rstrip("]"))] if index else part
    domain = getattr(part, "domains", {}).get(last, "")
    if domain == "positive":
        return np.abs(np.asarray(getattr(part, last), dtype=np.float64))
    spread = next((getattr(part, s) for s in _SPREADS if hasattr(part, s)), 1.0)
    held = 1.0 if isinstance(spread, str) or domain != "real" else spread
    return np.array(np.broadcast_to(np.asarray(held, dtype=np.float64), shape))


def _times(estimate: Estimate, unit: Array) -> Estimate:
    with np.errstate(over="ignore"):
        value, error = np.asarray(estimate.value) * unit, np.asarray(estimate.error) * np.abs(unit)
    return replace(estimate, value=value, error=error)
