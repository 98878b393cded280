"""A sweep, and a plan of many scenarios, against the script that one would write for each node."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from node_script import CHAINS, NO_TAIL, PROBS, node, scenario
from scipy import stats
from timing import Case

import steelyard as sy

Array = npt.NDArray[np.float64]

_DRAWS = 4000
# A verdict rests on the tail shape of each influence series and on whether chains agree; ours
# always finds both, a script only where it is asked to do the same.
_VERDICTS = " with verdicts"


def cases(small: bool) -> list[Case]:
    side, scenarios = (8, 40) if small else (40, 2000)
    ways = (True, False)
    return [
        make(size, lean=lean)
        for make, size in ((_sweep, side), (_plan, scenarios))
        for lean in ways
    ]


def _fit(parameters: int) -> tuple[sy.Fit, Array, Array, Array]:
    rng = np.random.default_rng(11)
    shape = (CHAINS, _DRAWS // CHAINS)
    tau = np.abs(rng.normal(0.03, 0.012, size=shape)) + 0.002
    mu = rng.normal(0.1, 0.02, size=shape)
    rate = mu[..., None] + tau[..., None] * rng.normal(size=(*shape, parameters))
    fit = sy.Fit(
        {"mu": mu, "tau": tau, "rate": rate},
        {"mu": sy.Normal(0.1, 0.1), "tau": sy.HalfNormal(0.05)},
    )
    return fit, mu.reshape(-1), tau.reshape(-1), rate.reshape(_DRAWS, -1)


def _sweep(side: int, *, lean: bool) -> Case:
    """Values and errors of two means and a probability over two hyperparameters of priors."""
    fit, mu, tau, rate = _fit(4)
    means, scales = np.linspace(0.05, 0.15, side), np.linspace(0.02, 0.1, side)
    columns = np.stack([mu, rate[:, 1], (rate[:, 3] > 0.12).astype(float)], axis=1)
    old = stats.norm.logpdf(mu, 0.1, 0.1) + stats.halfnorm.logpdf(tau, 0, 0.05)

    def script() -> tuple[Array, ...]:
        out = []
        for mean in means:
            for scale in scales:
                new = stats.norm.logpdf(mu, mean, 0.1) + stats.halfnorm.logpdf(tau, 0, scale)
                out.append(node(new - old, columns, lean))
        return tuple(np.array(part) for part in zip(*out, strict=True))

    def family(mean: float, scale: float) -> sy.Change:
        return sy.swap_prior(mu=sy.Normal(mean, 0.1), tau=sy.HalfNormal(scale))

    def ours() -> tuple[Array, ...]:
        asked = {"mu": "mu", "rate": "rate[1]", "high": "rate[3] > 0.12"}
        found = fit.sweep(family, {"mean": means, "scale": scales}, asked)
        kinds = (found.value, found.error)
        shown = [np.stack([kind[k].reshape(-1) for k in asked], 1) for kind in kinds]
        _ = [found.level[k] for k in asked]
        if not lean:
            told = [_told(found.estimates[k], side * side) for k in asked]
            shown += [np.concatenate(part, axis=1) for part in zip(*told, strict=True)]
        return tuple(shown)

    return Case(
        f"sweep, {side} x {side}" + ("" if lean else _VERDICTS),
        f"3 quantities, {_DRAWS} draws",
        script,
        ours,
        1e-5,
        "another order of summation",
        (None if lean else 10, None),
        rounds=3,
    )


def _told(estimate: sy.Estimate, count: int) -> list[Array]:
    """What the verdict of an estimate rests on: tail shapes, and p-values of the chains' test."""
    (agreement,) = (f for f in estimate.verdict.findings if f.code == "chains_disagree")
    shape = np.maximum(np.asarray(estimate.tail_shape), NO_TAIL)
    return [np.reshape(figure, (count, -1)) for figure in (shape, agreement.figure)]


def _plan(count: int, *, lean: bool) -> Case:
    """Values, paired shifts, their errors and quantiles of twenty parameters."""
    fit, mu, tau, rate = _fit(18)
    rng = np.random.default_rng(12)
    means, scales = rng.uniform(0.07, 0.13, count), rng.uniform(0.03, 0.08, count)
    columns = np.concatenate([mu[:, None], tau[:, None], rate], axis=1)
    old = stats.norm.logpdf(mu, 0.1, 0.1) + stats.halfnorm.logpdf(tau, 0, 0.05)

    def script() -> tuple[Array, ...]:
        out = []
        for mean, scale in zip(means, scales, strict=True):
            new = stats.norm.logpdf(mu, mean, 0.1) + stats.halfnorm.logpdf(tau, 0, scale)
            out.append(scenario(new - old, columns, lean))
        return tuple(np.array(part) for part in zip(*out, strict=True))

    def ours() -> tuple[Array, ...]:
        changes = {
            f"scenario {i}": sy.swap_prior(mu=sy.Normal(m, 0.1), tau=sy.HalfNormal(s))
            for i, (m, s) in enumerate(zip(means.tolist(), scales.tolist(), strict=True))
        }
        found = fit.triage(changes, ["mu", "tau", "rate"], probs=PROBS)
        _ = [e.verdict.level for kind in (found.value, found.shift) for e in kind.values()]

        def side_by_side(figures: Any) -> Array:
            return np.concatenate([np.reshape(f, (count, -1)) for f in figures], axis=1)

        shown = []
        for kind in (found.value, found.shift):
            shown += [side_by_side(getattr(e, f) for e in kind.values()) for f in _FIGURES]
            if not lean:
                told = [_told(e, count) for e in kind.values()]
                shown += [np.concatenate(part, axis=1) for part in zip(*told, strict=True)]
        quantiles = [np.reshape(q, (count, -1, len(PROBS))) for q in found.quantiles.values()]
        return (*shown, np.concatenate(quantiles, axis=1))

    return Case(
        f"plan, {count} scenarios" + ("" if lean else _VERDICTS),
        f"20 parameters, {_DRAWS} draws",
        script,
        ours,
        1e-5,
        "another order of summation",
        (None if lean else 25, None),
        rounds=1 if count > 100 else 3,
    )


_FIGURES = ("value", "error")
