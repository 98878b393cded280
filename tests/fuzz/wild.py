"""Arguments from a seed: good ones, and ones that no caller should pass but some caller will."""

from __future__ import annotations

import decimal
import fractions
from collections.abc import Callable, Sequence
from typing import Any, TypeVar

import numpy as np

Item = TypeVar("Item")

# Squares of it overflow: units have to be chosen by what comes.
LARGEST = 1e300
SPECIAL = (0.0, -0.0, 1.0, -1.0, np.inf, -np.inf, np.nan, LARGEST, -LARGEST, 5e-324, 1e-300, 1e5)
ODD: tuple[Callable[[], Any], ...] = (
    lambda: None,
    lambda: True,
    lambda: "",
    lambda: "mu",
    lambda: "quay 4 → 5\n\x00",
    lambda: b"\xff",
    lambda: 1j,
    lambda: 2**70,
    lambda: -(2**63),
    lambda: decimal.Decimal("0.5"),
    lambda: fractions.Fraction(1, 3),
    lambda: object(),
    list,
    dict,
    lambda: {"mu": 1.0},
    lambda: [[1.0], [1.0, 2.0]],
    lambda: (None,),
    lambda: range(3),
    lambda: {1, 2},
    lambda: iter([1.0]),
    lambda: len,
    lambda: str,
    lambda: slice(None),
    lambda: np.float32(0.3),
    lambda: np.int8(-3),
    lambda: np.uint64(2**64 - 1),
    lambda: np.bool_(True),
    lambda: np.datetime64("2026-12-01"),
    lambda: np.array(0.5),
    lambda: np.array([]),
    lambda: np.zeros((2, 0)),
    lambda: np.array(["a", "b"]),
    lambda: np.array([None, 1.0], dtype=object),
    lambda: np.ma.masked_array([1.0, 2.0], [True, False]),
    lambda: np.zeros(2, dtype=[("a", "f8")]),
    lambda: np.array([1 + 1j, 2.0]),
)
DTYPES = ("f8", "f4", "f2", ">f8", "i1", "i4", "i8", "u8", "?", "c16", "O", "U3", "M8[s]", "g")
NAMES = ("mu", "tau", "rate", "loss[1]", "quay 4", "größe", "and", "x", "1", "rate[0]", "mu.sd")


class Wild:
    """A source of arguments; the same seed gives the same ones."""

    def __init__(self, *seed: int) -> None:
        self.rng = np.random.default_rng(seed)

    def chance(self, share: float) -> bool:
        return bool(self.rng.random() < share)

    def count(self, least: int, most: int) -> int:
        return int(self.rng.integers(least, most + 1))

    def one(self, items: Sequence[Item]) -> Item:
        return items[int(self.rng.integers(len(items)))]

    def mostly(self, good: Callable[[], Any], share: float = 0.9) -> Any:
        """A good argument, or with the rest of the chance any at all."""
        return good() if self.chance(share) else self.anything()

    def anything(self) -> Any:
        kind = self.count(0, 3)
        if kind == 0:
            return float(self.one(SPECIAL))
        if kind == 1:
            return self.array(tuple(self.count(0, 5) for _ in range(self.count(0, 3))))
        return self.one(ODD)()

    def number(self) -> float:
        if self.chance(0.3):
            return float(self.one(SPECIAL))
        return float(self.rng.normal() * 10.0 ** self.count(-3, 3))

    def positive(self) -> float:
        return float(self.rng.gamma(2.0) * 10.0 ** self.count(-2, 2) + 1e-6)

    def values(self, shape: tuple[int, ...]) -> np.ndarray:
        """Finite float64 values: spread, tied, constant, huge or tiny."""
        kind = self.count(0, 9)
        if kind == 0:
            return np.full(shape, self.rng.normal())
        if kind == 1:
            return self.rng.integers(-2, 3, size=shape).astype(float)
        spread = self.rng.normal(size=shape)
        if kind == 2:
            return spread * 10.0 ** self.count(-300, 300)
        if kind == 3:
            return np.asarray(1e8 + spread)
        if kind == 4:
            return np.asarray(np.cumsum(spread, axis=0))
        if kind == 5:
            return np.asarray(np.sign(spread) * np.abs(self.rng.standard_cauchy(size=shape)))
        return spread

    def spoiled(self, values: np.ndarray) -> np.ndarray:
        """Some entries replaced by special ones."""
        values = np.array(values, dtype=float)
        if values.size:
            places = self.rng.integers(values.size, size=self.count(1, 3))
            values.reshape(-1)[places] = self.one(SPECIAL)
        return values

    def log_weights(self, shape: tuple[int, ...]) -> np.ndarray:
        """Log weights as they come: tame, heavy, with zeros, at any offset; now and then bad."""
        spread = self.rng.normal(size=shape) * self.one((0.0, 1e-14, 0.3, 2.0, 50.0, 1e5))
        if self.chance(0.3):
            spread[self.rng.random(size=shape) < self.rng.random()] = -np.inf
        if self.chance(0.3):
            spread = spread + self.one((1e5, -1e5, LARGEST))
        return self.spoiled(spread) if self.chance(0.1) else spread

    def laid_out(self, values: np.ndarray) -> np.ndarray:
        """The same values in another memory layout."""
        if not values.ndim:
            return values
        kind = self.count(0, 7)
        if kind == 0:
            return np.asfortranarray(values)
        if kind == 1:
            return values[..., ::-1].copy()[..., ::-1]
        if kind == 2:
            wide = np.zeros((*values.shape, 2))
            wide[..., 0] = values
            return np.asarray(wide[..., 0])
        if kind == 3:
            shifted = np.zeros(8 * values.size + 8, dtype=np.uint8)[1 : 8 * values.size + 1]
            misaligned: np.ndarray = shifted.view(np.float64).reshape(values.shape)
            misaligned[...] = values
            return misaligned
        if kind == 4:
            values = values.copy()
            values.flags.writeable = False
            return values
        return values

    def array(self, shape: tuple[int, ...]) -> np.ndarray:
        """Any array of a shape: any type, any layout, any content."""
        values = self.laid_out(self.values(shape))
        if self.chance(0.5):
            values = self.spoiled(values)
        if self.chance(0.5):
            with np.errstate(all="ignore"):
                values = np.nan_to_num(np.clip(values, -100, 100)).astype(self.one(DTYPES))
        if shape and self.chance(0.05):
            values = np.ma.masked_array(values, self.rng.random(shape) < 0.5)
        return values

    def name(self) -> str:
        return self.one(NAMES)
