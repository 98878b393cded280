"""Changes: frozen lists of edits to the target, combined with ``&`` in any order."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, NoReturn

import numpy as np

from steelyard.errors import ArgumentTypeError, TruthValueError

__all__ = [
    "AddTerm",
    "Change",
    "Drop",
    "Edit",
    "LogRatio",
    "Power",
    "RaiseNoise",
    "SwapLoglik",
    "SwapPrior",
    "WeighData",
]


class Edit:
    """One edit of the target; what it does is told by its class."""


@dataclass(frozen=True, eq=False)
class SwapPrior(Edit):
    """Replace the prior term `key`."""

    key: Any
    density: Any

    @property
    def label(self) -> str:
        """The key as text."""
        return self.key if isinstance(self.key, str) else ", ".join(map(str, self.key))

    def __str__(self) -> str:
        return f"prior of {self.label} becomes {_text(self.density)}"


@dataclass(frozen=True, eq=False)
class SwapLoglik(Edit):
    """Replace the likelihood term `name`; None stands for the only one."""

    name: str | None
    source: Any

    def __str__(self) -> str:
        return f"likelihood of {self.name or 'the data'} replaced"


@dataclass(frozen=True, eq=False)
class AddTerm(Edit):
    """Add a likelihood term."""

    name: str
    source: Any

    def __str__(self) -> str:
        return f"data {self.name} added"


@dataclass(frozen=True, eq=False)
class Drop(Edit):
    """Leave out a term, or observations of one: `kind` is how integers are meant."""

    what: Any = None
    kind: str = ""
    by_dim: tuple[tuple[str, Any], ...] = ()

    def __str__(self) -> str:
        what = ", ".join(f"{d}={v}" for d, v in self.by_dim) if self.by_dim else _text(self.what)
        return f"without {what}"


@dataclass(frozen=True, eq=False)
class WeighData(Edit):
    """Multiply the log likelihood of a term, or of each of its observations, by a factor."""

    name: str
    factor: Any

    def __str__(self) -> str:
        return f"data {self.name} weighed by {_text(self.factor)}"


@dataclass(frozen=True, eq=False)
class RaiseNoise(Edit):
    """Multiply the sd of normal errors of the term `name` by `factor`; `sd` is what it was."""

    name: str
    factor: float
    sd: Any

    def __str__(self) -> str:
        return f"noise of {self.name} times {self.factor:g}"


@dataclass(frozen=True, eq=False)
class Power(Edit):
    """Take prior or likelihood, or terms of them, to a power."""

    prior: Any = 1.0
    likelihood: Any = 1.0

    def __str__(self) -> str:
        parts = [
            f"{kind} to the power {_text(value)}"
            for kind, value in (("prior", self.prior), ("likelihood", self.likelihood))
            if isinstance(value, Mapping) or value != 1
        ]
        return " and ".join(parts) or "powers of one"


@dataclass(frozen=True, eq=False)
class LogRatio(Edit):
    """
    Multiply the target by any function of the draws, given as log values.

    `predictive` names the predictive draws whose own ratio this is.
    """

    source: Any
    predictive: str | None = None

    def __str__(self) -> str:
        whose = f" of predictive draws {self.predictive}" if self.predictive else ""
        return f"target times a given ratio{whose}"


@dataclass(frozen=True, eq=False)
class Change:
    """
    A change of prior, likelihood or data.

    Made by :func:`steelyard.swap_prior`, :func:`steelyard.swap_loglik`, :func:`steelyard.drop`,
    :func:`steelyard.add`, :func:`steelyard.weigh_data`, :func:`steelyard.power`,
    :func:`steelyard.raise_noise` and :func:`steelyard.log_ratio`, and combined with ``&``. The
    order of the parts does not matter.

    Attributes
    ----------
    edits : tuple of Edit
        The single edits.

    Examples
    --------
    >>> import steelyard as sy
    >>> print(sy.swap_prior(tau=sy.HalfCauchy(0.05)) & sy.drop("gauge B"))
    prior of tau becomes HalfCauchy(0.05); without gauge B
    """

    edits: tuple[Edit, ...]

    def __and__(self, other: object) -> Change:
        if not isinstance(other, Change):
            raise ArgumentTypeError(
                "change",
                "a change on both sides of &",
                type(other).__name__,
                "Make it with swap_prior, swap_loglik, drop, add, weigh_data, power or log_ratio.",
            )
        return Change(self.edits + other.edits)

    __rand__ = __and__

    def __bool__(self) -> NoReturn:
        raise TruthValueError(
            "change",
            "changes combined with &",
            "bool(change), as in 'a and b'",
            "Write a & b.",
        )

    def __str__(self) -> str:
        return "; ".join(map(str, self.edits))

    def __repr__(self) -> str:
        return f"<Change: {self}>"


def _text(value: Any) -> str:
    if isinstance(value, Mapping):
        return ", ".join(f"{k}: {_text(v)}" for k, v in value.items())
    if isinstance(value, tuple):
        return ", ".join(_text(v) for v in value)
    if isinstance(value, np.ndarray):
        return f"an array of shape {value.shape}"
    if isinstance(value, float):
        return f"{value:g}"
    if callable(value) and not hasattr(value, "domains"):
        return "a callable"
    return str(value)
