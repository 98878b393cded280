"""Up the ladder: rung after rung, in order of price, until one is sound."""

from __future__ import annotations

import math
import time
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np

from steelyard.answers import Answer, reweigh
from steelyard.answers.events import is_expression
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.names import close_names
from steelyard.changes import Change
from steelyard.errors import ArgumentError, ArgumentTypeError, SteelyardError
from steelyard.repair.evaluating import Evaluator, evaluator_of
from steelyard.repair.ladder import Ladder, Rung
from steelyard.repair.outcomes import Outcome, not_possible
from steelyard.repair.rungs import EMPTY, INTERRUPTED, MOVING, RUNGS
from steelyard.repair.spending import Purse, read_purse
from steelyard.verdicts import Level
from steelyard.weighing.arrays import seed_key

__all__ = ["Climb", "repair"]


@dataclass(eq=False)
class Climb:
    """
    What every rung may use.

    Attributes
    ----------
    record : Base
        The fit.
    change : Change
        What is asked.
    plain : Answer
        The answer by smoothing the base's own draws.
    purse : Purse
        What may be spent.
    seeds : bytes
        What random streams are derived from.
    fits : tuple
        Other fits to pool with.
    ascending : tuple of str
        Vectors that the model keeps in order.
    is_explicit : bool
        Whether the rungs were named, so that what bars one is an error.
    """

    record: Base
    change: Change
    plain: Answer
    purse: Purse
    seeds: bytes
    fits: tuple[Any, ...] = ()
    ascending: tuple[str, ...] = ()
    is_explicit: bool = False

    @cached_property
    def evaluator(self) -> Evaluator:
        """Base and target anywhere; an error names what cannot move."""
        made = evaluator_of(self.record, self.change, ascending=self.ascending)
        made.spent = self.purse.spent
        return made

    @property
    def has_gap(self) -> bool:
        """Whether the target reaches beyond the base's support."""
        return any(finding.code == "support_gap" for finding in self.plain._findings)

    @cached_property
    def start(self) -> Array:
        """Coordinates of the base draws; an error names one that has none."""
        return self.evaluator.start

    def generator(self, rung: str) -> np.random.Generator:
        """A random stream of the rung's own, whichever rungs were tried before."""
        return np.random.default_rng([*self.seeds, list(RUNGS).index(rung)])


def repair(
    record: Base,
    change: Change,
    *,
    rungs: Any = None,
    quantities: Any = None,
    most_evaluations: Any = None,
    most_seconds: Any = None,
    ascending: Any = (),
    fits: Any = (),
    rng: Any = None,
    progress: Any = None,
) -> Answer:
    """Climb the ladder; see ``Fit.repair``."""
    names = _names(rungs)
    purse = read_purse(most_evaluations, most_seconds, progress)
    given = _several(fits, "fits", "fits"), _several(ascending, "ascending", "names of vectors")
    seeds = seed_key(rng)
    began = time.monotonic()
    plain = reweigh(record, change)
    climb = Climb(record, change, plain, purse, seeds, *given, rungs is not None)
    _level(climb.plain, quantities)  # a quantity that cannot be read is an error before any cost
    outcome, first = _try(climb, "smoothing", quantities)
    tried = [replace(first, seconds=time.monotonic() - began)]
    chosen, best = "smoothing", plain if outcome.answer is None else outcome.answer
    for name in names:
        if name != "smoothing":
            outcome, rung = _try(climb, name, quantities)
            answer = outcome.answer
            if outcome.applies:
                tried.append(rung)
            if answer is not None and _better(answer, best, quantities):
                chosen, best = name, answer
            elif answer is not None:
                tried[-1] = replace(rung, stopped=_kept(rung, chosen))
        if tried[-1].stopped.startswith(INTERRUPTED):
            break
        if name == chosen and _level(best, quantities) == "sound":
            break
    return replace(best, ladder=Ladder(tuple(tried), chosen))


def _kept(rung: Rung, chosen: str) -> str:
    """Why an answer that a rung gave was not taken."""
    kept = f"no better than {chosen}, which was kept"
    return f"{rung.stopped}; {kept}" if rung.stopped in (INTERRUPTED, EMPTY) else kept


def _try(climb: Climb, name: str, quantities: Any) -> tuple[Outcome, Rung]:
    """One rung, with its price."""
    purse = climb.purse
    purse.rung, purse.is_empty = name, False
    purse.tell()
    points, began = purse.spent.points, time.monotonic()
    outcome = _barred(climb, name)
    if outcome is None:
        try:
            outcome = RUNGS[name](climb)
        except KeyboardInterrupt:
            outcome = Outcome(None, INTERRUPTED)
    outcome = replace(outcome, evaluations=outcome.evaluations + purse.spent.points - points)
    rung = _rung(name, outcome, purse, quantities)
    return outcome, replace(rung, seconds=time.monotonic() - began)


def _rung(name: str, outcome: Outcome, purse: Purse, quantities: Any) -> Rung:
    """What is told of an outcome."""
    answer, said = outcome.answer, outcome.stopped
    if answer is None:
        said = said or (EMPTY if purse.is_empty else "nothing better was found")
        return Rung(name, outcome.evaluations, 0.0, math.nan, math.nan, None, said)
    level = _level(answer, quantities)
    said = said or ("sound" if level == "sound" else f"{level}: {_why(answer)}")
    figures = (answer.effective_size, answer.tail_shape, answer.verdict)
    return Rung(name, outcome.evaluations, 0.0, *figures, said)


def _barred(climb: Climb, name: str) -> Outcome | None:
    """What keeps a rung from new points: told on the ladder, an error where it was named."""
    if name not in MOVING:
        return None
    try:
        _ = climb.start
    except SteelyardError as error:
        if climb.is_explicit:
            raise
        return Outcome(None, not_possible(error))
    return None


def _why(answer: Answer) -> str:
    codes = [r.code for r in answer.verdict.reasons if r.level < "sound"]
    return ", ".join(codes) or "a quantity is not sound"


def _level(answer: Answer, quantities: Any) -> Level:
    """The level of an answer, and of the quantities that were asked for."""
    levels: list[Level] = [answer.verdict.level]
    for quantity in _listed(quantities):
        is_event = isinstance(quantity, str) and is_expression(quantity)
        found = answer.prob(quantity) if is_event else answer.mean(quantity)
        levels += [Level(str(v)) for v in np.ravel(np.asarray(found.verdict.level, dtype=object))]
    return min(levels)


def _listed(quantities: Any) -> list[Any]:
    if quantities is None:
        return []
    if isinstance(quantities, Mapping):
        return list(quantities.values())
    return list(quantities) if isinstance(quantities, list | tuple) else [quantities]


def _better(answer: Answer, best: Answer, quantities: Any) -> bool:
    """Whether a rung's answer is worth more: its level, then its tail, then its effective size."""

    def worth(one: Answer) -> tuple[Level, float, float]:
        shape = one.tail_shape
        # Below one half all errors are finite, and a shape is not known to better than a tenth.
        tail = 0.5 if math.isnan(shape) else round(max(shape, 0.5), 1)
        return _level(one, quantities), -tail, one.effective_size

    return worth(answer) > worth(best)


def _several(value: Any, argument: str, what: str) -> tuple[Any, ...]:
    if isinstance(value, str):
        return (value,)
    if not isinstance(value, Iterable):
        raise ArgumentTypeError(argument, f"a list of {what}", repr(value), "Pass a list.")
    return tuple(value)


def _names(rungs: Any) -> list[str]:
    if rungs is None:
        return list(RUNGS)
    listed = [rungs] if isinstance(rungs, str) else rungs
    if not isinstance(listed, Iterable):
        raise ArgumentTypeError(
            "rungs", f"names from {', '.join(RUNGS)}", repr(rungs), "Name some."
        )
    names = list(listed)
    if not names:
        raise ArgumentError("rungs", "at least one", "none", "Leave it out for all of them.")
    for name in names:
        if not isinstance(name, str) or name not in RUNGS:
            raise ArgumentError(
                "rungs", "names of rungs", repr(name), close_names(str(name), RUNGS)
            )
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise ArgumentError("rungs", "each rung once", f"{twice} twice", "Name it once.")
    return names
