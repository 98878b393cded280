"""Looking ahead in a series: data are added to a fit of its first part until a refit is due."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

from steelyard.answers import Estimate
from steelyard.base import Base
from steelyard.base.likelihood import LoglikTerm, read_loglik_term
from steelyard.errors import ArgumentError, ArgumentTypeError, LikelihoodError, ShapeError
from steelyard.leaving_out.blocks import read_columns, width_of
from steelyard.leaving_out.deletion import (
    Deleted,
    Totals,
    delete_columns,
    group_findings,
    setting_of,
)
from steelyard.leaving_out.look_ahead_result import LookAhead
from steelyard.leaving_out.progress import Teller, teller
from steelyard.leaving_out.scoring import Series, level_counts, of_total, ranks_of, study_total
from steelyard.levels import LEVELS
from steelyard.verdicts import Verdict, judge

__all__ = ["look_ahead"]

Refit = Callable[[int], tuple[Any, Any]]


def look_ahead(
    base: Base,
    series: Any,
    *,
    from_: int,
    steps: int = 1,
    refit: Refit | None = None,
    until: str = "refit",
    progress: Any = None,
) -> LookAhead:
    """Add data forward; see ``Fit.look_ahead``."""
    term = _series(base, series)
    last = _read_points(term, from_, steps)
    if until not in ("refit", "strained"):
        raise ArgumentError(
            "until", "'refit' or 'strained'", repr(until), "Say which level is too bad."
        )
    bad = LEVELS.index(until)
    found = Deleted.empty(last - from_, 0)
    tell = teller(progress, last - from_, "points")
    begin, due, runs = from_, [], []
    while True:
        totals, stop, asks = _run(base, term, found, from_, begin, last, steps, refit, bad, tell)
        runs.append(study_total(base, totals.left_out, totals.raw))
        due += [stop] if asks else []
        if not asks or refit is None or stop == begin:
            break
        base, term = _refitted(refit, stop, term)
        begin = stop
    return _result(base, found, runs, due, from_, steps, refit is None)


def _run(
    base: Base,
    term: LoglikTerm,
    found: Deleted,
    from_: int,
    begin: int,
    last: int,
    steps: int,
    refit: Refit | None,
    bad: int,
    tell: Teller,
) -> tuple[Totals, int, bool]:
    """
    Add data from `begin` on; the series of the sum, where a refit is due, and whether one is.

    With `refit` the run ends there; without it goes on, since no point may be lost in silence.
    """
    setting, totals = setting_of(base), Totals.zero(base.draws.size)
    added = np.zeros(base.draws.size)
    first_due: int | None = None
    width = max(1, min(width_of(term, base.draws) - steps, 256))
    for start in range(begin, last, width):
        stop = min(start + width, last)
        values = read_columns(term, base.draws, np.arange(start, stop + steps - 1))
        before = added[:, None] + np.cumsum(values[:, : stop - start], axis=1)
        held = -np.concatenate([added[:, None], before[:, :-1]], axis=1)
        ahead = np.lib.stride_tricks.sliding_window_view(values, steps, axis=1).sum(axis=2)
        figures, series = delete_columns(setting, held, ahead)
        verdict = _verdict(figures, base, last - from_)
        asks = ranks_of(verdict, figures.score.shape) <= bad
        if first_due is None and asks.any():
            first_due = start + int(np.argmax(asks))
        if refit is not None and first_due is not None and first_due > begin:
            keep = first_due - start
            if keep:
                figures, series = delete_columns(setting, held[:, :keep], ahead[:, :keep])
                found.put(slice(start - from_, first_due - from_), figures)
                totals.add(series)
            return totals, first_due, True
        found.put(slice(start - from_, stop - from_), figures)
        totals.add(series)
        added = before[:, -1]
        tell(stop - from_)
    return totals, last if first_due is None else first_due, first_due is not None


def _verdict(found: Deleted, base: Base, tests: int) -> Verdict:
    shape = found.score.shape
    return Verdict(group_findings(found, base.draws.size, shape, tests), shape)


def _result(
    base: Base,
    found: Deleted,
    runs: list[Series],
    due: list[int],
    from_: int,
    steps: int,
    is_forecast: bool,
) -> LookAhead:
    points = np.arange(from_, from_ + len(found.score))
    verdict = _verdict(found, base, len(found.score))
    ranks = ranks_of(verdict, found.score.shape)
    by_point = Estimate(
        found.score,
        found.error,
        found.tail_shape,
        Verdict([*verdict.findings, judge("base_unverified")], found.score.shape),
        found.spread / np.where(found.error > 0, found.error, np.nan) ** 2,
        degrees=found.degrees,
        label=f"log score {steps} ahead",
        dims=("point",),
        labels={"point": points},
    )
    joint = _joint(runs, float(found.unseen.sum()))
    findings = [judge("base_unverified"), *level_counts(ranks, "points ahead")]
    total = of_total(float(found.score.sum()), joint, findings, f"log score {steps} ahead")
    end = from_ + len(points)
    needed = _forecast(from_, due[0], end) if is_forecast and due else len(due)
    return LookAhead(
        by_point,
        total,
        steps,
        from_,
        tuple(due),
        needed,
        is_forecast and bool(due),
        found.effective_size,
    )


def _joint(runs: list[Series], unseen: float) -> Series:
    """What the sum over all runs shows: its error adds up, the rest is that of the worst."""
    return Series(
        math.hypot(*(run.error for run in runs), unseen),
        max(run.tail_shape for run in runs),
        min(run.p_value for run in runs),
        min(run.effective_draws for run in runs),
        min(run.contributions for run in runs),
        min(run.degrees for run in runs),
    )


def _forecast(from_: int, due: int, end: int) -> int:
    """
    Refits for the whole series, when each carries its fit on in the same proportion (*derived*).

    What counts is data added against data seen: both posterior widths shrink alike.
    """
    ratio, at, count = due / max(from_, 1), float(due), 0
    while at < end:
        count += 1
        at = max(at * ratio, at + 1)
    return count


def _series(base: Base, series: Any) -> LoglikTerm:
    if isinstance(series, str):
        terms = base.loglik or {}
        raise ArgumentTypeError(
            "series",
            "log likelihood values of the whole series, draws first",
            f"the text {series!r}",
            "Terms of the fit are those it has seen"
            + (f" ({', '.join(terms)})" if terms else "")
            + ": pass values that go on beyond them.",
        )
    term = read_loglik_term("series", series, base.draws, "series")
    if len(term.obs_shape) != 1:
        raise ShapeError(
            "series",
            "one axis of observations in time order",
            f"shape {term.obs_shape}",
            "Sum what happens at the same time.",
        )
    return term


def _read_points(term: LoglikTerm, from_: Any, steps: Any) -> int:
    """One beyond the last point from which so many steps can be looked ahead."""
    count = term.observations
    for name, value in (("from_", from_), ("steps", steps)):
        if isinstance(value, bool) or not isinstance(value, int | np.integer):
            raise ArgumentTypeError(name, "an integer", repr(value), "Count observations.")
    if steps < 1:
        raise ArgumentError("steps", "at least 1", str(steps), "Say how far to look.")
    if not 1 <= from_ <= count - steps:
        raise ArgumentError(
            "from_",
            f"from 1 to {count - steps}: {steps} ahead must lie within {count} observations",
            str(from_),
            "Give the number of observations that the fit has seen.",
        )
    return int(count - steps + 1)


def _refitted(refit: Refit, point: int, term: LoglikTerm) -> tuple[Base, LoglikTerm]:
    given = refit(point)
    if not (isinstance(given, tuple) and len(given) == 2):
        raise ArgumentTypeError(
            "refit",
            "a pair (fit of the observations before that point, series at its draws)",
            type(given).__name__,
            "Return both.",
        )
    base = getattr(given[0], "_record", given[0])
    if not isinstance(base, Base):
        raise ArgumentTypeError(
            "refit", "a Fit, first", type(given[0]).__name__, "Return (fit, series)."
        )
    fresh = _series(base, given[1])
    if fresh.observations != term.observations:
        raise LikelihoodError(
            "refit",
            f"the same {term.observations} observations in the series",
            str(fresh.observations),
            "Evaluate the whole series at the new draws.",
        )
    return base, fresh
