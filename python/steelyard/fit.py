"""
The face on top: a fit, whose verbs are one line each.

The file is long because the docstring of every verb stands here, where users look for it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from functools import cached_property
from html import escape
from pathlib import Path
from typing import TYPE_CHECKING, Any

from steelyard.answers import Answer, Estimate, base_answer, reweigh
from steelyard.base import Base, Draws, read_base
from steelyard.changes import Change
from steelyard.checking import Findings, check

# Verbs import what they need when they are called: most scripts use few of them.
if TYPE_CHECKING:
    from steelyard.leaving_out import LeaveOut, LookAhead
    from steelyard.planning import Arrival, MoreDraws, RefitPlan, RefitValue, Triage
    from steelyard.repair.pooled import Pooled
    from steelyard.sensitivity import (
        Bounds,
        Local,
        Perturbation,
        PriorFactors,
        Pull,
        Reach,
        Statements,
        Sweep,
        TippingPoint,
    )
    from steelyard.show.pool_plots import PoolPlots
    from steelyard.table import Table

__all__ = ["Fit", "Pool", "pool"]


class Fit:
    """
    Posterior draws, and the prior terms and log likelihood that they came from.

    Parameters
    ----------
    draws : mapping, xarray.Dataset, data frame, array_like or Draws
        Named ``(chain, draw, *shape)`` arrays, or ``(n, *shape)`` arrays of one chain; or one
        ``(n, d)`` or ``(chain, draw, d)`` array with `names`. Nothing is thinned or dropped.
    prior : mapping, optional
        From a parameter, an element (``"rate[3]"``), a tuple of names (joint) or any label (for
        callables and arrays) to a prior term: a distribution such as ``sy.Normal("mu", "tau")``,
        a frozen scipy.stats distribution, a callable that gets ``{name: (n, *shape)}`` and returns
        log densities or a distribution, or an array of log densities. None and ``{}`` mean not
        stated; a flat prior is ``sy.Flat()``.
    loglik : array_like, callable or mapping, optional
        Log likelihood values ``(chain, draw, *obs)`` or ``(n, *obs)``, or a callable that gives
        them; one, or named terms. Without observation axes a term is a total.
    stored_log_density : array_like, optional
        Log density that the sampler saved, one value a draw.
    log_weights : array_like, optional
        Log weights of draws that are weighted already, up to a constant.
    names : iterable of str, optional
        Names for the last axis of an array of draws.
    chain : array_like or str, optional
        For stacked draws the chain of each, chains together; for a frame the name of a column.
    derived : iterable of str, or mapping, optional
        Names of draws that are not parameters, or ``{new name: callable}``.
    predictive : mapping, optional
        ``{name of predictive draws: likelihood term whose model made them}``: they are refused
        where a change replaces that model without bringing their own ratio.
    approximation : array_like or callable, optional
        Log density of the distribution that the draws really came from, where that is an
        approximation of the posterior (complete or up to a constant); the base is then weighted
        by posterior over approximation, and these weights are smoothed and judged like any.
    ordered : bool, optional
        False for draws without time order (shuffled, nested sampling, independent): errors are
        then those of independent draws.
    sampled : {"posterior", "deletions"}, optional
        What the draws came from: the posterior, or the mixture of the posteriors without each
        observation, ``posterior · Σ_i exp(−L_i)`` (see ``deletion_mixture``). The latter are
        weighed back to the posterior, and leaving out then uses bounded weights.

    Raises
    ------
    DrawsError, ShapeError, PriorError, LikelihoodError, UnknownNameError, RatioError
        Where something cannot be read, or the draws contradict the stated prior.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> rate = rng.normal(0.10, 0.02, size=(4, 1000))
    >>> fit = sy.Fit({"rate": rate}, prior={"rate": sy.Normal(0.1, 0.1)})
    >>> answer = fit.reweigh(sy.swap_prior(rate=sy.Normal(0.08, 0.05)))
    >>> bool(answer.shift("rate").value < 0), str(answer.verdict.level)
    (True, 'sound')
    """

    def __init__(
        self,
        draws: Any,
        prior: Mapping[Any, Any] | None = None,
        loglik: Any = None,
        *,
        stored_log_density: Any = None,
        log_weights: Any = None,
        names: Iterable[str] | None = None,
        chain: Any = None,
        derived: Iterable[str] | Mapping[str, Callable[..., Any]] = (),
        predictive: Mapping[str, str] | None = None,
        approximation: Any = None,
        ordered: bool = True,
        sampled: str = "posterior",
    ) -> None:
        from steelyard.leaving_out import sampled_from

        record = read_base(
            draws,
            prior,
            loglik,
            stored_log_density=stored_log_density,
            log_weights=log_weights,
            names=names,
            chain=chain,
            derived=derived,
            ordered=ordered,
            predictive=predictive,
            approximation=approximation,
        )
        self._record: Base = sampled_from(record, sampled)

    @property
    def draws(self) -> Draws:
        """The draws, stacked and read-only."""
        return self._record.draws

    @cached_property
    def base(self) -> Answer:
        """The answer without a change."""
        return base_answer(self._record)

    def check(self) -> Findings:
        """
        Check whether the claimed base is the one that the draws came from.

        Returns
        -------
        Findings
            One finding a check, each ``"found"``, ``"nothing found"`` or ``"not testable"``:
            whether the rows of draws and log likelihood are aligned (and which order fits),
            stored against claimed log density (and which term is missing, doubled, or lacks a
            Jacobian), hyperpriors by Stein's identity, agreement about the normalising constant,
            supports, repeated draws, mixing, and chains of unequal quality.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> x = np.random.default_rng(1).normal(size=(4, 500))
        >>> fit = sy.Fit(
        ...     {"x": x},
        ...     prior={"x": sy.Normal(0, 1)},
        ...     loglik=np.zeros((4, 500)),
        ...     stored_log_density=-0.5 * x**2,
        ... )
        >>> fit.check()[1].status
        'nothing found'
        """
        return check(self._record)

    def reweigh(self, change: Change, *, smooth: bool = True) -> Answer:
        """
        The answer under a change.

        Parameters
        ----------
        change : Change
            What is changed; changes combine with ``&``.
        smooth : bool, optional
            Whether the largest weights are smoothed.

        Returns
        -------
        Answer
            Estimates with errors, and a verdict.

        Raises
        ------
        ChangeError, UnknownNameError, PriorError, LikelihoodError, ShapeError
            Where the change does not fit the base.
        RatioError
            For log ratios that are NaN or +inf, or −inf for every draw.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"mu": rng.normal(size=(4, 500))}, prior={"mu": sy.Normal(0, 2)})
        >>> print(fit.reweigh(sy.swap_prior(mu=sy.Normal(0.5, 1))).verdict.level)
        sound
        """
        return reweigh(self._record, change, smooth=smooth)

    def repair(
        self,
        change: Change,
        *,
        rungs: Any = None,
        quantities: Any = None,
        most_evaluations: int | None = None,
        most_seconds: float | None = None,
        ascending: Iterable[str] = (),
        fits: Iterable[Any] = (),
        rng: Any = None,
        progress: Any = None,
    ) -> Answer:
        """
        The answer under a change, by the cheapest way that is sound.

        Parameters
        ----------
        change : Change
            What is changed.
        rungs : str or iterable of str, optional
            Which ways to try, in this order, from ``"smoothing"``, ``"collapse"``,
            ``"moment matching"``, ``"pooling"`` and ``"tempering"``; by default all of them.
        quantities : str, callable, list or mapping, optional
            Quantities and events that have to be sound as well.
        most_evaluations : int, optional
            How many points may be evaluated on all rungs.
        most_seconds : float, optional
            How long all rungs may take; held against between batches.
        ascending : str or iterable of str, optional
            Names of vectors that the model keeps in ascending order.
        fits : iterable of Fit, optional
            Other fits of the same data to pool with.
        rng : None, int or numpy.random.Generator, optional
            Seed or generator (SPEC 7).
        progress : bool or callable, optional
            True writes to standard error; a callable gets ``(points evaluated, rung)``.

        Returns
        -------
        Answer
            Of the first sound rung, else of the best one; its ``ladder`` says what each cost and
            why it stopped. The later rungs bring new draws: see ``answer.draws``.

        Raises
        ------
        PriorError, LikelihoodError, RatioError
            Where a rung that was named cannot move a parameter or evaluate a term at new points,
            and for densities that are NaN, with the point.
        ChangeError, UnknownNameError, ArgumentError, ArgumentTypeError
            As for :meth:`reweigh`, and for unusable limits and names.

        Notes
        -----
        New points need a prior term for every parameter and callables for all likelihood terms; the
        unconstrained space follows from the supports of the priors. A target that reaches beyond
        the base's support is tempered from its own prior. Answers of smoothing and of maps are held
        against draws further out before they are called sound; a mode that neither the base's draws
        nor moves from them reach is seen by no rung. On Ctrl-C the best answer so far is returned.

        References
        ----------
        .. [1] Paananen, Piironen, Bürkner, Vehtari (2021), Statistics and Computing 31.
        .. [2] Del Moral, Doucet, Jasra (2006), JRSS B 68.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(4)
        >>> readings = rng.normal(0.10, 0.03, size=20)
        >>> rate = rng.normal(readings.mean(), 0.03 / np.sqrt(20), size=(4, 500))
        >>> def gauge(draws):
        ...     return -0.5 * ((readings - draws["rate"][:, None]) / 0.03) ** 2
        >>> fit = sy.Fit({"rate": rate}, {"rate": sy.Flat()}, gauge)
        >>> change = sy.raise_noise("likelihood", 3.0, sd=0.03)
        >>> str(fit.reweigh(change).verdict.level)
        'strained'
        >>> answer = fit.repair(change)
        >>> str(answer.verdict.level), answer.ladder.chosen
        ('sound', 'moment matching')
        """
        from steelyard.repair import repair

        return repair(
            self._record,
            change,
            rungs=rungs,
            quantities=quantities,
            most_evaluations=most_evaluations,
            most_seconds=most_seconds,
            ascending=ascending,
            fits=fits,
            rng=rng,
            progress=progress,
        )

    def local(self, quantities: Any = None, *, of: str = "mean") -> Local:
        """
        Derivative of each quantity in every hyperparameter of every prior term.

        Parameters
        ----------
        quantities : str, list, mapping, callable or array_like, optional
            What is asked; events count too. All parameters by default.
        of : {"mean", "sd"}
            What of it.

        Returns
        -------
        Local
            Raw derivatives, and standardised ones per natural step of the hyperparameter.

        Raises
        ------
        PriorError
            Where no prior is stated, or a term has no derivative at a draw.

        Notes
        -----
        ``∂E f/∂h = Cov(f, ∂ log π_h/∂h)`` [1]_; numbers only, since a hyperparameter that is a
        parameter has a distribution instead.

        References
        ----------
        .. [1] Gustafson (1996), Annals of Statistics 24; Giordano, Broderick, Jordan (2018),
           JMLR 19.
        """
        from steelyard.sensitivity import local

        return local(self._record, quantities, of)

    def pull(self, quantities: Any = None) -> Pull:
        """
        How hard prior and likelihood pull at each quantity.

        Parameters
        ----------
        quantities : str, list, mapping, callable or array_like, optional
            What is asked. All parameters by default.

        Returns
        -------
        Pull
            Pulls of prior and likelihood, whole and term by term, and a reading in words. The
            whole prior counts all stated terms; in a hierarchy look at the terms on top.

        Raises
        ------
        ChangeError
            Where neither prior nor likelihood is stated.

        Notes
        -----
        ``½ [D(1/(1+δ)) + D(1+δ)] / log2(1+δ)`` with δ = 0.01, D(α) the cumulative Jensen–Shannon
        distance of the marginal when prior (or likelihood) is taken to the power α [1]_.

        References
        ----------
        .. [1] Kallioinen, Paananen, Bürkner, Vehtari (2024), Statistics and Computing 34.
        """
        from steelyard.sensitivity import pull

        return pull(self._record, quantities)

    def sweep(self, family: Callable[..., Change], grid: Any, quantities: Any = None) -> Sweep:
        """
        Answers over a grid of one or two hyperparameters.

        Parameters
        ----------
        family : callable
            Takes one or two numbers and returns a change.
        grid : array_like or mapping
            Nodes of one hyperparameter, or ``{name: nodes}`` for one or two; ascending.
        quantities : str, list, mapping, callable or array_like, optional
            What is asked; events count too. All parameters by default.

        Returns
        -------
        Sweep
            Values, errors and verdicts at every node, the trusted region, simultaneous bands.

        Raises
        ------
        ArgumentError, ArgumentTypeError
            For a grid that is not one, or a family that fails; the node is named.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"mu": rng.normal(size=(4, 500))}, {"mu": sy.Normal(0, 2)})
        >>> fit.sweep(lambda sd: sy.swap_prior(mu=sy.Normal(0, sd)), [1.5, 2, 3]).trusted.tolist()
        [True, True, True]
        """
        from steelyard.sensitivity import sweep

        return sweep(self._record, family, grid, quantities)

    def tipping_point(
        self,
        family: Callable[[float], Change],
        event: Any,
        level: float,
        between: tuple[float, float],
        start: float | None = None,
    ) -> TippingPoint:
        """
        Where a decision flips along a hyperparameter.

        Parameters
        ----------
        family : callable
            Takes a number and returns a change.
        event : str, callable or array_like
            One yes or no a draw.
        level : float
            The decision is whether the event's probability is above it.
        between : tuple of float
            Where to look.
        start : float, optional
            From where the nearest flip is counted; by default the value nearest to the base.

        Returns
        -------
        TippingPoint
            Flips, holds or unknown; all crossings with errors, a confidence set by inversion, and
            the limits of the trusted region. At most 60 reweighings.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            For a level, range, family or event that cannot be used.

        Notes
        -----
        Root of the smoothed estimate over the same draws; error ``error(P)/|dP/dλ|``; set
        ``{λ: |P(λ) − level| ≤ 1.96 error(P)}``.
        """
        from steelyard.sensitivity import tipping_point

        return tipping_point(self._record, family, event, level, between, start)

    def worst_case(
        self,
        quantity: Any,
        *,
        divergence: float | None = None,
        ratio: float | None = None,
        contamination: float | None = None,
        prior_of: str | None = None,
    ) -> Bounds:
        """
        Lowest and highest mean of a quantity over a class of changes.

        Parameters
        ----------
        quantity : str, callable or array_like
            One number, or one yes or no, a draw.
        divergence : float, optional
            All targets within this Kullback–Leibler divergence of the base, positive.
        ratio : float, optional
            All targets whose density ratio to the base has max/min of at most this, above 1; holds
            for posteriors when it holds for priors [1]_.
        contamination : float, optional
            All priors of one parameter that are the stated one but for this share, in (0, 1), of
            any other prior whatever [2]_.
        prior_of : str, optional
            That parameter: a single number with a proper prior of its own.

        Returns
        -------
        Bounds
            Both ends with errors and verdicts; all but those of a ratio are inner bounds.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            For no class or two, a size out of range, a quantity that does not vary.

        References
        ----------
        .. [1] DeRobertis, Hartigan (1981), Annals of Statistics 9; Csiszár (1975), Annals of
           Probability 3.
        .. [2] Berger, Berliner (1986), Annals of Statistics 14.
        """
        from steelyard.sensitivity import worst_case

        return worst_case(
            self._record,
            quantity,
            divergence=divergence,
            ratio=ratio,
            contamination=contamination,
            prior_of=prior_of,
        )

    def least_perturbation(
        self, quantity: Any, target: float, *, prior_of: str | None = None
    ) -> Perturbation:
        """
        The least change, in Kullback–Leibler divergence, that brings a mean to a target.

        Parameters
        ----------
        quantity : str, callable or array_like
            One number, or one yes or no, a draw.
        target : float
            Mean or probability to reach, inside the range of the draws.
        prior_of : str, optional
            Change only the prior of this parameter; the implied prior can then be looked at.

        Returns
        -------
        Perturbation
            Divergence with its error, weights, factor, and the implied prior.

        Raises
        ------
        ArgumentError, ArgumentTypeError, PriorError, QuantityError
            For a target out of reach, or a prior that is not a distribution of one number.

        Notes
        -----
        In the posterior ``q ∝ p exp(t f)``; in a prior ``p exp(η m (D − target))``, where m is
        posterior over prior and D the mean of the quantity given the parameter.
        """
        from steelyard.sensitivity import least_perturbation

        return least_perturbation(self._record, quantity, target, prior_of)

    def resistance(self, event: Any, level: float) -> Estimate:
        """
        Ratio up to which no change of bounded density ratio can flip a decision.

        Parameters
        ----------
        event : str, callable or array_like
            One yes or no a draw.
        level : float
            The decision is whether the event's probability is above it.

        Returns
        -------
        Estimate
            ``odds(P)/odds(level)``, or its inverse below the level. Sufficient, not a probability.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            For a level outside (0, 1), or an event that does not vary.
        """
        from steelyard.sensitivity import resistance

        return resistance(self._record, event, level)

    def least_data(self, event: Any, level: float, contrary: Any, *, most: float = 100.0) -> Reach:
        """
        Smallest number of pseudo-observations that flips a decision.

        Parameters
        ----------
        event : str, callable or array_like
            One yes or no a draw.
        level : float
            The decision is whether the event's probability is above it.
        contrary : callable or array_like
            Log density of one pseudo-observation against the decision, one number a draw.
        most : float, optional
            How many are tried.

        Returns
        -------
        Reach
            The number, or how far these draws can say that the decision holds.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            As for :meth:`tipping_point`.
        """
        from steelyard.sensitivity import least_data

        return least_data(self._record, event, level, contrary, most=most)

    def state(self, stated: Mapping[Any, float]) -> Statements:
        """
        The least change under which events have the probabilities that an expert states.

        Parameters
        ----------
        stated : mapping
            ``{event: probability}``, all held at once.

        Returns
        -------
        Statements
            Its `change` goes to :meth:`reweigh`; weights are bounded in advance.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            For statements that contradict each other, or have no draw on one side.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"mu": rng.normal(size=(4, 500))})
        >>> round(fit.reweigh(fit.state({"mu < 1": 0.8}).change).prob("mu < 1").value, 6)
        0.8
        """
        from steelyard.sensitivity import statements

        return statements(self._record, stated)

    def bayes_factors(
        self, priors: Mapping[str, Change], *, against: str | None = None
    ) -> PriorFactors:
        """
        Bayes factors between priors.

        Parameters
        ----------
        priors : mapping of str to Change
            The priors, as changes.
        against : str, optional
            A label; by default all are against the base.

        Returns
        -------
        PriorFactors
            Natural logs with errors of the pairs, and a table.

        Raises
        ------
        PriorError
            Where a prior is improper or taken to a power.
        UnknownNameError, ArgumentTypeError
            For a label that is not there, or no priors.
        """
        from steelyard.sensitivity import prior_factors

        return prior_factors(self._record, priors, against)

    def triage(
        self,
        scenarios: Any,
        quantities: Any = None,
        event: Any = None,
        level: Any = None,
        probs: Any = None,
    ) -> Triage:
        """
        Answer a list of scenarios in one table in which no row is lost.

        Parameters
        ----------
        scenarios : Plan, or mapping of str to Change
            What is asked; a plan says its quantities itself.
        quantities : str, list, mapping, callable or array_like, optional
            What is asked of each. All parameters by default, none beside an event.
        event : str, callable or array_like, optional
            The event of a decision.
        level : float, optional
            The level of that decision.
        probs : array_like, optional
            Probabilities of quantiles that are wanted beside the means.

        Returns
        -------
        Triage
            Values, paired shifts, errors, verdicts, simultaneous bands; failed scenarios stay.

        Raises
        ------
        ArgumentError, ArgumentTypeError, UnknownNameError, QuantityError
            For scenarios without names, or quantities that are not there.
        """
        from steelyard.planning import triage

        return triage(self._record, scenarios, quantities, event, level, probs)

    def plan_refits(self, scenarios: Any, efficiency: float = 0.5, cost: Any = None) -> RefitPlan:
        """
        The fewest refits to pool with these draws so that every scenario is answered.

        Parameters
        ----------
        scenarios : Plan, or mapping of str to Change
            What is to be asked; each may be refitted.
        efficiency : float, optional
            Effective draws of each scenario to one draw of the pool, in (0, 1).
        cost : float or mapping of str to float, optional
            Price of each refit; all cost the same by default.

        Returns
        -------
        RefitPlan
            Refits, shares of the pool, predicted efficiencies with verdicts, and advice.

        Raises
        ------
        ArgumentError, ArgumentTypeError, UnknownNameError
            For no scenarios, an efficiency outside (0, 1), or prices that are not positive.
        ChangeError, PriorError, LikelihoodError, ShapeError, RatioError
            For a change that does not fit the base.

        Notes
        -----
        From a pool with shares π the efficiency of scenario b is ``1/Σ w_b²/(Σ_a π_a w_a)``, the
        weights w those of the base draws: one over one plus a chi-square divergence. Scenarios out
        of reach of the base draws are refitted themselves, with at least their own share as
        efficiency, and are not counted on for any other.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"rate": rng.normal(0.1, 0.02, (4, 500))}, {"rate": sy.Normal(0.1, 0.02)})
        >>> plan = fit.plan_refits(
        ...     {
        ...         "lower": sy.swap_prior(rate=sy.Normal(0.07, 0.01)),
        ...         "low": sy.swap_prior(rate=sy.Normal(0.075, 0.01)),
        ...         "tight": sy.swap_prior(rate=sy.Normal(0.1, 0.015)),
        ...     },
        ...     efficiency=0.3,
        ... )
        >>> len(plan.refits), bool(plan.reached.all())
        (1, True)
        """
        from steelyard.planning import plan_refits

        return plan_refits(self._record, scenarios, efficiency, cost)

    def more_draws(
        self, quantity: Any, error: float, *, change: Change | None = None, of: str = "mean"
    ) -> MoreDraws:
        """
        How many draws bring a Monte Carlo error down to a given one.

        Parameters
        ----------
        quantity : str, array_like or callable
            What is asked; an event for ``of="prob"``.
        error : float
            The error wanted.
        change : Change, optional
            The change under which it is asked; none by default.
        of : {"mean", "sd", "prob"}, optional
            What of it.

        Returns
        -------
        MoreDraws
            The number, and the power by which the error falls.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError, UnknownNameError
            For an error that is not positive, or another quantity than one.

        Notes
        -----
        ``error ∝ S^{−(1 − max(k, ½))}`` with the tail shape k of the quantity: from ½ on its
        contributions have no variance, from 1 on no mean.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"rate": rng.normal(0.1, 0.02, (4, 500))})
        >>> now = fit.base.mean("rate").error
        >>> round(fit.more_draws("rate", now / 3).draws / 2000, 2)
        9.0
        """
        from steelyard.planning import more_draws

        return more_draws(self._record, quantity, error, change=change, of=of)

    def value_of_refit(
        self, change: Change, event: Any, level: float, *, draws: int | None = None
    ) -> RefitValue:
        """
        What a refit under a change is worth to a decision.

        Parameters
        ----------
        change : Change
            The change.
        event : str, callable or array_like
            One yes or no a draw.
        level : float
            The decision is whether the event's probability is above it.
        draws : int, optional
            Independent draws that the refit would give; as many as there are by default.

        Returns
        -------
        RefitValue
            Probability that the decision is on the right side now, and as expected afterwards; and
            what that is worth.

        Raises
        ------
        ArgumentError, ArgumentTypeError, QuantityError
            For a level outside (0, 1), several events, or no draws.

        Notes
        -----
        The Monte Carlo error is taken as normal; where the verdict is not sound it is not known
        what a refit would show, and nothing is said.

        References
        ----------
        .. [1] Raiffa, Schlaifer (1961), Applied Statistical Decision Theory.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(1)
        >>> fit = sy.Fit({"rate": rng.normal(0.1, 0.02, (4, 500))}, {"rate": sy.Normal(0.1, 0.02)})
        >>> tight = sy.swap_prior(rate=sy.Normal(0.1, 0.015))
        >>> found = fit.value_of_refit(tight, "rate > 0.1", 0.51)
        >>> bool(0.5 < found.right_now < found.right_after < 1)
        True
        """
        from steelyard.planning import value_of_refit

        return value_of_refit(self._record, change, event, level, draws=draws)

    def arrive(self, saved: str | Path | None = None) -> Arrival:
        """
        Take in data as they arrive.

        Parameters
        ----------
        saved : str or Path, optional
            What ``Arrival.save`` wrote, to go on from.

        Returns
        -------
        Arrival
            Batches are added to it; each gives an answer, until a refit is due.

        Raises
        ------
        DrawsError
            For a file that is something else, or of other draws.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rate = np.random.default_rng(1).normal(0.1, 0.02, (4, 500))
        >>> arrival = sy.Fit({"rate": rate}, {"rate": sy.Normal(0.1, 0.02)}).arrive()
        >>> bool(arrival.add("week 1", -0.5 * ((0.13 - rate) / 0.04) ** 2).mean("rate").value > 0.1)
        True
        """
        from steelyard.planning import Arrival

        return Arrival(self._record) if saved is None else Arrival.load(saved, self)

    def leave_out(
        self,
        groups: Any = None,
        *,
        term: str | None = None,
        conditional: Any = None,
        quantities: Any = None,
        sample: int | None = None,
        surrogate: Any = None,
        rng: Any = None,
        progress: Any = None,
    ) -> LeaveOut:
        """
        What leaving out each observation or group does.

        Parameters
        ----------
        groups : array_like, list, mapping or str, optional
            What goes together: a label for each observation, lists of positions (or
            ``{name: positions}``), or a dimension of the log likelihood; each observation alone by
            default.
        term : str, optional
            The likelihood term, where several have observations.
        conditional : array_like or callable, optional
            Log density of each group given all others and the parameters, ``(chain, draw,
            *groups)`` or ``(n, *groups)``, where that is not the sum of its terms: for correlated
            rows, and for groups whose own effects are integrated out.
        quantities : str, array_like, callable or mapping, optional
            Quantities whose influence is found in the same pass.
        sample : int, optional
            Leave out only so many groups, drawn at random; a surrogate stands for the others.
        surrogate : array_like, optional
            A cheap log score of each group for that, shape of the groups; by default the score by
            raw weights, in a pass of its own.
        rng : None, int or numpy.random.Generator, optional
            For drawing that sample (SPEC 7).
        progress : bool or callable, optional
            True writes to standard error; a callable gets ``(done, total)``.

        Returns
        -------
        LeaveOut
            Log score with both errors, by group, verdicts; influence, calibration and contrasts.

        Raises
        ------
        LikelihoodError
            Without a log likelihood by observation, or for values that are NaN, +inf, or −inf for
            every draw.
        RatioError
            For an observation that a draw with weight makes impossible.
        ShapeError, ArgumentError, ArgumentTypeError, UnknownNameError, AmbiguousNameError
            Where groups, terms, conditional or surrogate values do not fit, or a group holds all.

        Notes
        -----
        The weights of a group are ``w ∝ v exp(−Σ L)`` [1]_, smoothed, with base weights v; its
        score is ``log Σ w exp(Σ L)``. The error of the total comes from the influence series summed
        over groups draw by draw. From a tail shape of one half on, an allowance for weight beyond
        the heaviest draw is added to errors; from one on they are infinite.

        References
        ----------
        .. [1] Gelfand, Dey, Chang (1992), Bayesian Statistics 4.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(3)
        >>> readings = rng.normal(0.10, 0.03, size=40)
        >>> rate = rng.normal(readings.mean(), 0.03 / np.sqrt(40), size=(4, 500))
        >>> loglik = -0.5 * ((readings - rate[..., None]) / 0.03) ** 2 - np.log(0.03)
        >>> left = sy.Fit({"rate": rate}, loglik=loglik).leave_out()
        >>> left.by_group.value.shape, str(left.verdict.level)
        ((40,), 'sound')
        """
        from steelyard.leaving_out import leave_out

        return leave_out(
            self._record,
            groups,
            term=term,
            conditional=conditional,
            quantities=quantities,
            sample=sample,
            surrogate=surrogate,
            rng=rng,
            progress=progress,
        )

    def k_fold(
        self,
        folds: Any = 10,
        *,
        by: str = "chance",
        places: Any = None,
        apart: float = 0,
        term: str | None = None,
        quantities: Any = None,
        rng: Any = None,
        progress: Any = None,
    ) -> LeaveOut:
        """
        Leave out folds: at random, by blocks of time or of space, or as given.

        Parameters
        ----------
        folds : int, array_like, list or mapping, optional
            How many, or the folds themselves as ``groups`` of :meth:`leave_out`.
        by : {"chance", "order", "place"}, optional
            How a number of folds is made: at random, as blocks of consecutive observations, or as
            cells of about equal count.
        places : array_like, optional
            Coordinates of the observations, ``(*obs, d)``, for cells.
        apart : float, optional
            Observations no further from a fold than this (positions, or distance of places) are
            deleted with it but not scored.
        term : str, optional
            The likelihood term, where several have observations.
        quantities : str, array_like, callable or mapping, optional
            Quantities whose influence is found in the same pass.
        rng : None, int or numpy.random.Generator, optional
            For folds at random (SPEC 7).
        progress : bool or callable, optional
            As for :meth:`leave_out`.

        Returns
        -------
        LeaveOut
            The joint log score of each fold given the others, and all else of leaving out.

        Raises
        ------
        ArgumentError, ArgumentTypeError, ShapeError
            Where folds cannot be made so, or a fold with what stands near it holds all data.

        References
        ----------
        .. [1] Burman, Chow, Nolan (1994), Biometrika 81.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(3)
        >>> readings = rng.normal(0.10, 0.03, size=40)
        >>> rate = rng.normal(readings.mean(), 0.03 / np.sqrt(40), size=(4, 500))
        >>> loglik = -0.5 * ((readings - rate[..., None]) / 0.03) ** 2 - np.log(0.03)
        >>> fit = sy.Fit({"rate": rate}, loglik=loglik)
        >>> fit.k_fold(8, by="order", apart=1).by_group.value.shape
        (8,)
        """
        from steelyard.leaving_out import k_fold

        return k_fold(
            self._record,
            folds,
            by=by,
            places=places,
            apart=apart,
            term=term,
            quantities=quantities,
            rng=rng,
            progress=progress,
        )

    def look_ahead(
        self,
        series: Any,
        *,
        from_: int,
        steps: int = 1,
        refit: Callable[[int], tuple[Any, Any]] | None = None,
        until: str = "refit",
        progress: Any = None,
    ) -> LookAhead:
        """
        Scores of a series ahead of the data, from a fit to its first part.

        Parameters
        ----------
        series : array_like or callable
            Log likelihood of the whole series in time order at these draws, ``(chain, draw, T)`` or
            ``(n, T)``: each observation given those before.
        from_ : int
            How many of the observations this fit has seen: the position of the first predicted.
        steps : int, optional
            How many observations are predicted at a time, jointly.
        refit : callable, optional
            Gets a position at which a refit is due; returns ``(fit of the observations before it,
            series at its draws)``. Without it the look-ahead goes on and says where one was due.
        until : {"refit", "strained"}, optional
            The level of the weights from which a refit is due.
        progress : bool or callable, optional
            As for :meth:`leave_out`.

        Returns
        -------
        LookAhead
            Log score of each point and their sum, where refits are due, and how many are needed.

        Raises
        ------
        ArgumentError, ArgumentTypeError, ShapeError, LikelihoodError
            For positions beyond the series, more than one axis, or a refit of another series.

        Notes
        -----
        Weights ``w ∝ v exp(Σ_{from ≤ j < t} L_j)`` [1]_, smoothed; the score at t is
        ``log Σ w exp(L_t + … + L_{t + steps − 1})``. Without `refit` the number needed is a
        forecast: each fit is taken to carry the series on in the same proportion as the first.

        References
        ----------
        .. [1] Bürkner, Gabry, Vehtari (2020), J. Stat. Comput. Simul. 90.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> rng = np.random.default_rng(3)
        >>> readings = rng.normal(0.10, 0.03, size=60)
        >>> seen = readings[:30]
        >>> rate = rng.normal(seen.mean(), 0.03 / np.sqrt(30), size=(4, 500))
        >>> series = -0.5 * ((readings - rate[..., None]) / 0.03) ** 2 - np.log(0.03)
        >>> fit = sy.Fit({"rate": rate}, loglik=series[..., :30])
        >>> fit.look_ahead(series, from_=30).refit_due
        ()
        """
        from steelyard.leaving_out import look_ahead

        return look_ahead(
            self._record,
            series,
            from_=from_,
            steps=steps,
            refit=refit,
            until=until,
            progress=progress,
        )

    def __repr__(self) -> str:
        record = self._record
        prior = "not stated" if record.prior is None else ", ".join(record.prior)
        terms = record.loglik or {}
        loglik = ", ".join(
            f"{k} {list(v.obs_shape)}" if v.obs_shape else f"{k} (total)" for k, v in terms.items()
        )
        return f"<Fit of {record.draws!r}\n  prior: {prior}\n  loglik: {loglik or 'not stated'}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(repr(self))}</pre>"


class Pool(Fit):
    """
    Several fits used together: the verbs of a fit, on the draws of all.

    Made by :func:`steelyard.pool`. Changes are relative to the first fit; whether they reach beyond
    the draws is judged against all fits together.

    Attributes
    ----------
    labels : tuple of str
        Names of the fits.
    log_constants : Estimate
        Natural log normalising constants relative to the first fit's, one a fit.
    covariance : numpy.ndarray
        Their Monte Carlo covariance, ``(fits, fits)``.
    shared_mass : numpy.ndarray
        Share of the mass of a fit (row) that lies where another (column) makes draws.
    effective_sizes : numpy.ndarray
        Effective sizes of the fits, by which their draws count.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> narrow = sy.Fit({"mu": rng.normal(0, 1, (4, 500))}, prior={"mu": sy.Normal(0, 1)})
    >>> wide = sy.Fit({"mu": rng.normal(0, 2, (4, 500))}, prior={"mu": sy.Normal(0, 2)})
    >>> pool = sy.pool([narrow, wide], data="same", common="likelihood")
    >>> pool.reweigh(sy.swap_prior(mu=sy.Normal(0, 1.8))).verdict.is_sound
    True
    """

    def __init__(self, pooled: Pooled) -> None:
        self._record = pooled.record
        self._pooled = pooled

    @property
    def labels(self) -> tuple[str, ...]:
        """Names of the fits."""
        return self._pooled.labels

    @property
    def log_constants(self) -> Estimate:
        """Log normalising constants relative to the first fit's."""
        return self._pooled.log_constants

    @property
    def covariance(self) -> Any:
        """Monte Carlo covariance of the log constants."""
        return self._pooled.covariance

    @property
    def shared_mass(self) -> Any:
        """Share of the mass of a fit (row) that lies where another (column) makes draws."""
        return self._pooled.shared_mass

    @property
    def effective_sizes(self) -> Any:
        """Effective sizes of the fits, by which their draws count."""
        return self._pooled.sizes

    def check(self) -> Findings:
        """
        Check the claimed base of every fit by itself.

        Returns
        -------
        Findings
            Those of each fit, the name of the fit before the check.
        """
        return self._pooled.check()

    def table(self) -> Table:
        """
        One row for each fit.

        Returns
        -------
        Table
            Draws, effective size, log constant and its error, and the mass kept to itself.
        """
        return self._pooled.table()

    @property
    def plot(self) -> PoolPlots:
        """Plots of the pool; call it for the shared mass."""
        from steelyard.show.pool_plots import PoolPlots

        return PoolPlots(self._pooled)

    def __str__(self) -> str:
        return f"{self.table()}\nthe first fit from all draws: {self.base.verdict}"

    def __repr__(self) -> str:
        return f"<Pool of {len(self.labels)} fits, {self.draws.size} draws>\n{self.table()}"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + self.base.verdict._repr_html_()


def pool(
    fits: Any, *, data: str, common: str | Iterable[str] = (), log_constants: Any = None
) -> Pool:
    """
    Use several fits together.

    Parameters
    ----------
    fits : sequence of Fit, or mapping of str to Fit
        Fits of the same parameters, of unequal size and mixing.
    data : {"same", "disjoint"}
        Whether the fits saw the same data, under different priors or likelihoods, or parts of it
        that have nothing in common.
    common : str or iterable of str, optional
        Prior or likelihood terms that are the same in all fits: they cancel and are not evaluated
        at the draws of the others, so that arrays will do. ``"likelihood"`` (or ``"prior"``) stands
        for what no fit states.
    log_constants : array_like, optional
        Log normalising constants of the fits, where they are known; one a fit.

    Returns
    -------
    Pool
        A fit whose draws are those of all fits, and whose base is the posterior of the first; for
        disjoint data, the posterior of all data, the prior counted once.

    Raises
    ------
    ArgumentError, ArgumentTypeError
        For less than two fits, or another `data`.
    PriorError, LikelihoodError
        Where a term that is not common cannot be evaluated at the draws of the other fits.
    DrawsError, ShapeError, UnknownNameError, RatioError
        For fits of other parameters or data, or terms in `common` that are not there.

    Notes
    -----
    Constants solve ``exp(−f_k) = Σ_x c(x) q_k(x) / Σ_l n_l exp(f_l) q_l(x)`` [1]_ with effective
    sizes n and ``c`` the effective size of a draw's fit over its number of draws; the weights of
    any target are ``c q / Σ_l n_l exp(f_l) q_l``. Errors take the draws of each fit by itself, in
    chain order, and include those of the constants.

    References
    ----------
    .. [1] Vardi (1985), Annals of Statistics 13; Geyer (1994), Univ. of Minnesota TR 568; Kong,
       McCullagh, Meng, Nicolae, Tan (2003), JRSS B 65; Shirts, Chodera (2008), J. Chem. Phys. 129.

    Examples
    --------
    Two fits of the corrosion rate of one quay wall, under a tight prior and a wide one:

    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> readings = rng.normal(0.12, 0.04, size=20)
    >>> def fitted(sd):
    ...     precision = 20 / 0.04**2 + 1 / sd**2
    ...     mean = (readings.sum() / 0.04**2 + 0.10 / sd**2) / precision
    ...     rate = rng.normal(mean, precision**-0.5, size=(4, 500))
    ...     loglik = -0.5 * ((readings - rate[..., None]) / 0.04) ** 2
    ...     return sy.Fit({"rate": rate}, {"rate": sy.Normal(0.10, sd)}, {"gauge A": loglik})
    >>> both = sy.pool([fitted(0.01), fitted(0.1)], data="same", common="gauge A")
    >>> both.reweigh(sy.swap_prior(rate=sy.Flat())).mean("rate").verdict.is_sound
    True
    """
    from steelyard.repair.pools import pool_fits

    return Pool(pool_fits(fits, Fit, data, common, log_constants))
