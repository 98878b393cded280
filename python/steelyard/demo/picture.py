"""The picture of the demonstration: one row a scenario, verdicts by form and word."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from steelyard.demo.model import LEVEL
from steelyard.demo.scenarios import Scenario
from steelyard.digits import rounded

__all__ = ["draw_picture"]

LABELS_AT, VERDICT_AT, SHIFT_AT = -0.69, 1.03, 1.46  # in widths of the axes
INK, QUIET, BAND = "#1d2a36", "#6b7680", "#dfe5ea"
# A verdict is told by form, so that it survives a grey print and any colour vision.
MARKERS = {"sound": "o", "strained": "D", "refit": "x"}
FILLS = {"sound": INK, "strained": "white", "refit": INK}
LINES: dict[str, Any] = {"sound": "-", "strained": (0, (2, 2))}
TITLE = "Does quay 4 lose more than 0.12 mm a year?"
SUBTITLE = "Invented readings at nine invented quays; the same draws in every row"
FOOT = (
    "Bars: 95 % Monte Carlo intervals. Refit: the draws cannot answer, so no interval is drawn; "
    "do not quote the number.\n"
    "Sensitivity of the fitted model only; model adequacy is not assessed. "
    "Not a design check; applicable local codes and a licensed engineer govern."
)


def draw_picture(scenarios: Sequence[Scenario], path: Path) -> None:
    """
    Draw every scenario's probability and write it as a PNG.

    Parameters
    ----------
    scenarios : sequence of Scenario
        The base first.
    path : Path
        File to write.

    Raises
    ------
    ImportError
        Where matplotlib is not installed.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(9.6, 5.4), facecolor="white")
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.33, 0.2, 0.45, 0.62))
    for row, scenario in enumerate(scenarios):
        _draw_row(axes, row, scenario)
    _draw_references(axes, scenarios)
    _dress(axes, scenarios)
    figure.text(0.02, 0.955, TITLE, fontsize=14, fontweight="bold", color=INK, va="center")
    figure.text(0.02, 0.905, SUBTITLE, fontsize=9.5, color=QUIET, va="center")
    figure.text(0.02, 0.045, FOOT, fontsize=7.5, color=QUIET, va="center", linespacing=1.5)
    figure.savefig(path, dpi=150, format="png")


def _draw_row(axes: Any, row: int, scenario: Scenario) -> None:
    """Marker and interval, the label and meaning on the left, the verdict on the right."""
    level = scenario.level
    value = float(scenario.probability.value)
    if level != "refit":
        lower, upper = (float(end) for end in scenario.probability.error_interval())
        lower, upper = max(lower, 0.0), min(upper, 1.0)
        axes.plot([lower, upper], [row, row], color=INK, linewidth=1.8, ls=LINES[level])
    if np.isfinite(value):
        axes.plot(
            value,
            row,
            marker=MARKERS[level],
            markersize=7.5,
            markeredgewidth=1.6,
            markeredgecolor=INK,
            markerfacecolor=FILLS[level],
            linestyle="none",
            zorder=3,
        )
    beside = axes.get_yaxis_transform()
    _write(axes, LABELS_AT, row, scenario.label, beside, size=10, va="bottom")
    _write(axes, LABELS_AT, row + 0.06, scenario.meaning, beside, size=7.5, color=QUIET, va="top")
    _write(axes, VERDICT_AT, row, level, beside, size=10)
    _write(axes, SHIFT_AT, row, _shift_text(scenario), beside, size=9.5, ha="right")


def _write(
    axes: Any, x: float, y: float, text: str, transform: Any, *, size: float, **style: Any
) -> None:
    """Write a text in ink, centred on its row, unless the style says otherwise."""
    axes.text(
        x, y, text, transform=transform, fontsize=size, **{"color": INK, "va": "center"} | style
    )


def _shift_text(scenario: Scenario) -> str:
    """Return the shift in figures; none is quoted where the draws cannot answer."""
    if scenario.shift is None:
        return "–"
    if scenario.level == "refit":
        return "not quoted"
    value, error = float(scenario.shift.value), float(scenario.shift.error)
    sign = "+" if value > 0 else ""
    return f"{sign}{rounded(value, error)} ± {rounded(error, error)}".replace("-", "−")


def _draw_references(axes: Any, scenarios: Sequence[Scenario]) -> None:
    """Draw the base's interval as a band and the decision level as a line."""
    lower, upper = (float(end) for end in scenarios[0].probability.error_interval())
    axes.axvspan(lower, upper, color=BAND, zorder=0, linewidth=0)
    axes.axvline(LEVEL, color=INK, linewidth=1.0, zorder=1)
    above = axes.get_xaxis_transform()
    _write(axes, LEVEL, 1.05, f"level {LEVEL:g}", above, size=8.5, ha="center")
    _write(axes, LEVEL - 0.06, 1.05, "← leave", above, size=8.5, ha="right", color=QUIET)
    _write(axes, LEVEL + 0.06, 1.05, "re-coat →", above, size=8.5, color=QUIET)


def _dress(axes: Any, scenarios: Sequence[Scenario]) -> None:
    """Set the range to what is drawn, and leave only the marks a reader needs."""
    shown = [float(scenario.probability.value) for scenario in scenarios]
    shown += [
        float(end)
        for scenario in scenarios
        if scenario.level != "refit"
        for end in scenario.probability.error_interval()
    ]
    finite = [value for value in [*shown, LEVEL] if np.isfinite(value)]
    axes.set_xlim(max(0.0, min(finite) - 0.06), min(1.0, max(finite) + 0.06))
    axes.set_ylim(len(scenarios) - 0.5, -0.5)
    axes.set_yticks([])
    axes.axhline(0.5, color=QUIET, linewidth=0.6)
    axes.set_xlabel("probability that quay 4 loses more than 0.12 mm a year", color=INK, fontsize=9)
    axes.tick_params(axis="x", colors=INK, labelsize=8.5, length=3)
    for side in ("left", "right", "top"):
        axes.spines[side].set_visible(False)
    axes.spines["bottom"].set_color(QUIET)
    _write(axes, LABELS_AT, 1.05, "scenario", axes.transAxes, size=8.5, color=QUIET)
    _write(axes, VERDICT_AT, 1.05, "verdict", axes.transAxes, size=8.5, color=QUIET)
    _write(
        axes, SHIFT_AT, 1.05, "shift from base", axes.transAxes, size=8.5, ha="right", color=QUIET
    )
