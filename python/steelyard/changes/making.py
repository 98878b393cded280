"""How changes are stated: one function for each kind of edit."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.changes.edits import (
    AddTerm,
    Change,
    Drop,
    LogRatio,
    Power,
    RaiseNoise,
    SwapLoglik,
    SwapPrior,
    WeighData,
)
from steelyard.errors import ArgumentError, ArgumentTypeError, ChangeError

__all__ = [
    "add",
    "drop",
    "log_ratio",
    "power",
    "raise_noise",
    "swap_loglik",
    "swap_prior",
    "weigh_data",
]


def swap_prior(mapping: Mapping[Any, Any] | None = None, /, **terms: Any) -> Change:
    """
    Replace prior terms.

    Parameters
    ----------
    mapping : mapping, optional
        From the keys of the fit's prior to new terms: distributions, frozen scipy.stats
        distributions, callables that get ``{name: (n, *shape)}``, or arrays of log densities.
        For keys that are not Python names, such as ``("a", "b")``.
    **terms
        The same by keyword.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ChangeError
        Where nothing is named, or one term twice.

    Notes
    -----
    ``Δ = log π_new(θ) − log π_old(θ)`` for each term.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.swap_prior(tau=sy.HalfCauchy(0.05))
    <Change: prior of tau becomes HalfCauchy(0.05)>
    """
    pairs = _pairs(mapping, terms, "swap_prior", "prior")
    return Change(tuple(SwapPrior(key, density) for key, density in pairs))


def swap_loglik(terms: Any) -> Change:
    """
    Replace likelihood terms.

    Parameters
    ----------
    terms : array_like, callable or mapping
        New log likelihood of the only term, aligned with the draws; or ``{term: array}``.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ChangeError
        Where nothing is named.

    Notes
    -----
    ``Δ = Σ_i (L'_si − L_si)``. The new term needs the observations of the old one, so that other
    edits (dropping, weighing) keep their meaning; a total may replace a term and be replaced.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> sy.swap_loglik({"gauge A": np.zeros((4, 100, 12))})
    <Change: likelihood of gauge A replaced>
    """
    if isinstance(terms, Mapping):
        pairs = _pairs(terms, {}, "swap_loglik", "likelihood")
        return Change(tuple(SwapLoglik(str(name), source) for name, source in pairs))
    return Change((SwapLoglik(None, terms),))


def add(terms: Mapping[str, Any]) -> Change:
    """
    Add data: likelihood terms under new names.

    Parameters
    ----------
    terms : mapping
        ``{new_name: log likelihood}``, each aligned with the draws or a callable.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ArgumentTypeError
        Where `terms` is not a mapping.

    Notes
    -----
    ``Δ = Σ_i L_si`` of the new observations.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> sy.add({"spring survey": np.zeros((4, 100))})
    <Change: data spring survey added>
    """
    if not isinstance(terms, Mapping):
        raise ArgumentTypeError(
            "add", "{new name: log likelihood}", type(terms).__name__, "Give the new data a name."
        )
    pairs = _pairs(terms, {}, "add", "likelihood")
    return Change(tuple(AddTerm(str(name), source) for name, source in pairs))


def drop(what: Any = None, /, *, label: Any = None, position: Any = None, **dims: Any) -> Change:
    """
    Leave out data.

    Parameters
    ----------
    what : str, int, sequence or mapping, optional
        A likelihood term (``"gauge B"``), a label, positions from 0 (``[3, 17]``), or
        ``{term: positions}``.
    label, position : optional
        The same with integers said to be labels, or positions; needed where a dimension has
        integer labels that differ from positions.
    **dims
        Labels along a named dimension of the log likelihood: ``drop(rig="B")``.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ChangeError
        Where nothing is named, or the same in two ways.

    Notes
    -----
    Dropping is a factor of 0 on the observation: ``Δ = −Σ_{i dropped} L_si``. It does not undo
    scalings or priors that were computed from the dropped data.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.drop({"gauge A": [0, 4]})
    <Change: without gauge A: 0, 4>
    """
    given = [(kind, v) for kind, v in (("", what), ("label", label), ("position", position))]
    given = [(kind, value) for kind, value in given if value is not None]
    if len(given) + bool(dims) != 1:
        raise ChangeError(
            "drop",
            "one way of saying what to leave out",
            f"{len(given) + bool(dims)}",
            'Write drop("term"), drop([3, 17]), drop(label=…), drop(position=…) or drop(dim=…).',
        )
    if isinstance(what, Mapping) and not what:
        raise ChangeError("drop", "at least one term", "an empty mapping", "Name one.")
    if dims:
        return Change((Drop(by_dim=tuple((d, _kept(v)) for d, v in dims.items())),))
    return Change((Drop(_kept(given[0][1]), given[0][0]),))


def _kept(what: Any) -> Any:
    """A copy that does not follow later changes of what it was made from."""
    if isinstance(what, Mapping):
        return {k: _kept(v) for k, v in what.items()}
    if isinstance(what, list | tuple | np.ndarray | range | set):
        return tuple(_kept(v) for v in what) if not isinstance(what, np.ndarray) else what.copy()
    return what


def weigh_data(terms: Mapping[str, Any]) -> Change:
    """
    Give observations another weight in the likelihood.

    Parameters
    ----------
    terms : mapping
        ``{term: factor}`` with one factor, or one for each observation; not negative.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ArgumentTypeError
        Where `terms` is not a mapping of numbers.
    ArgumentError
        For a negative factor.

    Notes
    -----
    ``Δ = Σ_i (a_i − 1) L_si``; factors of several changes multiply.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.weigh_data({"gauge B": 0.5})
    <Change: data gauge B weighed by 0.5>
    """
    if not isinstance(terms, Mapping):
        raise ArgumentTypeError(
            "weigh_data", "{term: factor}", type(terms).__name__, "Name the term."
        )
    pairs = _pairs(terms, {}, "weigh_data", "likelihood")
    return Change(tuple(WeighData(str(k), _factor(v, f"weigh_data[{k!r}]")) for k, v in pairs))


def power(prior: Any = 1, likelihood: Any = 1) -> Change:
    """
    Take the prior, the likelihood, or terms of them to a power.

    Parameters
    ----------
    prior : float or mapping, optional
        One power for all prior terms, or ``{term: power}``; not negative.
    likelihood : float or mapping, optional
        The same for likelihood terms.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ArgumentTypeError, ArgumentError
        For anything but numbers that are not negative.

    Notes
    -----
    ``Δ = (α − 1) Σ log π + (β − 1) Σ L`` (power scaling: Kallioinen, Paananen, Bürkner, Vehtari
    2024). A power of 0 leaves the support as it was.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.power(likelihood=0.5)
    <Change: likelihood to the power 0.5>
    """

    def read(value: Any, argument: str) -> Any:
        if isinstance(value, Mapping):
            pairs = _pairs(value, {}, argument, "model")
            return {k: float(_scalar(v, f"{argument}[{k!r}]")) for k, v in pairs}
        return float(_scalar(value, argument))

    return Change((Power(read(prior, "power: prior"), read(likelihood, "power: likelihood")),))


def raise_noise(term: str, factor: float, sd: Any) -> Change:
    """
    Multiply the standard deviation of normal measurement errors.

    Parameters
    ----------
    term : str
        Likelihood term, by observation, whose errors are normal.
    factor : float
        What the sd is multiplied by, positive; below 1 for less noise.
    sd : float, array_like, str or callable
        The sd that the log likelihood was computed with: a number, one an observation, the name
        of a parameter, or a callable that gets ``{name: (n, *shape)}`` and returns ``(n,)`` or
        ``(n, *obs)``.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ArgumentError, ArgumentTypeError
        For a factor that is not positive, or an sd of a wrong type.

    Notes
    -----
    ``L' = (L + log s + c)/f² − log(f s) − c`` with ``c = ½ log 2π``. Where the data dominate, the
    weights have infinite variance from ``f = √2`` on, in any dimension.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.raise_noise("gauge B", 1.2, sd="sd_b")
    <Change: noise of gauge B times 1.2>
    """
    if not isinstance(term, str):
        raise ArgumentTypeError("raise_noise: term", "a name", repr(term), "Name the term.")
    number = float(_scalar(factor, "raise_noise: factor"))
    if not 1e-100 < number < 1e100:
        raise ArgumentError(
            "raise_noise: factor", "from 1e-100 to 1e100", f"{number:g}", "Use drop for no data."
        )
    return Change((RaiseNoise(term, number, sd),))


def log_ratio(source: Any, *, predictive: str | None = None) -> Change:
    """
    Multiply the target by any ratio.

    Parameters
    ----------
    source : array_like or callable
        Log ratio at each draw, ``(n,)`` or ``(chain, draw)``; or a callable that gets
        ``{name: (n, *shape)}`` and returns it.
    predictive : str, optional
        Name of predictive draws whose own ratio ``p_new(ỹ|θ)/p_old(ỹ|θ)`` this is, where their
        model is changed as well; without it they are refused under such a change.

    Returns
    -------
    Change
        The change.

    Raises
    ------
    ArgumentTypeError
        For a `predictive` that is not a name.

    Notes
    -----
    ``Δ = log q(θ) − log p(θ)`` up to a constant. −inf is a weight of zero; NaN and +inf are
    errors when the change is weighed.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.log_ratio(lambda draws: -draws["mu"] ** 2)
    <Change: target times a given ratio>
    """
    if predictive is not None and not isinstance(predictive, str):
        raise ArgumentTypeError(
            "log_ratio: predictive", "a name", repr(predictive), "Name the predictive draws."
        )
    return Change((LogRatio(source, predictive),))


def _pairs(
    mapping: Mapping[Any, Any] | None, terms: Mapping[str, Any], argument: str, kind: str
) -> list[tuple[Any, Any]]:
    if mapping is not None and not isinstance(mapping, Mapping):
        raise ArgumentTypeError(
            argument, "a mapping, or terms by keyword", type(mapping).__name__, "Name the term."
        )
    mapping = dict(mapping or {})
    twice = sorted(set(map(str, mapping)) & set(terms))
    if twice:
        raise ChangeError(argument, "each term once", f"{twice} twice", "Keep one of them.")
    for key in mapping:
        if not (isinstance(key, str) or (isinstance(key, tuple) and _all_text(key))):
            raise ArgumentTypeError(
                argument, "names, or tuples of names, as keys", repr(key), "Name the term."
            )
    pairs = [*mapping.items(), *terms.items()]
    if not pairs:
        raise ChangeError(argument, f"at least one {kind} term", "none", "Name the term to change.")
    return pairs


def _all_text(key: tuple[Any, ...]) -> bool:
    return len(key) > 0 and all(isinstance(part, str) for part in key)


def _scalar(value: Any, argument: str) -> Any:
    number = _factor(value, argument)
    if np.ndim(number):
        raise ArgumentTypeError(
            argument, "one number", f"shape {np.shape(number)}", "Use weigh_data for observations."
        )
    return number


def _factor(value: Any, argument: str) -> Any:
    array = plain_array(value, argument, "fiu")
    bad = ~(np.isfinite(array) & (array >= 0))
    if bad.any():
        raise ArgumentError(
            argument,
            "finite numbers that are not negative",
            f"{np.asarray(array)[bad].flat[0]:g}",
            "A factor of 0 leaves the term out, 1 leaves it as it is.",
        )
    return float(array) if array.ndim == 0 else array.astype(np.float64)
