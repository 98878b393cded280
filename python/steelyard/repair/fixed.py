"""What can be evaluated at new points, and what is fixed to the draws it came with."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.priors import PriorTerm
from steelyard.changes.merging import Draft
from steelyard.changes.noise import NoisyTerm, raised
from steelyard.errors import LikelihoodError, PriorError, RatioError

__all__ = ["refuse_fixed", "values_at"]


def values_at(term: LoglikTerm, draws: Draws) -> Iterator[tuple[slice, Array]]:
    """Values of a term by the block; a noisier term finds its sd at these points."""
    if isinstance(term, NoisyTerm) and term.plain is not None:
        term = raised(term.plain, term.noise_factor, term.sd, draws)
    return term.blocks(draws)


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
