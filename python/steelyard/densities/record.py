"""Frozen records of hyperparameters, which may be names of parameters."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from functools import cache
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.hyperparameters import (
    Array,
    LookUp,
    align,
    check_domain,
    check_draws,
    code,
    freeze,
    is_inside,
    named_draws,
    text,
)
from steelyard.errors import ShapeError

__all__ = ["Draws", "Record", "Resolved"]

# Hyperparameters as arrays, in the constructor's order; of a distribution made of others, first
# theirs, each again as such a list.
Resolved = list[Any]
Draws = Mapping[str, Array]
# Of arguments that are distributions themselves.
OTHER_DOMAINS = ("distribution", "distributions")


@cache
def _numbers(kind: Any) -> tuple[str, ...]:
    return tuple(n for n, domain in kind.domains.items() if domain not in OTHER_DOMAINS)


@dataclass(frozen=True, repr=False)
class Record:
    """What a distribution holds, checked when it is made, and looked up where names stand."""

    # Domain of each argument, in the constructor's order.
    domains: ClassVar[Mapping[str, str]] = {}
    # Axes at the end that belong to a hyperparameter itself (a vector, a matrix).
    own_axes: ClassVar[Mapping[str, int]] = {}

    def __post_init__(self) -> None:
        for name in self.numbers:
            given = getattr(self, name)
            if type(given) is float and is_inside(self.domains[name], given):
                continue  # what nearly every hyperparameter is, a thousand times in a sweep
            value = freeze(given, self._argument(name))
            object.__setattr__(self, name, value)
            if not isinstance(value, str):
                values = np.asarray(value, dtype=np.float64)
                check_domain(self.domains[name], values, self._argument(name))
        self._check()

    @property
    def numbers(self) -> tuple[str, ...]:
        """Hyperparameters that are numbers or names, as opposed to distributions."""
        kind: Any = type(self)
        return _numbers(kind)

    def _argument(self, name: str) -> str:
        return f"{type(self).__name__}: {name}"

    def _check(self) -> None:
        """Refuse hyperparameters that do not go together."""

    @property
    def event_axes(self) -> int:
        """Number of last axes of a value that make one vector (1) or matrix (2)."""
        return 0

    @property
    def parts(self) -> tuple[Record, ...]:
        """Distributions that this one is made of."""
        return ()

    @property
    def names(self) -> tuple[str, ...]:
        """Parameters that stand for a hyperparameter, those of the parts first."""
        inner = tuple(name for part in self.parts for name in part.names)
        values = (getattr(self, name) for name in self.numbers)
        return inner + tuple(v for v in values if isinstance(v, str))

    def resolve(
        self, shape: tuple[int, ...], draws: Draws | None = None, look_up: LookUp | None = None
    ) -> Resolved:
        """Hyperparameters as arrays that broadcast against a value of shape `shape`."""
        out: Resolved = [part.resolve(shape, draws, look_up) for part in self.parts]
        batch = shape[: len(shape) - self.event_axes]
        shapes = [batch]
        for name in self.numbers:
            argument, own = self._argument(name), self.own_axes.get(name, 0)
            value = getattr(self, name)
            if isinstance(value, str):
                found = named_draws(value, draws, look_up, argument)
                check_draws(self.domains[name], value, found, argument)
                found = align(found, batch, own, f"{argument}={value!r}")
            else:
                found = np.asarray(value, dtype=np.float64)
            out.append(found)
            shapes.append(found.shape[: max(found.ndim - own, 0)])
        try:
            np.broadcast_shapes(*shapes)
        except ValueError as error:
            raise ShapeError(
                str(self),
                f"hyperparameters that broadcast against the value's shape {shape}",
                ", ".join(str(s) for s in shapes[1:]),
                "Give scalars or arrays of the parameter's own trailing shape.",
            ) from error
        return self._completed(shape, out)

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        """Refuse resolved hyperparameters that do not go together; add what the shape tells."""
        return hyper

    def __str__(self) -> str:
        stated = (text(getattr(self, f.name)) for f in fields(self))
        return f"{type(self).__name__}({', '.join(stated)})"

    def __repr__(self) -> str:
        stated = (f"{f.name}={code(getattr(self, f.name))}" for f in fields(self))
        return f"{type(self).__name__}({', '.join(stated)})"
