"""Every public thing has a numpydoc docstring that names its parameters, results and errors."""

from __future__ import annotations

import inspect

import pytest
from numpydoc.validate import validate

import steelyard as sy

# Sections present and in order, every parameter described, results named.
CHECKS = {"GL03", "GL07", "SS01", "SS02", "SS03", "PR01", "PR02", "PR03", "PR07", "RT01", "RT03"}


# Made by the library, never by its user: their docstrings list attributes instead of parameters.
RESULTS = {"Answer", "Change", "Decision", "Distance", "Draws", "Estimate", "Reason", "Verdict"}
RESULTS |= {"LeaveOut", "Contrast", "Calibration", "Combination", "LookAhead", "Flip"}
RESULTS |= {"Pool"}
RESULTS |= {"Finding", "Findings", "Smoothed", *sy.errors.__all__}


def _public() -> list[str]:
    names = []
    for name in sy.__all__:
        thing = getattr(sy, name)
        if inspect.ismodule(thing):
            names += [f"{thing.__name__}.{n}" for n in thing.__all__]
        else:
            names.append(f"steelyard.{name}")
            if inspect.isclass(thing):
                names += [f"steelyard.{name}.{n}" for n in _methods(thing)]
    return names


def _methods(thing: type) -> list[str]:
    return [
        name
        for name, value in vars(thing).items()
        if not name.startswith("_") and inspect.isfunction(value)
    ]


@pytest.mark.parametrize("name", _public())
def test_a_public_docstring_is_complete(name: str) -> None:
    checks = CHECKS - {"PR01"} if name.rpartition(".")[2] in RESULTS else CHECKS
    found = {f"{code}: {text}" for code, text in validate(name)["errors"] if code in checks}
    assert not found
