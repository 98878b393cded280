"""A whole prior swap over many draws against the bare script that one would write."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy import stats
from scipy.special import logsumexp
from timing import Case

import steelyard as sy


def cases(small: bool) -> list[Case]:
    size = 100_000 if small else 1_000_000
    mu = np.random.default_rng(8).normal(0.11, 0.03, size=(4, size // 4))
    fit = sy.Fit({"mu": mu}, prior={"mu": sy.Normal(0.1, 0.1)})
    old = stats.norm(0.1, 0.1)
    targets: dict[str, tuple[Any, Any]] = {
        "Normal to StudentT": (sy.StudentT(4, 0.12, 0.08), stats.t(4, 0.12, 0.08)),
        "Normal to Normal": (sy.Normal(0.12, 0.08), stats.norm(0.12, 0.08)),
    }

    def case(name: str) -> Case:
        ours, theirs = targets[name]

        def script() -> Any:
            flat = mu.reshape(-1)
            log = theirs.logpdf(flat) - old.logpdf(flat)
            return np.array([(np.exp(log - logsumexp(log)) * flat).sum()])

        def answer() -> Any:
            estimate = fit.reweigh(sy.swap_prior(mu=ours)).mean("mu")
            _ = (estimate.error, estimate.tail_shape, estimate.verdict.level)
            return np.array([estimate.value])

        return Case(
            f"prior swap, {name}",
            f"{size} draws",
            script,
            answer,
            1e-4,
            "ours smooths the largest weights",
            (2, None),
        )

    return [case(name) for name in targets]
