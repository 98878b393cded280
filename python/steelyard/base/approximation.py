"""Draws from an approximation of known density as a base: weights that correct it."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

import numpy as np

from steelyard.base.draws import Array, Draws
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.priors import PriorTerm
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.base.shapes import draw_rows
from steelyard.errors import LikelihoodError, PriorError

__all__ = ["correct_approximation"]


def correct_approximation(
    approximation: Any,
    prior: Mapping[str, PriorTerm] | None,
    loglik: Mapping[str, LoglikTerm] | None,
    draws: Draws,
) -> Array:
    """``ℓ = Σ log prior + Σ L − log approximation`` at each draw, shape ``(n,)``."""
    if not prior:
        raise PriorError(
            "approximation",
            "the prior of the posterior that is approximated",
            "none stated",
            "Pass prior={…}; a flat one is sy.Flat().",
        )
    if not loglik:
        raise LikelihoodError(
            "approximation",
            "the log likelihood of the posterior that is approximated",
            "none stated",
            "Pass loglik=….",
        )
    if callable(approximation) and not hasattr(approximation, "shape"):
        approximation = approximation(MappingProxyType(dict(draws.values_by_name)))
    density = draw_rows(approximation, draws, "approximation")
    # A draw cannot come from where the approximation has no mass.
    refuse_bad_ratio(-density, draws, "−approximation")
    total = -density
    for term in prior.values():
        total = total + term.log_density_checked(draws)
    for likelihood in loglik.values():
        for part, block in likelihood.blocks(draws):
            total[part] += np.sum(block, axis=1)
    return np.asarray(total)
