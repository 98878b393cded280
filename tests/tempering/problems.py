"""Sources and targets of known constant, in the shape that tempering takes them."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

import steelyard as sy
from steelyard.repair.moves import MOVES, Family

REFERENCE = Path(__file__).resolve().parent.parent / "reference"
Array = np.ndarray


@dataclass(frozen=True)
class Conjugate:
    """Standard normal prior in d dimensions, normal likelihood of this strength around c."""

    d: int
    c: float
    strength: float

    def source(self, x: Array) -> Array:
        return -0.5 * (x**2).sum(axis=1)

    def target(self, x: Array) -> Array:
        return self.source(x) - 0.5 * self.strength * ((x - self.c) ** 2).sum(axis=1)

    def source_gradient(self, x: Array) -> Array:
        return -x

    def target_gradient(self, x: Array) -> Array:
        return -x - self.strength * (x - self.c)

    def start(self, size: int, rng: np.random.Generator) -> Array:
        return rng.normal(size=(size, self.d))

    def moments(self, temperature: float) -> tuple[float, float]:
        """Mean and sd of a coordinate at a temperature."""
        precision = 1 + temperature * self.strength
        return temperature * self.strength * self.c / precision, 1 / math.sqrt(precision)

    @property
    def log_constant(self) -> float:
        mean, sd = self.moments(1.0)
        square = self.strength * self.c**2 - (mean / sd) ** 2
        return self.d * (math.log(sd) - 0.5 * square)

    def temper(self, **settings: Any) -> sy.Tempered:
        start = settings.pop("start", self.start)
        return sy.temper(start, self.source, self.target, **settings)


class Exact(Family):
    """Fresh draws of a conjugate problem at any temperature: perfect moves."""

    name = "exact"

    def __init__(self, problem: Conjugate) -> None:
        self.problem = problem

    def first_scale(self, dimension: int) -> float:
        return 1.0

    def propose(self, at, temperature, cloud, scale, generator):  # type: ignore[no-untyped-def]
        mean, sd = self.problem.moments(temperature)
        return generator.normal(mean, sd, size=at.x.shape)

    def correction(self, at, proposed, temperature, cloud, scale):  # type: ignore[no-untyped-def]
        return at.at(temperature) - proposed.at(temperature)


def perfect(problem: Conjugate, monkeypatch: Any) -> None:
    """Make ``move="exact"`` known for the length of a test."""
    monkeypatch.setitem(MOVES, "exact", (Exact(problem),))


def pima(sd: float) -> tuple[Callable[[Array], Array], Callable[[Array], Array]]:
    """Log prior (without its constant) and log posterior of the diabetes regression."""
    text = (REFERENCE / "pima.json").read_text(encoding="utf-8")
    columns = json.loads(text)["columns"]
    rows = np.stack([columns[k] for k in ("npreg", "glu", "bmi", "ped")], axis=1)
    rows = (rows - rows.mean(axis=0)) / rows.std(axis=0, ddof=1)
    design = np.column_stack([np.ones(len(rows)), rows])
    signed = design * (2 * np.array(columns["diabetes"]) - 1)[:, None]

    def prior(x: Array) -> Array:
        return -0.5 * (x**2).sum(axis=1) / sd**2

    def posterior(x: Array) -> Array:
        z = -(x @ signed.T)
        return prior(x) - (np.log(1 + np.exp(-np.abs(z))) + np.maximum(z, 0)).sum(axis=1)

    return prior, posterior


def case(identifier: str) -> dict[str, Any]:
    """A case of family 9, ``"P9.1"`` for instance."""
    text = (REFERENCE / "family_09_tempering.json").read_text(encoding="utf-8")
    return next(c for c in json.loads(text)["cases"] if c["id"] == identifier)


def value(entry: dict[str, Any]) -> Any:
    """The expected value of an entry, as a float or a float array."""
    stored = entry["value"]
    return np.asarray(stored, dtype=float) if isinstance(stored, list) else float(stored)
