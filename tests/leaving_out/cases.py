"""Reference cases of leaving out (see tests/reference/README.md)."""

from __future__ import annotations

import functools
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

_FOLDER = Path(__file__).resolve().parent.parent / "reference"
_FILES = {
    "2": "family_02_deletion.json",
    "3": "family_03_hierarchical.json",
    "11": "family_11_future.json",
    "13": "leaving_out_family_13.json",
}


@functools.cache
def _cases(file_name: str) -> dict[str, dict[str, Any]]:
    content = json.loads((_FOLDER / file_name).read_text(encoding="utf-8"))
    return {case["id"]: case for case in content["cases"]}


def case(identifier: str) -> dict[str, Any]:
    """The case with this identifier, ``"P2.1"`` for instance."""
    return _cases(_FILES[identifier[1:].split(".")[0]])[identifier]


def data(identifier: str, name: str) -> NDArray[np.float64]:
    """An input of a case as an array."""
    return np.asarray(case(identifier)["inputs"][name], dtype=float)


def expected(identifier: str, name: str) -> Any:
    """An expected value of a case: a float or a float array."""
    stored = case(identifier)["expected"][name]["value"]
    return np.asarray(stored) if isinstance(stored, list) else float(stored)
