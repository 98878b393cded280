"""Colours and axes that all plots share."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from steelyard.base.optional import matplotlib_pyplot

__all__ = ["BASE", "GUIDE", "INK", "TARGET", "axes", "line_names", "title"]

INK = "#22333b"
BASE = "#a9b4b8"
TARGET = "#8c5e2a"
GUIDE = "#d9d4c7"


def axes(ax: Any) -> Any:
    """The given Axes, or new ones; frame reduced to the two axes that are read."""
    if ax is None:
        _, ax = matplotlib_pyplot().subplots(figsize=(6.4, 3.8), layout="constrained")
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    ax.tick_params(colors=INK)
    return ax


def title(ax: Any, text: str) -> None:
    """What a plot says, above it on the left."""
    ax.set_title(text, loc="left", fontsize=10, color=INK)


def line_names(ax: Any, names: Sequence[str]) -> None:
    """One named line below the other, the first on top."""
    ax.set_yticks(range(len(names)), names)
    ax.set_ylim(len(names) - 0.5, -0.5)
