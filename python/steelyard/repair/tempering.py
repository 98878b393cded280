"""From a source to a target by temperatures: sequential Monte Carlo on whole batches."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

import numpy as np

from steelyard.base.draws import Array
from steelyard.errors import ArgumentError
from steelyard.repair.arguments import (
    read_chain_length,
    read_families,
    read_islands,
    read_limit,
    read_share,
    refuse_no_gradient,
    teller,
)
from steelyard.repair.islands import Islands, log_masses
from steelyard.repair.particles import Particles
from steelyard.repair.points import Densities, refuse_no_function
from steelyard.repair.starting import (
    place_start,
    read_names,
    read_start,
    refuse_bad_start,
    start_size,
)
from steelyard.repair.sweeping import Setting, advance, cost_of
from steelyard.repair.tempered import Tempered
from steelyard.weighing.arrays import seed_key

__all__ = ["go_on", "temper"]

Density = Callable[[Array], Any]


def temper(
    start: Any,
    source: Density,
    target: Density,
    *,
    start_log_weights: Any = None,
    source_gradient: Density | None = None,
    target_gradient: Density | None = None,
    efficiency: float = 0.9,
    scheme: str = "systematic",
    move: str = "mixed",
    waste_free: bool | int = False,
    islands: int = 20,
    size: int | None = None,
    names: Iterable[str] | None = None,
    most_evaluations: int | None = None,
    rng: Any = None,
    progress: Any = None,
) -> Tempered:
    """
    Move draws of a source to a target by temperatures.

    Parameters
    ----------
    start : array_like or callable
        Draws of the source, shape ``(n, d)``, chains one after the other: a posterior's or a
        prior's. Or a callable that gets ``(size, generator)`` and returns that many draws.
    source, target : callable
        Natural log densities, up to constants, of all points at once: ``(n, d)`` to ``(n,)``. They
        may return −inf, never NaN.
    start_log_weights : array_like, optional
        Log weights of start draws that are weighted, shape ``(n,)``.
    source_gradient, target_gradient : callable, optional
        Gradients of the log densities, ``(n, d)`` to ``(n, d)``, for Langevin moves.
    efficiency : float, optional
        Conditional effective size that each temperature keeps, as a share in (0, 1).
    scheme : {"systematic", "stratified", "residual", "multinomial"}, optional
        How islands are resampled.
    move : {"mixed", "random walk", "independence", "langevin"}, optional
        How particles move; ``"mixed"`` takes independence and random walk, in the proportion in
        which they lead far.
    waste_free : bool or int, optional
        Whether all states of the moves are kept; a number says how many of each particle, by
        default 20. It takes ten times as many particles in each island.
    islands : int, optional
        Groups that are resampled each by itself: at least 10, since their spread is the error. Or
        1 with multinomial resampling, whose lineages give the variance.
    size : int, optional
        Number of particles, rounded up to full islands. By default as many as start draws, 4,000
        for a sampler.
    names : iterable of str, optional
        Names of the d columns.
    most_evaluations : int, optional
        Stop before more points than this are evaluated.
    rng : None, int or numpy.random.Generator, optional
        Seed or generator (SPEC 7).
    progress : bool or callable, optional
        True writes to standard error; a callable gets ``(temperature, evaluations)``.

    Returns
    -------
    Tempered
        Weighted draws, the log ratio of constants with its error, the history. On Ctrl-C, and at
        `most_evaluations`, what there is, with ``finished`` False; ``resume()`` goes on.

    Raises
    ------
    ArgumentError, ArgumentTypeError, ShapeError, DrawsError
        For arguments that cannot be used, and for densities that are NaN or +inf at a point.
    RatioError
        Where the target has no density at any start point.

    Notes
    -----
    A sampler [1]_ along ``p^(1−λ) q^λ``; the next λ by bisection so that the conditional effective
    size [2]_ keeps its share of all particles; then islands are resampled and particles moved until
    the summed jump distance stops growing. The ratio of constants is the product of the mean
    incremental weights, its variance that between islands, or from lineages [3]_. Islands share
    temperatures and the covariance that moves are scaled by, which couples them by terms of the
    order of one over the number of particles. The waste-free form is that of [4]_.

    References
    ----------
    .. [1] Del Moral, Doucet, Jasra (2006), JRSS B 68.
    .. [2] Zhou, Johansen, Aston (2016), Journal of Computational and Graphical Statistics 25.
    .. [3] Lee, Whiteley (2018), Biometrika 105.
    .. [4] Dau, Chopin (2022), JRSS B 84.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> rate = rng.normal(0.10, 0.02, size=(2000, 1))
    >>> def old(x):
    ...     return -0.5 * ((x[:, 0] - 0.10) / 0.02) ** 2
    >>> def new(x):
    ...     return -0.5 * ((x[:, 0] - 0.16) / 0.01) ** 2
    >>> tempered = sy.temper(rate, old, new, names=["rate"], rng=1)
    >>> constant = tempered.log_constant
    >>> bool(abs(constant.value - np.log(0.5)) < 4 * constant.error)
    True
    """
    drawn = read_start(start)
    for name, function in (("source", source), ("target", target)):
        refuse_no_function(function, name)
    count = read_islands(islands, scheme, waste_free)
    length = read_chain_length(waste_free)
    each = start_size(drawn, size, count, length)
    layout = Islands(count, each, scheme, neighbours=not callable(drawn))
    densities = Densities(source, target, source_gradient, target_gradient)
    families = read_families(move, densities)
    setting = Setting(densities, layout, families, read_share(efficiency), length)
    limit = read_limit(most_evaluations)
    tell = teller(progress)
    generator = np.random.default_rng(list(seed_key(rng)))
    state = _begin(drawn, start_log_weights, setting, generator, limit)
    labels = read_names(names, state.points.x.shape[1])
    return _run(state, setting, labels, limit, tell)


def _begin(
    start: Any,
    log_weights: Any,
    setting: Setting,
    generator: np.random.Generator,
    limit: int | None,
) -> Particles:
    layout = setting.islands
    cost = layout.particles * (2 if setting.gradients else 1)
    if limit is not None and limit < cost:
        raise ArgumentError(
            "most_evaluations",
            f"at least {cost:,}, for the {layout.particles:,} particles of the start",
            f"{limit:,}",
            "Allow more, or ask for fewer particles with size=.",
        )
    x, logs, eve = place_start(start, log_weights, layout, generator)
    points = setting.densities.at(x, gradients=setting.gradients)
    refuse_bad_start(points, logs)
    dimension, many = x.shape[1], len(setting.families)
    return Particles(
        points,
        logs,
        np.exp(log_masses(logs, layout.count)),
        eve,
        0.0,
        generator.bit_generator.state,
        tuple(family.first_scale(dimension) for family in setting.families),
        (1 / many,) * many,
        np.zeros(layout.count),
        evaluations=cost,
    )


def _run(
    state: Particles,
    setting: Setting,
    names: tuple[str, ...] | None,
    limit: int | None,
    tell: Callable[[Particles], None],
) -> Tempered:
    """Batch after batch; a state is complete between two of them, so that nothing is lost."""
    stopped = ""
    try:
        while not state.finished:
            if limit is not None and state.evaluations + cost_of(state, setting) > limit:
                stopped = "most_evaluations"
                break
            state = advance(state, setting)
            tell(state)
    except KeyboardInterrupt:
        stopped = "Ctrl-C"
    return Tempered(state, setting, names, stopped)


def go_on(
    run: Tempered, functions: tuple[Density | None, ...], most_evaluations: Any, progress: Any
) -> Tempered:
    """Resume a run; see ``Tempered.resume``."""
    setting, limit, tell = run._setting, read_limit(most_evaluations), teller(progress)
    known = setting.densities
    held = (known.source, known.target, known.source_gradient, known.target_gradient)
    merged = [new if new is not None else old for new, old in zip(functions, held, strict=True)]
    for name, function in zip(("source", "target"), merged, strict=False):
        if function is None:
            raise ArgumentError(
                name,
                "the function again",
                "none: functions are not pickled with a run",
                "Write resume(source, target).",
            )
    densities = Densities(*merged)
    if setting.gradients and not densities.has_gradients:
        refuse_no_gradient()
    if run.finished:
        return run
    return _run(run._state, replace(setting, densities=densities), run.names, limit, tell)
