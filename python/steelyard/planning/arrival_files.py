"""Arrivals on disk: a NumPy archive without pickled objects, of a version that it states."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.errors import DrawsError

__all__ = ["VERSION", "digest", "read_archive", "refuse"]

# Version of the format of saved arrivals.
VERSION = 1

_CONTENT = ("steelyard_arrival", "draws", "names", "observations", "totals")


def read_archive(path: str | Path) -> dict[str, Any]:
    try:
        with np.load(path, allow_pickle=False) as held:
            content = {name: held[name] for name in _CONTENT}
    except FileNotFoundError:
        raise
    except Exception as error:
        raise DrawsError(
            str(path),
            "an arrival written by save()",
            f"{type(error).__name__}: {error}",
            "Files with pickled objects are refused, since loading those runs code.",
        ) from error
    if content["steelyard_arrival"].shape != () or content["steelyard_arrival"] != VERSION:
        refuse(path, f"version {content['steelyard_arrival']}, not {VERSION}")
    numbers = content["observations"].dtype.kind == "i" and content["totals"].dtype.kind == "f"
    if not numbers or content["names"].dtype.kind != "U" or content["draws"].dtype.kind != "U":
        refuse(path, "entries of other kinds")
    if not content["names"].shape == content["observations"].shape == content["totals"].shape[:1]:
        refuse(path, "entries of different lengths")
    return content


def refuse(path: str | Path, came: str) -> None:
    raise DrawsError(
        str(path), "an arrival written by save()", came, "Write it again with this version."
    )


def digest(base: Base) -> str:
    """SHA-256 of names and values of the draws."""
    found = hashlib.sha256()
    for name in sorted(base.draws):
        values = np.ascontiguousarray(base.draws[name], dtype="<f8")
        found.update(f"{name}{values.shape}".encode())
        found.update(values.tobytes())
    return found.hexdigest()
