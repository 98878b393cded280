"""
The Answer: everything that the weighted draws say of a target.

The file is long because the docstring of every method stands here, where users look for it.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from html import escape
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from steelyard.answers.attribution import attribution_of
from steelyard.answers.covariances import covariance_of
from steelyard.answers.distances import distance_of, divergence_of
from steelyard.answers.estimate import Estimate, Estimates
from steelyard.answers.estimating import Scale, mean_of, sd_of
from steelyard.answers.moved import (
    Moved,
    both_of,
    constant_of_moved,
    divergence_of_moved,
    joined_values,
    refuse_moved,
    shift_of_moved,
    with_both,
)
from steelyard.answers.probabilities import probability_of
from steelyard.answers.quantiles import ENDS, quantile_of, shortest_of
from steelyard.answers.quantities import Quantity, event_mask, labelled, read_quantity
from steelyard.answers.shifts import log_evidence_ratio_of, shift_of
from steelyard.answers.tabulate import tabulate
from steelyard.arrays import ReadOnly
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.changes import Change, Target
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError
from steelyard.table import Table
from steelyard.verdicts import Finding, Verdict
from steelyard.weighing.bounds import largest_ratio
from steelyard.weighing.resampling import Method, resample
from steelyard.weighing.summaries import probabilities
from steelyard.weighing.weigh import Weights

if TYPE_CHECKING:
    from steelyard.show.answer_plots import AnswerPlots

__all__ = ["Answer"]


@dataclass(frozen=True, eq=False)
class Answer:
    """
    What the draws of a fit say under a change.

    Made by ``Fit.reweigh``, ``Fit.base`` and :func:`steelyard.weigh`.

    A **quantity** is a name (``"mu"``, ``"rate[3]"``), an array shaped like the draws, a callable
    that gets ``{name: (n, *shape)}``, or ``{label: quantity}``; without one, all parameters. For
    several quantities the result is a dictionary of Estimates. An **event** is a boolean array or
    a callable that returns one, or a text such as ``"rate[3] > 0.12"``.

    Attributes
    ----------
    verdict : Verdict
        Judges base, support and weights; the verdict of an estimate is never better.
    log_weights, weights : numpy.ndarray
        Smoothed and normalised, base weights included; ``(chain, draw)`` or ``(n,)``.
    effective_size, entropy_size, largest_share : float
        Of those weights.
    tail_shape : float
        Of the raw weights.
    terms : mapping of str to numpy.ndarray
        Target minus base, term by term, on the log scale, before smoothing.
    change : Change or None
        The change; None for the base.
    ladder : Ladder or None
        What each rung of a repair cost and where it stopped; None without one. The draws of the
        later rungs are new ones.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(2)
    >>> draws = {"rate": rng.normal(0.10, 0.02, size=(4, 1000))}
    >>> fit = sy.Fit(draws, prior={"rate": sy.Normal(0.1, 0.1)})
    >>> answer = fit.reweigh(sy.swap_prior(rate=sy.Normal(0.08, 0.05)))
    >>> answer.mean("rate").verdict.is_sound
    True
    """

    _base: Base
    _weights: Weights
    _base_weights: Weights
    _findings: tuple[Finding, ...]
    change: Change | None = None
    _target: Target | None = None
    _moved: Moved | None = None
    ladder: Any = None

    @cached_property
    def _scale(self) -> Scale:
        return Scale(self._base, self._weights, self._base_weights, self._findings)

    @property
    def draws(self) -> Draws:
        """The draws, as the base or the repair has them; their weights are :attr:`weights`."""
        return self._base.draws

    @property
    def verdict(self) -> Verdict:
        """What may be said of the answer as a whole."""
        return Verdict(self._findings)

    @property
    def log_weights(self) -> Array:
        """Smoothed, normalised natural log weights, base weights included."""
        return self._base.draws.shaped(self._weights.log)

    @property
    def weights(self) -> Array:
        """Smoothed, normalised weights, base weights included."""
        return self._base.draws.shaped(self._weights.linear)

    @property
    def effective_size(self) -> float:
        """``1/Σw²``."""
        return self._weights.effective_size

    @property
    def entropy_size(self) -> float:
        """``exp(−Σ w log w)``."""
        return self._weights.entropy_size

    @property
    def largest_share(self) -> float:
        """Share of the heaviest draw."""
        return self._weights.largest_share

    @property
    def tail_shape(self) -> float:
        """Tail shape of the raw weights."""
        return self._weights.tail_shape

    @property
    def terms(self) -> Mapping[str, Array]:
        """Target minus base, term by term, on the natural log scale; none for moved draws."""
        is_own = self._target is not None and self._moved is None
        terms = self._target.terms if is_own and self._target is not None else {}
        return ReadOnly({k: self._base.draws.shaped(v) for k, v in terms.items()})

    def mean(self, quantity: Any = None) -> Any:
        """
        Mean under the target.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to estimate; all parameters by default.

        Returns
        -------
        Estimate or dict of Estimate
            In the quantity's own shape.

        Raises
        ------
        UnknownNameError, QuantityError, ShapeError
            Where the quantity cannot be evaluated on the draws.

        Notes
        -----
        ``μ̂ = Σ w f``; ``error² = LRV(z)/S`` with ``z_s = S w_s (f_s − μ̂)`` [1]_.

        References
        ----------
        .. [1] Geyer (1992), Statistical Science 7; Jones et al. (2006), JASA 101.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> sy.weigh(np.zeros(4)).mean([1.0, 2.0, 3.0, 4.0]).value
        2.5
        """
        return self._each(quantity, lambda q: mean_of(self._scale, q))

    def sd(self, quantity: Any = None) -> Any:
        """
        Standard deviation under the target.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to estimate; all parameters by default.

        Returns
        -------
        Estimate or dict of Estimate
            ``sqrt(Σ w (f − μ̂)²)``, in the quantity's own shape.

        Raises
        ------
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> sy.weigh(np.zeros(2)).sd([1.0, 3.0]).value
        1.0
        """
        return self._each(quantity, lambda q: sd_of(self._scale, q))

    def quantile(self, quantity: Any = None, probs: Any = (0.05, 0.5, 0.95)) -> Any:
        """
        Quantiles under the target.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to estimate; all parameters by default.
        probs : float or array_like
            Probabilities in [0, 1].

        Returns
        -------
        Estimate or dict of Estimate
            Shape ``(*probs.shape, *shape)``. The error is +inf, and the level refit, where the
            probability is within its own error of 0 or 1.

        Raises
        ------
        ArgumentError
            For a probability outside [0, 1].
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        See Also
        --------
        steelyard.weights.quantile : The same for arrays, with the equation.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> round(sy.weigh(np.zeros(101)).quantile(np.arange(101.0), 0.5).value, 9)
        50.0
        """
        p = probabilities(probs)
        return self._each(quantity, lambda q: quantile_of(self._scale, q, p))

    def interval(
        self,
        quantity: Any = None,
        mass: float = 0.95,
        kind: Literal["central", "shortest"] = "central",
    ) -> Any:
        """
        Interval that holds a given probability under the target.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to estimate; all parameters by default.
        mass : float
            Probability inside, in (0, 1).
        kind : {"central", "shortest"}
            Equal tails, or the shortest interval.

        Returns
        -------
        Estimate or dict of Estimate
            Shape ``(2, *shape)``: lower and upper limit, each with its Monte Carlo error.

        Raises
        ------
        ArgumentError
            For a mass outside (0, 1) or another kind.
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=4000)
        >>> sy.weigh(np.zeros(4000)).interval(x, 0.9).value.shape
        (2,)
        """
        if not isinstance(mass, int | float | np.floating) or not 0 < mass < 1:
            raise ArgumentError("mass", "a number between 0 and 1", repr(mass), "Write 0.95.")
        if not isinstance(kind, str) or kind not in ("central", "shortest"):
            raise ArgumentError("kind", "'central' or 'shortest'", repr(kind), "Choose one.")
        if kind == "shortest":
            return self._each(quantity, lambda q: shortest_of(self._scale, q, float(mass)))
        tails = np.array([(1 - mass) / 2, (1 + mass) / 2])
        return self._each(quantity, lambda q: quantile_of(self._scale, q, tails, ENDS))

    def prob(self, event: Any, level: float | None = None) -> Any:
        """
        Probability of an event under the target.

        Parameters
        ----------
        event : str, array_like, callable or mapping
            A text (``"rate[3] > 0.12 and mu < 0.2"``), a boolean array shaped like the draws, a
            callable that returns one, or ``{label: event}``.
        level : float, optional
            A level in (0, 1) that the probability is held against; the estimate's `decision` then
            says on which side it lies and how surely.

        Returns
        -------
        Estimate or dict of Estimate
            Where no draw lies in the event the value is NaN and `upper_bound` is set; where none
            lies outside, `lower_bound`.

        Raises
        ------
        QuantityError
            For an event that is not boolean, or a text that does not parse.
        ArgumentError
            For a level outside (0, 1).

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rate = np.random.default_rng(4).normal(0.12, 0.01, size=(4, 500))
        >>> fit = sy.Fit({"rate": rate}, prior={"rate": sy.Normal(0.1, 0.1)})
        >>> fit.base.prob("rate > 0.12", level=0.8).decision.above
        False
        """
        if isinstance(event, Mapping):
            if not event:
                raise QuantityError("event", "at least one", "an empty mapping", "Name one.")
            return Estimates({str(k): self.prob(v, level) for k, v in event.items()})
        if event is None:
            raise QuantityError("event", "an event", "None", 'Write "rate[3] > 0.12".')
        if level is not None and (
            isinstance(level, bool) or not isinstance(level, int | float | np.floating)
        ):
            raise ArgumentTypeError("level", "a number in (0, 1)", repr(level), "Write 0.8.")
        known = None if self._moved is not None else self._target
        bound = largest_ratio(self._base, known, self._weights.log_mean_ratio)
        return probability_of(self._scale, event_mask(event, self._base), level, bound)

    def shift(self, quantity: Any = None, of: Any = "mean") -> Any:
        """
        Difference from the base, with the error of the paired difference.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to compare; all parameters by default. An event (also as text) gives the shift
            of its probability, NaN where no draw lies inside or outside of it.
        of : {"mean", "sd"} or tuple
            What of it: ``"mean"``, ``"sd"`` or ``("quantile", p)``.

        Returns
        -------
        Estimate or dict of Estimate
            Target minus base.

        Raises
        ------
        ArgumentError
            For another `of`, or a probability outside (0, 1).
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        Notes
        -----
        One influence series for the pair, ``S w (f − μ₁) − S v (f − μ₀)`` with the base weights v:
        the noise that target and base share cancels.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=2000)
        >>> answer = sy.weigh(0.2 * x, {"x": x})
        >>> answer.shift("x").error < answer.mean("x").error
        True
        """
        if self._moved is not None:
            return shift_of_moved(self._scale, self._moved, quantity, of)
        return self._each(quantity, lambda q: shift_of(self._scale, q, of), events=True)

    def covariance(self, quantity: Any = None) -> Estimate:
        """
        Covariance matrix under the target.

        Parameters
        ----------
        quantity : str, array_like, callable, mapping or list of str, optional
            What to estimate; all parameters by default. All elements go into one matrix.

        Returns
        -------
        Estimate
            Shape ``(k, k)`` for k elements, labelled by their names.

        Raises
        ------
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`; also for more than 250 elements.

        Notes
        -----
        ``Σ w (f − μ)(g − ν)``, divided by one (not by ``n − 1``).

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=(1000, 2))
        >>> sy.weigh(np.zeros(1000)).covariance(x).value.shape
        (2, 2)
        """
        return covariance_of(self._scale, self._several(quantity))

    def distance(self, quantity: Any = None) -> Any:
        """
        Distances of the marginals under the target from those under the base.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What to compare; all parameters by default.

        Returns
        -------
        Distance or dict of Distance
            Wasserstein-1 in base sd, largest gap of the distribution functions (Kolmogorov), and
            the cumulative Jensen–Shannon distance [1]_, each an Estimate in the quantity's shape.

        Raises
        ------
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        References
        ----------
        .. [1] Nguyen, Vreeken (2015), ECML PKDD.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=4000)
        >>> distance = sy.weigh(0.5 * x).distance(x)
        >>> bool(0.4 < distance.wasserstein.value < 0.6)
        True
        """
        moved = self._moved
        if moved is not None:
            both = both_of(self._scale, moved)
            return with_both(
                self._scale, moved, quantity, lambda a, b: distance_of(both, joined_values(a, b))
            )
        several = labelled(quantity, self._base)
        if several is not None:
            return Estimates({k: distance_of(self._scale, q) for k, q in several.items()})
        return distance_of(self._scale, read_quantity(quantity, self._base))

    def attribute(self, quantity: Any = None, *, groups: Any = None, blocks: Any = None) -> Any:
        """
        What each term of the change contributes to the shift of a mean.

        Parameters
        ----------
        quantity : str, array_like, callable or mapping, optional
            What shifts; all parameters by default. An event counts too.
        groups : mapping, optional
            ``{label: list of terms}``: terms, as in :attr:`terms`, that are told together.
        blocks : mapping, optional
            ``{likelihood term: a label an observation}``: a term that is told by block.

        Returns
        -------
        Attribution or dict of Attribution
            Contributions that add up to the shift; what is left is told with its error.

        Raises
        ------
        ChangeError
            For the base, where a term is in two groups, and for draws that a repair has moved.
        UnknownNameError, ShapeError, ArgumentTypeError
            For groups or blocks that do not fit the change.

        Notes
        -----
        ``∫₀¹ Cov_λ(f, Δ_j) dλ`` along ``w^(λ) ∝ exp(λ ℓ)`` [1]_. Draws that the change rules out
        have a row of their own.

        References
        ----------
        .. [1] Gelman, Meng (1998), Statistical Science 13.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=(4, 500))
        >>> fit = sy.Fit({"x": x}, {"x": sy.Normal(0, 2)}, -0.1 * x[..., None] ** 2)
        >>> change = sy.swap_prior(x=sy.Normal(0.5, 2)) & sy.power(likelihood=0.9)
        >>> list(fit.reweigh(change).attribute("x").terms)
        ['prior: x', 'likelihood: likelihood']
        """
        if self._moved is not None:
            refuse_moved("attribute", "Attribute with fit.reweigh(change), or to a smaller change.")
        return self._each(
            quantity,
            lambda q: attribution_of(self._scale, self._target, q, groups, blocks),
            events=True,
        )

    @property
    def divergence(self) -> Estimate:
        """Kullback–Leibler divergence of the target from the base, in natural units."""
        if self._moved is not None:
            own = log_evidence_ratio_of(self._scale, None)
            constant = constant_of_moved(self._moved, own)
            return divergence_of_moved(self._scale, self._moved, constant)
        return divergence_of(self._scale)

    @property
    def log_evidence_ratio(self) -> Estimate:
        """
        Natural log of the target's normalising constant over the base's.

        For a swapped prior with normalised densities this is the log Bayes factor of the new
        prior against the old one; for dropped data, the log probability of the rest against all.
        Callables and arrays are taken to be normalised.

        Raises
        ------
        PriorError
            Where a changed prior term is improper, or taken to a power.
        """
        own = log_evidence_ratio_of(self._scale, self._target)
        return own if self._moved is None else constant_of_moved(self._moved, own)

    def table(
        self,
        quantities: Any = None,
        probs: Any = (0.05, 0.5, 0.95),
        *,
        event: Any = None,
        level: Any = None,
    ) -> Table:
        """
        One row for each element of each quantity.

        Parameters
        ----------
        quantities : str, array_like, callable or mapping, optional
            What to tabulate; all parameters by default.
        probs : float or array_like
            Probabilities of the quantile columns.
        event : str, array_like or callable, optional
            An event that decides, one yes or no a draw: its probability is the last row.
        level : float, optional
            The level in (0, 1) that the event's probability is held against.

        Returns
        -------
        Table
            Columns ``quantity``, one for each dimension, ``mean``, ``error``, ``low`` and ``high``
            (simultaneous 95 % Monte Carlo band of the means of all rows), ``sd``, quantiles;
            ``shift`` and ``shift_error`` of the mean (paired, not for the base); with an event
            ``needed``, the level, and ``right_side``, the Monte Carlo probability that the event's
            probability is on the side of it where it seems to be; ``tail_shape`` (of the mean),
            ``level`` (the worst in the row) and ``reasons``.

        Raises
        ------
        ArgumentError
            For a probability outside [0, 1], or an event without its level.
        UnknownNameError, QuantityError, ShapeError
            As for :meth:`mean`.

        Notes
        -----
        Rows rest on the same draws, so that their errors are dependent: the band is as wide as the
        largest of all studentised deviations asks for, found with multipliers on sixty stretches
        of the chains [1]_, and Student's t for each row's own degrees of freedom.

        References
        ----------
        .. [1] Chernozhukov, Chetverikov, Kato (2013), Annals of Statistics 41.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rate = np.random.default_rng(1).normal(0.10, 0.02, size=4000)
        >>> answer = sy.weigh(10 * rate, {"rate": rate})
        >>> table = answer.table("rate", event="rate > 0.1", level=0.5)
        >>> table["low"][0] < table["mean"][0] < table["high"][0]
        True
        """
        probs = probabilities(probs)
        if (event is None) != (level is None):
            raise ArgumentError(
                "level", "an event and its level together", "one of them", "State both, or neither."
            )
        asked = self._several(quantities)
        shifted = self.change is not None
        if event is None:
            return tabulate(self._scale, asked, probs, shifted=shifted)
        mask = event_mask(event, self._base)
        if mask.columns.shape[1] != 1 or mask.label in asked:
            raise ArgumentError(
                "event", "one yes or no a draw, not among the quantities", repr(event), "Name one."
            )
        decision = (mask, float(level), self.prob(event, level))
        return tabulate(self._scale, asked, probs, shifted=shifted, decision=decision)

    def resample(self, size: int, method: Method = "systematic", *, rng: Any = None) -> Draws:
        """
        Equally weighted draws.

        Parameters
        ----------
        size : int
            How many.
        method : str, optional
            As for :func:`steelyard.weights.resample`.
        rng : None, int or numpy.random.Generator, optional
            Seed or generator (SPEC 7).

        Returns
        -------
        Draws
            In the order of the base, so that chains stay recognisable.

        Raises
        ------
        ArgumentError, ArgumentTypeError
            As for :func:`steelyard.weights.resample`.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=1000)
        >>> sy.weigh(x, {"x": x}).resample(100, rng=7).size
        100
        """
        rows = resample(self._weights.log, size, method, rng=rng)
        return self._base.draws.take(rows)

    @property
    def plot(self) -> AnswerPlots:
        """Plots of the answer; call it for the default one."""
        from steelyard.show.answer_plots import AnswerPlots

        return AnswerPlots(self)

    def _each(self, quantity: Any, work: Callable[[Quantity], Any], *, events: bool = False) -> Any:
        several = labelled(quantity, self._base, events=events)
        if several is not None:
            return Estimates({label: work(q) for label, q in several.items()})
        return work(read_quantity(quantity, self._base, events=events))

    def _several(self, quantities: Any) -> dict[str, Quantity]:
        """Quantities by label, also for one alone and for a list of names."""
        several = labelled(quantities, self._base)
        if several is not None:
            return several
        one = read_quantity(quantities, self._base)
        return {one.label: one}

    def _figures(self) -> str:
        count = self._base.draws.size
        named = {math.inf: "not fitted", -math.inf: "none (no tail)"}
        shape = named.get(self.tail_shape, short(self.tail_shape))
        return (
            f"{count} draws, effective size {short(round(self.effective_size, 1))}, "
            f"largest share {short(self.largest_share)}, tail shape {shape}"
        )

    def __str__(self) -> str:
        change = "the base itself" if self.change is None else str(self.change)
        ladder = "" if self.ladder is None else f"\n{self.ladder}"
        return f"change: {change}\nweights: {self._figures()}\nverdict: {self.verdict}{ladder}"

    def __repr__(self) -> str:
        return f"<Answer {self.verdict.level}: {self._figures()}>"

    def _repr_html_(self) -> str:
        change = "the base itself" if self.change is None else str(self.change)
        head = f"<p>Change: {escape(change)}<br>Weights: {escape(self._figures())}</p>"
        rows = sum(v[0].size for v in self._base.draws.values())
        table = self.table()._repr_html_() if 0 < rows <= 60 else ""
        ladder = "" if self.ladder is None else self.ladder._repr_html_()
        return head + self.verdict._repr_html_() + ladder + table
