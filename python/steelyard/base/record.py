"""The base: everything known of a fit, as a plain record that functions take."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.base.approximation import correct_approximation
from steelyard.base.draws import Array, Draws
from steelyard.base.likelihood import LoglikTerm, read_loglik
from steelyard.base.predictive import Visible, read_predictive
from steelyard.base.priors import PriorTerm, read_prior
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.base.reading import read_draws
from steelyard.base.shapes import draw_rows, stacked
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    RatioError,
    UnknownNameError,
)

__all__ = ["Base", "read_base", "read_log_weights"]


@dataclass(frozen=True, eq=False)
class Base:
    """
    A fit as a record.

    Attributes
    ----------
    draws : Draws
        The draws, derived quantities included.
    prior : mapping of str to PriorTerm, or None
        Prior terms by label; None where not stated.
    loglik : mapping of str to LoglikTerm, or None
        Likelihood terms by name; None where not stated.
    log_weights : numpy.ndarray or None
        Normalised log weights that the draws came with, shape ``(n,)``.
    stored_log_density : numpy.ndarray or None
        What the sampler saved, shape ``(n,)``.
    derived : mapping of str to callable or None
        Names that are not parameters, and how to recompute them where that is known.
    ordered : bool
        Whether the draws of a chain stand in the order they were drawn.
    predictive : mapping of str to str
        Names of predictive draws, and the likelihood term whose model made them.
    is_approximate : bool
        Whether the draws came from an approximation, which `log_weights` correct.
    withheld : frozenset of str
        Predictive draws that the change at hand makes unusable.
    """

    draws: Draws
    prior: Mapping[str, PriorTerm] | None = None
    loglik: Mapping[str, LoglikTerm] | None = None
    log_weights: Array | None = None
    stored_log_density: Array | None = None
    derived: Mapping[str, Callable[..., Any] | None] = field(default_factory=dict)
    ordered: bool = True
    predictive: Mapping[str, str] = field(default_factory=dict)
    is_approximate: bool = False
    withheld: frozenset[str] = frozenset()

    @property
    def parameters(self) -> tuple[str, ...]:
        """Names of the draws that are parameters."""
        others = {*self.derived, *self.predictive}
        return tuple(name for name in self.draws if name not in others)

    @property
    def reference(self) -> Array | None:
        """Log weights that log ratios are added to: those of the base, but for some pools."""
        pooling = self.draws.pooling
        if pooling is None or pooling.reference is None:
            return self.log_weights
        return pooling.reference

    def visible(self) -> Mapping[str, Array]:
        """The draws as callables receive them: read-only, withheld ones refused."""
        values = dict(self.draws.values_by_name)
        return Visible(values, self.withheld) if self.withheld else MappingProxyType(values)


def read_base(
    draws: Any,
    prior: Any = None,
    loglik: Any = None,
    *,
    stored_log_density: Any = None,
    log_weights: Any = None,
    names: Iterable[str] | None = None,
    chain: Any = None,
    derived: Iterable[str] | Mapping[str, Callable[..., Any]] = (),
    ordered: bool = True,
    predictive: Mapping[str, str] | None = None,
    approximation: Any = None,
) -> Base:
    """Read everything that `Fit` takes into one record; see there."""
    if not isinstance(ordered, bool | np.bool_):
        raise ArgumentTypeError("ordered", "True or False", repr(ordered), "Say which.")
    read = read_draws(draws, names, chain, ordered=bool(ordered))
    read, recipes = _with_derived(read, derived)
    stored = None
    if stored_log_density is not None:
        stored = draw_rows(stored_log_density, read, "stored_log_density")
    terms, likelihood = _prior(prior, read, approximation), read_loglik(loglik, read)
    weights = None if log_weights is None else read_log_weights(log_weights, read)
    if approximation is not None:
        correction = correct_approximation(approximation, terms, likelihood, read)
        weights = correction if weights is None else correction + weights
        refuse_bad_ratio(weights, read, "approximation")
    return Base(
        read,
        terms,
        likelihood,
        weights,
        stored,
        recipes,
        bool(ordered),
        read_predictive(predictive, read, likelihood),
        approximation is not None,
    )


def _prior(prior: Any, draws: Draws, approximation: Any) -> dict[str, PriorTerm] | None:
    # Draws of an approximation may leave the prior's support: they then weigh nothing.
    return read_prior(prior, draws, must_contain=approximation is None)


def read_log_weights(log_weights: Any, draws: Draws) -> Array:
    """Base log weights `(n,)`, checked; −inf is a weight of zero."""
    rows = stacked(log_weights, draws, "log_weights")
    if rows.ndim != 1:
        raise RatioError(
            "log_weights", "one number a draw", f"shape {np.shape(log_weights)}", "Sum them first."
        )
    out = np.require(rows, np.float64, ["C", "A"])
    refuse_bad_ratio(out, draws, "log_weights")
    return out


def _with_derived(draws: Draws, derived: Any) -> tuple[Draws, dict[str, Callable[..., Any] | None]]:
    if isinstance(derived, str):
        derived = (derived,)
    if not isinstance(derived, Iterable) or getattr(derived, "ndim", 1) == 0:
        raise ArgumentTypeError(
            "derived", "names, or {new name: callable}", repr(derived), "Name derived quantities."
        )
    if not isinstance(derived, Mapping):
        recipes: dict[str, Callable[..., Any] | None] = {str(name): None for name in derived}
        for name in recipes:
            if name not in draws:
                raise UnknownNameError(
                    "derived",
                    "names among the draws, or a mapping from new names to callables",
                    repr(name),
                    "Pass {name: callable} to have it computed.",
                )
        return draws, recipes
    values: dict[str, npt.NDArray[Any]] = dict(draws.values_by_name)
    for name, recipe in derived.items():
        if not callable(recipe):
            raise ArgumentTypeError(
                f"derived[{name!r}]", "a callable", type(recipe).__name__, "Or give names only."
            )
        if name in values:
            raise ArgumentError(
                f"derived[{name!r}]",
                "a name that is not among the draws yet",
                f"{name!r}, which is",
                "Rename it, or list it by name alone.",
            )
        rows = stacked(
            recipe(MappingProxyType(dict(draws.values_by_name))), draws, f"derived[{name!r}]"
        )
        out = np.require(rows, np.float64, ["C", "A"])
        if not np.isfinite(out).all():
            raise DrawsError(
                f"derived[{name!r}]",
                "finite values",
                f"{int((~np.isfinite(out)).sum())} NaN or infinite",
                "Mend the callable where it has no value.",
            )
        values[name] = out
    made = Draws(
        values, draws.starts, draws.has_chain_axis, draws.dims, draws.labels, draws.chain_names
    )
    return made, dict(derived)
