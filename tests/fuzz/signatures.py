"""Arguments for a function of which nothing is known but its signature."""

from __future__ import annotations

import inspect
from collections.abc import Callable
from typing import Any

from .wild import Wild


def arguments(
    wild: Wild, function: Callable[..., Any], one: Callable[[], Any]
) -> tuple[tuple[Any, ...], dict[str, Any]]:
    """Every required argument and some of the others, each as `one` makes them."""
    given: list[Any] = []
    named: dict[str, Any] = {}
    for parameter in inspect.signature(function).parameters.values():
        # A callback of the caller may raise what it likes.
        if parameter.kind in (parameter.VAR_POSITIONAL, parameter.VAR_KEYWORD) or (
            parameter.name == "progress"
        ):
            continue
        required = parameter.default is parameter.empty
        if not required and wild.chance(0.6):
            continue
        if required and parameter.kind is not parameter.KEYWORD_ONLY:
            given.append(one())
        elif parameter.kind is not parameter.POSITIONAL_ONLY:
            named[parameter.name] = one()
    return tuple(given), named


def public(thing: Any, known: set[str]) -> list[str]:
    """Names of the methods of a thing that are not among the known ones."""
    kind = type(thing)
    return [
        name
        for name in dir(kind)
        if not name.startswith("_")
        and name not in known
        and inspect.isfunction(getattr(kind, name))
    ]
