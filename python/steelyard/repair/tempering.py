"""From a source to a target by temperatures: sequential Monte Carlo on whole batches."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

import numpy as np

from steelyard.base.draws import Array
from steelyard.base.names import close_names
from steelyard.errors import ArgumentError, ArgumentTypeError
from steelyard.repair.islands import Islands, log_masses
from steelyard.repair.moves import MOVES, Family
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

SCHEMES = ("systematic", "stratified", "residual", "multinomial")
# States that a waste-free run keeps of each resampled particle, unless told.
_CHAIN_LENGTH = 20
# Fewer islands know too little of their own spread.
_LEAST_ISLANDS = 10

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
        Whether all states of the moves are kept; a number says how many of each particle.
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
    length = _chain_length(waste_free)
    count = _islands(islands, scheme, length)
    layout = Islands(count, start_size(drawn, size, count, length), scheme)
    densities = Densities(source, target, source_gradient, target_gradient)
    families = _families(move, densities)
    setting = Setting(densities, layout, families, _share(efficiency), length)
    limit = _limit(most_evaluations)
    tell = _teller(progress)
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
    refuse_bad_start(points)
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
    setting, limit, tell = run._setting, _limit(most_evaluations), _teller(progress)
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
        _refuse_no_gradient()
    if run.finished:
        return run
    return _run(run._state, replace(setting, densities=densities), run.names, limit, tell)


def _families(move: Any, densities: Densities) -> tuple[Family, ...]:
    if not isinstance(move, str) or move.lower() not in MOVES:
        near = close_names(move.lower(), MOVES) if isinstance(move, str) else "Name one."
        raise ArgumentError("move", f"one of {', '.join(MOVES)}", repr(move), near)
    families = MOVES[move.lower()]
    if any(family.cost > 1 for family in families):
        for name in ("source_gradient", "target_gradient"):
            if getattr(densities, name) is not None:
                refuse_no_function(getattr(densities, name), name)
        if not densities.has_gradients:
            _refuse_no_gradient()
    return families


def _refuse_no_gradient() -> None:
    raise ArgumentError(
        "source_gradient, target_gradient",
        "both, for Langevin moves",
        "none or one of them",
        "Pass the gradients of both log densities, or choose move='mixed'.",
    )


def _chain_length(waste_free: Any) -> int:
    if isinstance(waste_free, bool | np.bool_):
        return _CHAIN_LENGTH if waste_free else 1
    if not isinstance(waste_free, int | np.integer):
        raise ArgumentTypeError(
            "waste_free", "True, False or a number of states", repr(waste_free), "Say which."
        )
    if not 2 <= waste_free <= 10_000:
        raise ArgumentError(
            "waste_free", "from 2 to 10,000 states", str(waste_free), "Write True for the default."
        )
    return int(waste_free)


def _islands(islands: Any, scheme: Any, chain_length: int) -> int:
    if not isinstance(scheme, str) or scheme not in SCHEMES:
        near = close_names(scheme, SCHEMES) if isinstance(scheme, str) else "Name one."
        raise ArgumentError("scheme", f"one of {', '.join(SCHEMES)}", repr(scheme), near)
    if isinstance(islands, bool) or not isinstance(islands, int | np.integer):
        raise ArgumentTypeError("islands", "an integer", repr(islands), "Say how many.")
    single = scheme == "multinomial" and chain_length == 1
    if islands < _LEAST_ISLANDS and not (islands == 1 and single):
        raise ArgumentError(
            "islands",
            f"at least {_LEAST_ISLANDS}, or 1 with scheme='multinomial' and no waste-free moves",
            str(islands),
            "The error of the constant comes from them: take 20.",
        )
    return int(islands)


def _share(efficiency: Any) -> float:
    if isinstance(efficiency, bool) or not isinstance(efficiency, int | float | np.floating):
        raise ArgumentTypeError("efficiency", "a number in (0, 1)", repr(efficiency), "Write 0.9.")
    if not 0 < efficiency < 1:
        raise ArgumentError("efficiency", "a number in (0, 1)", repr(efficiency), "Write 0.9.")
    return float(efficiency)


def _limit(most_evaluations: Any) -> int | None:
    if most_evaluations is None:
        return None
    if isinstance(most_evaluations, bool) or not isinstance(most_evaluations, int | np.integer):
        raise ArgumentTypeError(
            "most_evaluations", "an integer", repr(most_evaluations), "Say how many points."
        )
    if most_evaluations < 1:
        raise ArgumentError(
            "most_evaluations", "a positive number", str(most_evaluations), "Say how many points."
        )
    return int(most_evaluations)


def _teller(progress: Any) -> Callable[[Particles], None]:
    if progress is None or progress is False:
        return lambda state: None
    if progress is True:

        def write(state: Particles) -> None:
            end = "\n" if state.finished else ""
            at = f"{state.temperature:.4g}, {state.evaluations:,} evaluations"
            sys.stderr.write(f"\rtemperature {at}{end}")
            sys.stderr.flush()

        return write
    if callable(progress):
        return lambda state: progress(state.temperature, state.evaluations)
    raise ArgumentTypeError(
        "progress",
        "True, or a callable of (temperature, evaluations)",
        repr(progress),
        "Leave it out for none.",
    )
