"""Draws and likelihood terms of several fits as one stack, nothing copied but the draws."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.base.draws import Draws
from steelyard.base.likelihood import LoglikTerm, called_term

if TYPE_CHECKING:
    from steelyard.base.record import Base

__all__ = ["StackedRows", "stack_draws", "stacked_term"]


class StackedRows:
    """Likelihood values of several fits, each at its own draws, read by the rows asked for."""

    def __init__(self, parts: Sequence[tuple[LoglikTerm, Draws]]) -> None:
        self.parts = tuple(parts)
        self.edges = np.concatenate([[0], np.cumsum([draws.size for _, draws in parts])])
        self.shape = (int(self.edges[-1]), *parts[0][0].obs_shape)
        self.dtype = np.dtype(np.float64)

    def __getitem__(self, place: Any) -> npt.NDArray[Any]:
        rows, *rest = place if isinstance(place, tuple) else (place,)
        start, stop, _ = rows.indices(self.shape[0])
        found = []
        for (term, draws), (first, end) in zip(
            self.parts, pairwise(self.edges.tolist()), strict=True
        ):
            low, high = max(start, first), min(stop, end)
            if low < high:
                found.append(_rows(term, draws, low - first, high - first, tuple(rest)))
        if not found:
            return np.empty((0, *self.shape[1:]))
        return np.concatenate(found)


def _rows(
    term: LoglikTerm, draws: Draws, low: int, high: int, rest: tuple[Any, ...]
) -> npt.NDArray[Any]:
    if called_term(term.source):
        part = slice(low, high)
        block = {name: values[part] for name, values in draws.values_by_name.items()}
        return np.asarray(term.source(block))[(slice(None), *rest)]
    if not term.has_chain_axis:
        return np.asarray(term.source[(slice(low, high), *rest)])
    parts = []
    for chain, (first, end) in enumerate(pairwise(draws.starts.tolist())):
        begin, stop = max(low, first), min(high, end)
        if begin < stop:
            within = slice(begin - first, stop - first)
            parts.append(np.asarray(term.source[(chain, within, *rest)]))
    return np.concatenate(parts)


def stacked_term(terms: Sequence[LoglikTerm], draws: Sequence[Draws]) -> LoglikTerm:
    """One term of the same name in every fit, each with the values at its own draws."""
    first = terms[0]
    if called_term(first.source):
        return first
    source = StackedRows(list(zip(terms, draws, strict=True)))
    return LoglikTerm(first.name, source, first.obs_shape, False, first.dims, first.labels)


def stack_draws(records: Sequence[Base], labels: Sequence[str]) -> Draws:
    """The draws of all fits, chain after chain, under names that say which fit."""
    parts = [record.draws for record in records]
    first = parts[0]
    values = {name: np.concatenate([part[name] for part in parts]) for name in first}
    offsets = np.concatenate([[0], np.cumsum([part.size for part in parts])])
    starts = [part.starts[:-1] + offset for part, offset in zip(parts, offsets, strict=False)]
    lengths = {int(n) for part in parts for n in np.diff(part.starts)}
    names = tuple(
        f"{label}: {chain}"
        for label, part in zip(labels, parts, strict=True)
        for chain in part.chain_names or range(part.chains)
    )
    return Draws(
        values,
        np.concatenate([*starts, offsets[-1:]]).astype(np.int64),
        all(part.has_chain_axis for part in parts) and len(lengths) == 1,
        first.dims,
        first.labels,
        names,
    )
