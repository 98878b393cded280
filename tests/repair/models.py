"""Bioassay and stack loss: likelihoods as code, exact draws, and closed forms of refits."""

from __future__ import annotations

import functools
import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

Array = NDArray[np.float64]
Draws = Mapping[str, Array]
_REFERENCE = Path(__file__).resolve().parent.parent / "reference"


@functools.cache
def case(file: str, identifier: str) -> Any:
    """One case of a file of tests/reference."""
    content = json.loads((_REFERENCE / file).read_text(encoding="utf-8"))
    return next(c for c in content["cases"] if c["id"] == identifier)


_INPUTS = case("family_13_end_to_end.json", "P13.1")["inputs"]
DOSE, DEATHS, ANIMALS = np.array(_INPUTS["x"]), np.array(_INPUTS["deaths"]), float(_INPUTS["n"])
_WAYS = np.log(special.comb(ANIMALS, DEATHS))


def logit_loglik(d: Draws) -> Array:
    """Binomial log probabilities of the four dose groups, ``(n, 4)``."""
    curve = d["intercept"][:, None] + d["slope"][:, None] * DOSE
    alive = (ANIMALS - DEATHS) * special.log_expit(-curve)
    return np.asarray(_WAYS + DEATHS * special.log_expit(curve) + alive)


def probit_loglik(d: Draws) -> Array:
    """The same under a probit curve of intercept and slope divided by 1.702."""
    curve = (d["intercept"][:, None] + d["slope"][:, None] * DOSE) / 1.702
    alive = (ANIMALS - DEATHS) * special.log_ndtr(-curve)
    return np.asarray(_WAYS + DEATHS * special.log_ndtr(curve) + alive)


STEP = np.array([0.05, 0.1])
GRID = np.stack(
    np.meshgrid(np.arange(-15, 20, STEP[0]), np.arange(-20, 120, STEP[1]), indexing="ij"), axis=-1
).reshape(-1, 2)


def grid_weights(log_prior: Array, loglik: Array) -> Array:
    """Normalised weights of the cells of `GRID`, whose sides are a hundredth of an sd or less."""
    log = log_prior + loglik
    w = np.exp(log - log.max())
    return np.asarray(w / w.sum())


def grid_draws(weights: Array, count: int, rng: np.random.Generator) -> dict[str, Array]:
    """Independent draws: a cell by its weight, and a place in it."""
    rows = rng.choice(len(GRID), size=count, p=weights)
    points = GRID[rows] + STEP * (rng.random((count, 2)) - 0.5)
    return {"intercept": points[:, 0], "slope": points[:, 1]}


_STACK_LOSS = case("family_02_deletion.json", "P2.1")
X = np.asarray(_STACK_LOSS["inputs"]["X"], dtype=float)
Y = np.asarray(_STACK_LOSS["inputs"]["y"], dtype=float)
SCORES = np.asarray(_STACK_LOSS["expected"]["deletion_log_score"]["value"])


def stack_loss_loglik(d: Draws) -> Array:
    """Normal log densities of the 21 rows, ``(n, 21)``."""
    variance = d["variance"][:, None]
    return np.asarray(-0.5 * (np.log(2 * np.pi * variance) + (Y - d["beta"] @ X.T) ** 2 / variance))


@dataclass(frozen=True)
class Regression:
    """``β | σ² ~ N(m, σ² V)``, ``σ² ~ InvGamma(a, b)`` under the reference prior."""

    m: Array
    V: Array
    a: float
    b: float

    @classmethod
    def without(cls, gone: list[int]) -> Regression:
        """The posterior of the stack loss data without some rows."""
        x, y = np.delete(X, gone, 0), np.delete(Y, gone)
        m = np.linalg.lstsq(x, y, rcond=None)[0]
        rss = float(((y - x @ m) ** 2).sum())
        return cls(m, np.linalg.inv(x.T @ x), (len(y) - x.shape[1]) / 2, rss / 2)

    def draws(self, rng: np.random.Generator, count: int) -> dict[str, Array]:
        """Exact independent draws."""
        variance = self.b / rng.gamma(self.a, size=count)
        noise = rng.normal(size=(count, len(self.m))) @ np.linalg.cholesky(self.V).T
        return {"beta": self.m + np.sqrt(variance)[:, None] * noise, "variance": variance}
