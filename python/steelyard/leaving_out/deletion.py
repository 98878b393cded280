"""What leaving out does, group by group: one function does the work of a block of columns."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.errors import RatioError
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    degrees_of,
    relative_efficiency,
    standard_error,
)
from steelyard.weighing.trust import figure_findings

__all__ = [
    "Deleted",
    "Setting",
    "Totals",
    "delete_columns",
    "deletion_weights",
    "group_findings",
    "log_ratio_of",
    "setting_of",
    "unseen_mass",
]

# Place of the faults among the figures of the kernel.
_FAULTS = 11


@dataclass(frozen=True, eq=False)
class Setting:
    """What every deletion shares: draws, base weights, and standardised quantities."""

    draws: Draws
    ordered: bool
    log_weights: Array | None
    # Normalised log weights of the base, where they are not equal, and the weights (n,).
    base_logs: Array | None
    base: Array
    # Quantities (n, P), centred by their base mean and divided by their base sd.
    quantities: Array
    # Efficiency of the base draws for each quantity.
    efficiency: Array


@dataclass(frozen=True, eq=False)
class Deleted:
    """
    Figures of groups left out, one entry a group.

    `score` and `in_sample` are log densities, `error` the Monte Carlo error of `score`;
    `tail_shape` is that of the raw weights, the sizes and the share are those of the smoothed
    ones; `unseen` is the share of weight that may lie beyond the heaviest draw, `spread` the
    variance of the density over its mean, were the draws those without the group. `shift` and
    `shift_error`, ``(groups, P)``, are in base sd. `degrees` are those of the error's interval,
    `chain_share` is the p-value of the chains' shares of the raw weights.
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
    degrees: Array
    chain_share: Array
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
        normal, equal = None, np.full(draws.size, 1 / draws.size)
    else:
        normal = logs - _core.log_sum_exp(np.ascontiguousarray(logs)[:, None])[0]
        equal = np.exp(normal)
    f = np.zeros((draws.size, 0)) if quantities is None else quantities
    mean = _core.weighted_mean(f, equal)
    sd = np.sqrt(_core.weighted_mean((f - mean) ** 2, equal))
    varies = (f != f[:1]).any(axis=0) & (sd > 0)
    scaled = np.ascontiguousarray((f - mean) / np.where(varies, sd, np.nan))
    efficiency = relative_efficiency(np.where(varies, scaled, 0.0), draws, base.ordered)
    return Setting(draws, base.ordered, logs, normal, equal, scaled, efficiency)


def delete_columns(
    setting: Setting,
    held: npt.NDArray[Any],
    scored: npt.NDArray[Any],
    refuse: Callable[[], object] | None = None,
) -> tuple[Deleted, Totals]:
    """
    Leave out groups, one a column.

    `held` ``(n, k)`` is the log density of what is deleted with each group, `scored` that of the
    group itself (the same array where nothing more is deleted). The weights are
    ``w ∝ v exp(−held)`` with base weights v, smoothed; the score is ``log Σ w exp(scored)``, its
    influence series ``S w (exp(scored)/p − 1)`` with p the exponential of the score. Values that
    were not checked come with `refuse`, which raises where one of them is no log density.
    """
    draws, alone = setting.draws, held is scored
    repeats = None if setting.ordered else draws.repeats
    figures, totals, shift, square = _core.delete(
        held if alone else np.asarray(held, dtype=np.float64),
        setting.quantities,
        None if alone else np.asarray(scored, dtype=np.float64),
        setting.base_logs,
        draws.starts if setting.ordered else None,
        None if repeats is None else repeats.astype(np.int64),
    )
    if figures[:, _FAULTS].any():
        if refuse is not None:
            refuse()
        log_ratio_of(setting, np.asarray(held, dtype=np.float64))
    found = _deleted(setting, figures, shift, square)
    if draws.pooling is not None:
        found = _within_fits(setting, found, held, scored)
    return found, Totals(*totals)


def _within_fits(
    setting: Setting, found: Deleted, held: npt.NDArray[Any], scored: npt.NDArray[Any]
) -> Deleted:
    """Figures that rest on chains, from what varies within the fits of a pool, in plain code."""
    draws, ordered = setting.draws, setting.ordered
    log_weights, raw = deletion_weights(setting, np.asarray(held, dtype=np.float64))
    scaled = draws.size * np.exp(log_weights)
    reached = np.exp(np.asarray(scored, dtype=np.float64) - found.score) - 1
    z, z_raw = scaled * reached, draws.size * raw * reached
    efficiency = relative_efficiency(z_raw, draws, ordered)
    carrying = contributions_of(z, efficiency, draws, ordered)
    equal = np.full(draws.size, 1 / draws.size)
    return replace(
        found,
        error=np.hypot(standard_error(z, draws, ordered), found.unseen),
        degrees=degrees_of(carrying, efficiency, draws),
        chain_share=chains_p_value(scaled, equal, draws) if ordered else found.chain_share,
    )


def _deleted(setting: Setting, figures: Array, shift: Array, square: Array) -> Deleted:
    """Figures of the kernel with allowances, degrees and errors of shifts."""
    count = setting.draws.size
    score, error, in_sample, shape, size, entropy, share, spread, carried, efficiency, p_value = (
        np.ascontiguousarray(figures[:, place]) for place in range(_FAULTS)
    )
    unseen = np.where(share * count > 1 + 1e-9, unseen_mass(shape, share), 0.0)
    return Deleted(
        score,
        np.hypot(error, unseen),
        in_sample,
        shape,
        size,
        entropy,
        share,
        unseen,
        spread,
        degrees_of(carried, efficiency, setting.draws),
        p_value,
        shift,
        np.sqrt(square / setting.efficiency),
    )


def unseen_mass(shape: Array, share: Array) -> Array:
    """
    Allowance for weight beyond the heaviest draw, where the weights have no finite variance.

    A Pareto tail of shape k beyond the largest r of S weights holds about ``r/(1 − k)`` in the sum,
    a share of ``share/(1 − k)``. From k = ½ on, that is as large as the error or larger, and the
    error, estimated from the same draws, does not know of it: a log score is then too high.
    *Derived*; from k = 1 on no allowance is enough.
    """
    rest = np.where(shape < 1, 1 - shape, np.nan)
    return np.where(shape >= 1, np.inf, np.where(shape > 0.5, share / rest, 0.0))


def deletion_weights(setting: Setting, held: Array) -> tuple[Array, Array]:
    """Smoothed log weights and raw weights ``(n, k)``, both normalised."""
    log_ratio = log_ratio_of(setting, held)
    raw = np.exp(log_ratio - log_ratio.max(axis=0))
    efficiency = relative_efficiency(raw, setting.draws, setting.ordered)
    log_weights = np.empty_like(log_ratio)
    _core.smooth(log_ratio, efficiency, log_weights)
    raw /= raw.sum(axis=0)
    return log_weights, raw


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


def group_findings(
    found: Deleted, draws: int, shape: tuple[int, ...], tests: int | None = None
) -> list[Finding]:
    """
    What the weights of every group say about trust, in the shape of the groups.

    `tests` is how many groups are judged in all, where `found` holds only some of them.
    """
    tests = found.score.size if tests is None else tests

    def shaped(figure: Array) -> Array:
        return figure.reshape(shape)

    with np.errstate(divide="ignore", invalid="ignore"):
        divergence = np.maximum(np.log(draws / found.entropy_size), 0.0) / np.log(draws)
    return [
        *figure_findings(
            draws,
            shaped(found.tail_shape),
            (shaped(found.effective_size), shaped(found.entropy_size)),
            shaped(found.largest_share),
            shaped(divergence),
        ),
        # As many tests as groups: p-values are held against limits as those of one.
        judge("chain_share", shaped(np.minimum(found.chain_share * tests, 1.0))),
    ]
