"""At which batch a refit will be due: simulated ahead of the data, or continued from history."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from types import MappingProxyType
from typing import Any

import numpy as np

from steelyard.answers.reweigh import reweigh
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.likelihood import read_loglik_term
from steelyard.changes import add
from steelyard.errors import RatioError
from steelyard.rules import RULES

__all__ = ["Forecast", "extrapolate", "simulate"]

_KEY = "what arrives"


@dataclass(frozen=True, eq=False)
class Forecast(Frozen):
    """
    When a refit will be due.

    Attributes
    ----------
    due : int or None
        The batch from now on (1 is the next) after which the answer asks for a refit; 0 where it
        does already, None where it does not within the batches looked at, or nothing is known.
    earliest, latest : int or None
        Of simulated futures the tenth and the ninetieth in a hundred; of a continued history by a
        constant rate, and by one that slows down as data add up. None is beyond the horizon.
    batches : int
        How many batches were looked at.
    sizes : numpy.ndarray
        Effective size expected after each: the median of the futures.
    limit : float
        Effective size below which a refit is due at the latest.
    how : {"simulated", "continued", "unknown"}
        What it rests on.
    """

    due: int | None
    earliest: int | None
    latest: int | None
    batches: int
    sizes: Array
    limit: float
    how: str

    def __str__(self) -> str:
        if self.how == "unknown":
            return "when a refit will be due is not known before the first batch: simulate some"
        if self.due == 0:
            return "a refit is due now"
        if self.due is None:
            first = "" if self.earliest is None else f", at the earliest after {self.earliest}"
            return f"no refit is due within {self.batches} more batches ({self.how}{first})"
        last = f"{self.latest}" if self.latest is not None else f"more than {self.batches}"
        return (
            f"a refit is due after about {self.due} more batches ({self.how}; "
            f"{self.earliest} to {last})"
        )

    def __repr__(self) -> str:
        return f"<Forecast {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def _limit() -> float:
    return RULES["few_effective"].refit


def extrapolate(
    base_size: float, sizes: Sequence[float], levels: Sequence[str], batches: int
) -> Forecast:
    """
    The history continued.

    Weights of a normal posterior to which data add up have an effective size that falls like a
    power of the amount of data: ``log size`` is taken as a line in ``log(1 + batches)``, fitted
    through the size before any. A constant rate a batch is the other extreme.
    """
    limit = _limit()
    if levels and levels[-1] == "refit":
        return Forecast(0, 0, 0, batches, np.empty(0), limit, "continued")
    if not sizes:
        return Forecast(None, None, None, batches, np.empty(0), limit, "unknown")
    t = np.log1p(np.arange(1, len(sizes) + 1))
    fall = np.log(base_size) - np.log(np.asarray(sizes))
    slope = max(float(t @ fall / (t @ t)), 0.0)
    ahead = np.arange(1, batches + 1)
    # From the size now on, so that the line begins where the history ends.
    power = np.log(sizes[-1]) - slope * (np.log1p(len(sizes) + ahead) - t[-1])
    steady = np.log(sizes[-1]) - ahead * max(float(fall[-1]), 0.0) / len(sizes)
    middle = 0.5 * (power + steady)
    due, first, last = (_crossing(np.exp(line), limit) for line in (middle, steady, power))
    return Forecast(due, first, last, batches, np.exp(middle), limit, "continued")


def _crossing(sizes: Array, limit: float) -> int | None:
    below = np.flatnonzero(sizes < limit)
    return int(below[0]) + 1 if below.size else None


def simulate(
    base: Base,
    so_far: Array,
    log_weights: Array,
    simulated: Callable[..., Any],
    batches: int,
    repeats: int,
    rng: Any,
) -> Forecast:
    """
    Futures simulated from draws of the present answer.

    Each starts from one draw, which makes all its batches; the answer is judged after each as it
    would be then, until it asks for a refit.
    """
    streams = np.random.default_rng(rng).spawn(repeats)
    draws = base.draws
    sizes = np.full((repeats, batches), 0.0)
    due = np.full(repeats, math.inf)
    weights = np.exp(log_weights)
    for future, stream in enumerate(streams):
        place = int(stream.choice(draws.size, p=weights / weights.sum()))
        made = MappingProxyType({name: draws[name][place] for name in draws})
        total = so_far.copy()
        for batch in range(batches):
            total += _one_batch(base, simulated, made, stream)
            try:
                answer = reweigh(base, add({_KEY: total}))
            except RatioError:
                due[future] = batch + 1
                break
            sizes[future, batch] = answer.effective_size
            if answer.verdict.level == "refit":
                due[future] = batch + 1
                break
    low, middle, high = np.quantile(due, [0.1, 0.5, 0.9], method="inverted_cdf")
    known = [None if math.isinf(v) else int(v) for v in (middle, low, high)]
    return Forecast(
        known[0],
        known[1],
        known[2],
        batches,
        np.median(sizes, axis=0),
        _limit(),
        "simulated",
    )


def _one_batch(
    base: Base,
    simulated: Callable[..., Any],
    made: Mapping[str, Any],
    stream: np.random.Generator,
) -> Array:
    term = read_loglik_term(_KEY, simulated(made, stream), base.draws, "simulated")
    return term.total(base.draws)
