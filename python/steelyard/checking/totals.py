"""Log prior and log likelihood at every draw, term by term, as the base claims them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array, Draws

__all__ = ["likelihood_totals", "parameter_columns", "prior_totals", "with_values"]


def prior_totals(base: Base, draws: Draws | None = None) -> dict[str, Array]:
    """Log density of every prior term, ``(n,)`` each, at the base's draws or at others."""
    at = base.draws if draws is None else draws
    return {label: term.log_density(at) for label, term in (base.prior or {}).items()}


def likelihood_totals(base: Base) -> dict[str, Array]:
    """Log likelihood of every term, summed over observations, ``(n,)`` each."""
    return {name: term.total(base.draws) for name, term in (base.loglik or {}).items()}


def parameter_columns(base: Base) -> tuple[list[str], Array]:
    """All elements of all parameters as columns ``(n, d)``, with their names."""
    names, columns = [], []
    for name in base.parameters:
        values = base.draws.values_by_name[name].reshape(base.draws.size, -1)
        single = base.draws.values_by_name[name].ndim == 1
        names += [name] if single else [f"{name}[{i}]" for i in range(values.shape[1])]
        columns.append(values)
    return names, np.concatenate(columns, axis=1)


def with_values(draws: Draws, values: Mapping[str, Array]) -> Draws:
    """The draws with some parameters replaced."""
    return replace(draws, values_by_name={**draws.values_by_name, **values})
