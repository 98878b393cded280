"""One text, and so one hash, for plans that mean the same."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

from steelyard.changes import Change
from steelyard.densities import Distribution

__all__ = ["VERSION", "canonical_hash"]

# Of the schema: of plan files and of what a hash is taken from.
VERSION = 1


def canonical_hash(
    scenarios: Sequence[tuple[str, Change]],
    quantities: Any,
    event: Any,
    level: float | None,
    probs: Sequence[float] | None = None,
) -> str:
    """SHA-256 over the canonical JSON of a plan; the order of edits does not matter."""
    content = {
        "version": VERSION,
        "scenarios": [[name, plain(change)] for name, change in scenarios],
        "quantities": plain(quantities),
        "event": plain(event),
        "level": plain(level),
    }
    if probs is not None:
        content["probs"] = plain(probs)
    return hashlib.sha256(_text(content).encode("utf-8")).hexdigest()


def _text(content: Any) -> str:
    return json.dumps(content, sort_keys=True, separators=(",", ":"), ensure_ascii=False)


def plain(value: Any) -> Any:
    """What JSON can hold; arrays and callables are represented by hashes of their content."""
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, int | float | np.integer | np.floating):
        # 1 and 1.0 are the same hyperparameter; repr keeps every digit.
        return {"number": repr(float(value))}
    if isinstance(value, Change):
        return sorted((plain(edit) for edit in value.edits), key=_text)
    if isinstance(value, Mapping):
        return {"mapping": sorted(([plain(k), plain(v)] for k, v in value.items()), key=_text)}
    if isinstance(value, list | tuple | set):
        listed = [plain(v) for v in value]
        return sorted(listed, key=_text) if isinstance(value, set) else listed
    if isinstance(value, Distribution) or (is_dataclass(value) and not isinstance(value, type)):
        parts = {f.name: plain(getattr(value, f.name)) for f in fields(value)}
        return {"kind": type(value).__name__, **parts}
    if hasattr(value, "dist") and hasattr(value, "args"):  # a frozen scipy.stats distribution
        return {"frozen": value.dist.name, "args": plain(value.args), "kwds": plain(value.kwds)}
    if hasattr(value, "__array__"):
        return _array(np.asarray(value))
    return _callable(value)


def _array(array: Any) -> dict[str, Any]:
    kept = np.ascontiguousarray(array)
    digest = hashlib.sha256(kept.tobytes()).hexdigest()
    return {"array": digest, "shape": list(kept.shape), "dtype": kept.dtype.str}


def _callable(value: Any) -> dict[str, Any]:
    """By name and compiled body; what it reads from elsewhere is not seen."""
    code = getattr(value, "__code__", None)
    name = getattr(value, "__qualname__", type(value).__qualname__)
    if code is None:
        return {"callable": name}
    body = code.co_code + repr((code.co_names, _constants(code))).encode()
    return {"callable": name, "body": hashlib.sha256(body).hexdigest()}


def _constants(code: Any) -> list[Any]:
    # A nested function's code object prints its address: its own body stands for it.
    return [
        (c.co_code.hex(), c.co_names) if hasattr(c, "co_code") else repr(c) for c in code.co_consts
    ]
