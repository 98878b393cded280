"""Bayes factors between priors, many at once, all pairs with their own errors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, finish, study_pair
from steelyard.answers.quantities import Quantity
from steelyard.answers.reweigh import reweigh
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.names import close_names
from steelyard.changes import Change
from steelyard.errors import ArgumentTypeError, UnknownNameError
from steelyard.table import Table

__all__ = ["PriorFactors", "prior_factors"]


@dataclass(frozen=True, eq=False)
class PriorFactors(Frozen):
    """
    Log Bayes factors of several priors against one of them.

    Attributes
    ----------
    log_factor : mapping of str to Estimate
        Natural logs, by label.
    against : str
        What they are against: ``"base"`` or a label.
    """

    log_factor: Mapping[str, Estimate]
    against: str

    def table(self) -> Table:
        """One row a prior, the best supported first."""
        rows = sorted(self.log_factor.items(), key=lambda item: -float(item[1].value))
        columns: dict[str, list[Any]] = {
            "prior": [label for label, _ in rows],
            "log_factor": [float(e.value) for _, e in rows],
            "error": [float(e.error) for _, e in rows],
            "factor": [float(np.exp(e.value)) for _, e in rows],
            "level": [str(e.verdict.level) for _, e in rows],
            "reasons": [
                ", ".join(r.code for r in e.verdict.reasons if r.level < "sound") for _, e in rows
            ],
        }
        errors = {
            "log_factor": columns["error"],
            "error": columns["error"],
            "factor": [f * e for f, e in zip(columns["factor"], columns["error"], strict=True)],
        }
        return Table(columns, errors, f"Bayes factors against {self.against}")

    def __str__(self) -> str:
        return str(self.table())

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return f"<p>against {escape(self.against)}</p>" + self.table()._repr_html_()


def prior_factors(
    base: Base, priors: Mapping[str, Change], against: str | None = None
) -> PriorFactors:
    """Bayes factors between priors; see ``Fit.bayes_factors``."""
    if not isinstance(priors, Mapping) or not priors:
        raise ArgumentTypeError(
            "priors",
            "{label: change}",
            repr(priors),
            'Write {"wider": sy.swap_prior(tau=sy.HalfNormal(0.1))}.',
        )
    answers = {str(label): reweigh(base, change) for label, change in priors.items()}
    plain = {label: answer.log_evidence_ratio for label, answer in answers.items()}
    if against is None:
        return PriorFactors(ReadOnly(plain), "base")
    if against not in answers:
        raise UnknownNameError(
            "against", "a label of priors", repr(against), close_names(str(against), answers)
        )
    other = answers[against]
    factors = {}
    for label, answer in answers.items():
        # Both ratios share their draws: one series for the pair, as for a shift.
        scale = Scale(base, answer._weights, other._weights, answer._findings + other._findings)
        ones = np.ones((base.draws.size, 1))
        value = answer._weights.log_mean_ratio - other._weights.log_mean_ratio
        whole = Quantity(f"log Bayes factor against {against}", ones[:, 0])
        series = study_pair(scale, ones, ones)
        factors[label] = finish(scale, whole, np.array([value]), series, None)
    return PriorFactors(ReadOnly(factors), against)
