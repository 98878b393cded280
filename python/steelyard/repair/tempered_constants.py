"""The constant of a tempered run, its error, and what the run shows of trust."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from steelyard import _core
from steelyard.answers import Estimate
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError
from steelyard.repair.islands import lineage_variance, log_masses
from steelyard.verdicts import Finding, Verdict, judge

if TYPE_CHECKING:
    from steelyard.repair.tempered import Tempered

__all__ = ["bridged_constant", "mean_weight_constant", "run_findings"]

# Step weights whose tail holds less of Σ w² than this are not judged by its shape.
_IDLE_TAIL = 0.01


def mean_weight_constant(run: Tempered) -> Estimate:
    """Sum of the logs of mean weights; see ``Tempered.log_constant``."""
    logs = run._target_logs
    value = float(_core.log_sum_exp(logs[:, None])[0])
    relative, degrees = _relative_variance(run, logs)
    error = math.sqrt(relative)
    findings = [*run._findings, judge("constant_spread", error)]
    # Moves mend the draws of a step whose weights have a heavy tail, but not its mean weight.
    spoken = [step.tail_shape for step in run.history if step.tail_share >= _IDLE_TAIL]
    if spoken:
        findings.append(judge("step_shape", max(spoken)))
    if run.finished and run.islands > 1 and error > 0:
        gap = abs(value - float(sum(step.bridged for step in run.history)))
        findings.append(judge("sides_disagree", gap / error))
    return Estimate(
        value,
        error,
        max((step.tail_shape for step in run.history), default=-math.inf),
        Verdict(findings),
        math.nan,
        degrees=degrees,
        label="log constant of target over source",
    )


def bridged_constant(run: Tempered) -> Estimate:
    """Sum of bridged log ratios; see ``Tempered.bridged_constant``."""
    if not run.finished or run.islands == 1:
        raise ArgumentError(
            "bridged_constant",
            "a finished run of several islands",
            "one island" if run.finished else "a run that stopped early",
            "Use log_constant.",
        )
    error = math.sqrt(run._setting.islands.variance(run._state.bridged))
    return Estimate(
        float(sum(step.bridged for step in run.history)),
        error,
        -math.inf,
        Verdict([*run._findings, judge("constant_spread", error)]),
        math.nan,
        degrees=run.islands - 1.0,
        label="bridged log constant of target over source",
    )


def run_findings(run: Tempered) -> Iterator[Finding]:
    """What islands, moves and supports say of the draws."""
    steps = [step for step in run.history if step.sweeps > 0]
    if run.islands > 1:
        shares = _shares(run._target_logs, run.islands)
        yield judge("few_islands", 1 / float((shares**2).sum()))
    if steps:
        yield judge("moves_stuck", min(step.jump for step in steps))
    beyond = sum(step.beyond for step in steps)
    if beyond:
        yield judge("beyond_source", beyond)
    if not run.finished:
        yield judge("tempering_unfinished", 1 - run.temperature, why=run.stopped)


def _relative_variance(run: Tempered, logs: Array) -> tuple[float, float]:
    """Variance of the ratio of constants over its square, and degrees of freedom."""
    count, state = run.islands, run._state
    if count > 1:
        off = _shares(logs, count) - state.start_masses
        return run._setting.islands.variance(off), count - 1.0
    if run._remaining is None:
        return state.lineage, math.inf
    return lineage_variance(logs, state.eve, state.resampled), math.inf


def _shares(logs: Array, islands: int) -> Array:
    masses = np.exp(log_masses(logs, islands) - logs.max())
    return np.asarray(masses / masses.sum())
