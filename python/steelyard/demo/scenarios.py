"""The base and the six changes, answered: what the page and the picture show."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

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


def _event_indicator(draws: Mapping[str, npt.NDArray[np.float64]]) -> npt.NDArray[np.float64]:
    """Return 1.0 where `EVENT` holds and 0.0 elsewhere, one entry a draw."""
    return (draws["rate"][:, 3] > 0.12).astype(np.float64)


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
        shift = answer.shift(_event_indicator)
        scenarios.append(Scenario(label, CHANGES[label], probability, shift))
    return scenarios
