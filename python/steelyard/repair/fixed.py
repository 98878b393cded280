"""What can be evaluated at new points, and what is fixed to the draws it came with."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from types import MappingProxyType
from typing import Any, TypeVar

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.priors import PriorTerm
from steelyard.base.shapes import stacked
from steelyard.changes.merging import Draft, PriorTarget
from steelyard.changes.noise import NoisyTerm, raised
from steelyard.errors import DrawsError, LikelihoodError, PriorError, RatioError, ShapeError

__all__ = [
    "naming_what_is_lost",
    "prior_at",
    "ratio_at",
    "refuse_fixed",
    "values_at",
    "with_derived",
]

# Draws of whichever class.
AnyDraws = TypeVar("AnyDraws", bound=Draws)


def values_at(term: LoglikTerm, draws: Draws) -> Iterator[tuple[slice, Array]]:
    """Values of a term by the block; a noisier term finds its sd at these points."""
    if isinstance(term, NoisyTerm) and term.plain is not None:
        term = raised(term.plain, term.noise_factor, term.sd, draws)
    return term.blocks(draws)


def prior_at(edited: PriorTarget, old: Array, draws: Draws) -> Array:
    """Log density of an edited prior term, where that of the term before is `old`."""
    new = old if edited.given is None else edited.given.log_density_checked(draws)
    if edited.factor == 0:
        # To the power 0 a prior is flat on its own support, and still nothing outside of it.
        return np.where(new > -np.inf, 0.0, -np.inf)
    return edited.factor * new


def with_derived(record: Base, draws: AnyDraws) -> AnyDraws:
    """The draws with every derived quantity that has a recipe, computed from them."""
    recipes = {name: recipe for name, recipe in record.derived.items() if recipe is not None}
    if not recipes:
        return draws
    plain = MappingProxyType(dict(draws.values_by_name))
    values: dict[str, Any] = dict(draws.values_by_name)
    for name, recipe in recipes.items():
        rows = stacked(recipe(plain), draws, f"derived[{name!r}]")
        values[name] = np.require(rows, np.float64, ["C", "A"])
    return replace(draws, values_by_name=values)


def refuse_fixed(record: Base, draft: Draft) -> None:
    """What is given only as values at the base draws cannot be evaluated elsewhere."""
    if not record.loglik:
        raise LikelihoodError(
            "repair",
            "a fit whose log likelihood is stated",
            "a fit without",
            "Pass loglik= to Fit: a callable that gets {name: (n, *shape)}.",
        )
    for name, term in record.loglik.items():
        _refuse_array(term, f"loglik[{name!r}]")
    for label, stated in (record.prior or {}).items():
        _refuse_array_prior(stated, f"prior[{label!r}]")
    for label, prior in draft.prior.items():
        if prior.given is not None:
            _refuse_array_prior(prior.given, f"swap_prior[{label!r}]")
    for name, edited in draft.loglik.items():
        if edited.density is not edited.base and np.any(edited.factor):
            _refuse_array(
                edited.density, f"{'add' if edited.base is None else 'swap_loglik'}[{name!r}]"
            )
            _refuse_fixed_sd(edited.density, name)
    for source in draft.ratios:
        if not callable(source) or hasattr(source, "shape"):
            raise RatioError(
                "log_ratio",
                "a callable, which can be evaluated at new points",
                "an array of values at the base draws",
                "Pass a callable that gets {name: (n, *shape)} and returns log ratios.",
            )


def _refuse_array(term: LoglikTerm, argument: str) -> None:
    if not callable(term.source) or hasattr(term.source, "shape"):
        raise LikelihoodError(
            argument,
            "a callable, which can be evaluated at new points",
            "an array of values at the base draws",
            "Pass a callable that gets {name: (n, *shape)} and returns (n, *obs).",
        )


def _refuse_array_prior(term: PriorTerm, argument: str) -> None:
    if isinstance(term.density, np.ndarray):
        raise PriorError(
            argument,
            "a term that can be evaluated at new points",
            "an array of log densities at the base draws",
            "State it as a distribution, or as a callable that gets {name: (n, *shape)}.",
        )


def _refuse_fixed_sd(term: LoglikTerm, name: str) -> None:
    if isinstance(term, NoisyTerm) and term.plain is not None:
        _refuse_array(term.plain, f"loglik[{name!r}]")


def ratio_at(source: Callable[..., Any], draws: Draws) -> Array:
    """A given log ratio at points, checked."""
    rows = stacked(source(MappingProxyType(dict(draws.values_by_name))), draws, "log_ratio")
    if rows.ndim != 1:
        raise ShapeError(
            "log_ratio",
            f"one number a draw, shape ({draws.size},)",
            str(rows.shape),
            "Sum the log ratio over its trailing axes first.",
        )
    out = np.array(rows, dtype=np.float64)
    bad = np.isnan(out) | (out == np.inf)
    if bad.any():
        row = int(np.argmax(bad))
        raise RatioError(
            "log_ratio",
            "log ratios that are finite or −inf",
            f"{out[row]} at {draws.where(row)}",
            "Mend the log ratio there; −inf is a weight of zero.",
        )
    return out


class naming_what_is_lost:  # noqa: N801 — read as a statement
    """Turns the KeyError of a callable that asks for something that did not move into words."""

    def __init__(self, record: Base) -> None:
        self._lost = {
            **{k: "derived" for k, recipe in record.derived.items() if recipe is None},
            **dict.fromkeys(record.predictive, "predictive"),
        }

    def __enter__(self) -> None:
        return None

    def __exit__(self, kind: object, error: BaseException | None, trace: object) -> None:
        if isinstance(error, KeyError) and error.args and error.args[0] in self._lost:
            name = error.args[0]
            raise DrawsError(
                f"{self._lost[name]} {name!r}",
                "quantities that can be recomputed where draws move",
                "values at the base draws only",
                f"Pass derived={{{name!r}: callable}} to Fit, or compute it inside the callable.",
            ) from error
