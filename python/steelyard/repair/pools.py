"""What may be pooled: a door that reads fits and sends them the right way."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from steelyard.errors import ArgumentError, ArgumentTypeError
from steelyard.repair.disjoint import pool_disjoint
from steelyard.repair.pooled import Pooled
from steelyard.repair.pooling import pool_records

__all__ = ["pool_fits"]


def _read_fits(fits: Any) -> tuple[tuple[str, ...], list[Any]]:
    """Names and fits, from a sequence or a mapping; at least two."""
    if isinstance(fits, Mapping):
        labels, held = tuple(str(name) for name in fits), list(fits.values())
    elif isinstance(fits, Sequence) and not isinstance(fits, str):
        held = list(fits)
        labels = tuple(f"fit {number}" for number in range(1, len(held) + 1))
    else:
        raise ArgumentTypeError(
            "fits", "a list of fits, or {name: fit}", type(fits).__name__, "Write pool([a, b], …)."
        )
    if len(held) < 2:
        raise ArgumentError(
            "fits", "at least two fits", f"{len(held)}", "A single fit reweighs by itself."
        )
    return labels, held


def pool_fits(fits: Any, kind: type, data: Any, common: Any, log_constants: Any) -> Pooled:
    """Fits pooled into one record; `kind` is the class that a fit must have."""
    labels, held = _read_fits(fits)
    for label, fit in zip(labels, held, strict=True):
        if not isinstance(fit, kind):
            raise ArgumentTypeError(
                "fits", "fits", f"{type(fit).__name__} as {label}", "Make them with sy.Fit(…)."
            )
    if not isinstance(data, str) or data not in ("same", "disjoint"):
        raise ArgumentError(
            "data", "'same' or 'disjoint'", repr(data), "Say what data the fits saw."
        )
    records = [fit._record for fit in held]
    for label, record in zip(labels, records, strict=True):
        if record.draws.pooling is not None:
            raise ArgumentTypeError(
                "fits", "single fits", f"a pool as {label}", "Pool all of its fits at once."
            )
    way = pool_records if data == "same" else pool_disjoint
    return way(records, labels, common, log_constants)
