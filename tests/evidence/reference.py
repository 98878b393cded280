"""Read the reference cases and compare with their deterministic tolerances."""

from __future__ import annotations

import functools
import json
from pathlib import Path
from typing import Any

import numpy as np

_FOLDER = Path(__file__).resolve().parent.parent / "reference"


@functools.cache
def _cases(file_name: str) -> dict[str, dict[str, Any]]:
    content = json.loads((_FOLDER / file_name).read_text(encoding="utf-8"))
    return {case["id"]: case for case in content["cases"]}


def case(identifier: str) -> dict[str, Any]:
    """The reference case with this identifier, ``"P1.2b"`` for instance."""
    family = int(identifier[1:].split(".")[0])
    for path in sorted(_FOLDER.glob(f"*family_{family:02d}*.json")):
        if identifier in _cases(path.name):
            return _cases(path.name)[identifier]
    raise KeyError(identifier)


def value(entry: dict[str, Any]) -> Any:
    """The expected value of an entry, as a float or a float array."""
    stored = entry["value"]
    return np.asarray(stored, dtype=float) if isinstance(stored, list) else float(stored)


def accuracy(entry: dict[str, Any]) -> Any:
    """How far the reference value itself may be off, from its stated rtol and atol."""
    return entry.get("atol", 0.0) + entry.get("rtol", 0.0) * np.abs(value(entry))


def assert_equal_within(computed: Any, entry: dict[str, Any]) -> None:
    """Hold a deterministic result to the tolerance that the reference case states."""
    np.testing.assert_allclose(
        np.asarray(computed, dtype=float),
        value(entry),
        rtol=entry.get("rtol", 0.0),
        atol=entry.get("atol", 0.0),
        err_msg=f"tolerance: {entry.get('tol_reason', 'exact')}",
    )
