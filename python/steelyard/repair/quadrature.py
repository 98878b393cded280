"""Integrals over many effects at once, and draws from what was integrated."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from steelyard.base.draws import Array

__all__ = ["NODES", "Grid", "grid_of"]

NODES = 41
# Nodes reach so many scales to either side, and stand closer in the middle by the curve of sinh.
_REACH = 20.0
_CURVE = 4.0


@dataclass(frozen=True, eq=False)
class Grid:
    """
    Nodes ``(NODES, n, *shape)`` along each effect, ``r = c + h B sinh(a u)/sinh(a)``.

    In u they are evenly spaced: the trapezoidal rule converges exponentially for smooth integrands
    that vanish at both ends.
    """

    nodes: Array
    centre: Array
    scale: Array

    def log_integral(self, logs: Array) -> Array:
        """Log of the integral over r of densities whose logs at the nodes are `logs`."""
        terms = logs + self._log_slopes(_u().reshape(-1, *([1] * self.centre.ndim)))
        top = terms.max(axis=0)
        safe = np.where(np.isfinite(top), top, 0.0)
        with np.errstate(divide="ignore"):
            return np.asarray(safe + np.log(np.exp(terms - safe).sum(axis=0) * _step()))

    def draw(self, logs: Array, generator: np.random.Generator) -> tuple[Array, Array]:
        """
        One draw a column from the density that is linear in u between the nodes, and its log.

        Returns ``(n, *shape)`` each.
        """
        terms = logs + self._log_slopes(_u().reshape(-1, *([1] * self.centre.ndim)))
        top = terms.max(axis=0)
        f = np.exp(terms - np.where(np.isfinite(top), top, 0.0))
        cells = (f[1:] + f[:-1]) / 2
        reached = np.cumsum(cells, axis=0)
        total = reached[-1]
        wanted = generator.random(total.shape) * total
        cell = np.minimum((reached < wanted).sum(axis=0), len(cells) - 1)
        low, high = _pick(f, cell), _pick(f, cell + 1)
        into = wanted - (_pick(reached, cell) - _pick(cells, cell))
        share = np.clip(_linear_share(low, high, into), 0.0, 1.0)
        u = -1 + _step() * (cell + share)
        with np.errstate(divide="ignore"):
            log_density = np.log(low + (high - low) * share) - np.log(total * _step())
        effects = self.centre + self.scale * _REACH * np.sinh(_CURVE * u) / math.sinh(_CURVE)
        return effects, log_density - self._log_slopes(u)

    def _log_slopes(self, u: Array) -> Array:
        constant = math.log(_REACH * _CURVE / math.sinh(_CURVE))
        return np.asarray(np.log(np.cosh(_CURVE * u)) + np.log(self.scale) + constant)


def grid_of(centre: Array, scale: Array) -> Grid:
    """Nodes about centres, in units of scales."""
    u = _u().reshape(-1, *([1] * centre.ndim))
    nodes = centre + scale * _REACH * np.sinh(_CURVE * u) / math.sinh(_CURVE)
    return Grid(nodes, centre, scale)


def _u() -> Array:
    return np.linspace(-1.0, 1.0, NODES)


def _step() -> float:
    return 2.0 / (NODES - 1)


def _pick(values: Array, row: Array) -> Array:
    return np.asarray(np.take_along_axis(values, row[None].astype(np.int64), axis=0)[0])


def _linear_share(low: Array, high: Array, into: Array) -> Array:
    """Where a density from `low` to `high` over a unit cell has gathered the mass `into`."""
    # The root of (high − low) t²/2 + low t = into, in the form that keeps its digits.
    root = np.sqrt(np.maximum(low**2 + 2 * (high - low) * into, 0.0))
    below = low + root
    return np.asarray(np.where(below > 0, 2 * into / np.where(below > 0, below, 1.0), 0.0))
