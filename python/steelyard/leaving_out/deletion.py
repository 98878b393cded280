"""What leaving out does, group by group: one function does the work of a block of columns."""

from __future__ import annotations

from dataclasses import dataclass, field, fields

import numpy as np

from steelyard import _core
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.errors import RatioError
from steelyard.verdicts import Finding, judge, shape_limit
from steelyard.weighing.series import relative_efficiency, standard_error

__all__ = [
    "Deleted",
    "Setting",
    "Totals",
    "delete_columns",
    "deletion_weights",
    "group_findings",
    "log_ratio_of",
    "setting_of",
]


@dataclass(frozen=True, eq=False)
class Setting:
    """What every deletion shares: draws, base weights, and standardised quantities."""

    draws: Draws
    ordered: bool
    log_weights: Array | None
    # Normalised base weights (n,).
    base: Array
    # Quantities (n, P), centred by their base mean and divided by their base sd.
    quantities: Array
    # Efficiency of the base draws for each quantity.
    efficiency: Array
    # Their first three powers side by side (n, 3 P).
    powers: Array
    # What the base adds to errors: ``Σ v² f²``, ``Σ v² f q``, ``Σ v² q²``, ``q = (f² − 1)/2``.
    own: tuple[Array, ...]


@dataclass(frozen=True, eq=False)
class Deleted:
    """
    Figures of groups left out, one entry a group.

    `score` and `in_sample` are log densities, `error` the Monte Carlo error of `score`;
    `tail_shape` is that of the raw weights, the sizes and the share are those of the smoothed
    ones; `unseen` is the share of weight that may lie beyond the heaviest draw, `spread` the
    variance of the density over its mean, were the draws those without the group. `shift` and
    `shift_error`, ``(groups, P)``, are in base sd.
    """

    score: Array
    error: Array
    in_sample: Array
    tail_shape: Array
    effective_size: Array
    entropy_size: Array
    largest_share: Array
    unseen: Array
    spread: Array
    shift: Array
    shift_error: Array

    @classmethod
    def empty(cls, count: int, quantities: int) -> Deleted:
        """Room for so many groups."""
        wide = ("shift", "shift_error")
        return cls(
            *(
                np.full((count, quantities) if f.name in wide else (count,), np.nan)
                for f in fields(cls)
            )
        )

    def put(self, part: slice, block: Deleted) -> None:
        """Write the figures of a block."""
        for f in fields(self):
            getattr(self, f.name)[part] = getattr(block, f.name)

    def take(self, groups: Array) -> Deleted:
        """The figures of some groups."""
        return Deleted(*(getattr(self, f.name)[groups] for f in fields(self)))


@dataclass(frozen=True, eq=False)
class Totals:
    """
    Influence series ``(n,)`` summed over groups draw by draw.

    `left_out` is that of the left-out log score, `raw` the same with unsmoothed weights,
    `in_sample` that of the in-sample log score. Errors of single groups share the draws: only
    their series add up.
    """

    left_out: Array
    raw: Array
    in_sample: Array = field(default_factory=lambda: np.zeros(0))

    @classmethod
    def zero(cls, count: int) -> Totals:
        """No group yet."""
        return cls(np.zeros(count), np.zeros(count), np.zeros(count))

    def add(self, block: Totals, factor: float = 1.0) -> None:
        """Add the series of a block."""
        for f in fields(self):
            series = getattr(self, f.name)
            series += factor * getattr(block, f.name)


def setting_of(base: Base, quantities: Array | None = None) -> Setting:
    """The setting of a base, with quantities ``(n, P)`` standardised."""
    draws = base.draws
    logs = base.log_weights
    if logs is None:
        equal = np.full(draws.size, 1 / draws.size)
    else:
        equal = np.exp(logs - _core.log_sum_exp(np.ascontiguousarray(logs)[:, None])[0])
    f = np.zeros((draws.size, 0)) if quantities is None else quantities
    mean = _core.weighted_mean(f, equal)
    sd = np.sqrt(_core.weighted_mean((f - mean) ** 2, equal))
    varies = (f != f[:1]).any(axis=0) & (sd > 0)
    scaled = (f - mean) / np.where(varies, sd, np.nan)
    efficiency = relative_efficiency(np.where(varies, scaled, 0.0), draws, base.ordered)
    q = (scaled**2 - 1) / 2
    own = tuple((equal**2) @ part for part in (scaled**2, scaled * q, q**2))
    powers = np.concatenate([scaled, scaled**2, scaled**3], axis=1)
    return Setting(draws, base.ordered, logs, equal, scaled, efficiency, powers, own)


def delete_columns(setting: Setting, held: Array, scored: Array) -> tuple[Deleted, Totals]:
    """
    Leave out groups, one a column.

    `held` ``(n, k)`` is the log density of what is deleted with each group, `scored` that of the
    group itself (the same array where nothing more is deleted). The weights are
    ``w ∝ v exp(−held)`` with base weights v, smoothed; the score is ``log Σ w exp(scored)``, its
    influence series ``S w (exp(scored)/p − 1)`` with p the exponential of the score.
    """
    draws, count = setting.draws, setting.draws.size
    log_weights, raw, shape = deletion_weights(setting, held)
    w = np.exp(log_weights)
    joint = log_weights + scored
    score = _core.log_sum_exp(joint)
    z = count * (np.exp(joint - score) - w)
    raw_series = count * (_share(raw, scored, setting, held is scored) - raw)
    in_sample, z_in = _in_sample(setting, scored)
    shift, shift_error = _shifts(setting, w)
    share = _core.largest_share(log_weights)
    unseen = np.where(share * count > 1 + 1e-9, unseen_mass(shape, share), 0.0)
    with np.errstate(over="ignore"):
        spread = np.expm1(np.maximum(_core.log_sum_exp(joint + scored) - 2 * score, 0.0))
    found = Deleted(
        score,
        np.hypot(standard_error(z, draws, setting.ordered), unseen),
        in_sample,
        shape,
        _core.effective_size(log_weights, False),
        _core.effective_size(log_weights, True),
        share,
        unseen,
        spread,
        shift,
        shift_error,
    )
    return found, Totals(z.sum(axis=1), raw_series.sum(axis=1), z_in.sum(axis=1))


def unseen_mass(shape: Array, share: Array) -> Array:
    """
    Allowance for weight beyond the heaviest draw, where the weights have no finite variance.

    A Pareto tail of shape k beyond the largest r of S weights holds about ``r/(1 − k)`` in the sum,
    a share of ``share/(1 − k)``. From k = ½ on, that is as large as the error or larger, and the
    error, estimated from the same draws, does not know of it: a log score is then too high.
    *Derived*; from k = 1 on no allowance is enough.
    """
    room = np.where(shape < 1, 1 - shape, np.nan)
    return np.where(shape >= 1, np.inf, np.where(shape > 0.5, share / room, 0.0))


def deletion_weights(setting: Setting, held: Array) -> tuple[Array, Array, Array]:
    """Smoothed log weights and raw weights ``(n, k)``, both normalised, and tail shapes."""
    log_ratio = log_ratio_of(setting, held)
    raw = np.exp(log_ratio - log_ratio.max(axis=0))
    efficiency = relative_efficiency(raw, setting.draws, setting.ordered)
    log_weights = np.empty_like(log_ratio)
    shape = _core.smooth(log_ratio, efficiency, log_weights)
    raw /= raw.sum(axis=0)
    return log_weights, raw, shape


def log_ratio_of(setting: Setting, held: Array) -> Array:
    """``−held + log v``; a draw without base weight has none, whatever its ratio."""
    with np.errstate(invalid="ignore"):
        total = -held if setting.log_weights is None else setting.log_weights[:, None] - held
    impossible = held == -np.inf
    if impossible.any():
        weighs = setting.base > 0
        if (impossible & weighs[:, None]).any():
            row = int(np.nonzero(impossible & weighs[:, None])[0][0])
            raise RatioError(
                "log likelihood",
                "draws under which every observation is possible",
                f"−inf at {setting.draws.where(row)}",
                "The draws did not come from a posterior with this observation in it.",
            )
        total = np.where(impossible, -np.inf, total)
    return total


def _share(raw: Array, scored: Array, setting: Setting, same: bool) -> Array:
    """``w exp(scored)/p`` with raw weights: the base weights where nothing more is deleted."""
    if same:
        return setting.base[:, None]
    with np.errstate(divide="ignore"):
        joint = np.log(raw) + scored
    return np.exp(joint - _core.log_sum_exp(joint))


def _in_sample(setting: Setting, scored: Array) -> tuple[Array, Array]:
    """``log Σ v exp(scored)``, and its influence series."""
    with np.errstate(divide="ignore"):
        joint = scored + np.log(setting.base)[:, None]
    score = _core.log_sum_exp(joint)
    return score, setting.draws.size * (np.exp(joint - score) - setting.base[:, None])


def _shifts(setting: Setting, w: Array) -> tuple[Array, Array]:
    """
    Shifts of the means of the quantities, in base sd, and their Monte Carlo errors.

    With f standardised, the influence of a draw on a shift m is
    ``w (f − m) − v f − v m (f² − 1)/2``: target mean, base mean and base sd. The error
    is that of independent draws divided by the efficiency of the base draws for f.
    """
    count, v = setting.quantities.shape[1], setting.base
    if count == 0:
        empty = np.zeros((w.shape[1], 0))
        return empty, empty
    powers = setting.powers
    first = w.T @ powers
    m = first[:, :count]
    squares = w**2
    second = squares.T @ powers[:, : 2 * count]
    target = second[:, count:] - 2 * m * second[:, :count]
    target += m**2 * squares.sum(axis=0)[:, None]
    equal = setting.log_weights is None
    product = first / len(v) if equal else (w * v[:, None]).T @ powers
    mass = np.full((w.shape[1], 1), 1 / len(v)) if equal else (w.T @ v)[:, None]
    one, two, three = (product[:, i * count : (i + 1) * count] for i in range(3))
    both = two - m * one + m * ((three - one) / 2 - m * (two - mass) / 2)
    own = setting.own[0] + 2 * m * setting.own[1] + m**2 * setting.own[2]
    variance = np.maximum(target - 2 * both + own, 0.0) / setting.efficiency
    return m, np.sqrt(variance)


def group_findings(found: Deleted, draws: int, shape: tuple[int, ...]) -> list[Finding]:
    """What the weights of every group say about trust, in the shape of the groups."""

    def shaped(figure: Array) -> Array:
        return figure.reshape(shape)

    with np.errstate(divide="ignore", invalid="ignore"):
        divergence = np.maximum(np.log(draws / found.entropy_size), 0.0) / np.log(draws)
    return [
        judge("weight_shape", shaped(found.tail_shape), strained=shape_limit(draws)),
        judge("few_effective", shaped(found.effective_size)),
        judge("few_effective_entropy", shaped(found.entropy_size)),
        judge("few_carry", shaped(found.largest_share)),
        judge("saturated_divergence", shaped(divergence)),
    ]
