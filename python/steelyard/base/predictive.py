"""Predictive draws: usable only while the model that made them stands."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from steelyard.base.draws import Array, Draws
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.names import close_names
from steelyard.errors import ArgumentTypeError, QuantityError, UnknownNameError

__all__ = ["Visible", "read_predictive", "refuse_withheld"]


def read_predictive(
    predictive: Any, draws: Draws, loglik: Mapping[str, LoglikTerm] | None
) -> dict[str, str]:
    """Read ``{name of predictive draws: likelihood term that made them}``."""
    if predictive is None:
        return {}
    if not isinstance(predictive, Mapping):
        raise ArgumentTypeError(
            "predictive",
            "{name of predictive draws: likelihood term}",
            type(predictive).__name__,
            'Write for instance {"next reading": "gauge B"}.',
        )
    terms = loglik or {}
    for name, term in predictive.items():
        if name not in draws:
            raise UnknownNameError(
                "predictive", "names among the draws", repr(name), close_names(str(name), draws)
            )
        if term not in terms:
            raise UnknownNameError(
                f"predictive[{name!r}]",
                "a stated likelihood term",
                repr(term),
                close_names(str(term), terms),
            )
    return {str(name): str(term) for name, term in predictive.items()}


def refuse_withheld(name: str, argument: str) -> None:
    """The error for predictive draws whose model has changed."""
    raise QuantityError(
        argument,
        "draws whose model the change leaves alone",
        f"predictive draws {name!r}, made under the old model",
        "Combine the change with log_ratio(p_new/p_old on the log scale, "
        f"predictive={name!r}), or draw them anew.",
    )


class Visible(Mapping[str, Array]):
    """Draws by name, with those refused that a change has made unusable."""

    def __init__(self, values: Mapping[str, Array], withheld: frozenset[str]) -> None:
        self._values = values
        self._withheld = withheld

    def __getitem__(self, name: str) -> Array:
        if name in self._withheld:
            refuse_withheld(name, "quantity")
        return self._values[name]

    def __iter__(self) -> Iterator[str]:
        return (name for name in self._values if name not in self._withheld)

    def __len__(self) -> int:
        return len(self._values) - len(self._withheld)
