"""A number with its Monte Carlo error and what may be said of it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from html import escape
from typing import Any, NoReturn

import numpy as np
import numpy.typing as npt

from steelyard.answers.student import student_quantile
from steelyard.arrays import Frozen
from steelyard.base.names import label_texts
from steelyard.digits import chance, rounded, short
from steelyard.errors import ArgumentError, TruthValueError
from steelyard.verdicts import Level, Verdict

__all__ = ["Decision", "Estimate", "Estimates"]


@dataclass(frozen=True)
class Decision(Frozen):
    """
    On which side of a level a probability lies, and how surely.

    Attributes
    ----------
    level : float
        The level that decides.
    above : bool or numpy.ndarray
        Whether the probability is above it.
    right : float or numpy.ndarray
        Monte Carlo probability that this side is the right one; NaN where the estimate is not
        sound, since the error that it rests on is not.
    """

    level: float
    above: Any
    right: Any

    def __str__(self) -> str:
        if np.ndim(self.above):
            return f"{int(np.sum(self.above))} of {np.size(self.above)} above {self.level:g}"
        side = "above" if self.above else "not above"
        if math.isnan(self.right):
            return f"{side} {self.level:g}, how surely is not known"
        sure = chance(self.right)
        return f"{side} {self.level:g}, right with Monte Carlo probability {sure}"


@dataclass(frozen=True, eq=False)
class Estimate(Frozen):
    """
    An estimate from weighted draws.

    Attributes
    ----------
    value : float or numpy.ndarray
        The estimate, in the quantity's own shape; NaN where the draws give none.
    error : float or numpy.ndarray
        Its Monte Carlo standard error.
    tail_shape : float or numpy.ndarray
        Tail shape of the contributions of single draws, weights included.
    verdict : Verdict
        What may be said of it; never better than the answer's.
    effective_draws : float or numpy.ndarray
        Number of independent draws that would give this error.
    upper_bound : float, numpy.ndarray or None
        For an event in which no draw lies: a bound on its probability (NaN where none is known);
        None otherwise.
    lower_bound : float, numpy.ndarray or None
        The same for an event outside of which no draw lies.
    decision : Decision or None
        For a probability that was held against a level.
    degrees : float or numpy.ndarray
        Degrees of freedom of the error interval, at least 1: few where few draws carry the estimate
        on one side, or where a slow chain knows little of its own error.
    label : str
        What was estimated.
    dims : tuple of str
        Names of the dimensions of `value`.
    labels : mapping of str to numpy.ndarray
        Labels along them.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(5)
    >>> rate = rng.normal(0.10, 0.02, size=(4, 500))
    >>> fit = sy.Fit({"rate": rate}, prior={"rate": sy.Normal(0.1, 0.1)})
    >>> estimate = fit.base.mean("rate")
    >>> estimate.verdict.is_sound, bool(estimate.error < 0.001)
    (True, True)
    """

    value: Any
    error: Any
    tail_shape: Any
    verdict: Verdict
    effective_draws: Any
    upper_bound: Any = None
    lower_bound: Any = None
    decision: Decision | None = None
    degrees: Any = math.inf
    label: str = ""
    dims: tuple[str, ...] = ()
    labels: Mapping[str, npt.NDArray[Any]] = field(default_factory=dict)

    def error_interval(self, level: float = 0.95) -> npt.NDArray[np.float64]:
        """
        Monte Carlo interval: where the value would lie with infinitely many draws.

        Parameters
        ----------
        level : float
            Probability in (0, 1).

        Returns
        -------
        numpy.ndarray
            Lower and upper limit, shape ``(2, *shape)``.

        Raises
        ------
        ArgumentError
            For a level outside (0, 1).

        Notes
        -----
        ``value ± t error`` with the quantile of Student's t for :attr:`degrees`: a mean of few
        skewed contributions is not normal, and its error is not well known. It says nothing about
        the model.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> answer = sy.weigh(np.zeros(1000))
        >>> answer.mean(np.arange(1000.0)).error_interval(0.9).shape
        (2,)
        """
        if not isinstance(level, int | float | np.floating) or not 0 < level < 1:
            raise ArgumentError("level", "a number between 0 and 1", repr(level), "Write 0.95.")
        with np.errstate(invalid="ignore"):
            half = student_quantile(float(level), self.degrees) * np.asarray(self.error)
        return np.stack([np.asarray(self.value) - half, np.asarray(self.value) + half])

    def to_xarray(self) -> Any:
        """
        The estimate as an xarray Dataset.

        Returns
        -------
        xarray.Dataset
            Variables ``value``, ``error``, ``tail_shape``, ``effective_draws`` and ``level``.

        Raises
        ------
        MissingExtraError
            Without xarray.
        """
        from steelyard.base.optional import xarray

        shape = np.shape(self.value)
        dims = [d or f"axis_{i}" for i, d in enumerate(self.dims or ("",) * len(shape))]
        levels = np.asarray(self.verdict.level).astype(str)
        parts = {
            "value": self.value,
            "error": self.error,
            "tail_shape": self.tail_shape,
            "effective_draws": self.effective_draws,
            "level": levels,
        }
        variables = {k: (dims, np.broadcast_to(np.asarray(v), shape)) for k, v in parts.items()}
        coords = {d: v for d, v in self.labels.items() if d in dims}
        return xarray().Dataset(variables, coords=coords, attrs={"quantity": self.label})

    def _refuse(self, other: object) -> NoReturn:
        raise TruthValueError(
            "estimate",
            "a comparison of its .value, with its .error in mind",
            f"a comparison with {type(other).__name__}",
            "Write estimate.value > c; for a decision use prob(event, level=…).decision.",
        )

    __lt__ = __le__ = __gt__ = __ge__ = __eq__ = __ne__ = _refuse
    __hash__ = object.__hash__

    def __bool__(self) -> NoReturn:
        raise TruthValueError(
            "estimate",
            "a question about its .value",
            "bool(estimate)",
            "Write estimate.value, or estimate.verdict.is_sound.",
        )

    def __float__(self) -> NoReturn:
        raise TruthValueError(
            "estimate",
            "its .value, with its .error in mind",
            "float(estimate)",
            "Write float(estimate.value).",
        )

    def _bound(self) -> str:
        if self.upper_bound is not None and np.ndim(self.upper_bound) == 0:
            known = not math.isnan(self.upper_bound)
            return f"below {short(self.upper_bound)}" if known else "no draw in the event, no bound"
        if self.lower_bound is not None and np.ndim(self.lower_bound) == 0:
            known = not math.isnan(self.lower_bound)
            return f"above {short(self.lower_bound)}" if known else "no draw outside, no bound"
        return ""

    def _texts(self) -> Any:
        value, error = np.asarray(self.value), np.asarray(self.error)
        texts = np.empty(value.shape, dtype=object)
        for place in np.ndindex(value.shape):
            v, e = float(value[place]), float(error[place])
            texts[place] = f"{rounded(v, e)} ± {rounded(e, e)}"
        return texts

    def __str__(self) -> str:
        head = f"{self.label}: " if self.label else ""
        if np.ndim(self.value) == 0:
            number = self._bound() or str(self._texts()[()])
            tail = f"; {self.decision}" if self.decision else ""
            return f"{head}{number} ({self.verdict.level}){tail}"
        texts, levels = self._texts(), self.verdict.level
        if texts.size > 40:
            return f"{head}array of shape {texts.shape}; {self.verdict!r}"
        lines = [
            f"  [{', '.join(self._names(place))}] {texts[place]} ({Level.__str__(levels[place])})"
            for place in np.ndindex(texts.shape)
        ]
        return "\n".join([head.rstrip(" "), *lines])

    def _names(self, place: tuple[int, ...]) -> list[str]:
        """Labels of one element, positions where there are none."""
        dims = self.dims or ("",) * len(place)
        return [
            label_texts(self.labels[dim])[i] if dim in self.labels else str(i)
            for dim, i in zip(dims, place, strict=True)
        ]

    def __repr__(self) -> str:
        return f"<Estimate {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


class Estimates(dict[str, Any]):
    """
    Several results by label: a dictionary that prints itself one a line.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> x = np.random.default_rng(1).normal(size=1000)
    >>> list(sy.weigh(np.zeros(1000), {"mu": x, "tau": x**2}).mean())
    ['mu', 'tau']
    """

    def __str__(self) -> str:
        return "\n".join(f"{label}: {_without_label(one)}" for label, one in self.items())

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def _without_label(result: Any) -> str:
    if isinstance(result, Estimate):
        return str(replace(result, label=""))
    return "\n  ".join(["", *str(result).splitlines()])
