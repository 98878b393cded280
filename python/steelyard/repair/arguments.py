"""The arguments of temper, read and refused."""

from __future__ import annotations

import sys
from collections.abc import Callable
from typing import Any

import numpy as np

from steelyard.base.names import close_names
from steelyard.errors import ArgumentError, ArgumentTypeError
from steelyard.repair.moves import MOVES, Family
from steelyard.repair.particles import Particles
from steelyard.repair.points import Densities, refuse_no_function

__all__ = [
    "read_chain_length",
    "read_families",
    "read_islands",
    "read_limit",
    "read_share",
    "refuse_no_gradient",
    "teller",
]

SCHEMES = ("systematic", "stratified", "residual", "multinomial")
# States that a waste-free run keeps of each resampled particle, unless told.
_CHAIN_LENGTH = 20
# Fewer islands know too little of their own spread.
_LEAST_ISLANDS = 10


def read_families(move: Any, densities: Densities) -> tuple[Family, ...]:
    if not isinstance(move, str) or move.lower() not in MOVES:
        near = close_names(move.lower(), MOVES) if isinstance(move, str) else "Name one."
        raise ArgumentError("move", f"one of {', '.join(MOVES)}", repr(move), near)
    families = MOVES[move.lower()]
    if any(family.cost > 1 for family in families):
        for name in ("source_gradient", "target_gradient"):
            if getattr(densities, name) is not None:
                refuse_no_function(getattr(densities, name), name)
        if not densities.has_gradients:
            refuse_no_gradient()
    return families


def refuse_no_gradient() -> None:
    raise ArgumentError(
        "source_gradient, target_gradient",
        "both, for Langevin moves",
        "none or one of them",
        "Pass the gradients of both log densities, or choose move='mixed'.",
    )


def read_chain_length(waste_free: Any) -> int:
    """States kept of each resampled particle; 1 for none but the last."""
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


def read_islands(islands: Any, scheme: Any, waste_free: Any) -> int:
    """Number of islands."""
    if not isinstance(scheme, str) or scheme not in SCHEMES:
        near = close_names(scheme, SCHEMES) if isinstance(scheme, str) else "Name one."
        raise ArgumentError("scheme", f"one of {', '.join(SCHEMES)}", repr(scheme), near)
    if isinstance(islands, bool) or not isinstance(islands, int | np.integer):
        raise ArgumentTypeError("islands", "an integer", repr(islands), "Say how many.")
    single = scheme == "multinomial" and not waste_free
    if islands < _LEAST_ISLANDS and not (islands == 1 and single):
        raise ArgumentError(
            "islands",
            f"at least {_LEAST_ISLANDS}, or 1 with scheme='multinomial' and no waste-free moves",
            str(islands),
            "The error of the constant comes from them: take 20.",
        )
    return int(islands)


def read_share(efficiency: Any) -> float:
    if isinstance(efficiency, bool) or not isinstance(efficiency, int | float | np.floating):
        raise ArgumentTypeError("efficiency", "a number in (0, 1)", repr(efficiency), "Write 0.9.")
    if not 0 < efficiency < 1:
        raise ArgumentError("efficiency", "a number in (0, 1)", repr(efficiency), "Write 0.9.")
    return float(efficiency)


def read_limit(most_evaluations: Any) -> int | None:
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


def teller(progress: Any) -> Callable[[Particles], None]:
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
