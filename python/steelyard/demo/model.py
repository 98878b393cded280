"""
The invented corrosion model as Steelyard sees it: draws, priors, likelihood, changes.

The model itself is written out in ``sample``, which the draws came from.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from importlib.resources import files

import numpy as np
import numpy.typing as npt

import steelyard as sy
from steelyard.demo.readings import Readings, load_readings

__all__ = ["CHANGES", "EVENT", "LEVEL", "changes", "fit", "load_draws", "log_likelihood"]

Array = npt.NDArray[np.float64]

EVENT = "rate[3] > 0.12"  # positions count from 0: this is quay 4
LEVEL = 0.7
TAIL_DF = 5.0
CHANGES: Mapping[str, str] = {
    "wider spread": "spread of rates half-Cauchy, not half-normal",
    "sceptical mean": "mean rate Gamma about 0.08, not normal about 0.1",
    "weaker readings": "all readings count for 0.7 of a reading",
    "heavy-tailed B": f"errors of gauge B Student-t ({TAIL_DF:g} df), not normal",
    "B either way": "gauge B may read thick as well as thin",
    "without B": "all readings of gauge B left out",
}


def load_draws() -> dict[str, Array]:
    """
    Read the committed posterior draws of the invented readings.

    Returns
    -------
    dict
        Arrays ``(chain, draw, *shape)``: ``rate`` (nine quays, mm a year), ``mu``, ``tau``,
        ``sd_a``, ``sd_b``, ``bias_b``.
    """
    with files("steelyard.demo").joinpath("draws.npz").open("rb") as stream:
        stored = np.load(stream, allow_pickle=False)
        return {name: stored[name] for name in stored.files}


def _standardised(
    draws: Mapping[str, Array], readings: Readings, gauge: int
) -> tuple[Array, Array]:
    """Errors of one gauge's readings in units of its sd, (chain, draw, obs), and log sd."""
    mine = readings.gauge == gauge
    bias = draws["bias_b"] if gauge == 1 else np.zeros_like(draws["bias_b"])
    expected = draws["rate"][..., readings.quay[mine]] * readings.age[mine] + bias[..., None]
    sd = draws["sd_b" if gauge == 1 else "sd_a"][..., None]
    return (readings.loss[mine] - expected) / sd, np.log(sd)


def log_likelihood(draws: Mapping[str, Array], readings: Readings) -> dict[str, Array]:
    """
    Log likelihood of every reading, one term a gauge.

    Parameters
    ----------
    draws : mapping of str to array
        As from `load_draws`.
    readings : Readings
        The invented readings.

    Returns
    -------
    dict
        ``"gauge A"`` and ``"gauge B"``: arrays ``(chain, draw, obs)``, natural log.
    """
    terms = {}
    for gauge, name in enumerate(("gauge A", "gauge B")):
        error, log_sd = _standardised(draws, readings, gauge)
        terms[name] = -0.5 * error**2 - log_sd - 0.5 * math.log(2 * math.pi)
    return terms


def _heavy_tailed_gauge_b(draws: Mapping[str, Array], readings: Readings) -> Array:
    """Student-t log density of gauge B's readings, (chain, draw, obs)."""
    error, log_sd = _standardised(draws, readings, gauge=1)
    half = (TAIL_DF + 1) / 2
    constant = math.lgamma(half) - math.lgamma(TAIL_DF / 2) - 0.5 * math.log(TAIL_DF * math.pi)
    return np.asarray(constant - half * np.log1p(error**2 / TAIL_DF) - log_sd)


def fit() -> sy.Fit:
    """
    State the fit: committed draws, the priors and the likelihood they came from.

    Returns
    -------
    sy.Fit
        The base of every change in `changes`.
    """
    draws = load_draws()
    return sy.Fit(
        draws,
        prior={
            "rate": sy.Normal("mu", "tau"),
            "mu": sy.Normal(0.1, 0.1),
            "tau": sy.HalfNormal(0.05),
            "bias_b": sy.HalfNormal(0.15),
            "sd_a": sy.Gamma(4, 10),
            "sd_b": sy.Gamma(4, 10),
        },
        loglik=log_likelihood(draws, load_readings()),
    )


def changes() -> dict[str, sy.Change]:
    """
    State the six changes of the demonstration.

    Returns
    -------
    dict
        Changes in the order in which they are shown, by the labels of `CHANGES`.
    """
    heavy_tailed = _heavy_tailed_gauge_b(load_draws(), load_readings())
    stated = (
        sy.swap_prior(tau=sy.HalfCauchy(0.05)),
        sy.swap_prior(mu=sy.Gamma(64, 800)),
        sy.power(likelihood=0.7),
        sy.swap_loglik({"gauge B": heavy_tailed}),
        sy.swap_prior(bias_b=sy.Normal(0, 0.15)),
        sy.drop("gauge B"),
    )
    return dict(zip(CHANGES, stated, strict=True))
