"""Parameters on an unconstrained scale, as far as their priors' supports tell it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.densities import Distribution

__all__ = ["Scale", "scale_of"]


@dataclass(frozen=True)
class Scale:
    """A map from the real line to a parameter's support: identity, log, or logit."""

    kind: Literal["identity", "log", "logit"]

    def free(self, value: Array) -> Array:
        """The parameter on the real line."""
        if self.kind == "identity":
            return value
        return np.log(value) if self.kind == "log" else np.log(value) - np.log1p(-value)

    def bound(self, free: Array) -> Array:
        """The parameter from the real line."""
        if self.kind == "identity":
            return free
        return np.exp(free) if self.kind == "log" else 1 / (1 + np.exp(-free))

    def log_jacobian(self, free: Array) -> Array:
        """Log of the derivative of the parameter in its free value."""
        if self.kind == "identity":
            return np.zeros_like(free)
        return free if self.kind == "log" else -np.logaddexp(0, free) - np.logaddexp(0, -free)


def scale_of(name: str, base: Base) -> Scale | None:
    """The scale of a whole parameter; None for a support other than line, half line, [0, 1]."""
    term = (base.prior or {}).get(name)
    if term is None or not isinstance(term.density, Distribution):
        return None
    value = base.draws.values_by_name.get(name)
    if value is None:
        return None
    low, high = term.density.support(value.shape, look_up=base.draws.look_up)
    if np.all(low == -np.inf) and np.all(high == np.inf):
        return Scale("identity")
    if np.all(low == 0) and np.all(high == np.inf):
        return Scale("log") if (value > 0).all() else None
    if np.all(low == 0) and np.all(high == 1):
        return Scale("logit") if ((value > 0) & (value < 1)).all() else None
    return None
