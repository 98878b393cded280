"""The face on top: a fit, whose verbs are one line each."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from functools import cached_property
from html import escape
from typing import Any

from steelyard.answers import Answer, base_answer, reweigh
from steelyard.base import Base, Draws, read_base
from steelyard.changes import Change
from steelyard.checking import Findings, check

__all__ = ["Fit"]


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
    ) -> None:
        self._record: Base = read_base(
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
        Is the claimed base the one that the draws came from?

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
