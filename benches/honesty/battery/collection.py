"""All problems, in a fixed order."""

from __future__ import annotations

from functools import cache

from . import chains, normals, priors, shapes
from .problem import Problem


@cache
def all_problems() -> tuple[Problem, ...]:
    """Every problem of every family."""
    return tuple(
        problem for module in (normals, shapes, chains, priors) for problem in module.problems()
    )
