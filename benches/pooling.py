"""
Pools and plans of conjugate normal models, where everything is known.

``python benches/pooling.py [--repeats 400]`` prints how often 95 % Monte Carlo intervals of pooled
estimates cover, and how predicted efficiencies of planned refits compare with refits made.
"""

from __future__ import annotations

import argparse
import sys

import numpy as np

import steelyard as sy

SEED = 20_261_214
READING = 1.0


def posterior(mean: float, sd: float) -> tuple[float, float]:
    precision = 1 + 1 / sd**2
    return (READING + mean / sd**2) / precision, precision**-0.5


def log_constant(mean: float, sd: float) -> float:
    return float(-0.5 * np.log(1 + sd**2) - 0.5 * (READING - mean) ** 2 / (1 + sd**2))


def fitted(
    rng: np.random.Generator, prior: tuple[float, float], shape: tuple[int, int], correlation: float
) -> sy.Fit:
    noise = rng.normal(size=shape)
    chains = np.empty(shape)
    chains[:, 0] = noise[:, 0]
    for t in range(1, shape[1]):
        kept = correlation * chains[:, t - 1]
        chains[:, t] = kept + np.sqrt(1 - correlation**2) * noise[:, t]
    mean, sd = posterior(*prior)
    return sy.Fit({"mu": mean + sd * chains}, {"mu": sy.Normal(*prior)})


def coverage(repeats: int) -> bool:
    """Three fits of unequal length and mixing; seven estimates each."""
    names = ("base mean", "mean", "sd", "shift", "log evidence", "constant 2", "constant 3")
    hits, misses = np.zeros(len(names)), 0.0
    scores = []
    priors = [(0.0, 0.5), (0.0, 1.0), (0.0, 2.0)]
    for repeat in range(repeats):
        rng = np.random.default_rng([SEED, repeat])
        cases = zip(priors, (300, 1500, 500), (0.0, 0.8, 0.5), strict=True)
        fits = [fitted(rng, prior, (4, n), rho) for prior, n, rho in cases]
        pool = sy.pool(fits, data="same", common="likelihood")
        wide = pool.reweigh(sy.swap_prior(mu=sy.Normal(0, 3)))
        mean, sd = posterior(0, 3)
        base, first = posterior(*priors[0])[0], log_constant(*priors[0])
        pairs = [
            (pool.base.mean("mu"), base),
            (wide.mean("mu"), mean),
            (wide.sd("mu"), sd),
            (wide.shift("mu"), mean - base),
            (wide.log_evidence_ratio, log_constant(0, 3) - first),
        ]
        row = [low <= v <= high for e, v in pairs for low, high in [e.error_interval()]]
        low, high = pool.log_constants.error_interval()
        exact = [log_constant(*prior) - first for prior in priors]
        row += [low[k] <= exact[k] <= high[k] for k in (1, 2)]
        hits += row
        off = [(e.value - v) / e.error for e, v in pairs]
        scores.append(off)
        misses += "pool_contradiction" in [r.code for r in pool.base.verdict.reasons]
    for name, share in zip(names, hits / repeats, strict=True):
        print(f"{name:14} covers {share:.3f}")
    print(f"all {hits.sum() / repeats / len(names):.3f}; said to contradict {misses / repeats:.4f}")
    print("observed over reported error", np.std(scores, axis=0).round(2))
    return bool(hits.sum() / repeats / len(names) > 0.92)


def planning(repeats: int) -> bool:
    """Random lists of six scenarios; refits made at the planned shares, 12,000 draws in all."""
    differences, reached, counts = [], [], []
    for repeat in range(repeats):
        rng = np.random.default_rng([SEED, 1, repeat])
        priors = {
            f"scenario {k}": (float(rng.normal(0, 1)), float(rng.uniform(0.4, 1.1)))
            for k in range(6)
        }
        changes = {k: sy.swap_prior(mu=sy.Normal(*v)) for k, v in priors.items()}
        plan = fitted(rng, (0.0, 1.0), (4, 2000), 0.0).plan_refits(changes, efficiency=0.4)
        every = {"base": (0.0, 1.0), **priors}
        fits = {
            name: fitted(rng, every[name], (1, max(20, round(12_000 * share))), 0.0)
            for name, share in plan.shares.items()
        }
        pool = next(iter(fits.values()))
        if len(fits) > 1:
            pool = sy.pool(fits, data="same", common="likelihood")
        for place, name in enumerate(plan.names):
            achieved = pool.reweigh(changes[name]).effective_size / pool.draws.size
            if bool(plan.efficiency.verdict[place].is_sound) and name not in plan.out_of_reach:
                differences.append(achieved - plan.efficiency.value[place])
                reached.append(achieved >= 0.4 - 0.03 or not plan.reached[place])
        counts.append(len(plan.refits))
    print(
        f"planned refits {np.mean(counts):.2f} of 6; achieved minus predicted efficiency: "
        f"mean {np.mean(differences):+.4f}, sd {np.std(differences):.4f}, "
        f"largest {np.abs(differences).max():.3f}; reached where promised {np.mean(reached):.3f}"
    )
    return bool(np.abs(np.mean(differences)) < 0.02)


def main(arguments: list[str] | None = None) -> int:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--repeats", type=int, default=400)
    repeats = parser.parse_args(arguments).repeats
    good = coverage(repeats)
    return 0 if planning(max(1, repeats // 10)) and good else 1


if __name__ == "__main__":
    sys.exit(main())
