"""The page of the demonstration: plain text, as ``python -m steelyard`` prints it."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Sequence

import numpy as np

import steelyard as sy
from steelyard.demo.model import LEVEL, load_draws
from steelyard.demo.readings import Readings, load_readings
from steelyard.demo.scenarios import Scenario
from steelyard.digits import chance, rounded

__all__ = ["CAUTIONS", "compose_page"]

WIDTH = 96
CAUTIONS = (
    "Not a design check; applicable local codes and a licensed engineer govern.",
    "Sensitivity of the fitted model only; model adequacy is not assessed.",
)
HEADINGS = (
    ("", "scenario"),
    ("", "P"),
    ("", "error"),
    ("", "shift"),
    ("", "error"),
    ("tail", "shape"),
    ("eff.", "draws"),
    ("", "verdict"),
    ("", "re-coat?"),
    ("", "sure"),
)
LEFT_COLUMNS = (0, 7, 8)
LEGEND = (
    "P: probability that quay 4 loses more than 0.12 mm a year. error: Monte Carlo standard "
    "error. shift: paired difference from the base. Tail shape: of this probability's "
    "contributions; none where all weights are equal. sure: Monte Carlo probability that the side "
    "of the level is the right one.",
    "~   strained: right order of magnitude; do not rest a decision on it alone.",
    "[ ] refit: these draws cannot answer this; no number should be quoted.",
)


def compose_page(scenarios: Sequence[Scenario]) -> str:
    """
    Compose the whole page.

    Parameters
    ----------
    scenarios : sequence of Scenario
        The base first.

    Returns
    -------
    str
        Plain text, at most 96 columns wide, without a closing newline.
    """
    parts = (
        _heading(),
        _setting(load_readings()),
        _base_answer(scenarios[0]),
        _table(scenarios),
        "\n".join(_paragraph(text) for text in LEGEND),
        _reasons(scenarios),
        "Cautions\n" + "\n".join(f"  {caution}" for caution in CAUTIONS),
    )
    return "\n\n".join(parts)


def _paragraph(text: str, indent: str = "") -> str:
    return textwrap.fill(text, WIDTH, initial_indent=indent, subsequent_indent=indent)


def _heading() -> str:
    title = "Steelyard, a demonstration: is quay 4 to be re-coated?"
    return f"{title}\n{'=' * len(title)}\nEverything here is invented: harbour, gauges, readings."


def _setting(readings: Readings) -> str:
    chains, draws = load_draws()["mu"].shape
    by_a, by_b = np.bincount(readings.gauge, minlength=2)
    first, last = readings.year.min(), readings.year.max()
    return _paragraph(
        f"A harbour authority has {readings.loss.size} ultrasonic readings of wall thickness at "
        f"nine quays, {first} to {last}: {by_a} by gauge A, {by_b} by gauge B. One hierarchical "
        f"model of corrosion rates was fitted to them once: {chains} chains of {draws:,} draws. "
        f"Quay 4 is re-coated if P(rate > 0.12 mm a year) is above {LEVEL:g}. What if the model "
        "or the readings were others? Each answer below weighs the same draws again."
    )


def _base_answer(base: Scenario) -> str:
    probability = base.probability
    value, error = float(probability.value), float(probability.error)
    return (
        f"Base answer: P(rate at quay 4 > 0.12) = {rounded(value, error)} ± "
        f"{rounded(error, error)} (Monte Carlo), verdict {base.level}: {_side(base)}."
    )


def _side(scenario: Scenario) -> str:
    """Return what the probability's side of the level says to do."""
    decision = scenario.probability.decision
    return "re-coat" if decision is not None and decision.above else "leave"


def _marked(text: str, level: str) -> str:
    """Mark what is not sound, so that no figure can be read without its verdict."""
    return {"sound": text, "strained": f"~{text}", "refit": f"[{text}]"}[level]


def _number_and_error(estimate: sy.Estimate | None, level: str, plus: str = "") -> list[str]:
    if estimate is None:
        return ["–", "–"]
    value, error = float(estimate.value), float(estimate.error)
    sign = plus if value > 0 else ""
    texts = (sign + rounded(value, error), rounded(error, error))
    return [_marked(text, level) for text in texts]


def _cells(scenario: Scenario) -> list[str]:
    probability, level = scenario.probability, scenario.level
    decision, answers = probability.decision, level != "refit"
    sure = "–"
    if decision is not None and level == "sound":
        sure = chance(decision.right)
    tail_shape = float(probability.tail_shape)
    return [
        scenario.label,
        *_number_and_error(probability, level),
        *_number_and_error(scenario.shift, level, plus="+"),
        "none" if tail_shape == -math.inf else f"{tail_shape:.2f}",
        f"{float(probability.effective_draws):,.0f}",
        level,
        _marked("yes" if _side(scenario) == "re-coat" else "no", level) if answers else "no answer",
        sure,
    ]


def _table(scenarios: Sequence[Scenario]) -> str:
    rows = [*zip(*HEADINGS, strict=True), *(_cells(scenario) for scenario in scenarios)]
    widths = [max(len(row[column]) for row in rows) for column in range(len(HEADINGS))]
    lines = []
    for row in rows:
        aligned = [
            cell.ljust(width) if column in LEFT_COLUMNS else cell.rjust(width)
            for column, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join(aligned).rstrip())
    rule = "-" * max(map(len, lines))
    return "\n".join([*lines[:2], rule, lines[2], rule, *lines[3:], rule])


def _reasons(scenarios: Sequence[Scenario]) -> str:
    lines = ["What was changed, and why an answer is not sound"]
    for scenario in scenarios[1:]:
        lines.append(f"  {scenario.label} ({scenario.level}): {scenario.meaning}")
        if scenario.level == "sound":
            continue
        # Reasons come worst first; milder ones would add length, not another conclusion.
        worst = [r for r in scenario.probability.verdict.reasons if r.level == scenario.level]
        lines += [_paragraph(reason.sentence, "      ") for reason in worst]
        lines.append(_paragraph(f"To do: {worst[0].next_step}", "      "))
    return "\n".join(lines)
