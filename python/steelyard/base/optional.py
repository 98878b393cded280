"""Libraries that are loaded only where a function needs them."""

from __future__ import annotations

from importlib import import_module
from typing import Any

from steelyard.errors import MissingExtraError

__all__ = ["matplotlib_pyplot", "xarray"]


def _load(module: str, extra: str) -> Any:
    try:
        return import_module(module)
    except ImportError as error:
        raise MissingExtraError(
            module,
            f"{module.partition('.')[0]} to be installed",
            str(error),
            f'Install it with: pip install "steelyard[{extra}]".',
        ) from error


def xarray() -> Any:
    """The module xarray."""
    return _load("xarray", "xarray")


def matplotlib_pyplot() -> Any:
    """The module matplotlib.pyplot."""
    return _load("matplotlib.pyplot", "plot")
