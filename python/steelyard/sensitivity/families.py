"""A family of changes over one or two hyperparameters, and the grid it is asked at."""

from __future__ import annotations

import inspect
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import product
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.base import Base
from steelyard.base.draws import Array, Draws
from steelyard.base.priors import PriorTerm
from steelyard.changes import Change, Target
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, SteelyardError
from steelyard.sensitivity.targets import Formed, Targets

__all__ = [
    "Family",
    "first_name",
    "members",
    "nodes_of",
    "read_family",
    "read_grid",
    "refuse_withheld",
    "remembering",
]

# A callable of one or two numbers that returns a change.
Family = Callable[..., Change]
# A map of more nodes than this is a mistake in the grid sooner than a wish.
_MOST_NODES = 100_000


def read_family(family: Any) -> None:
    """Refuse a family that cannot be called."""
    if not callable(family):
        raise ArgumentTypeError(
            "family",
            "a callable that returns a change",
            type(family).__name__,
            "Write lambda scale: sy.swap_prior(tau=sy.HalfNormal(scale)).",
        )


def read_grid(family: Any, grid: Any) -> dict[str, Array]:
    """The grid by hyperparameter: at least two nodes each, finite and ascending."""
    read_family(family)
    axes = dict(grid) if isinstance(grid, Mapping) else {first_name(family): grid}
    if not 1 <= len(axes) <= 2:
        raise ArgumentError(
            "grid", "one or two hyperparameters", f"{len(axes)}", "Hold the others fixed."
        )
    read = {str(name): _axis(values, f"grid[{str(name)!r}]") for name, values in axes.items()}
    count = int(np.prod([len(axis) for axis in read.values()]))
    if count > _MOST_NODES:
        raise ArgumentError("grid", f"at most {_MOST_NODES:,} nodes", f"{count:,}", "Thin it out.")
    return read


def _axis(values: Any, argument: str) -> Array:
    axis = plain_array(values, argument, "fiu").astype(np.float64)
    if axis.ndim == 2:
        raise ArgumentError(
            argument,
            "at least two nodes in a row",
            f"{len(axis)} rows",
            "Give two hyperparameters as a mapping of their names to their nodes.",
        )
    if axis.ndim != 1 or axis.size < 2:
        raise ArgumentError(
            argument,
            "at least two nodes in a row",
            f"shape {axis.shape}",
            "For one value use reweigh().",
        )
    if not np.isfinite(axis).all():
        raise ArgumentError(argument, "finite nodes", "NaN or infinite ones", "Leave them out.")
    falls = np.flatnonzero(~(np.diff(axis) > 0))
    if len(falls):
        came = f"{short(axis[falls[0] + 1])} after {short(axis[falls[0]])}"
        raise ArgumentError(
            argument, "nodes in ascending order, each once", came, "Sort them (numpy.unique)."
        )
    return axis


def first_name(family: Any) -> str:
    try:
        names = list(inspect.signature(family).parameters)
    except (TypeError, ValueError):
        names = []
    return names[0] if names else "hyperparameter"


def nodes_of(grid: Mapping[str, Array]) -> list[tuple[float, ...]]:
    """All nodes, the last hyperparameter running fastest."""
    return [tuple(map(float, node)) for node in product(*grid.values())]


def _named_node(names: Sequence[str], node: tuple[float, ...]) -> str:
    """A node in words, for errors."""
    return ", ".join(f"{name} = {short(value)}" for name, value in zip(names, node, strict=True))


def members(
    targets: Targets, family: Family, names: Sequence[str], nodes: Sequence[tuple[float, ...]]
) -> Formed:
    """The targets of several nodes; whatever goes wrong is told with the node."""
    formed = targets.form([_change_at(family, names, node) for node in nodes])
    for place, error in formed.errors.items():
        raise type(error)(
            f"family at {_named_node(names, nodes[place])}: {error.argument}",
            error.expected,
            error.came,
            error.next_step,
        ) from error
    return formed


def _change_at(family: Family, names: Sequence[str], node: tuple[float, ...]) -> Change:
    try:
        change = family(*node)
    except SteelyardError as error:
        # Most often a hyperparameter outside its domain, which the error names.
        raise ArgumentError(
            f"family at {_named_node(names, node)}",
            f"{error.argument} to be {error.expected}",
            error.came,
            error.next_step,
        ) from error
    except Exception as error:
        raise ArgumentError(
            f"family at {_named_node(names, node)}",
            "a change",
            f"{type(error).__name__}: {error}",
            "Mend the family there.",
        ) from error
    if not isinstance(change, Change):
        raise ArgumentTypeError(
            f"family at {_named_node(names, node)}",
            "a change",
            type(change).__name__,
            "Return what swap_prior or the like gives.",
        )
    return change


def refuse_withheld(formed: Formed, ask: Callable[[Base], object], base: Base) -> None:
    """Quantities of predictive draws whose model changed are refused, by asking again."""
    for target in formed.made:
        if isinstance(target, Target) and target.withheld:
            ask(replace(base, withheld=target.withheld))


@dataclass(frozen=True, eq=False)
class _Remembered(PriorTerm):
    """A prior term whose values and log density at the draws are found once for all nodes."""

    kept: dict[str, Array] = field(default_factory=dict)

    def value(self, draws: Draws) -> Array:
        """The draws it is about, from memory after the first time."""
        if "value" not in self.kept:
            self.kept["value"] = super().value(draws)
        return self.kept["value"]

    def log_density_checked(self, draws: Draws) -> Array:
        """The log density, from memory after the first time."""
        if "log_density" not in self.kept:
            self.kept["log_density"] = super().log_density_checked(draws)
        return self.kept["log_density"]


def remembering(base: Base) -> Base:
    """The same base, which evaluates its own prior once however many nodes ask for it."""
    if not base.prior:
        return base
    prior = {
        label: _Remembered(term.key, term.density) if term.is_distribution else term
        for label, term in base.prior.items()
    }
    return replace(base, prior=prior)
