"""One batch after another: weigh and resample at the next temperature, then move."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base.draws import Array
from steelyard.repair.bridging import bridge
from steelyard.repair.islands import Islands, lineage_variance, log_masses
from steelyard.repair.moves import Cloud, Family, cloud_of
from steelyard.repair.particles import Moving, Particles, Step
from steelyard.repair.points import Densities, Points, Rows
from steelyard.repair.schedule import next_temperature
from steelyard.weighing.trust import tail_share

__all__ = ["Setting", "advance", "cost_of"]

# The moves of a temperature end when twice as many lead less than this much further. With 1.25 the
# islands lagged behind alike, and the reported variance of the log constant was 0.36 of the one
# observed on a shift in 20 dimensions (0.85 with this), for two thirds of the evaluations.
_GROWTH = 1.1
# At the target they go on for longer: what they leave is the answer.
_LAST_GROWTH = 1.05
_MOST_SWEEPS = 128
# A single island is resampled below this share only: each resampling adds noise to the variance
# from lineages (after 22 of them, with 1,000 particles, a third of constants lay beyond 3 errors).
_BEARABLE = 0.5
# How fast scales follow the acceptance, which is known to a per cent or so from all particles.
_GAIN = 1.5
# No family of several is chosen more seldom.
_LEAST_SHARE = 0.1


@dataclass(frozen=True, eq=False)
class Setting:
    """
    What does not change during a run.

    Attributes
    ----------
    densities : Densities
        The user's functions.
    islands : Islands
        Layout and resampling scheme.
    families : tuple of Family
        The moves.
    efficiency : float
        Conditional share that a step keeps.
    chain_length : int
        States that a waste-free run keeps of each resampled particle; 1 keeps the last alone.
    """

    densities: Densities
    islands: Islands
    families: tuple[Family, ...]
    efficiency: float
    chain_length: int = 1

    @property
    def gradients(self) -> bool:
        return any(family.cost > 1 for family in self.families)


def cost_of(state: Particles, setting: Setting) -> int:
    """Evaluations of the next batch."""
    if state.moving is None:
        return 0
    return len(state.points.x) * (2 if setting.gradients else 1)


def advance(state: Particles, setting: Setting) -> Particles:
    """The state after the next batch; the given one stays as it is."""
    if state.moving is None:
        return _weigh(state, setting)
    moved = _sweep(state, setting)
    return _settled(moved, setting) if _is_over(moved, setting) else moved


def _weigh(state: Particles, setting: Setting) -> Particles:
    """Step to the next temperature, weigh, resample."""
    ratio, logs = state.points.ratio, state.log_weights
    total = float(_core.log_sum_exp(logs[:, None])[0])
    weights = np.exp(logs - total)
    after, share = next_temperature(state.temperature, weights, ratio, setting.efficiency)
    before, rise = logs, after - state.temperature
    logs = logs + rise * ratio
    added = float(_core.log_sum_exp(logs[:, None])[0]) - total
    w = np.exp(logs - (total + added))
    cloud = cloud_of(state.points.x, w)
    pending = Step(
        after,
        share,
        1 / float((w**2).sum()),
        float(_core.tail_shape(logs[:, None], np.ones(1))[0]),
        tail_share(w),
        added,
    )
    moving = Moving(cloud, state.points.x, rise, before, ratio)
    return _resampled(
        replace(state, log_weights=logs, temperature=after, moving=moving, pending=pending), setting
    )


def _resampled(state: Particles, setting: Setting) -> Particles:
    islands, moving, generator = setting.islands, state.moving, state.generator()
    assert moving is not None
    assert state.pending is not None
    lineage = lineage_variance(state.log_weights, state.eve, state.resampled)
    bearable = state.pending.effective_size >= _BEARABLE * islands.particles
    if islands.count == 1 and bearable:
        return replace(state, lineage=lineage, moving=replace(moving, begun=state.points.x))
    many = islands.size // setting.chain_length
    rows = islands.resample(state.log_weights, many, generator)
    mass = log_masses(state.log_weights, islands.count) - math.log(islands.size)
    points = state.points.take(rows)
    return replace(
        state,
        points=points,
        log_weights=np.repeat(mass, islands.size),
        eve=np.repeat(state.eve[rows], setting.chain_length),
        resampled=state.resampled + 1,
        lineage=lineage,
        stream=generator.bit_generator.state,
        moving=replace(moving, begun=points.x, kept=(points,) if setting.chain_length > 1 else ()),
    )


def _sweep(state: Particles, setting: Setting) -> Particles:
    """Move every particle once."""
    moving, points, generator = state.moving, state.points, state.generator()
    assert moving is not None
    chosen = _chosen(state, generator)
    proposed = _proposed(state, moving.cloud, chosen, setting, generator)
    chance = _log_chance(state, proposed, moving.cloud, chosen, setting)
    with np.errstate(over="ignore"):  # +inf is then what is meant
        accepted = generator.random(len(points.x)) < np.exp(chance)
    after = points.where(accepted, proposed)
    step = np.where(accepted, (moving.cloud.whiten(after.x - points.x) ** 2).sum(axis=1), 0.0)
    scales, shares = _steered(state, chosen, accepted, step, setting)
    far = (moving.cloud.whiten(after.x - moving.begun) ** 2).sum(axis=1)
    outside = accepted & (proposed.source == -np.inf)
    moving = replace(
        moving,
        distances=(*moving.distances, float(np.sqrt(far).mean())),
        kept=(*moving.kept, after) if moving.kept else (),
        accepted=moving.accepted + float(accepted.mean()),
        jump=math.sqrt(float(far.mean()) / (2 * moving.cloud.dimension)),
        evaluations=moving.evaluations + cost_of(state, setting),
        beyond=moving.beyond + int(outside.sum()),
    )
    return replace(
        state,
        points=after,
        moving=moving,
        scales=scales,
        shares=shares,
        evaluations=state.evaluations + cost_of(state, setting),
        calls=state.calls + 1,
        stream=generator.bit_generator.state,
    )


def _chosen(state: Particles, generator: np.random.Generator) -> list[Rows]:
    """The particles that each family moves."""
    count = len(state.points.x)
    if len(state.shares) == 1:
        return [np.arange(count, dtype=np.int64)]
    edges = np.cumsum(state.shares)[:-1]
    drawn = np.searchsorted(edges, generator.random(count), side="right")
    return [np.flatnonzero(drawn == k).astype(np.int64) for k in range(len(state.shares))]


def _proposed(
    state: Particles,
    cloud: Cloud,
    chosen: list[Rows],
    setting: Setting,
    generator: np.random.Generator,
) -> Points:
    x = np.empty_like(state.points.x)
    for rows, family, scale in zip(chosen, setting.families, state.scales, strict=True):
        x[rows] = family.propose(
            state.points.take(rows), state.temperature, cloud, scale, generator
        )
    return setting.densities.at(x, gradients=setting.gradients)


def _log_chance(
    state: Particles, proposed: Points, cloud: Cloud, chosen: list[Rows], setting: Setting
) -> Array:
    """Log of Metropolis and Hastings' ratio."""
    at = state.temperature
    out = proposed.at(at) - state.points.at(at)
    for rows, family, scale in zip(chosen, setting.families, state.scales, strict=True):
        here, there = state.points.take(rows), proposed.take(rows)
        out[rows] += family.correction(here, there, at, cloud, scale)
    return np.asarray(out)


def _steered(
    state: Particles,
    chosen: list[Rows],
    accepted: npt.NDArray[np.bool_],
    step: Array,
    setting: Setting,
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Scales steered to each family's acceptance; shares by squared jump distance for the price."""
    scales, gains = [], []
    for rows, family, scale in zip(chosen, setting.families, state.scales, strict=True):
        if family.goal is not None and len(rows):
            scale *= math.exp(_GAIN * (float(accepted[rows].mean()) - family.goal))
        scales.append(scale)
        gains.append(float(step[rows].mean()) if len(rows) else 0.0)
    if len(gains) == 1 or sum(gains) == 0:
        return tuple(scales), state.shares
    wanted = np.maximum(np.array(gains) / sum(gains), _LEAST_SHARE)
    shares = 0.5 * np.array(state.shares) + 0.5 * wanted / wanted.sum()
    return tuple(scales), tuple((shares / shares.sum()).tolist())


def _is_over(state: Particles, setting: Setting) -> bool:
    """Whether the moves of this temperature have done what they can."""
    moving = state.moving
    assert moving is not None
    if setting.chain_length > 1:
        return len(moving.kept) == setting.chain_length
    done = len(moving.distances)
    if done >= _MOST_SWEEPS:
        return True
    growth = _GROWTH if state.temperature < 1 else _LAST_GROWTH
    return done >= 2 and moving.distances[-1] < growth * moving.distances[done // 2 - 1]


def _settled(state: Particles, setting: Setting) -> Particles:
    """The step closed, with what it cost; a waste-free run takes all states that it kept."""
    moving, pending = state.moving, state.pending
    assert moving is not None
    assert pending is not None
    points = state.points
    if moving.kept:
        count = len(points.x)
        order = np.arange(count * len(moving.kept)).reshape(-1, count).T.reshape(-1)
        points = Points.joined(list(moving.kept), order)
    bridged, influence = bridge(
        (moving.log_weights, moving.ratio),
        (state.log_weights, points.ratio),
        moving.step,
        setting.islands.count,
    )
    step = replace(
        pending,
        bridged=bridged,
        sweeps=len(moving.distances),
        acceptance=moving.accepted / len(moving.distances),
        jump=moving.jump,
        evaluations=moving.evaluations,
        beyond=moving.beyond,
    )
    return replace(
        state,
        points=points,
        bridged=state.bridged + influence,
        steps=(*state.steps, step),
        moving=None,
        pending=None,
    )
