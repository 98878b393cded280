"""Bioassay of family 13: four dose groups, a logit or probit curve, exact posterior draws."""

from __future__ import annotations

import functools
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special, stats

from . import reference
from .rejection import draw_by_rejection

Array = NDArray[np.float64]

SIZE = 100_000
_INPUTS = reference.case("P13.1")["inputs"]
_DOSE = np.array(_INPUTS["x"])
_DEATHS = np.array(_INPUTS["deaths"])
_ANIMALS = float(_INPUTS["n"])
_WAYS = special.comb(_ANIMALS, _DEATHS)
# With this scaling a probit curve lies within 0.01 of a logit curve.
_PROBIT_SCALE = 1.702


def logit_loglik(draws: Mapping[str, Array]) -> Array:
    """Binomial log probabilities of the four groups under a logit curve, ``(n, 4)``."""
    curve = draws["intercept"][:, None] + draws["slope"][:, None] * _DOSE
    dead, alive = special.log_expit(curve), special.log_expit(-curve)
    return np.log(_WAYS) + _DEATHS * dead + (_ANIMALS - _DEATHS) * alive


def probit_loglik(draws: Mapping[str, Array]) -> Array:
    """The same under a probit curve of the intercept and slope divided by 1.702."""
    curve = (draws["intercept"][:, None] + draws["slope"][:, None] * _DOSE) / _PROBIT_SCALE
    dead, alive = special.log_ndtr(curve), special.log_ndtr(-curve)
    return np.log(_WAYS) + _DEATHS * dead + (_ANIMALS - _DEATHS) * alive


def wide_prior(draws: Mapping[str, Array]) -> Array:
    """Independent normals: intercept sd 10, slope sd 20."""
    intercept = stats.norm.logpdf(draws["intercept"], 0.0, 10.0)
    return intercept + stats.norm.logpdf(draws["slope"], 0.0, 20.0)


_INFORMATIVE = stats.multivariate_normal(mean=[0.0, 10.0], cov=[[4.0, 10.0], [10.0, 100.0]])


def informative_prior(draws: Mapping[str, Array]) -> Array:
    """Means 0 and 10, sds 2 and 10, correlation one half."""
    return _INFORMATIVE.logpdf(np.column_stack([draws["intercept"], draws["slope"]]))


@functools.cache
def posterior_draws(prior_name: str) -> dict[str, Any]:
    """Exact independent draws under the ``"wide"`` or the ``"informative"`` prior, seed 1307."""
    prior = {"wide": wide_prior, "informative": informative_prior}[prior_name]

    def log_density(points: Array) -> Array:
        draws = {"intercept": points[:, 0], "slope": points[:, 1]}
        return prior(draws) + logit_loglik(draws).sum(axis=1)

    points = draw_by_rejection(log_density, (1.0, 8.0), SIZE, np.random.default_rng(1307))
    return {"intercept": points[:, 0].copy(), "slope": points[:, 1].copy()}
