"""One problem: draws of a base, a change, and what is exactly true of the target."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

import steelyard as sy

Array = NDArray[np.float64]
Ask = Callable[[np.random.Generator], Any]

# Probability of the tail event under the target.
RARE = 1e-3


@dataclass(frozen=True)
class Exact:
    """
    A quantity of the target that is known.

    Attributes
    ----------
    estimate : callable
        From an Answer to an Estimate.
    truth : float
        What infinitely many draws would give.
    scale : float
        The sd that an error is measured in: of the quantity under the target; of the event's
        indicator for a probability; 1 for the log of a ratio of constants (an error of 0.1 is
        then 10 % of the ratio).
    """

    estimate: Callable[[Any], Any]
    truth: float
    scale: float


@dataclass(frozen=True)
class Problem:
    """
    A base, a change and exact answers.

    Attributes
    ----------
    family : str
        What problems are reported together under.
    name : str
        What tells it from others of its family.
    finite : bool
        Whether the weights have a finite variance under the base, by algebra.
    ask : callable
        From a random generator to a fresh Answer under the change.
    exact : mapping of str to Exact
        What is known of the target.
    """

    family: str
    name: str
    finite: bool
    ask: Ask
    exact: Mapping[str, Exact]

    @property
    def group(self) -> str:
        """The family, apart for problems whose weights have no finite variance."""
        return self.family if self.finite else f"{self.family}, infinite variance"


def exact_answers(target: Any, base: Any, log_constant: float) -> dict[str, Exact]:
    """
    The seven quantities of a continuous target of one coordinate, called ``x`` in the draws.

    `target` and `base` are frozen scipy distributions of that coordinate, `log_constant` is what
    ``log Σ v exp ℓ`` tends to.
    """
    sd, limit = float(target.std()), float(target.isf(RARE))
    exact = {
        "mean": Exact(lambda a: a.mean("x"), float(target.mean()), sd),
        "sd": Exact(lambda a: a.sd("x"), sd, sd),
        "q0.05": Exact(lambda a: a.quantile("x", 0.05), float(target.ppf(0.05)), sd),
        "q0.95": Exact(lambda a: a.quantile("x", 0.95), float(target.ppf(0.95)), sd),
        "tail": Exact(lambda a: a.prob(f"x > {limit!r}"), RARE, float(np.sqrt(RARE * (1 - RARE)))),
        "log ratio": Exact(lambda a: a.log_evidence_ratio, log_constant, 1.0),
        "shift": Exact(lambda a: a.shift("x"), float(target.mean() - base.mean()), sd),
    }
    return {label: e for label, e in exact.items() if np.isfinite(e.truth)}


def weighed(sample: Callable[[np.random.Generator], Array], log_ratio: Any) -> Ask:
    """Ask by the ratio itself: draws ``(chain, draw)``, and their log ratio as a function."""

    def ask(rng: np.random.Generator) -> Any:
        x = sample(rng)
        return sy.Fit({"x": x}).reweigh(sy.log_ratio(lambda draws: log_ratio(draws["x"])))

    return ask


def one_dimension(
    family: str, name: str, base: Any, target: Any, *, finite: bool, count: int = 1000
) -> Problem:
    """Independent draws of a frozen distribution, 4 chains of `count`, asked about another."""

    def log_ratio(x: Array) -> Array:
        return np.asarray(target.logpdf(x) - base.logpdf(x))

    ask = weighed(lambda rng: base.rvs(size=(4, count), random_state=rng), log_ratio)
    return Problem(family, name, finite, ask, exact_answers(target, base, 0.0))


def normal(mean: float, sd: float) -> Any:
    """A frozen normal distribution."""
    return stats.norm(mean, sd)
