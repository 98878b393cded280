"""Names of parameters, and of elements of them, in texts such as ``"rate[3]"``."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.errors import AmbiguousNameError, UnknownNameError

__all__ = [
    "Reference",
    "close_names",
    "find",
    "label_hits",
    "label_position",
    "label_texts",
    "position_in",
    "refuse_if_ambiguous",
]

_BRACKETS = re.compile(r"^(?P<name>.+?)\[(?P<index>[^\[\]]*)\]$")
_INTEGER = re.compile(r"^[+-]?\d+$")
_WHOLE = re.compile(r"^[+-]?\d+(\.0*)?$")
_KEYWORD = re.compile(r"^(label|position)\s*=\s*(.+)$")


@dataclass(frozen=True)
class Reference:
    """A parameter (`index` empty) or an element of one."""

    name: str
    index: tuple[int, ...] = ()

    def overlaps(self, other: Reference) -> bool:
        """Whether the two share an element."""
        common = min(len(self.index), len(other.index))
        return self.name == other.name and self.index[:common] == other.index[:common]


def close_names(name: str, known: Iterable[str]) -> str:
    """A next step that offers the nearest names, or all of them."""
    names = list(known)
    near = get_close_matches(name, names, n=3)
    if near:
        return f"Did you mean {' or '.join(repr(n) for n in near)}?"
    shown = ", ".join(names[:12]) + (", …" if len(names) > 12 else "")
    return f"Known: {shown or 'none'}."


def find(
    text: str,
    shapes: Mapping[str, tuple[int, ...]],
    dims: Mapping[str, tuple[str, ...]],
    labels: Mapping[str, npt.NDArray[Any]],
    argument: str,
) -> Reference:
    """Resolve a text; exact names win over brackets."""
    if text in shapes:
        return Reference(text)
    match = _BRACKETS.match(text)
    if match is None or match["name"] not in shapes:
        raise UnknownNameError(
            argument, "the name of a parameter", repr(text), close_names(text, shapes)
        )
    name, parts = match["name"], [p.strip() for p in match["index"].split(",")]
    shape = shapes[name]
    if len(parts) > len(shape):
        raise UnknownNameError(
            argument,
            f"at most {len(shape)} positions in brackets ({name!r} has shape {shape})",
            repr(text),
            "Name one element." if shape else f"Write {name!r}: it is a single number.",
        )
    names = dims.get(name, ("",) * len(shape))
    index = tuple(
        position_in(part, size, labels.get(dim), f"{argument} {text!r}", dim)
        for part, size, dim in zip(parts, shape, names, strict=False)
    )
    return Reference(name, index)


def position_in(
    part: str, size: int, labels: npt.NDArray[Any] | None, argument: str, dim: str
) -> int:
    """Position that one part of the brackets names: an integer, a label, or either said."""
    said = _KEYWORD.match(part)
    kind, part = (said[1], said[2].strip().strip("'\"")) if said else ("", part.strip("'\""))
    if _INTEGER.match(part) and kind != "label":
        position = int(part)
        if not kind:
            refuse_if_ambiguous(labels, size, argument, dim)
        if not 0 <= position < size:
            raise UnknownNameError(
                argument, f"a position from 0 to {size - 1}", part, "Positions count from 0."
            )
        return position
    if kind == "position":
        raise UnknownNameError(argument, "an integer position", repr(part), "Count from 0.")
    return label_position(part, labels, argument, dim)


def refuse_if_ambiguous(
    labels: npt.NDArray[Any] | None, size: int, argument: str, dim: str
) -> None:
    """Refuse a bare integer where labels that look like integers differ from positions."""
    texts = label_texts(labels)
    if not texts or not all(_WHOLE.match(text) for text in texts):
        return
    if [int(float(text)) for text in texts] != list(range(size)):
        raise AmbiguousNameError(
            argument,
            f"label= or position=, since dimension {dim!r} has integer labels "
            f"{texts[0]}…{texts[-1]} that differ from positions",
            "a bare integer",
            'Write for instance "rate[label=4]" or "rate[position=3]"; drop() takes both words.',
        )


def label_texts(labels: npt.NDArray[Any] | None) -> list[str]:
    """Labels as texts; dates as ISO dates, with times only where they have any."""
    if labels is None:
        return []
    if labels.dtype.kind == "M":
        days = labels.astype("datetime64[D]")
        unit = "D" if bool((days == labels).all()) else "auto"
        return [str(text) for text in np.datetime_as_string(labels, unit)]  # type: ignore[call-overload]
    return [str(label) for label in labels.tolist()]


def label_hits(labels: npt.NDArray[Any] | None, label: object) -> npt.NDArray[np.bool_]:
    """Which labels of a dimension are the one that is meant."""
    texts = label_texts(labels)
    if labels is not None and labels.dtype.kind == "M":
        try:
            return np.asarray(labels == np.datetime64(label).astype(labels.dtype))  # type: ignore[call-overload]
        except (TypeError, ValueError):
            return np.zeros(len(texts), dtype=np.bool_)
    return np.array([text == str(label) for text in texts], dtype=np.bool_)


def label_position(label: object, labels: npt.NDArray[Any] | None, argument: str, dim: str) -> int:
    """Position of a label along a dimension; it must occur exactly once."""
    if labels is None:
        raise UnknownNameError(
            argument,
            "an integer position (the dimension has no labels)",
            repr(label),
            "Count from 0, or read the draws from an xarray Dataset with coordinates.",
        )
    hits = np.flatnonzero(label_hits(labels, label))
    if len(hits) == 1:
        return int(hits[0])
    raise UnknownNameError(
        argument,
        f"one label of dimension {dim!r}",
        repr(label) if not len(hits) else f"{label!r}, which stands {len(hits)} times",
        close_names(str(label), label_texts(labels)),
    )
