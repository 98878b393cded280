"""Calls made, counted, and held to their one promise."""

from __future__ import annotations

import pickle
import traceback
import warnings
from collections import Counter
from collections.abc import Callable
from typing import Any

import numpy as np

import steelyard as sy
from steelyard.errors import SteelyardError

# What the bindings themselves may raise; the package in front of them is stricter. The warning is
# numpy's, where a complex scalar is read as a float.
OF_BINDINGS = (ValueError, TypeError, OverflowError, np.exceptions.ComplexWarning)


class Explorer:
    """
    Makes calls and keeps what should not have happened.

    Attributes
    ----------
    answered, refused : Counter
        Calls by name.
    findings : dict
        What was broken, by where it was: an exception that is no refusal, a warning, or a result
        that contradicts itself.
    """

    def __init__(self) -> None:
        self.answered: Counter[str] = Counter()
        self.refused: Counter[str] = Counter()
        self.findings: dict[tuple[str, str, str], str] = {}
        self.seed: tuple[int, ...] = ()

    @property
    def made(self) -> int:
        return self.answered.total() + self.refused.total()

    def call(
        self,
        name: str,
        function: Callable[..., Any],
        *arguments: Any,
        refusals: tuple[type[Exception], ...] = (SteelyardError,),
        **options: Any,
    ) -> Any:
        """What the function returns, or None where it refuses."""
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("error")
                result = function(*arguments, **options)
                audit(result)
        except refusals as refusal:
            self.refused[name] += 1
            if isinstance(refusal, SteelyardError) and not tells(refusal):
                self._keep(name, refusal, arguments, options)
            return None
        except (KeyboardInterrupt, SystemExit):
            raise
        # A panic of a kernel is no Exception.
        except BaseException as error:
            self._keep(name, error, arguments, options)
            return None
        self.answered[name] += 1
        return result

    def _keep(
        self, name: str, error: BaseException, arguments: tuple[Any, ...], options: Any
    ) -> None:
        inner = traceback.extract_tb(error.__traceback__)[-1]
        place = f"{inner.filename.rsplit('/', 1)[-1]}:{inner.lineno}"
        key = (name, type(error).__name__, place)
        if key not in self.findings:
            self.findings[key] = (
                f"{name}, seed {self.seed}: {type(error).__name__} at {place}: "
                f"{str(error)[:300]}\n    {shown(arguments)} {shown(options)}"
            )


def shown(value: Any) -> str:
    """A short text of arguments; some have a text form that fails itself."""
    try:
        with np.printoptions(threshold=20, edgeitems=4):
            return repr(value)[:600]
    except Exception as error:
        return f"<no text: {error!r}>"


def tells(refusal: SteelyardError) -> bool:
    """Whether all four parts of a message are there, and short enough to be read."""
    parts = (refusal.argument, refusal.expected, refusal.came, refusal.next_step)
    return all(isinstance(part, str) and part for part in parts) and len(str(refusal)) < 3000


def audit(result: Any) -> None:
    """A result prints itself, survives pickling, and does not contradict itself."""
    if isinstance(result, dict):
        for part in result.values():
            audit(part)
    if isinstance(result, sy.Estimate):
        audit_estimate(result)
    elif isinstance(result, sy.Answer):
        audit_answer(result)
    if isinstance(result, sy.Estimate | sy.Table | sy.Draws | sy.Verdict):
        texts = str(result), repr(result)
        assert all(texts), "an empty text form"
        again = pickle.loads(pickle.dumps(result))
        assert (str(again), repr(again)) == texts, "pickling changes it"
    if hasattr(result, "_repr_html_"):
        assert result._repr_html_(), "an empty HTML form"


def audit_estimate(estimate: sy.Estimate) -> None:
    shape = np.shape(estimate.value)
    for name in ("error", "tail_shape", "effective_draws"):
        assert np.shape(getattr(estimate, name)) == shape, f"{name} of another shape"
    assert np.shape(estimate.verdict.level) == shape, "verdict of another shape"
    assert not np.any(np.asarray(estimate.error) < 0), "a negative error"
    assert not np.any(np.asarray(estimate.effective_draws) < 0), "negative effective draws"


def audit_answer(answer: sy.Answer) -> None:
    weights = np.asarray(answer.weights)
    # 1e-9: a sum of some hundred roundings.
    assert abs(weights.sum() - 1) < 1e-9, f"weights add up to {weights.sum()}"
    assert (weights >= 0).all(), "a negative weight"
    count = weights.size * (1 + 1e-9)
    assert 1 - 1e-9 <= answer.effective_size <= answer.entropy_size * (1 + 1e-9) <= count * 2
    assert answer.entropy_size <= count, "more effective than there are"
    assert 0 < answer.largest_share <= 1 + 1e-9
    assert str(answer)
    assert repr(answer)
