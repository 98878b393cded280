"""Draws of a target's prior, from which a target beyond the base's support is reached."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm
from steelyard.changes.merging import Draft
from steelyard.densities import Distribution
from steelyard.errors import PriorError

__all__ = ["prior_draws", "target_prior"]


def target_prior(record: Base, draft: Draft) -> dict[str, PriorTerm]:
    """
    Prior terms of the target, each a proper distribution that can be drawn from.

    Raises
    ------
    PriorError
        For a term that cannot.
    """
    terms = {}
    for label, term in (record.prior or {}).items():
        edited = draft.prior.get(label)
        new = term if edited is None or edited.given is None else edited.given
        factor = 1.0 if edited is None else edited.factor
        density = new.density
        if not isinstance(density, Distribution) or not density.is_proper or factor != 1:
            raise PriorError(
                f"prior[{label!r}]",
                "a proper distribution, to be drawn from, since the target reaches beyond the base",
                f"{density}" if factor == 1 else f"one to the power {factor:g}",
                "State it as one of Steelyard's distributions.",
            )
        terms[label] = new
    return terms


def prior_draws(
    record: Base, terms: Mapping[str, PriorTerm], size: int, generator: np.random.Generator
) -> Draws:
    """Independent draws of the parameters, those that others name first."""
    template = record.draws
    values: dict[str, Array] = {
        name: np.zeros((size, *template.values_by_name[name].shape[1:]))
        for name in record.parameters
    }
    waiting, drawn = dict(terms), set[str]()
    while waiting:
        ready = [
            label
            for label, term in waiting.items()
            if all(template.find(n).name in drawn for n in term.density.names)
        ]
        if not ready:
            raise PriorError(
                "repair", "priors that do not name each other in a circle", ", ".join(waiting), ""
            )
        term = waiting.pop(ready[0])
        _draw(term, template, values, size, generator)
        names = (term.key,) if isinstance(term.key, str) else term.key
        drawn |= {template.find(name).name for name in names}
    starts = np.array([0, size], dtype=np.int64)
    return Draws(values, starts, False, template.dims, template.labels)


def _draw(
    term: PriorTerm, template: Draws, values: dict[str, Array], size: int, generator: Any
) -> None:
    """One term, written into the values of the parameters that it is about."""
    shape = (size, *term.value(template).shape[1:])
    now = Draws(values, np.array([0, size], dtype=np.int64), False, template.dims, template.labels)
    found = term.density.sample(shape, rng=generator, look_up=now.look_up)
    flat, start = found.reshape(size, -1), 0
    for name in (term.key,) if isinstance(term.key, str) else term.key:
        reference = template.find(name)
        place: tuple[Any, ...] = (slice(None), *reference.index)
        wanted = values[reference.name][place].shape
        width = int(np.prod(wanted[1:], dtype=np.int64))
        values[reference.name][place] = flat[:, start : start + width].reshape(wanted)
        start += width
