"""Normal bases: shifts, scales and rotations, in 1 to 100 dimensions, and Student-t targets."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np
from scipy import stats

import steelyard as sy

from .problem import Array, Ask, Problem, exact_answers, normal, one_dimension


def problems() -> Iterator[Problem]:
    """All of them."""
    yield from _shifts()
    yield from _scales()
    yield from _rotations()
    yield from _students()


def _shifts() -> Iterator[Problem]:
    # exp(mx) has all moments under a normal base: always of finite variance.
    base = normal(0, 1)
    for by in (0.3, 0.8, 1.2, 1.7):
        yield one_dimension("shift", f"by {by}", base, normal(by, 1), finite=True)
    for by in (0.3, 0.8):
        yield one_dimension(
            "shift", f"by {by}, 20,000 draws", base, normal(by, 1), finite=True, count=5000
        )
    yield one_dimension("shift", "by 0.5, 400 draws", base, normal(0.5, 1), finite=True, count=100)
    for d, length in ((2, 0.5), (10, 1.0), (50, 1.0), (100, 1.2)):
        by = length / math.sqrt(d)
        ask = _many(d, np.full(d, by), np.ones(d))
        exact = exact_answers(normal(by, 1), base, 0.0)
        yield Problem("shift", f"by {length}, {d} dimensions", True, ask, exact)


def _scales() -> Iterator[Problem]:
    # The weights of N(0, s²) over N(0, 1) have finite variance below s² = 2, in any dimension.
    base = normal(0, 1)
    for sd in (0.5, 0.8, 1.1, 1.2, 1.3, 1.45, 1.7):
        yield one_dimension("scale", f"by {sd}", base, normal(0, sd), finite=sd**2 < 2)
    yield one_dimension(
        "scale", "by 1.2, 20,000 draws", base, normal(0, 1.2), finite=True, count=5000
    )
    for d, sd in ((2, 1.15), (2, 1.43), (10, 0.9), (10, 1.08), (50, 1.03), (100, 0.97)):
        ask = _many(d, np.zeros(d), np.full(d, sd))
        exact = exact_answers(normal(0, sd), base, 0.0)
        yield Problem("scale", f"by {sd}, {d} dimensions", sd**2 < 2, ask, exact)


def _many(d: int, mean: Array, sd: Array) -> Ask:
    """Draws of d independent standard normals; ``x`` is the first of them."""

    def log_ratio(draws: Any) -> Array:
        x = np.concatenate([draws["x"][:, None], draws["rest"]], axis=1)
        return np.asarray((x**2 / 2 - ((x - mean) / sd) ** 2 / 2 - np.log(sd)).sum(axis=1))

    def ask(rng: np.random.Generator) -> Any:
        x = rng.normal(size=(4, 1000, d))
        return sy.Fit({"x": x[..., 0], "rest": x[..., 1:]}).reweigh(sy.log_ratio(log_ratio))

    return ask


def _rotations() -> Iterator[Problem]:
    """A normal of sds 1 and `ratio`, turned; the weights are ``exp(½ x'Ax)``, A = V⁻¹ − T⁻¹."""
    for degrees, ratio in ((20, 0.7), (90, 0.8), (30, 0.5), (45, 0.5), (60, 0.5)):
        angle = math.radians(degrees)
        turn = np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])
        base = np.diag([1.0, ratio**2])
        target = turn @ base @ turn.T
        gain = np.linalg.inv(base) - np.linalg.inv(target)
        root = np.sqrt(base)
        shape = float(np.linalg.eigvalsh(root @ gain @ root)[-1])
        exact = exact_answers(normal(0, math.sqrt(target[0, 0])), normal(0, 1), 0.0)
        name = f"by {degrees}°, sds 1 and {ratio}"
        yield Problem("rotation", name, shape < 0.5, _turned(gain, root), exact)


def _turned(gain: Array, root: Array) -> Ask:
    def log_ratio(draws: Any) -> Array:
        x = np.stack([draws["x"], draws["y"]], axis=-1)
        return np.asarray(((x @ gain) * x).sum(axis=-1) / 2)

    def ask(rng: np.random.Generator) -> Any:
        x = rng.normal(size=(4, 1000, 2)) @ root
        return sy.Fit({"x": x[..., 0], "y": x[..., 1]}).reweigh(sy.log_ratio(log_ratio))

    return ask


def _students() -> Iterator[Problem]:
    # A Student-t over a normal has weights of shape 1. Over one of `nu` degrees of freedom, one
    # of `nu_target` has weights like |x|^(nu − nu_target), of shape 1 − nu_target/nu.
    for nu in (30, 8, 5):
        yield one_dimension(
            "Student-t target", f"{nu} over normal", normal(0, 1), stats.t(nu), finite=False
        )
    for nu, nu_target in ((5, 4), (5, 3), (6, 2.5), (7, 3), (3, 8)):
        yield one_dimension(
            "Student-t base",
            f"{nu_target} over {nu}",
            stats.t(nu),
            stats.t(nu_target),
            finite=1 - nu_target / nu < 0.5,
        )
    yield one_dimension("Student-t base", "normal over 5", stats.t(5), normal(0, 1), finite=True)
    yield one_dimension("Student-t base", "moved by 1", stats.t(5), stats.t(5, 1.0), finite=True)
