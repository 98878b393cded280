"""Means, standard deviations, probabilities and shifts from weighted draws, errors included."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.quantities import Quantity
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    degrees_of,
    relative_efficiency,
    standard_error,
    tail_of,
)
from steelyard.weighing.weigh import Weights

__all__ = [
    "Scale",
    "Series",
    "column_blocks",
    "finish",
    "mean_of",
    "moments",
    "sd_of",
    "study",
    "study_pair",
]

# From so many contributions on a heavy fitted shape says nothing more (`make honesty`), ours.
MANY = 4.0

# Columns of a quantity that are worked on at a time.
_WIDTH = 64


@dataclass(frozen=True, eq=False)
class Scale:
    """
    What an estimate is weighed with: the base, its own weights, and the target's.

    `is_joined` says that base and target have draws of their own, one after the other.
    """

    base: Base
    weights: Weights
    base_weights: Weights
    findings: tuple[Finding, ...]
    is_joined: bool = False

    @property
    def count(self) -> int:
        return self.base.draws.size


@dataclass(frozen=True, eq=False)
class Series:
    """
    What the influence series of columns show, one entry a column.

    `efficiency` is that of the base draws for the quantity, without its weights: unlike the error
    it does not shrink where a series misses its own tail. `contributions` is how many draws carry
    the series on its heavier side, `degrees` the degrees of freedom of its interval; None where
    there is no one series to count.
    """

    error: Array
    shape: Array
    p_value: Array
    efficiency: Array
    contributions: Array | None = None
    degrees: Array | None = None

    def times(self, unit: Array) -> Series:
        """The series of values in another unit."""
        return replace(self, error=self.error * unit)


def in_unit(f: Array) -> tuple[Array, Array]:
    """
    Columns in a unit in which squares neither overflow nor vanish, and that unit.

    The unit is 1 but for columns beyond 1e±100, and a power of two, so that nothing is rounded.
    """
    top = np.abs(f).max(axis=0)
    _, exponent = np.frexp(np.where(top > 0, top, 1.0))
    unit = np.where(np.abs(exponent) > 330, np.ldexp(1.0, exponent), 1.0)
    return (f / unit if (unit != 1).any() else f), unit


def column_blocks(columns: Array) -> Iterator[tuple[slice, Array]]:
    """Blocks of columns, so that work arrays stay small for long vectors of parameters."""
    for start in range(0, columns.shape[1], _WIDTH):
        part = slice(start, min(start + _WIDTH, columns.shape[1]))
        yield part, columns[:, part]


def study(
    scale: Scale, psi: Array, weights: Array | None = None, raw: Array | None = None
) -> Series:
    """
    Errors and tail shapes of weighted means of `psi` ``(n, k)``, centred influence values.

    ``z_s = S w_s ψ_s`` and ``error² = LRV(z)/S``; the tail shape is fitted to each sign of the
    series on unsmoothed weights, and the larger one counts.
    """
    draws, ordered = scale.base.draws, scale.base.ordered
    w = scale.weights.linear if weights is None else weights
    r = scale.weights.raw if raw is None else raw
    z = draws.size * w[:, None] * psi
    z_raw = draws.size * r[:, None] * psi
    efficiency = relative_efficiency(z_raw, draws, ordered)
    carried = contributions_of(z, efficiency, draws, ordered)
    return Series(
        standard_error(z, draws, ordered),
        tail_of(z_raw, efficiency, draws, ordered),
        chains_p_value(psi, w, draws) if ordered else np.ones(psi.shape[1]),
        relative_efficiency(psi, draws, ordered),
        carried,
        degrees_of(carried, efficiency, draws),
    )


def moments(scale: Scale, f: Array, weights: Array | None = None) -> tuple[Array, Array]:
    """Weighted mean and standard deviation of the columns of `f`."""
    w = scale.weights.linear if weights is None else weights
    mean = _core.weighted_mean(f, w)
    return mean, np.sqrt(_core.weighted_mean((f - mean) ** 2, w))


def mean_of(scale: Scale, quantity: Quantity) -> Estimate:
    """Weighted mean."""

    def work(f: Array) -> tuple[Array, Series, Array]:
        f, unit = in_unit(f)
        mean, sd = moments(scale, f)
        series = study(scale, f - mean)
        return mean * unit, series.times(unit), (sd * unit) ** 2

    return _over_columns(scale, quantity, work)


def sd_of(scale: Scale, quantity: Quantity) -> Estimate:
    """Weighted standard deviation; influence ``((f − μ)² − σ²)/2σ``."""

    def work(f: Array) -> tuple[Array, Series, Array]:
        f, unit = in_unit(f)
        mean, sd = moments(scale, f)
        psi = ((f - mean) ** 2 - sd**2) / np.where(sd > 0, 2 * sd, 1.0)
        spread = _core.weighted_mean(psi**2, scale.weights.linear)
        return sd * unit, study(scale, psi).times(unit), spread * unit**2

    return _over_columns(scale, quantity, work)


def study_pair(scale: Scale, psi_target: Array, psi_base: Array) -> Series:
    """
    Error of a difference between target and base over the same draws.

    One series for the pair, ``S w ψ₁ − S v ψ₀``: the noise that both share cancels.
    """
    draws, ordered, count = scale.base.draws, scale.base.ordered, scale.count
    base = scale.base_weights

    def pair(w: Array, v: Array) -> Array:
        return count * (w[:, None] * psi_target - v[:, None] * psi_base)

    z, z_raw = pair(scale.weights.linear, base.linear), pair(scale.weights.raw, base.raw)
    efficiency = relative_efficiency(z_raw, draws, ordered)
    carried = contributions_of(z, efficiency, draws, ordered)
    equal = np.full(count, 1 / count)
    if scale.is_joined:  # what the target's influence is at draws of the base says nothing of it
        psi_target = np.where(scale.weights.raw[:, None] > 0, psi_target, 0.0)
    return Series(
        standard_error(z, draws, ordered),
        tail_of(z_raw, efficiency, draws, ordered),
        chains_p_value(z, equal, draws) if ordered else np.ones(z.shape[1]),
        relative_efficiency(psi_target, draws, ordered),
        carried,
        degrees_of(carried, efficiency, draws),
    )


def _over_columns(
    scale: Scale, quantity: Quantity, work: Callable[[Array], tuple[Array, Series, Array]]
) -> Estimate:
    columns = quantity.columns
    value, variance = np.empty(columns.shape[1]), np.empty(columns.shape[1])
    parts = []
    for part, f in column_blocks(columns):
        value[part], series, variance[part] = work(f)
        parts.append(series)
    return finish(scale, quantity, value, joined(parts), variance)


def joined(parts: list[Series]) -> Series:
    """Series of blocks of columns put together."""
    return Series(
        np.concatenate([p.error for p in parts]),
        np.concatenate([p.shape for p in parts]),
        np.concatenate([p.p_value for p in parts]),
        np.concatenate([p.efficiency for p in parts]),
        _joined_known([p.contributions for p in parts]),
        _joined_known([p.degrees for p in parts]),
    )


def _joined_known(parts: list[Array | None]) -> Array | None:
    known = [part for part in parts if part is not None]
    return np.concatenate(known) if len(known) == len(parts) else None


def finish(
    scale: Scale,
    quantity: Quantity,
    value: Array,
    series: Series,
    variance: Array | None,
    *,
    lead: tuple[int, ...] = (),
    extra: tuple[Finding, ...] = (),
    lead_labels: Mapping[str, Array | npt.NDArray[Any]] | None = None,
    **fields: Any,
) -> Estimate:
    """
    An Estimate from flat figures: shapes put back, reasons added to those of the answer.

    `variance` is that of the influence of one draw; without it effective draws are NaN. Figures
    in `extra` come flat and are shaped here; `lead` are axes in front of the quantity's own, with
    their labels in `lead_labels` by the names of their dimensions.
    """
    shape = (*lead, *quantity.shape)

    def shaped(flat: Array) -> Any:
        return flat.reshape(shape) if shape else float(flat.reshape(()))

    with np.errstate(invalid="ignore", divide="ignore"):
        effective = (
            np.full(value.shape, math.nan)
            if variance is None
            else np.where(series.error > 0, variance / series.error**2, float(scale.count))
        )
    unknown = np.full(value.shape, math.inf)
    carried = unknown if series.contributions is None else series.contributions
    own = [
        judge("quantity_shape", series.shape, spoken=~(carried >= MANY)),
        judge("few_contributions", carried),
        judge("chains_disagree", series.p_value),
        judge("few_effective_draws", scale.weights.effective_size * series.efficiency),
        *extra,
    ]
    findings = [*scale.findings, *(_shaped(f, shape) for f in own)]
    return Estimate(
        shaped(value),
        shaped(series.error),
        shaped(series.shape),
        Verdict(findings, shape),
        shaped(effective),
        degrees=shaped(unknown if series.degrees is None else series.degrees),
        label=quantity.label,
        dims=(*(lead_labels or ("",) * len(lead)), *quantity.dims),
        labels={**quantity.labels, **(lead_labels or {})},
        **{k: v if not isinstance(v, np.ndarray) else shaped(v) for k, v in fields.items()},
    )


def _shaped(finding: Finding, shape: tuple[int, ...]) -> Finding:
    size = math.prod(shape)

    def put(values: Any) -> Any:
        return values.reshape(shape) if values.size == size and values.ndim else values

    return Finding(
        finding.code,
        put(finding.figure) if shape else finding.figure.reshape(()),
        finding.strained,
        finding.refit,
        finding.words,
        finding.spoken
        if finding.spoken is None
        else (put(finding.spoken) if shape else finding.spoken.reshape(())),
    )
