"""The base and the six changes, answered: what the page and the picture show."""

from __future__ import annotations

from dataclasses import dataclass

import steelyard as sy
from steelyard.demo.model import CHANGES, EVENT, LEVEL, changes, fit

__all__ = ["Scenario", "answer_all"]


@dataclass(frozen=True)
class Scenario:
    """
    One row: the probability of the event under the base or a change.

    Attributes
    ----------
    label : str
        Short name.
    meaning : str
        What is changed, in words.
    probability : sy.Estimate
        Probability of `EVENT`, with the Monte Carlo probability that its side of `LEVEL` is right.
    shift : sy.Estimate or None
        Its paired difference from the base; None for the base itself.
    """

    label: str
    meaning: str
    probability: sy.Estimate
    shift: sy.Estimate | None

    @property
    def level(self) -> str:
        """
        Level of the probability's verdict.

        Returns
        -------
        str
            ``"sound"``, ``"strained"`` or ``"refit"``.
        """
        return str(self.probability.verdict.level)


def answer_all() -> list[Scenario]:
    """
    Answer the base and every change from the same draws.

    Returns
    -------
    list of Scenario
        The base first, then the changes in the order of `CHANGES`.
    """
    base = fit()
    scenarios = [Scenario("base", "the fit as stated", base.base.prob(EVENT, level=LEVEL), None)]
    for label, change in changes().items():
        answer = base.reweigh(change)
        probability = answer.prob(EVENT, level=LEVEL)
        shift = answer.shift(EVENT)
        scenarios.append(Scenario(label, CHANGES[label], probability, shift))
    return scenarios
