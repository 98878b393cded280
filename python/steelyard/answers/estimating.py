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
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array, Draws
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    MANY_CHAINS,
    agreement,
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
    "joined",
    "mean_of",
    "moments",
    "sd_of",
    "series_of",
    "study",
    "study_pair",
    "study_pair_and_spread",
]

# From so many contributions on a heavy fitted shape says nothing more (`make honesty`), ours.
MANY = 4.0
# Where not even the root of a contribution has a finite mean it takes Cochran's number of them:
# with fewer, what the draws have not reached is missing from the estimate and from its error.
WILD = 2.0
MANY_WILD = 25.0

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
        with np.errstate(over="ignore"):
            return replace(self, error=self.error * unit)


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
    if _by_one_kernel(draws, ordered):
        return _study_at_once(psi, np.zeros(psi.shape[1]), w, r, draws)[0]
    z = draws.size * w[:, None] * psi
    z_raw = draws.size * r[:, None] * psi
    p_value = chains_p_value(psi, w, draws) if ordered else np.ones(psi.shape[1])
    return series_of(scale.base, z, psi, z_raw, p_value)


def series_of(
    base: Base, z: Array, psi: Array, z_raw: Array | None = None, p_value: Array | None = None
) -> Series:
    """
    What influence series `z` ``(n, k)`` show, of a quantity with influence `psi` without weights.

    `z_raw` are the series before smoothing, `p_value` says whether the chains agree, if both are
    not those of `z` itself.
    """
    draws, ordered = base.draws, base.ordered
    z_raw = z if z_raw is None else z_raw
    if p_value is None:
        equal = np.full(draws.size, 1 / draws.size)
        p_value = chains_p_value(z, equal, draws) if ordered else np.ones(z.shape[1])
    efficiency = relative_efficiency(z_raw, draws, ordered)
    carried = contributions_of(z, efficiency, draws, ordered)
    return Series(
        standard_error(z, draws, ordered),
        tail_of(z_raw, efficiency, draws, ordered),
        p_value,
        relative_efficiency(psi, draws, ordered),
        carried,
        degrees_of(carried, efficiency, draws),
    )


def _by_one_kernel(draws: Draws, ordered: bool) -> bool:
    return ordered and draws.chains < MANY_CHAINS and draws.pooling is None


def _study_at_once(
    f: Array, centre: Array, w: Array, raw: Array, draws: Draws
) -> tuple[Series, Array]:
    """The study of ``f − centre`` by one kernel, which forms no series as an array; ``Σ w ψ²``."""
    figures, chains = _core.study(f, centre, w, raw, draws.starts)
    spread, long_run, efficiency, shape, own, carried, top = figures
    # About the mean under these weights, which is the centre but for rounding.
    pooled = np.maximum(spread - (chains[0] * np.nan_to_num(chains[1])).sum(axis=0) ** 2, 0.0)
    carried = np.sqrt(efficiency) * carried
    series = Series(
        np.sqrt(long_run / draws.size),
        shape,
        agreement(chains, pooled, top, draws.starts),
        own,
        carried,
        degrees_of(carried, efficiency, draws),
    )
    return series, spread


def _study_about_mean(scale: Scale, f: Array) -> tuple[Array, Series, Array]:
    """Weighted means of the columns of `f`, their series, and the variance of a draw."""
    weights, draws = scale.weights, scale.base.draws
    if _by_one_kernel(draws, scale.base.ordered):
        mean = _core.weighted_mean(f, weights.linear)
        series, spread = _study_at_once(f, mean, weights.linear, weights.raw, draws)
        return mean, series, spread
    mean, sd = moments(scale, f)
    return mean, study(scale, f - mean), sd**2


def moments(scale: Scale, f: Array, weights: Array | None = None) -> tuple[Array, Array]:
    """Weighted mean and standard deviation of the columns of `f`."""
    w = scale.weights.linear if weights is None else weights
    mean, square = _core.weighted_moments(f, w)
    return mean, np.sqrt(square)


def mean_of(scale: Scale, quantity: Quantity) -> Estimate:
    """Weighted mean."""

    def work(f: Array) -> tuple[Array, Series, Array]:
        f, unit = in_unit(f)
        mean, series, spread = _study_about_mean(scale, f)
        return mean * unit, series.times(unit), np.sqrt(spread) * unit

    return _over_columns(scale, quantity, work)


def sd_of(scale: Scale, quantity: Quantity) -> Estimate:
    """Weighted standard deviation; influence ``((f − μ)² − σ²)/2σ``."""

    def work(f: Array) -> tuple[Array, Series, Array]:
        f, unit = in_unit(f)
        mean, sd = moments(scale, f)
        # Divided at the end: where the sd is far below the values the quotient's square overflows.
        psi = (f - mean) ** 2 - sd**2
        spread = np.sqrt(_core.weighted_mean(psi**2, scale.weights.linear))
        with np.errstate(over="ignore"):
            slope = unit / np.where(sd > 0, 2 * sd, 1.0)
            return sd * unit, study(scale, psi).times(slope), spread * slope

    return _over_columns(scale, quantity, work)


def study_pair(scale: Scale, psi_target: Array, psi_base: Array) -> Series:
    """
    Error of a difference between target and base over the same draws.

    One series for the pair, ``S w ψ₁ − S v ψ₀``: the noise that both share cancels.
    """
    return study_pair_and_spread(scale, psi_target, psi_base)[0]


def study_pair_and_spread(scale: Scale, psi_target: Array, psi_base: Array) -> tuple[Series, Array]:
    """The same, and the sd of the influence of one draw."""
    count, base = scale.count, scale.base_weights

    def pair(w: Array, v: Array) -> Array:
        return count * (w[:, None] * psi_target - v[:, None] * psi_base)

    z, z_raw = pair(scale.weights.linear, base.linear), pair(scale.weights.raw, base.raw)
    if scale.is_joined:  # what the target's influence is at draws of the base says nothing of it
        psi_target = np.where(scale.weights.raw[:, None] > 0, psi_target, 0.0)
    return series_of(scale.base, z, psi_target, z_raw), np.sqrt(_core.mean_square(z))


def _over_columns(
    scale: Scale, quantity: Quantity, work: Callable[[Array], tuple[Array, Series, Array]]
) -> Estimate:
    columns = quantity.columns
    value, spread = np.empty(columns.shape[1]), np.empty(columns.shape[1])
    parts = []
    for part, f in column_blocks(columns):
        value[part], series, spread[part] = work(f)
        parts.append(series)
    return finish(scale, quantity, value, joined(parts), spread, whole=True)


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
    spread: Array | None,
    *,
    lead: tuple[int, ...] = (),
    extra: tuple[Finding, ...] = (),
    lead_labels: Mapping[str, Array | npt.NDArray[Any]] | None = None,
    whole: bool = False,
    **fields: Any,
) -> Estimate:
    """
    An Estimate from flat figures: shapes put back, reasons added to those of the answer.

    `spread` is the sd of the influence of one draw; without it effective draws are NaN. Figures
    in `extra` come flat and are shaped here; `lead` are axes in front of the quantity's own, with
    their labels in `lead_labels` by the names of their dimensions. `whole` says that the series is
    that of a mean or an sd, not a difference, whose shape is large where two series nearly cancel.
    """
    shape = (*lead, *quantity.shape)

    def shaped(flat: Array) -> Any:
        return flat.reshape(shape) if shape else float(flat.reshape(()))

    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        effective = (
            np.full(value.shape, math.nan)
            if spread is None
            else np.where(series.error > 0, (spread / series.error) ** 2, float(scale.count))
        )
    unknown = np.full(value.shape, math.inf)
    carried = unknown if series.contributions is None else series.contributions
    enough = np.where((series.shape >= WILD) & whole, MANY_WILD, MANY)
    own = [
        judge("quantity_shape", series.shape, spoken=~(carried >= enough)),
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
        if not shape:
            return values.reshape(())
        return values.reshape(shape) if values.size == size and values.ndim else values

    spoken = None if finding.spoken is None else put(finding.spoken)
    return replace(finding, figure=put(finding.figure), spoken=spoken)
