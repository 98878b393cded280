"""A likelihood term with normal errors, and its values under more or less noise."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.base.draws import Array, Draws
from steelyard.base.likelihood import LoglikTerm
from steelyard.errors import ArgumentError, ArgumentTypeError, ChangeError, ShapeError

__all__ = ["NoisyTerm", "raised"]

_C = 0.5 * math.log(2 * math.pi)


@dataclass(frozen=True, eq=False)
class NoisyTerm(LoglikTerm):
    """
    The term `plain` with the sd of its normal errors multiplied.

    Attributes
    ----------
    plain : LoglikTerm
        The term as it stands in the base.
    noise_factor : float
        What the sd is multiplied by.
    log_sd : numpy.ndarray
        Log of the old sd, broadcasts against ``(n, observations)``.
    sd : float, array_like, str or callable
        The old sd as it was given, which can be found at other points.
    """

    plain: LoglikTerm | None = None
    noise_factor: float = 1.0
    log_sd: Array | None = None
    sd: Any = None

    def blocks(self, draws: Draws) -> Iterator[tuple[slice, Array]]:
        """Values ``(L + log s + c)/f² − log(f s) − c`` by block."""
        if self.plain is None or self.log_sd is None:
            raise ChangeError(self.name, "a term to make noisier", "none", "Use raise_noise.")
        f = self.noise_factor
        for part, block in self.plain.blocks(draws):
            log_sd = self.log_sd[part] if len(self.log_sd) == draws.size else self.log_sd
            yield part, (block + log_sd + _C) / f**2 - math.log(f) - log_sd - _C


def raised(term: LoglikTerm, factor: float, sd: Any, draws: Draws) -> NoisyTerm:
    """The term under noise times `factor`; `sd` as in `raise_noise`."""
    if term.is_total:
        raise ChangeError(
            f"raise_noise[{term.name!r}]",
            "a term by observation",
            "a total",
            "Give the log likelihood by observation, or swap_loglik the total.",
        )
    log_sd = np.log(_sd_rows(sd, term, draws))
    return NoisyTerm(
        term.name,
        term.source,
        term.obs_shape,
        term.has_chain_axis,
        term.dims,
        term.labels,
        term,
        factor,
        log_sd,
        sd,
    )


def _called(sd: Any, draws: Draws, where: str) -> Array:
    values = plain_array(sd(MappingProxyType(dict(draws.values_by_name))), where)
    if not values.ndim:
        raise ShapeError(
            where, f"({draws.size},) or more axes", "()", "For one number give it as sd."
        )
    return values


def _sd_rows(sd: Any, term: LoglikTerm, draws: Draws) -> Array:
    """The sd as ``(1 or n, 1 or observations)``, positive."""
    where = f"raise_noise[{term.name!r}]: sd"
    if isinstance(sd, str):
        values = draws.look_up(sd, where)
    elif callable(sd):
        values = _called(sd, draws, where)
    else:
        values = plain_array(sd, where)
        if values.ndim and values.shape != term.obs_shape:
            raise ShapeError(
                where,
                f"one number, or one an observation, shape {term.obs_shape}",
                str(values.shape),
                "For an sd that is a parameter give its name.",
            )
        values = values.reshape(1, -1)
    if values.dtype.kind not in "fiu":
        raise ArgumentTypeError(where, "numbers", f"dtype {values.dtype}", "Convert them.")
    bad = ~(np.isfinite(values) & (values > 0))
    if bad.any():
        raise ArgumentError(
            where,
            "positive numbers",
            f"{float(values[bad].flat[0]):g}",
            "Give the sd, not its log.",
        )
    if values.ndim == 1:
        values = values[:, None]
    rows = values.reshape(len(values), -1)
    if len(rows) not in (1, draws.size) or rows.shape[1] not in (1, term.observations):
        raise ShapeError(
            where,
            f"({draws.size},) or ({draws.size}, *{term.obs_shape})",
            str(values.shape),
            "Give one sd a draw, or one for each draw and observation.",
        )
    return np.asarray(rows, dtype=np.float64)
