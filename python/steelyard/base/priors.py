"""Prior terms: a distribution, a frozen scipy distribution, a callable, or an array."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np

from steelyard.base.draws import Array, Draws
from steelyard.base.names import Reference, close_names
from steelyard.base.ratios import extremes_of
from steelyard.base.shapes import draw_rows
from steelyard.densities import Distribution
from steelyard.errors import ArgumentTypeError, PriorError, UnknownNameError

__all__ = [
    "PriorTerm",
    "callable_or_array",
    "known_term",
    "read_prior",
    "read_term",
    "same_density",
    "stated_prior",
]

Key = str | tuple[str, ...]


@dataclass(frozen=True, eq=False)
class PriorTerm:
    """
    One prior term: what it is about, and its density.

    Attributes
    ----------
    key : str or tuple of str
        As the user wrote it.
    density : Distribution, frozen scipy distribution, callable or numpy.ndarray
        As the user gave it; arrays are ``(n,)``, summed over trailing axes.
    """

    key: Key
    density: Any

    @property
    def label(self) -> str:
        """The key as text."""
        return self.key if isinstance(self.key, str) else ", ".join(self.key)

    @property
    def is_distribution(self) -> bool:
        return isinstance(self.density, Distribution)

    @property
    def is_proper(self) -> bool:
        """Whether the density is known to be improper (callables and arrays are taken at word)."""
        return not self.is_distribution or bool(self.density.is_proper)

    @property
    def is_discrete(self) -> bool | None:
        """Whether the density is one of counts; None for a callable or an array."""
        if isinstance(self.density, Distribution):
            return self.density.is_discrete
        return hasattr(self.density, "pmf") if _is_frozen(self.density) else None

    def value(self, draws: Draws) -> Array:
        """Draws of what the term is about: ``(n, *shape)``, or ``(n, d)`` for a joint term."""
        if isinstance(self.key, str):
            return draws.look_up(self.key, "prior")
        parts = [draws.look_up(name, "prior") for name in self.key]
        return np.concatenate([p.reshape(len(p), -1) for p in parts], axis=1)

    def resolved(self, draws: Draws) -> PriorTerm:
        """The term with a callable replaced by what it returns: a distribution or an array."""
        if isinstance(self.density, np.ndarray) or not callable_or_array(self.density):
            return self
        found = self.density(MappingProxyType(dict(draws.values_by_name)))
        if callable_or_array(found):
            found = draw_rows(found, draws, f"prior[{self.label!r}]")
        return PriorTerm(self.key, found)

    def log_density(self, draws: Draws) -> Array:
        """Log density at every draw, summed over trailing axes, shape ``(n,)``."""
        density = self.resolved(draws).density
        if isinstance(density, np.ndarray):
            return density
        value = self.value(draws)
        if isinstance(density, Distribution):
            out = density.log_density(value, look_up=draws.look_up)
        else:
            out = _frozen_log_density(density, value, f"prior[{self.label!r}]")
        if out.ndim == 1:
            return np.asarray(out)
        flat = out.reshape(draws.size, -1)
        # +inf beside −inf has no sum, and a row with it is reported as +inf.
        unbounded = (flat == np.inf).any(axis=1)
        return np.where(unbounded, np.inf, np.where(flat == np.inf, 0.0, flat).sum(axis=1))

    def log_density_checked(self, draws: Draws) -> Array:
        """The same, refusing NaN and +inf, which no density has at a draw."""
        return self.checked(self.log_density(draws), draws)

    def checked(self, out: Array, draws: Draws) -> Array:
        """Log densities of the term, unless one is NaN or +inf."""
        if extremes_of(out)[1] < math.inf:
            return out
        bad = np.isnan(out) | (out == np.inf)
        if bad.any():
            first = int(np.argmax(bad))
            raise PriorError(
                f"prior[{self.label!r}]",
                "log densities that are finite or −inf",
                f"{int(bad.sum())} of {len(out)} NaN or +inf, first {out[first]} at "
                f"{draws.where(first)}",
                "Check the density at that draw.",
            )
        return out


def _is_frozen(density: Any) -> bool:
    return not isinstance(density, Distribution) and (
        hasattr(density, "logpdf") or hasattr(density, "logpmf")
    )


def _frozen_log_density(density: Any, value: Array, argument: str) -> Array:
    try:
        try:
            out = density.logpdf(value)
        except AttributeError:  # discrete frozen distributions carry logpdf in name only
            out = density.logpmf(value)
    except ValueError as error:
        raise PriorError(
            argument,
            f"a distribution of values of shape {value.shape[1:] or '()'}",
            f"one that refuses them ({error})",
            "Match the distribution's dimension; a joint prior has a tuple of names as key.",
        ) from error
    out = np.asarray(out, dtype=np.float64)
    if out.ndim == 0 or out.shape[0] != value.shape[0]:
        raise PriorError(
            argument,
            f"log densities for {value.shape[0]} draws",
            f"shape {out.shape}",
            "Match the distribution's dimension; a joint prior has a tuple of names as key.",
        )
    return out


def read_prior(
    prior: Any, draws: Draws, *, must_contain: bool = True
) -> dict[str, PriorTerm] | None:
    """
    Read the prior terms of a fit and hold the draws against their supports.

    ``None`` and an empty mapping mean that the prior is not stated.
    """
    if prior is None:
        return None
    if not isinstance(prior, Mapping):
        raise ArgumentTypeError(
            "prior",
            "a mapping from parameters to prior terms",
            type(prior).__name__,
            'Write for instance {"mu": sy.Normal(0, 1)}.',
        )
    terms = {}
    for key, density in prior.items():
        term = read_term(key, density, draws, "prior")
        if must_contain and not callable_or_array(term.density):
            _refuse_outside(term, draws)
        terms[term.label] = term
    _refuse_overlap(terms, draws)
    return terms or None


def callable_or_array(density: Any) -> bool:
    """Whether a term has no support that is known before it is evaluated."""
    return not (isinstance(density, Distribution) or _is_frozen(density))


def read_term(key: Any, density: Any, draws: Draws, argument: str) -> PriorTerm:
    """One prior term, its names resolved and its kind checked."""
    if not (isinstance(key, str) or (isinstance(key, tuple) and all_text(key))):
        raise ArgumentTypeError(
            argument, "a name or a tuple of names as key", repr(key), "Name parameters."
        )
    where = f"{argument}[{key!r}]"
    if isinstance(density, type):
        raise ArgumentTypeError(
            where, "a term", f"the class {density.__name__}", "Give it its hyperparameters."
        )
    if isinstance(density, Distribution) or _is_frozen(density):
        for name in (key,) if isinstance(key, str) else key:
            draws.find(name, argument)
        if isinstance(density, Distribution):
            for name in density.names:
                draws.find(name, where)
        return PriorTerm(key, density)
    if callable(density):
        return PriorTerm(key, density)
    if hasattr(density, "__array__") or isinstance(density, list | tuple):
        return PriorTerm(key, draw_rows(density, draws, where))
    raise ArgumentTypeError(
        where,
        "a distribution, a frozen scipy.stats distribution, a callable or an array",
        type(density).__name__,
        'Write for instance sy.Normal(0, 1), or Normal("mu", "tau") with names of parameters.',
    )


def all_text(values: tuple[Any, ...]) -> bool:
    """Whether every entry is a text."""
    return len(values) > 0 and all(isinstance(v, str) for v in values)


def _refuse_outside(term: PriorTerm, draws: Draws) -> None:
    impossible = term.log_density_checked(draws) == -np.inf
    if impossible.any():
        raise PriorError(
            f"prior[{term.label!r}]",
            f"draws inside the support of {term.density}",
            f"{int(impossible.sum())} of {draws.size} outside, first at "
            f"{draws.where(int(np.argmax(impossible)))}",
            "The draws did not come from this prior: state the one that was fitted.",
        )


def _refuse_overlap(terms: Mapping[str, PriorTerm], draws: Draws) -> None:
    """A parameter with two distributions would have its prior counted twice."""
    seen: list[tuple[str, Reference]] = []
    for label, term in terms.items():
        if callable_or_array(term.density):
            continue
        for name in (term.key,) if isinstance(term.key, str) else term.key:
            found = draws.find(name)
            for other, before in seen:
                if found.overlaps(before):
                    raise PriorError(
                        f"prior[{label!r}]",
                        "each parameter in one term",
                        f"{name!r} stated here and in {other!r}",
                        "State one of them.",
                    )
            seen.append((label, found))


def stated_prior(terms: Mapping[str, PriorTerm] | None, argument: str) -> Mapping[str, PriorTerm]:
    """The prior terms, or an error that says that none was stated."""
    if not terms:
        raise PriorError(
            argument,
            "a fit whose prior is stated",
            "a fit without prior",
            "Pass prior={…} to Fit; a flat prior is sy.Flat().",
        )
    return terms


def known_term(key: object, terms: Mapping[str, Any], argument: str, kind: str) -> None:
    """Refuse a term that the base does not state."""
    if not isinstance(key, str | tuple) or key not in terms:
        raise UnknownNameError(
            argument, f"a stated {kind} term", repr(key), close_names(str(key), terms)
        )


def same_density(one: Any, other: Any) -> bool:
    """Whether two terms are the same object or equal distributions."""
    if one is other:
        return True
    return isinstance(one, Distribution) and isinstance(other, Distribution) and one == other
