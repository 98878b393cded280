"""Is the model calibrated: where each observation falls in its left-out predictive distribution."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.arrays import Frozen, plain_array
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm, read_loglik_term
from steelyard.digits import short
from steelyard.errors import ArgumentError, ShapeError
from steelyard.leaving_out.deletion import deletion_weights, setting_of
from steelyard.leaving_out.groups import Positions
from steelyard.leaving_out.sampling import generator_of
from steelyard.leaving_out.uniformity import band_of, grid_of
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["Calibration", "calibrate"]


@dataclass(frozen=True, eq=False)
class Calibration(Frozen):
    """
    Probability integral transforms of observations left out.

    Attributes
    ----------
    transform : numpy.ndarray
        ``P(Y ≤ y_i)`` under the left-out predictive distribution, in the shape of the groups;
        randomised between `below` and `reached` for counts and ties.
    below, reached : numpy.ndarray
        ``P(Y < y_i)`` and ``P(Y ≤ y_i)``.
    level : float
        Probability of the band.
    grid : numpy.ndarray
        Where the distribution of the transforms is held against the band.
    lower, upper : numpy.ndarray
        The band: for a calibrated model the share of transforms up to each point of the grid stays
        inside everywhere with probability `level`.
    verdict : Verdict
        That of the weights of the groups, an array.
    """

    transform: Array
    below: Array
    reached: Array
    level: float
    grid: Array
    lower: Array
    upper: Array
    verdict: Verdict

    @cached_property
    def share(self) -> Array:
        """Share of the transforms up to each point of the grid."""
        ordered = np.sort(self.transform.reshape(-1))
        return np.searchsorted(ordered, self.grid, side="right") / ordered.size

    @cached_property
    def share_smooth(self) -> Array:
        """
        The same without randomisation: counts spread evenly between `below` and `reached`.

        References
        ----------
        .. [1] Czado, Gneiting, Held (2009), Biometrics 65.
        """
        low, high = self.below.reshape(-1, 1), self.reached.reshape(-1, 1)
        width = np.where(high > low, high - low, 1.0)
        held = np.clip((self.grid - low) / width, 0.0, 1.0)
        return np.asarray(np.where(high > low, held, self.grid >= high).mean(axis=0))

    @property
    def is_inside(self) -> bool:
        """Whether the shares stay inside the band everywhere."""
        return bool(((self.share >= self.lower) & (self.share <= self.upper)).all())

    @property
    def sentence(self) -> str:
        """What the transforms say, in words."""
        if self.is_inside:
            return (
                f"The {self.transform.size:,} transforms stay inside the "
                f"{100 * self.level:g} % band: nothing against calibration."
            )
        gap = np.maximum(self.share - self.upper, self.lower - self.share)
        worst = int(np.argmax(gap))
        spread = float(np.var(self.transform)) * 12
        mean = float(np.mean(self.transform))
        shift = abs(mean - 0.5) * np.sqrt(12 * self.transform.size)
        if shift > 3:
            side = "below" if mean < 0.5 else "above"
            what = f"observations fall {side} what is predicted (mean transform {short(mean)})"
        elif spread > 1:
            what = "predictions are too narrow: transforms crowd at both ends"
        else:
            what = "predictions are too wide, or of another shape: transforms crowd inside"
        return (
            f"Outside the {100 * self.level:g} % band, most at {short(float(self.grid[worst]))}: "
            f"{what}."
        )

    @property
    def plot(self) -> Any:
        """Draw the share of transforms minus its expectation, with the band; takes ``ax=``."""
        from steelyard.show.leave_out_plots import CalibrationPlots

        return CalibrationPlots(self)

    def __str__(self) -> str:
        return self.sentence

    def __repr__(self) -> str:
        return f"<Calibration {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def calibrate(
    left: LeaveOut,
    observed: Any,
    predictive: Any,
    cdf: Any,
    cdf_below: Any,
    level: float,
    rng: Any,
) -> Calibration:
    """Transforms and their band; see ``LeaveOut.calibration``."""
    if (predictive is None) == (cdf is None):
        raise ArgumentError(
            "predictive",
            "predictive draws, or cdf= values at the observations",
            "both" if cdf is not None else "neither",
            "Pass one of them.",
        )
    if not isinstance(level, int | float | np.floating) or not 0 < level < 1:
        raise ArgumentError("level", "a number between 0 and 1", repr(level), "Write 0.95.")
    generator = generator_of(rng)
    if predictive is not None:
        below, reached = _from_draws(left, _observed(left, observed), predictive)
    else:
        below, reached = _from_cdf(left, cdf, cdf_below)
    u = generator.random(len(below))
    transform = below + u * (reached - below)
    grid = grid_of(len(transform))
    lower, upper = band_of(len(transform), grid, float(level))
    verdict = left.by_group.verdict
    shape = left.shape
    return Calibration(
        transform.reshape(shape),
        below.reshape(shape),
        reached.reshape(shape),
        float(level),
        grid,
        lower,
        upper,
        verdict,
    )


def _observed(left: LeaveOut, observed: Any) -> Array:
    if observed is None:
        raise ArgumentError("observed", "the observations", "nothing", "Pass them with the draws.")
    values = plain_array(observed, "observed", "fiub").astype(np.float64)
    if values.shape != left._groups.shape:
        raise ShapeError(
            "observed",
            f"one value a group, shape {left._groups.shape}",
            str(values.shape),
            "Leave out single observations, and pass each of them.",
        )
    if np.isnan(values).any():
        raise ArgumentError("observed", "numbers", "NaN", "Leave those observations out before.")
    return values.reshape(-1)[left._chosen]


def _read(left: LeaveOut, source: Any, argument: str) -> LoglikTerm:
    term = read_loglik_term(argument, source, left._base.draws, argument)
    if term.obs_shape != left._groups.shape:
        raise ShapeError(
            argument,
            f"a value for each draw and group, groups of shape {left._groups.shape}",
            str(term.obs_shape),
            "Leave out single observations, and pass draws for each of them.",
        )
    return term


def _columns(term: LoglikTerm, base: Base, positions: Positions) -> Array:
    return np.concatenate([block[:, positions] for _, block in term.blocks(base.draws)])


def _from_draws(left: LeaveOut, observed: Array, predictive: Any) -> tuple[Array, Array]:
    term = _read(left, predictive, "predictive")
    below, reached = np.empty(len(observed)), np.empty(len(observed))
    for part, w, values in _weighted(left, term):
        y = observed[part]
        below[part] = (w * (values < y)).sum(axis=0)
        reached[part] = below[part] + (w * (values == y)).sum(axis=0)
    return below, np.minimum(reached, 1.0)


def _from_cdf(left: LeaveOut, cdf: Any, cdf_below: Any) -> tuple[Array, Array]:
    reached = _expected(left, _read(left, cdf, "cdf"))
    if cdf_below is None:
        return reached, reached
    below = _expected(left, _read(left, cdf_below, "cdf_below"))
    if (below > reached + 1e-12).any():
        raise ArgumentError(
            "cdf_below",
            "no more than cdf",
            "larger values",
            "Pass P(Y < y) there, P(Y ≤ y) as cdf.",
        )
    return np.minimum(below, reached), reached


def _expected(left: LeaveOut, term: LoglikTerm) -> Array:
    out = np.empty(len(left._chosen))
    for part, w, values in _weighted(left, term):
        outside = values[(values < 0) | (values > 1)]
        if outside.size:
            raise ArgumentError(
                term.name,
                "probabilities from 0 to 1",
                short(float(outside[0])),
                "Pass distribution functions.",
            )
        out[part] = (w * values).sum(axis=0)
    return np.clip(out, 0.0, 1.0)


def _weighted(left: LeaveOut, term: LoglikTerm) -> Any:
    """Weights of each block of groups beside values of the same groups."""
    setting = setting_of(left._base)
    for part, held, _ in left._groups.blocks(left._base.draws, left._chosen):
        log_weights, _ = deletion_weights(setting, held)
        yield part, np.exp(log_weights), _columns(term, left._base, left._chosen[part])
