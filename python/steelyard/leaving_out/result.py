"""LeaveOut: what every group does, and what may be said of it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.answers import Estimate
from steelyard.arrays import Frozen, frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.digits import rounded, short
from steelyard.leaving_out.calibration import Calibration, calibrate
from steelyard.leaving_out.contrast import Contrast, contrast
from steelyard.leaving_out.curing import with_refits
from steelyard.leaving_out.deletion import Deleted, Totals, group_findings
from steelyard.leaving_out.flipping import Flip, fewest_to_flip
from steelyard.leaving_out.groups import Groups, Positions
from steelyard.leaving_out.influence import Held, influence, influential
from steelyard.leaving_out.sampling import Sampled
from steelyard.leaving_out.scoring import (
    Ranks,
    Refits,
    level_counts,
    of_total,
    ranks_of,
    silenced,
    study_total,
)
from steelyard.leaving_out.tables import scores_table, untrusted_table
from steelyard.levels import LEVELS
from steelyard.table import Table
from steelyard.verdicts import Finding, Verdict

if TYPE_CHECKING:
    from steelyard.show.leave_out_plots import LeaveOutPlots

__all__ = ["LeaveOut"]


@dataclass(frozen=True, eq=False)
class LeaveOut(Frozen):
    """
    What leaving out each observation or group does.

    Made by ``Fit.leave_out`` and ``Fit.k_fold``.

    Attributes
    ----------
    log_score : Estimate
        Sum over groups of the log density of each given the others, with its Monte Carlo error.
    sampling_error : float
        How far that sum would vary with another sample of as many groups:
        ``sqrt(N var(score))``. It is no Monte Carlo error and does not shrink with more draws.
    by_group : Estimate
        Log score of each group, in the shape of the groups.
    in_sample : numpy.ndarray
        Log posterior predictive density of each group, itself included.
    optimism : Estimate
        In-sample minus left-out log score.
    tail_shape, effective_size : numpy.ndarray
        Of the weights of each group.
    verdict : Verdict
        What may be said of the total; that of single groups is ``by_group.verdict``.
    sampled : Sampled or None
        Which groups were left out where a sample was asked for.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(3)
    >>> readings = rng.normal(0.10, 0.03, size=40)
    >>> rate = rng.normal(readings.mean(), 0.03 / np.sqrt(40), size=(4, 500))
    >>> loglik = -0.5 * ((readings - rate[..., None]) / 0.03) ** 2 - np.log(0.03)
    >>> left = sy.Fit({"rate": rate}, loglik=loglik).leave_out()
    >>> left.verdict.is_sound, left.by_group.value.shape
    (True, (40,))
    """

    _base: Base
    _groups: Groups
    _chosen: Positions
    _found: Deleted
    _totals: Totals
    _notes: tuple[Finding, ...] = ()
    sampled: Sampled | None = None
    _refits: Refits = field(default_factory=dict)
    _held: Held | None = None

    @cached_property
    def by_group(self) -> Estimate:
        """Log score of each group."""
        score, error = self._scores, self._found.error.copy()
        for group, (_, own) in self._refits.items():
            error[self._chosen == group] = own
        with np.errstate(divide="ignore", invalid="ignore"):
            size = np.where(error > 0, self._found.spread / error**2, np.nan)
        dims, labels = self._axes
        return Estimate(
            score.reshape(self.shape),
            error.reshape(self.shape),
            self.tail_shape,
            self._group_verdict,
            size.reshape(self.shape),
            degrees=self._degrees.reshape(self.shape),
            label="left-out log score",
            dims=dims,
            labels=labels,
        )

    @property
    def _degrees(self) -> Array:
        """Of the intervals of the groups; the error of a refit is taken as known."""
        return np.where(np.isin(self._chosen, list(self._refits)), np.inf, self._found.degrees)

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape of the groups, or of the sample of them."""
        return self._groups.shape if self.sampled is None else (len(self._chosen),)

    @property
    def _axes(self) -> tuple[tuple[str, ...], Mapping[str, npt.NDArray[Any]]]:
        if self.sampled is None:
            return self._groups.dims, self._groups.labels
        return ("group",), {"group": np.array([self.name_of(i) for i in range(len(self._chosen))])}

    def name_of(self, row: int) -> str:
        """
        A text for one group: its label, or its position.

        Parameters
        ----------
        row : int
            Flat position among the groups that were left out.

        Returns
        -------
        str
            The text.
        """
        return self._groups.name(int(self._chosen[row]))

    @cached_property
    def _scores(self) -> Array:
        score = self._found.score.copy()
        for group, (value, _) in self._refits.items():
            score[self._chosen == group] = value
        return score

    @property
    def _more(self) -> float:
        """Variance of a total beside that of its series: of refits, and for weight unseen."""
        refits = sum(error**2 for _, error in self._refits.values())
        # Log scores are all too high where weight is unseen: allowances add up as they stand.
        unseen = self._found.unseen[~np.isin(self._chosen, list(self._refits))].sum()
        factor = 1.0 if self.sampled is None else self.sampled.of / self.sampled.size
        return float(factor**2 * (refits + unseen**2))

    @cached_property
    def _group_verdict(self) -> Verdict:
        findings = group_findings(self._found, self._base.draws.size, self.shape)
        cured = np.isin(self._chosen, list(self._refits)).reshape(self.shape)
        return Verdict([*silenced(findings, cured), *self._notes], self.shape)

    @cached_property
    def _ranks(self) -> Ranks:
        return ranks_of(self._group_verdict, self.shape)

    @cached_property
    def log_score(self) -> Estimate:
        """Sum of the log scores, with its Monte Carlo error."""
        value = float(self._scores.sum())
        if self.sampled is not None:
            value = self.sampled.total(self._scores)
        series = study_total(self._base, self._totals.left_out, self._totals.raw, self._more)
        findings = [*self._notes, *level_counts(self._ranks, "groups left out")]
        return of_total(value, series, findings, "left-out log score")

    @cached_property
    def optimism(self) -> Estimate:
        """In-sample minus left-out log score; the error is that of the pair."""
        gap = self._found.in_sample - self._scores
        value = float(gap.sum()) if self.sampled is None else self.sampled.simple_total(gap)
        totals = self._totals
        series = study_total(
            self._base,
            totals.in_sample - totals.left_out,
            totals.in_sample - totals.raw,
            self._more,
        )
        findings = [*self._notes, *level_counts(self._ranks, "groups left out")]
        return of_total(value, series, findings, "optimism")

    @property
    def in_sample(self) -> Array:
        """Log posterior predictive density of each group, itself included."""
        return frozen(self._found.in_sample.reshape(self.shape))

    @property
    def tail_shape(self) -> Array:
        """Tail shape of the raw weights of each group."""
        return frozen(self._found.tail_shape.reshape(self.shape))

    @property
    def effective_size(self) -> Array:
        """Effective size of the smoothed weights of each group."""
        return frozen(self._found.effective_size.reshape(self.shape))

    @property
    def sampling_error(self) -> float:
        """``sqrt(N var(score))``; NaN for a single group."""
        scores = self._scores
        if len(scores) < 2:
            return math.nan
        if self.sampled is not None:
            return math.sqrt(self._groups.count * self.sampled.variance(scores))
        with np.errstate(over="ignore"):
            return math.sqrt(self._groups.count * float(np.var(scores, ddof=1)))

    @property
    def verdict(self) -> Verdict:
        """What may be said of the total."""
        return self.log_score.verdict

    def influence(self, quantities: Any = None) -> Estimate:
        """
        What leaving out each group does to the means of quantities, in base sd.

        Parameters
        ----------
        quantities : str, array_like, callable or mapping, optional
            What to look at; all parameters by default. Events count as their probabilities.

        Returns
        -------
        Estimate
            Shape ``(*groups, quantities)``: ``(Σ w f − mean f)/sd f``; NaN for a quantity that does
            not vary. The names of the quantities are the labels of the last dimension.

        Raises
        ------
        UnknownNameError, QuantityError, ShapeError
            Where a quantity cannot be evaluated on the draws.

        Notes
        -----
        No matrix of weights is kept. Errors are those of independent draws over the efficiency of
        the base draws for f. The tail shape is that of the weights.

        References
        ----------
        .. [1] Gelfand, Dey, Chang (1992), Bayesian Statistics 4.
        """
        return influence(self, quantities)

    def influential(self, quantity: Any, n: int = 10) -> Table:
        """
        The groups whose absence moves one quantity most.

        Parameters
        ----------
        quantity : str, array_like or callable
            A single number for each draw, or an event.
        n : int, optional
            How many groups to list.

        Returns
        -------
        Table
            The largest shifts first, with their errors and levels.

        Raises
        ------
        ArgumentError
            For an `n` below 1.
        QuantityError
            For a quantity with several elements.
        """
        return influential(self, quantity, n)

    def fewest_to_flip(self, event: Any, level: float, *, most: int = 20) -> Flip:
        """
        A small set of groups whose joint absence puts a probability on the other side of a level.

        Parameters
        ----------
        event : str, array_like or callable
            The event.
        level : float
            The level in (0, 1) that decides.
        most : int, optional
            How many groups may go at most.

        Returns
        -------
        Flip
            Whether it flips, which groups that takes, and the re-weighed probability.

        Raises
        ------
        ArgumentError
            For a level outside (0, 1), or `most` below 1.
        ChangeError
            Where the log score rests on conditional terms, which do not add up over groups.
        """
        return fewest_to_flip(self, event, level, most)

    def calibration(
        self,
        observed: Any = None,
        predictive: Any = None,
        *,
        cdf: Any = None,
        cdf_below: Any = None,
        level: float = 0.95,
        rng: Any = None,
    ) -> Calibration:
        """
        Where each observation falls in its left-out predictive distribution.

        Parameters
        ----------
        observed : array_like, optional
            The observations, in the shape of the groups; needed with `predictive`.
        predictive : array_like, optional
            Predictive draws ``(chain, draw, *obs)`` or ``(n, *obs)``.
        cdf : array_like, optional
            Instead: ``P(Y ≤ y_i | θ_s)``, shaped like predictive draws.
        cdf_below : array_like, optional
            For counts ``P(Y < y_i | θ_s)``; without it the distribution is continuous.
        level : float, optional
            Probability of the simultaneous band.
        rng : None, int or numpy.random.Generator, optional
            For the randomisation of ties and counts (SPEC 7).

        Returns
        -------
        Calibration
            The transforms, which are uniform for a calibrated model, and a band for them.

        Raises
        ------
        ArgumentError, ShapeError
            Where neither or both of `predictive` and `cdf` come, or shapes disagree.
        """
        return calibrate(self, observed, predictive, cdf, cdf_below, level, rng)

    def contrast(self, other: LeaveOut) -> Contrast:
        """
        Difference to another model on the same observations.

        Parameters
        ----------
        other : LeaveOut
            The other model's.

        Returns
        -------
        Contrast
            This model's log score minus the other's, with its errors and a sentence.

        Raises
        ------
        ShapeError, ArgumentError
            Where the observations or groups differ.
        """
        return contrast(self, other)

    @property
    def plot(self) -> LeaveOutPlots:
        """Plots; calling it draws where trust is thin."""
        from steelyard.show.leave_out_plots import LeaveOutPlots

        return LeaveOutPlots(self)

    def untrusted(self) -> Table:
        """
        The groups whose weights cannot be relied on, worst first, and what would cure each.

        Returns
        -------
        Table
            One row a group below sound.
        """
        return untrusted_table(self)

    def with_refits(self, log_scores: Mapping[Any, Any]) -> LeaveOut:
        """
        The same with true refits of some groups folded in.

        Parameters
        ----------
        log_scores : mapping
            From a group (label, position or tuple of positions) to its log score from a fit
            without it: a number, or an Estimate with its Monte Carlo error.

        Returns
        -------
        LeaveOut
            A new one; the reasons against the weights of these groups are gone.

        Raises
        ------
        UnknownNameError
            For a group that is not there.
        ArgumentError
            For a log score that is not a finite number.
        """
        return with_refits(self, log_scores)

    def table(self) -> Table:
        """
        One row a group: log score, error, in-sample score, tail shape, effective size, level.

        Returns
        -------
        Table
            In the order of the groups.
        """
        return scores_table(self)

    def __str__(self) -> str:
        total, gap, ranks = self.log_score, self.optimism, self._ranks
        counts = [f"{int((ranks == rank).sum()):,} {LEVELS[rank]}" for rank in (2, 1, 0)]
        sampling = short(float(f"{self.sampling_error:.2g}"))
        lines = [
            f"left-out log score {rounded(total.value, total.error)} "
            f"± {rounded(total.error, total.error)} Monte Carlo, ± {sampling} sampling "
            f"({total.verdict.level})",
            f"optimism {rounded(gap.value, gap.error)} ± {rounded(gap.error, gap.error)}",
            f"{len(self._chosen):,} groups: {', '.join(c for c in counts if c[0] != '0')}",
        ]
        if self.sampled is not None:
            lines.insert(1, str(self.sampled))
        return "\n".join(lines)

    def __repr__(self) -> str:
        return f"<LeaveOut {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"
