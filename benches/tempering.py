"""
Tempering held to known constants: coverage, honesty of its error, and which moves are the cheapest.

    python benches/tempering.py [--runs R] [--seed N] [--only WORD] [--moves | --constants]

`--constants` runs the 20-dimensional cases and the Pima case R times each and ends with status 1
where fewer than 94 % of log constants lie within 3 reported errors, or the mean reported variance
is not within a factor 2 of the observed one. `--moves` compares the families of moves, and settings
of efficiency, by work: mean squared error times evaluations.
"""

from __future__ import annotations

import argparse
import json
import math
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

import steelyard as sy

REFERENCE = Path(__file__).resolve().parent.parent / "tests" / "reference"
SIZE = 1000
Array = np.ndarray


@dataclass(frozen=True)
class Problem:
    """A source that can be sampled, a target, and what is known of it."""

    name: str
    sample: Callable[[int, np.random.Generator], Array]
    source: Callable[[Array], Array]
    target: Callable[[Array], Array]
    log_constant: float
    mean: float
    source_gradient: Callable[[Array], Array]
    target_gradient: Callable[[Array], Array]


def normal(d: int, sd: float = 1.0) -> tuple[Any, Any, Any, float]:
    """Sampler, log density without its constant, gradient, and log of that constant."""
    return (
        lambda n, rng: rng.normal(0, sd, size=(n, d)),
        lambda x: -0.5 * (x**2).sum(axis=1) / sd**2,
        lambda x: -x / sd**2,
        d * (math.log(sd) + 0.5 * math.log(2 * math.pi)),
    )


def conjugate(d: int, c: float, strength: float) -> Problem:
    """P9.2 in d dimensions: standard normal prior, normal likelihood around c."""
    sample, source, gradient, _ = normal(d)
    after = 1 + strength
    mean = strength * c / after
    constant = d * (-0.5 * math.log(after) - 0.5 * (strength * c**2 - after * mean**2))
    return Problem(
        f"normal likelihood, {d}-d",
        sample,
        source,
        lambda x: -0.5 * (x**2).sum(axis=1) - 0.5 * strength * ((x - c) ** 2).sum(axis=1),
        constant,
        mean,
        gradient,
        lambda x: -x - strength * (x - c),
    )


def shifted(d: int, by: float) -> Problem:
    """The mean moved by so many sd in every direction."""
    sample, source, gradient, _ = normal(d)
    return Problem(
        f"shift {by:g}, {d}-d",
        sample,
        source,
        lambda x: -0.5 * ((x - by) ** 2).sum(axis=1),
        0.0,
        by,
        gradient,
        lambda x: by - x,
    )


def scaled(d: int, by: float) -> Problem:
    """The sd multiplied."""
    sample, source, gradient, _ = normal(d)
    return Problem(
        f"scale {by:g}, {d}-d",
        sample,
        source,
        lambda x: -0.5 * (x**2).sum(axis=1) / by**2,
        d * math.log(by),
        0.0,
        gradient,
        lambda x: -x / by**2,
    )


def student(d: int, degrees: float = 3.0) -> Problem:
    """A multivariate Student-t from a normal."""
    sample, source, gradient, constant = normal(d)
    power = 0.5 * (degrees + d)
    own = math.lgamma(0.5 * degrees) + 0.5 * d * math.log(degrees * math.pi) - math.lgamma(power)
    return Problem(
        f"Student-t {degrees:g}, {d}-d",
        sample,
        source,
        lambda x: -power * np.log1p((x**2).sum(axis=1) / degrees),
        own - constant,
        0.0,
        gradient,
        lambda x: -2 * power * x / (degrees + (x**2).sum(axis=1, keepdims=True)),
    )


def banana() -> Problem:
    """P9.3 from a normal of sd 3."""
    case = reference("P9.3")
    s1, s2, b = (case["inputs"][k] for k in ("s1", "s2", "b"))
    sample, source, gradient, constant = normal(2, 3.0)

    def bent(x: Array) -> Array:
        return x[:, 1] - b * (x[:, 0] ** 2 - s1**2)

    def target_gradient(x: Array) -> Array:
        r = bent(x) / s2**2
        return np.stack([-x[:, 0] / s1**2 + 2 * b * x[:, 0] * r, -r], axis=1)

    return Problem(
        "banana, 2-d",
        sample,
        source,
        lambda x: -0.5 * (x[:, 0] / s1) ** 2 - 0.5 * (bent(x) / s2) ** 2,
        case["expected"]["log_z"]["value"] - constant,
        0.0,
        gradient,
        target_gradient,
    )


def far_modes() -> Problem:
    """P9.4 from a normal of sd 5."""
    case = reference("P9.4")
    w, m, s, d = (case["inputs"][k] for k in ("w", "m", "s", "d"))
    sample, source, gradient, constant = normal(d, 5.0)

    def parts(x: Array) -> Array:
        out = []
        for wk, mk, sk in zip(w, m, s, strict=True):
            square = ((x - mk * (np.arange(d) == 0)) ** 2).sum(axis=1)
            out.append(math.log(wk) - d * math.log(sk) - 0.5 * square / sk**2)
        return np.stack(out)

    def target_gradient(x: Array) -> Array:
        p = parts(x)
        p = np.exp(p - np.logaddexp.reduce(p))
        return sum(
            pk[:, None] * (mk * (np.arange(d) == 0) - x) / sk**2
            for pk, mk, sk in zip(p, m, s, strict=True)
        )

    return Problem(
        "two far modes, 4-d",
        sample,
        source,
        lambda x: np.logaddexp.reduce(parts(x)),
        case["expected"]["log_z"]["value"] - constant,
        case["expected"]["mean_first_coordinate"]["value"],
        gradient,
        target_gradient,
    )


def pima(sd: float = 10.0) -> Problem:
    """P9.5: logistic regression from its prior; the constant is the evidence."""
    expected = reference("P9.5")["expected"]["base" if sd == 10 else "new"]
    columns = json.loads((REFERENCE / "pima.json").read_text(encoding="utf-8"))["columns"]
    rows = np.stack([columns[k] for k in ("npreg", "glu", "bmi", "ped")], axis=1)
    rows = (rows - rows.mean(axis=0)) / rows.std(axis=0, ddof=1)
    design = np.column_stack([np.ones(len(rows)), rows])
    signed = design * (2 * np.array(columns["diabetes"]) - 1)[:, None]
    sample, source, gradient, _ = normal(5, sd)
    return Problem(
        f"Pima from its prior, sd {sd:g}",
        sample,
        source,
        lambda x: source(x) - softplus(-(x @ signed.T)).sum(axis=1),
        expected["log_evidence"]["value"],
        expected["mean"]["value"][0],
        gradient,
        lambda x: gradient(x) + (1 / (1 + np.exp(x @ signed.T))) @ signed,
    )


def softplus(z: Array) -> Array:
    """``log(1 + exp(z))``, faster than logaddexp."""
    return np.log(1 + np.exp(-np.abs(z))) + np.maximum(z, 0)


def reference(identifier: str) -> dict[str, Any]:
    """A case of family 9."""
    path = REFERENCE / "family_09_tempering.json"
    cases = json.loads(path.read_text(encoding="utf-8"))["cases"]
    return next(case for case in cases if case["id"] == identifier)


@dataclass(frozen=True)
class Outcome:
    """Figures of repeated runs of one problem."""

    error: Array
    reported: Array
    bridged_error: Array
    bridged_reported: Array
    mean_error: Array
    mean_reported: Array
    evaluations: float
    calls: float
    sound: float
    seconds: float

    @property
    def within(self) -> float:
        """Share of constants within 3 reported errors."""
        return float((np.abs(self.error) <= 3 * self.reported).mean())

    @property
    def variance_ratio(self) -> float:
        """Mean reported variance over the observed mean square."""
        return float((self.reported**2).mean() / (self.error**2).mean())

    @property
    def bridged_within(self) -> float:
        return float((np.abs(self.bridged_error) <= 3 * self.bridged_reported).mean())

    @property
    def mean_within(self) -> float:
        return float((np.abs(self.mean_error) <= 2 * self.mean_reported).mean())

    @property
    def work(self) -> float:
        """Evaluations that give the log constant an error of one tenth."""
        return float((self.error**2).mean() * self.evaluations / 0.01)

    @property
    def mean_work(self) -> float:
        """The same for the mean of the first coordinate, in units of its reported error."""
        return float((self.mean_error**2).mean() * self.evaluations)


def repeat(problem: Problem, runs: int, seed: int, **settings: Any) -> Outcome:
    """The same run from `runs` seeds."""
    found, cost, began = [], [], time.perf_counter()
    for run in range(runs):
        if settings.get("move") == "langevin":
            settings["source_gradient"] = problem.source_gradient
            settings["target_gradient"] = problem.target_gradient
        tempered = sy.temper(
            problem.sample,
            problem.source,
            problem.target,
            rng=np.random.default_rng([seed, run]),
            **{"size": SIZE, **settings},
        )
        constant, mean = tempered.log_constant, tempered.answer().mean("x[0]")
        bridged = tempered.bridged_constant if tempered.islands > 1 else constant
        found.append(
            (
                constant.value - problem.log_constant,
                constant.error,
                bridged.value - problem.log_constant,
                bridged.error,
                mean.value - problem.mean,
                mean.error,
            )
        )
        cost.append((tempered.evaluations, tempered.calls, bool(constant.verdict.is_sound)))
    columns = np.array(found).T
    evaluations, calls, sound = np.array(cost, dtype=float).mean(axis=0)
    return Outcome(*columns, evaluations, calls, sound, (time.perf_counter() - began) / runs)


HEAD = (
    f"{'problem':32s} {'setting':28s} {'within 3':>8s} {'var ratio':>9s} {'rms':>7s} "
    f"{'bridged':>7s} {'rms':>7s} {'mean 95%':>8s} {'evals':>9s} {'calls':>6s} {'work':>9s} "
    f"{'work mean':>9s} {'sound':>5s} {'s/run':>6s}"
)


def line(problem: str, setting: str, outcome: Outcome) -> str:
    """One row of the table."""
    return (
        f"{problem:32s} {setting:28s} {outcome.within:8.2f} {outcome.variance_ratio:9.2f} "
        f"{np.sqrt((outcome.error**2).mean()):7.3f} {outcome.bridged_within:7.2f} "
        f"{np.sqrt((outcome.bridged_error**2).mean()):7.3f} {outcome.mean_within:8.2f} "
        f"{outcome.evaluations:9,.0f} {outcome.calls:6.0f} {outcome.work:9,.0f} "
        f"{outcome.mean_work:9,.1f} {outcome.sound:5.2f} {outcome.seconds:6.2f}"
    )


# The share of 100 runs that has to lie within 3 reported errors, and how far variances may differ.
WITHIN = 0.94
FACTOR = 2.0


def constants(runs: int, seed: int, only: str) -> bool:
    """The cases that have to hold; whether they do."""
    settings: dict[str, dict[str, Any]] = {
        "default": {},
        "waste-free": {"waste_free": True, "size": 4 * SIZE},
        "lineages": {"islands": 1, "scheme": "multinomial"},
    }
    held = True
    for problem in (conjugate(20, 1.0, 4.0), scaled(20, 1.6), pima(10.0), pima(1.0)):
        for name, chosen in settings.items():
            if only not in f"{problem.name} {name}":
                continue
            found = repeat(problem, runs, seed, **chosen)
            fair = 1 / FACTOR <= found.variance_ratio <= FACTOR
            held &= found.within >= WITHIN and fair
            print(line(problem.name, name, found), flush=True)
    return held


def moves(runs: int, seed: int, only: str) -> None:
    """Which moves, and at which efficiency, are the cheapest."""
    battery = (
        conjugate(20, 1.0, 4.0),
        shifted(20, 1.0),
        scaled(20, 1.6),
        scaled(50, 1.6),
        student(10),
        banana(),
        far_modes(),
    )
    for problem in battery:
        for move in ("mixed", "independence", "random walk", "langevin"):
            if only in f"{problem.name} {move}":
                print(line(problem.name, move, repeat(problem, runs, seed, move=move)), flush=True)
        for efficiency in (0.5, 0.7, 0.95):
            if only in f"{problem.name} efficiency":
                found = repeat(problem, runs, seed, efficiency=efficiency)
                print(line(problem.name, f"mixed, efficiency {efficiency:g}", found), flush=True)


def main(arguments: list[str] | None = None) -> int:
    """Run what is asked; 0 where all constants hold."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[1])
    parser.add_argument("--runs", type=int, default=100)
    parser.add_argument("--seed", type=int, default=20_261_201)
    parser.add_argument("--only", default="", help="a part of the name of problem and setting")
    parser.add_argument("--constants", action="store_true")
    parser.add_argument("--moves", action="store_true")
    options = parser.parse_args(arguments)
    print(f"seed {options.seed}, {options.runs} runs, {SIZE:,} particles\n{HEAD}", flush=True)
    held = True
    if options.constants or not options.moves:
        held = constants(options.runs, options.seed, options.only)
    if options.moves or not options.constants:
        moves(options.runs, options.seed, options.only)
    return 0 if held else 1


if __name__ == "__main__":
    sys.exit(main())
