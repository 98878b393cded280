"""Answers and estimates whose judged figure is known: what the tests of the reasons hold.

Weights are built so that the figure is known exactly: `count` draws of equal weight among 1,000
have effective size `count` in both forms, largest share one over it and divergence
log(1,000/count).
"""

from __future__ import annotations

import functools
from dataclasses import replace
from typing import Any

import numpy as np

import steelyard as sy
from steelyard.leaving_out import LeaveOut, leave_out
from steelyard.verdicts import judge

SEED = 20_261_216
N = 1000


def equal(count: int, draws: int = N) -> sy.Answer:
    """`count` draws of equal weight, spread evenly over all; the others have none."""
    log_ratio = np.full(draws, -np.inf)
    log_ratio[np.linspace(0, draws - 1, count).astype(int)] = 0.0
    return sy.weigh(log_ratio, smooth=False)


def heavy(share: float) -> sy.Answer:
    """One draw with this share, the others equal."""
    log_ratio = np.zeros(N)
    log_ratio[77] = np.log(share / (1 - share) * (N - 1))
    return sy.weigh(log_ratio, smooth=False)


def shape(shape: float) -> sy.Answer:
    """Weights with that Pareto tail at evenly spaced probabilities, in random order.

    METHODS' shrinkage takes k to (M k + 5)/(M + 10) with M = 190 of 4,000 draws: the shapes asked
    for keep at least 0.05 of distance from a limit.
    """
    u = (np.arange(4000) + 0.5) / 4000
    log_ratio = -shape * np.log(np.random.default_rng(SEED).permutation(u))
    return sy.weigh(log_ratio, smooth=False)


def noise(seed: int, *shape: int) -> np.ndarray:
    return np.random.default_rng(SEED + seed).normal(size=shape)


def apart(distance: float) -> sy.Estimate:
    """Mean of four chains of independent noise, one of which sits apart."""
    x = noise(1, 4, 500)
    x -= x.mean(axis=1, keepdims=True)
    x[3] += distance
    return sy.weigh(np.zeros(x.shape)).mean(x)


def shares(tilt: float) -> sy.Answer:
    """Four chains, the last of which holds exp(tilt) times the weight of another."""
    log_ratio = 0.3 * noise(2, 4, 500)
    log_ratio -= np.log(np.exp(log_ratio).mean(axis=1, keepdims=True))
    log_ratio[3] += tilt
    return sy.weigh(log_ratio, smooth=False)


def unordered(draws: int = N) -> sy.Answer:
    """Draws without order, each of which is worth one."""
    return sy.Fit({"x": noise(15, draws)}, ordered=False).base


def few(draws: float) -> sy.Estimate:
    return unordered(int(draws)).mean("x")


def event(inside: int) -> sy.Estimate:
    return unordered().prob(np.arange(N) < inside)


def excursions(count: int) -> sy.Answer:
    """The heavy fifth of one chain of 2,000 stands in `count` stretches, far apart."""
    log_ratio = 0.01 * noise(14, 2000)
    length = 420 // count + 1
    for start in np.linspace(0, 2000 - length, count).astype(int):
        log_ratio[start : start + length] += 3.0
    return sy.weigh(log_ratio, smooth=False)


def quantile(p: float) -> sy.Estimate:
    return unordered().quantile("x", p)


def beyond(draws: float) -> sy.Estimate:
    """A quantile with so many of the 1,000 draws at or below it."""
    return quantile((draws - 0.5) / N)


def product(power: float) -> sy.Estimate:
    """Mean of a quantity with a Pareto tail of that shape, under equal weights."""
    u = (np.arange(4000) + 0.5) / 4000
    x = np.random.default_rng(SEED + 4).permutation(u) ** -power
    return sy.weigh(np.zeros(4000)).mean(x)


def carried(count: int) -> sy.Estimate:
    """Mean of a quantity that `count` of 1,000 unordered draws carry alike."""
    x = np.zeros(N)
    x[np.linspace(10, N - 10, count).astype(int)] = 1.0
    # A little noise keeps the draws from being repeats of each other.
    x += 1e-9 * np.random.default_rng(SEED + 20).normal(size=N)
    return sy.Fit({"x": x}, ordered=False).base.mean("x")


def prior(old: sy.Normal | sy.Flat, new: object) -> sy.Answer:
    x = np.random.default_rng(SEED + 5).uniform(size=N)
    return sy.Fit({"x": x}, prior={"x": old}).reweigh(sy.swap_prior(x=new))


def loosened(power: float) -> sy.Answer:
    """A flat prior: the data dominate, and the shape is one less the power."""
    loglik = {"gauge A": np.full((N, 2), -1.0) + 0.01 * noise(17, N, 2)}
    fit = sy.Fit({"x": noise(6, N)}, {"x": sy.Flat()}, loglik)
    return fit.reweigh(sy.power(likelihood=power))


def both(shape: float) -> sy.Answer:
    """Normal throughout: ``λ(1 − V P₀) + V P₀`` for a prior widened to a flat one, λ = 0.1."""
    x = noise(18, N)
    variance = (shape - 0.1) / 0.9
    x = (x - x.mean()) / x.std(ddof=1) * np.sqrt(variance)
    fit = sy.Fit({"x": x}, {"x": sy.Normal(0, 1)}, {"gauge A": np.full((N, 2), -1.0)})
    return fit.reweigh(sy.power(likelihood=0.9) & sy.swap_prior(x=sy.Flat()))


def noisier(factor: float) -> sy.Answer:
    fit = sy.Fit({"x": noise(16, N)}, loglik={"gauge A": np.full((N, 2), -1.0)})
    return fit.reweigh(sy.raise_noise("gauge A", factor, sd=1.0))


def stacked(seed: int) -> sy.Fit:
    return sy.Fit({"x": noise(seed, N)}, prior={"x": sy.Normal(0, 9)})


def widened(shape: float) -> sy.Answer:
    x = noise(10, N)
    x = (x - x.mean()) / x.std(ddof=1) * np.sqrt(shape)
    fit = sy.Fit({"x": x}, prior={"x": sy.Normal(0, 1)})
    return fit.reweigh(sy.swap_prior(x=sy.Flat()))


def left_out(shape: float, **arguments: Any) -> LeaveOut:
    """Two observations left out: the weights of the first have that Pareto tail."""
    u = (np.arange(4000) + 0.5) / 4000
    heavy = shape * np.log(np.random.default_rng(SEED).permutation(u))
    loglik = np.stack([heavy, 0.01 * noise(21, 4000), 0.01 * noise(22, 4000)], axis=1)
    fit = sy.Fit({"x": noise(20, 4000)}, loglik=loglik, ordered=False)
    return leave_out(fit._record, **arguments)


def own_effects(share: float) -> LeaveOut:
    """Three groups whose log density has this share of its variance from their own effect."""
    theta, other = noise(23, 4000, 3), noise(24, 4000, 3)
    loglik = 0.1 * (np.sqrt(share) * theta + np.sqrt(1 - share) * other)
    one_chain = np.zeros(4000, dtype=int)
    fit = sy.Fit({"theta": theta}, loglik=loglik, chain=one_chain, ordered=False)
    return leave_out(fit._record)


def repaired(rung: str, df: float = 0.0) -> sy.Answer:
    """A normal moved by five of its sds, or a Student-t there, by one rung of the ladder."""
    fit = sy.Fit(
        {"x": noise(31, 4, 500)},
        {"x": sy.Flat()},
        lambda draws: -0.5 * draws["x"] ** 2,
    )

    def target(draws: Any) -> Any:
        square = (draws["x"] - 5) ** 2
        return -(df + 1) / 2 * np.log1p(square / df) if df else -0.5 * square

    return fit.repair(sy.swap_loglik(target), rungs=rung)


def left_behind(variance: float) -> sy.Answer:
    """A sound answer whose base draws show so many times the variance of its weights."""
    answer = repaired("moment matching")
    kept = tuple(f for f in answer._findings if f.code != "mass_behind")
    return replace(answer, _findings=(*kept, judge("mass_behind", variance)))


@functools.cache
def _run(most_evaluations: int | None = None) -> sy.Tempered:
    """Normal draws moved a little, in 20 islands."""
    return sy.temper(
        lambda size, rng: rng.normal(size=(size, 1)),
        lambda x: -0.5 * x[:, 0] ** 2,
        lambda x: -0.5 * (x[:, 0] - 1.5) ** 2,
        size=N,
        most_evaluations=most_evaluations,
        rng=SEED,
    )


def tempered(**figures: float) -> sy.Tempered:
    """A run one of whose steps shows these figures."""
    run = _run()
    steps = list(run._state.steps)
    steps[1] = replace(steps[1], tail_share=0.5, **figures)
    return replace(run, _state=replace(run._state, steps=tuple(steps)))


def sided(errors: float) -> sy.Estimate:
    """A log constant so many errors from what is seen looking back."""
    run = _run()
    steps, constant = list(run._state.steps), run.log_constant
    off = errors * constant.error - (constant.value - run.bridged_constant.value)
    steps[0] = replace(steps[0], bridged=steps[0].bridged - off)
    return replace(run, _state=replace(run._state, steps=tuple(steps))).log_constant


def stranded(islands: int) -> sy.Tempered:
    """A run in which so many of 20 islands hold all weight, in equal parts."""
    run = _run()
    log_weights = np.full(N, -np.inf)
    log_weights[: islands * N // 20] = -np.log(islands * N // 20)
    return replace(run, _state=replace(run._state, log_weights=log_weights))


def stopped(sweeps: int | None) -> sy.Tempered:
    """A run that was stopped after so many sweeps, or not at all."""
    return _run(None if sweeps is None else (1 + sweeps) * N)
