"""The state of a run: everything that going on needs, between two batches."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.arrays import Frozen
from steelyard.base.draws import Array
from steelyard.repair.moves import Cloud
from steelyard.repair.points import Points, Rows

__all__ = ["Moving", "Particles", "Step"]


@dataclass(frozen=True)
class Step:
    """
    One temperature of a tempered run.

    Attributes
    ----------
    temperature : float
        λ, from 0 at the source to 1 at the target.
    conditional_share : float
        Conditional effective size of the step, over the number of particles.
    effective_size : float
        Effective size of the weights after the step, all islands together.
    tail_shape : float
        Tail shape of the step's weights.
    tail_share : float
        Share of that tail in ``Σ w²``.
    log_ratio : float
        Log ratio of constants that the step adds.
    sweeps : int
        How many times all particles were moved.
    acceptance : float
        Share of the proposals that were accepted.
    jump : float
        How far particles came from where the step found them: root mean square distance in the
        metric of their covariance over that of independent draws, ``√(2 d)``.
    evaluations : int
        Points at which the densities were evaluated.
    beyond : int
        Proposals to which the target gives density and the source none.
    bridged : float
        The same log ratio from the particles before the step and those after its moves; 0
        while these go on.
    """

    temperature: float
    conditional_share: float
    effective_size: float
    tail_shape: float
    tail_share: float
    log_ratio: float
    sweeps: int = 0
    acceptance: float = 0.0
    jump: float = 0.0
    evaluations: int = 0
    beyond: int = 0
    bridged: float = 0.0


@dataclass(frozen=True, eq=False)
class Moving(Frozen):
    """
    Moves that are going on at a temperature.

    Attributes
    ----------
    cloud : Cloud
        Moments of the particles before resampling.
    begun : numpy.ndarray
        Where each particle stood when the moves began.
    step : float
        How far the temperature rose before them.
    log_weights, ratio : numpy.ndarray
        Of the particles before that.
    distances : tuple of float
        Mean distance from there after each sweep.
    kept : tuple of Points
        States that a waste-free run keeps, the resampled ones first.
    accepted : float
        Sum over sweeps of the share accepted.
    jump : float
        As in Step, after the last sweep.
    evaluations, beyond : int
        As in Step.
    """

    cloud: Cloud
    begun: Array
    step: float
    log_weights: Array
    ratio: Array
    distances: tuple[float, ...] = ()
    kept: tuple[Points, ...] = ()
    accepted: float = 0.0
    jump: float = 0.0
    evaluations: int = 0
    beyond: int = 0


@dataclass(frozen=True, eq=False)
class Particles(Frozen):
    """
    Where a run stands.

    Attributes
    ----------
    points : Points
        The particles; fewer than the layout says while a waste-free run moves.
    log_weights : numpy.ndarray
        Log weights; the start's add up to one, and those at temperature λ to the ratio of
        constants.
    start_masses : numpy.ndarray
        Weight that each island held at the start.
    eve : numpy.ndarray
        First ancestor of each particle.
    temperature : float
        λ reached; moves may still be going on there.
    stream : mapping
        State of the random generator before the next batch.
    resampled, evaluations, calls : int
        How often resampled; points evaluated; batches.
    lineage : float
        Relative variance of the constant from the lineages, before the last resampling.
    scales, shares : tuple of float
        Scale of each family of moves, and how often it is chosen.
    bridged : numpy.ndarray
        What each island adds to the bridged constant, centred.
    steps : tuple of Step
        Temperatures done.
    moving : Moving or None
        Moves going on.
    pending : Step or None
        The step that they belong to.
    """

    points: Points
    log_weights: Array
    start_masses: Array
    eve: Rows
    temperature: float
    stream: Mapping[str, Any]
    scales: tuple[float, ...]
    shares: tuple[float, ...]
    bridged: Array
    resampled: int = 0
    evaluations: int = 0
    calls: int = 1
    lineage: float = 0.0
    steps: tuple[Step, ...] = ()
    moving: Moving | None = None
    pending: Step | None = None

    @property
    def finished(self) -> bool:
        return self.temperature >= 1 and self.moving is None

    def generator(self) -> np.random.Generator:
        """A generator that goes on where the last batch left it."""
        generator = np.random.Generator(np.random.PCG64())
        generator.bit_generator.state = dict(self.stream)
        return generator
