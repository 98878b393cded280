"""How fast a density falls at the two ends of its support."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.densities.hyperparameters import Array

__all__ = ["Tail", "Tails", "bounded", "heavier", "infinite"]


@dataclass(frozen=True, eq=False)
class Tail:
    """
    One end of a density: ``log p = −speed · d^order + power · log d``, up to smaller terms.

    At an infinite end ``d`` is the distance from any fixed point, and grows; at a finite end it is
    the distance from that limit, and vanishes.

    Attributes
    ----------
    limit : numpy.ndarray
        The end of the support, ``±inf`` or finite.
    order : numpy.ndarray
        0 where the density falls or rises like a power, 1 for an exponential, 2 for a normal fall;
        any positive number at an infinite end, +inf for faster than all of them; negative at a
        finite end that the density leaves more slowly than any power.
    speed : numpy.ndarray
        Coefficient of the leading term, 0 where `order` is 0; +inf for faster than any.
    power : numpy.ndarray
        The power beside it. Where the order is 0, −inf at an infinite end (+inf at a finite one)
        means a fall faster than any power.

    All are arrays that broadcast against the value.

    Notes
    -----
    Normal: order 2, speed 1/(2 sd²). Gamma: order 1, speed rate, power shape − 1, at both ends the
    same power. Student-t: order 0, power −(df + 1).
    """

    limit: Array
    order: Array
    speed: Array
    power: Array

    @property
    def is_infinite(self) -> npt.NDArray[np.bool_]:
        """Whether the support has no limit on this side."""
        return np.isinf(self.limit)

    @property
    def precision(self) -> Array:
        """Of a normal fall: 0 for slower tails, +inf for faster ones and at a finite limit."""
        return self._coefficient(2.0) * 2.0

    @property
    def rate(self) -> Array:
        """Of an exponential fall: 0 for slower tails, +inf for faster ones and a finite limit."""
        return self._coefficient(1.0)

    @property
    def index(self) -> Array:
        """``a`` of a fall like ``d^−a``: +inf for faster tails and at a finite limit."""
        polynomial = self.is_infinite & (self.order == 0)
        return np.where(polynomial, -self.power, np.inf)

    def _coefficient(self, order: float) -> Array:
        slower = self.is_infinite & (self.order < order)
        same = self.is_infinite & (self.order == order)
        return np.where(slower, 0.0, np.where(same, self.speed, np.inf))

    @property
    def kind(self) -> npt.NDArray[np.str_]:
        """In words, elementwise."""
        order, polynomial = self.order, (self.order == 0) & (self.power > -np.inf)
        return np.select(
            [
                ~self.is_infinite,
                polynomial,
                order < 1,
                (order == 1) & (self.speed < np.inf),
                order < 2,
                order == 2,
            ],
            [
                "bounded",
                "polynomial",
                "between polynomial and exponential",
                "exponential",
                "between exponential and normal",
                "normal",
            ],
            "lighter than normal",
        )

    def raised(self, factor: Any) -> Tail:
        """The tail of the density to the power `factor` (a power-scaled prior)."""
        return Tail(self.limit, self.order, self.speed * factor, self.power * factor)


@dataclass(frozen=True, eq=False)
class Tails:
    """
    Both ends of a density.

    Attributes
    ----------
    lower, upper : Tail
        Towards smaller and towards larger values.
    """

    lower: Tail
    upper: Tail


def _tail(limit: Any, order: Any, speed: Any, power: Any) -> Tail:
    values = (np.asarray(v, dtype=np.float64) for v in (limit, order, speed, power))
    return Tail(*np.broadcast_arrays(*values))


def bounded(limit: Any, power: Any = 0.0, *, order: Any = 0.0, speed: Any = 0.0) -> Tail:
    """A finite end, near which the density goes like a power of the distance."""
    return _tail(limit, order, speed, power)


def infinite(side: int, order: Any, speed: Any, power: Any = 0.0) -> Tail:
    """An infinite end, `side` −1 or +1."""
    return _tail(side * np.inf, order, speed, power)


def heavier(one: Tail, other: Tail, side: int) -> npt.NDArray[np.bool_]:
    """Whether `one` leaves more mass at its end than `other`; `side` +1 for upper ends, else −1."""
    infinite_end = one.is_infinite
    # Far out a low order and a high power are heavy, close to a limit the reverse.
    low_order, high_order = one.order < other.order, one.order > other.order
    high_power, low_power = one.power > other.power, one.power < other.power
    answer = np.where(infinite_end, high_power, low_power)
    answer = np.where(one.speed != other.speed, one.speed < other.speed, answer)
    answer = np.where(
        one.order != other.order, np.where(infinite_end, low_order, high_order), answer
    )
    further = side * one.limit > side * other.limit
    return np.asarray(np.where(one.limit != other.limit, further, answer), dtype=np.bool_)
