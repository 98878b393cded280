"""Quantities and events: names, arrays, callables and mappings become draws of what is asked."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.answers.events import evaluate_event, is_expression
from steelyard.arrays import plain_array
from steelyard.base import Base
from steelyard.base.draws import Array, element
from steelyard.base.predictive import refuse_withheld
from steelyard.base.ratios import extremes_of
from steelyard.base.shapes import stacked
from steelyard.errors import ArgumentTypeError, QuantityError

__all__ = ["Quantity", "asked_for", "event_mask", "labelled", "read_quantity"]


@dataclass(frozen=True, eq=False)
class Quantity:
    """
    Draws of something asked for.

    Attributes
    ----------
    label : str
        What it is called.
    values : numpy.ndarray
        ``(n, *shape)`` float64.
    dims : tuple of str
        Names of the trailing dimensions; empty texts where they have none.
    labels : mapping of str to numpy.ndarray
        Labels along named dimensions.
    is_event : bool
        Whether the values are the 0 and 1 of an event.
    """

    label: str
    values: Array
    dims: tuple[str, ...] = ()
    labels: Mapping[str, npt.NDArray[Any]] = field(default_factory=dict)
    is_event: bool = False

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape without the draw axis."""
        return self.values.shape[1:]

    @property
    def columns(self) -> Array:
        """The values as ``(n, k)``."""
        return self.values.reshape(len(self.values), -1)


def labelled(quantity: Any, base: Base, *, events: bool = False) -> dict[str, Quantity] | None:
    """Several quantities by label, for a mapping or for None (all parameters); else None."""
    if quantity is None:
        if not base.parameters:
            raise QuantityError(
                "quantity",
                "something to estimate, since the answer holds no draws of parameters",
                "nothing",
                "Pass draws= to weigh(), or an array shaped like the log ratios.",
            )
        return {name: read_quantity(name, base) for name in base.parameters}
    if isinstance(quantity, list | tuple) and quantity and all_text(quantity):
        quantity = {name: name for name in quantity}
    if isinstance(quantity, Mapping):
        if not quantity:
            raise QuantityError("quantity", "at least one", "an empty mapping", "Name one.")
        return {
            str(label): replace(read_quantity(one, base, events=events), label=str(label))
            for label, one in quantity.items()
        }
    return None


def asked_for(quantities: Any, base: Base) -> dict[str, Quantity]:
    """Quantities and events by label, also for one alone."""
    several = labelled(quantities, base, events=True)
    if several is not None:
        return several
    one = read_quantity(quantities, base, events=True)
    return {one.label: one}


def read_quantity(
    quantity: Any, base: Base, argument: str = "quantity", *, events: bool = False
) -> Quantity:
    """Draws of one quantity: a name, an array shaped like the draws, or a callable."""
    draws = base.draws
    if isinstance(quantity, str):
        if is_expression(quantity) and quantity not in draws:
            return _event_as_quantity(quantity, base, argument, events)
        return _named(quantity, base, argument)
    label = "quantity"
    if callable(quantity) and not hasattr(quantity, "shape"):
        label = _name_of(quantity, label)
        quantity = quantity(base.visible())
    elif not (hasattr(quantity, "shape") or isinstance(quantity, list | tuple)):
        raise ArgumentTypeError(
            argument,
            "a parameter's name, an array shaped like the draws, a callable, or a mapping of those",
            type(quantity).__name__,
            f"Known parameters: {', '.join(draws) or 'none'}.",
        )
    else:
        _refuse_if_moved(base, argument)
    quantity = quantity if hasattr(quantity, "dims") else plain_array(quantity, argument)
    if quantity.dtype == np.bool_:
        event = _event_as_quantity(quantity, base, argument, events, is_computed=True)
        return replace(event, label=label)
    values = np.require(stacked(quantity, draws, argument), np.float64, ["C", "A"])
    _refuse_bad_values(values, base, argument)
    return Quantity(label, values, ("",) * (values.ndim - 1))


def all_text(values: Iterable[Any]) -> bool:
    """Whether every entry is a text."""
    return all(isinstance(value, str) for value in values)


def _event_as_quantity(
    event: Any, base: Base, argument: str, events: bool, *, is_computed: bool = False
) -> Quantity:
    if not events:
        raise QuantityError(
            argument,
            "numbers",
            f"an event ({event[:80]!r})" if isinstance(event, str) else "True and False",
            "Use prob(event), which counts the draws on both sides; shift() takes events too.",
        )
    return event_mask(event, base, is_computed=is_computed)


def _name_of(function: Any, otherwise: str) -> str:
    name = str(getattr(function, "__name__", otherwise))
    return otherwise if name == "<lambda>" else name


def _named(text: str, base: Base, argument: str) -> Quantity:
    draws = base.draws
    if not len(draws):
        raise QuantityError(
            argument,
            "an array or a callable, since the answer holds no draws",
            repr(text),
            "Pass draws= to weigh() to name parameters.",
        )
    found = draws.find(text, argument)
    if found.name in base.withheld:
        refuse_withheld(found.name, argument)
    values = element(draws.values_by_name[found.name], found.index)
    names = draws.dims.get(found.name, ("",) * (values.ndim - 1 + len(found.index)))
    dims = names[len(found.index) :]
    labels = {d: draws.labels[d] for d in dims if d in draws.labels}
    return Quantity(text, np.require(values, np.float64, ["C", "A"]), dims, labels)


def _refuse_bad_values(values: Array, base: Base, argument: str) -> None:
    low, high = extremes_of(values)
    if -math.inf < low and high < math.inf:
        return
    bad = np.isnan(values) | np.isinf(values)
    if bad.any():
        rows = np.flatnonzero(bad.reshape(len(values), -1).any(axis=1))
        raise QuantityError(
            argument,
            "finite values",
            f"{int(bad.sum())} NaN or infinite, first at {base.draws.where(int(rows[0]))}",
            "A mean over them has no value; ask for the probability of an event instead.",
        )


def _refuse_if_moved(base: Base, argument: str) -> None:
    """An array belongs to the draws that it was computed at, and nobody can see which these are."""
    if base.is_moved:
        raise QuantityError(
            argument,
            "a name, a text or a callable, since the draws have moved",
            "an array",
            'Pass a callable that gets {name: (n, *shape)}, such as lambda d: d["mu"] ** 2.',
        )


def _look_up(base: Base) -> Callable[[str, str], Array]:
    def look_up(name: str, argument: str) -> Array:
        if base.draws.find(name, argument).name in base.withheld:
            refuse_withheld(name, argument)
        return base.draws.look_up(name, argument)

    return look_up


# A name, perhaps with an element of it, and nothing else.
_NAME = re.compile(r"^\s*(?!(and|or|not)\s*$)[^\W\d][\w.]*(\[[^\[\]]*\])?\s*$")


def event_mask(event: Any, base: Base, *, is_computed: bool = False) -> Quantity:
    """
    Draws of an event as 0 and 1: a text, a boolean array, or a callable that returns one.

    `is_computed` says that an array was computed from these very draws.
    """
    draws = base.draws
    label = "event"
    if isinstance(event, str):
        if event in draws or _NAME.match(event):
            raise QuantityError(
                "event",
                'a comparison, such as "rate[3] > 0.12"',
                repr(event if len(event) <= 80 else event[:80] + "…"),
                "A name alone is a quantity, not an event.",
            )
        label, event = event, evaluate_event(event, _look_up(base))
    elif callable(event) and not hasattr(event, "shape"):
        label = _name_of(event, label)
        event = event(base.visible())
    elif not is_computed:
        _refuse_if_moved(base, "event")
    values = event if hasattr(event, "dims") else plain_array(event, "event")
    if values.dtype != np.bool_:
        raise QuantityError(
            "event",
            "True or False for each draw",
            f"dtype {values.dtype}",
            'Compare with something, as in lambda d: d["mu"] > 0.1.',
        )
    rows = np.require(stacked(event, draws, "event"), np.float64, ["C", "A"])
    return Quantity(label, rows, ("",) * (rows.ndim - 1), is_event=True)
