"""Answers to many data sets of a problem, as arrays that can be counted."""

from __future__ import annotations

import os
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .collection import all_problems
from .problem import Array, Problem

LEVELS = (0.90, 0.95, 0.99)
RANKS = ("refit", "strained", "sound")


@dataclass(frozen=True)
class Cell:
    """
    One quantity of one problem over all its data sets.

    Attributes
    ----------
    group, problem, quantity : str
        What it belongs to.
    finite : bool
        Whether the problem's weights have a finite variance.
    scale : float
        The sd that errors are measured in.
    miss : numpy.ndarray
        Estimate minus truth, one a data set; NaN where there is no estimate.
    error : numpy.ndarray
        Reported Monte Carlo errors.
    covered : numpy.ndarray of bool
        Whether each interval of `LEVELS` holds the truth, shape ``(3, n)``.
    rank : numpy.ndarray of int
        0 refit, 1 strained, 2 sound.
    """

    group: str
    problem: str
    quantity: str
    finite: bool
    scale: float
    miss: Array
    error: Array
    covered: NDArray[np.bool_]
    rank: NDArray[np.int8]

    @property
    def sound(self) -> NDArray[np.bool_]:
        """Where the quantity was called sound."""
        return self.rank == 2


def cells_of(problem: Problem, number: int, seed: int, repeats: int) -> list[Cell]:
    """The cells of a problem; its random stream comes from `seed` and its own `number`."""
    shape = (repeats, len(problem.exact))
    value, error = np.empty(shape), np.empty(shape)
    rank = np.empty(shape, dtype=np.int8)
    covered = np.empty((len(LEVELS), *shape), dtype=np.bool_)
    for row, stream in enumerate(np.random.SeedSequence([seed, number]).spawn(repeats)):
        answer = problem.ask(np.random.default_rng(stream))
        for column, exact in enumerate(problem.exact.values()):
            estimate = exact.estimate(answer)
            value[row, column], error[row, column] = estimate.value, estimate.error
            rank[row, column] = RANKS.index(str(estimate.verdict.level))
            for position, level in enumerate(LEVELS):
                low, high = estimate.error_interval(level)
                covered[position, row, column] = low <= exact.truth <= high
    return [
        Cell(
            problem.group,
            f"{problem.family}: {problem.name}",
            label,
            problem.finite,
            exact.scale,
            value[:, i] - exact.truth,
            error[:, i],
            covered[:, :, i],
            rank[:, i],
        )
        for i, (label, exact) in enumerate(problem.exact.items())
    ]


def _numbered(task: tuple[int, int, int]) -> list[Cell]:
    number, seed, repeats = task
    return cells_of(all_problems()[number], number, seed, repeats)


def measure(seed: int, repeats: int, numbers: Sequence[int], workers: int) -> list[Cell]:
    """Cells of the problems `numbers`, on `workers` processes; the same for any number of them."""
    # One thread a process: the processes share the cores.
    os.environ.setdefault("STEELYARD_THREADS", "1")
    tasks = [(number, seed, repeats) for number in numbers]
    if workers == 1:
        return [cell for task in tasks for cell in _numbered(task)]
    with ProcessPoolExecutor(workers) as pool:
        return [cell for cells in pool.map(_numbered, tasks) for cell in cells]
