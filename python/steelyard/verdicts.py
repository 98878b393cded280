"""What may be said of an answer: three levels, and the reasons for them in one table."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from html import escape
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import frozen
from steelyard.digits import short
from steelyard.errors import ArgumentTypeError, TruthValueError
from steelyard.levels import LEVELS, Level, needed_draws, rank_of, shape_limit
from steelyard.rules import RULES

__all__ = ["Finding", "Level", "Reason", "Verdict", "judge", "needed_draws", "shape_limit"]


@dataclass(frozen=True)
class Reason:
    """
    One reason behind a verdict.

    Attributes
    ----------
    code : str
        Short name, as in the table of rules.
    figure : float
        The figure that was judged.
    limit : float
        The limit that it was held against; NaN where there is none.
    level : Level
        The level that this reason alone would give; a note has ``"sound"``.
    sentence : str
        The reason in words.
    next_step : str
        What to do about it.
    """

    code: str
    figure: float
    limit: float
    level: Level
    sentence: str
    next_step: str

    def __str__(self) -> str:
        return f"{self.sentence} {self.next_step}"


@dataclass(frozen=True, eq=False)
class Finding:
    """A rule held against figures, one per element of a quantity (or one for all)."""

    code: str
    figure: npt.NDArray[np.float64]
    strained: float
    refit: float
    words: Mapping[str, str] = field(default_factory=dict)
    # True where the rule speaks at all; a figure inside its limits is silent.
    spoken: npt.NDArray[np.bool_] | None = None

    @property
    def wording(self) -> tuple[str, str]:
        """Code and words: findings of several targets that share it are one finding."""
        return self.code, str(sorted(self.words.items()))

    @property
    def rank(self) -> npt.NDArray[np.int8]:
        worse = RULES[self.code].worse
        rank = np.full(self.figure.shape, 2, dtype=np.int8)
        if worse == "always":
            rank[...] = 0
        elif worse != "note":
            rank[_beyond(self.figure, self.strained, worse, closed=worse == "from")] = 1
            # A shape of exactly 1 has no finite mean: upper refit limits are closed.
            rank[_beyond(self.figure, self.refit, worse, closed=worse != "below")] = 0
        if self.spoken is not None:
            rank[~self.spoken] = 2
        return rank

    def at(self, index: Any, shape: tuple[int, ...]) -> Finding:
        def cut(values: npt.NDArray[Any]) -> npt.NDArray[Any]:
            return np.asarray(np.broadcast_to(values, shape)[index])

        return Finding(
            self.code,
            cut(self.figure),
            self.strained,
            self.refit,
            self.words,
            None if self.spoken is None else cut(self.spoken),
        )

    def reason(self, figure: float, rank: int) -> Reason:
        rule = RULES[self.code]
        limit = self.refit if rank == 0 else self.strained
        words = {"figure": short(figure), "limit": short(limit), **self.words}
        if "{meaning}" in rule.sentence:
            words["meaning"] = _meaning(figure)
        return Reason(
            self.code,
            figure,
            limit if rule.worse in ("above", "from", "below") else math.nan,
            Level(LEVELS[rank]),
            rule.sentence.format(**words),
            rule.next_step_refit if rank == 0 and rule.next_step_refit else rule.next_step,
        )


def _worst(finding: Finding, rank: npt.NDArray[np.int8]) -> int:
    """Position of the worst figure among those of the worst level."""
    sign = -1.0 if RULES[finding.code].worse == "below" else 1.0
    figures = np.broadcast_to(sign * finding.figure, rank.shape).reshape(-1)
    figures = np.where(np.isnan(figures), np.inf, figures)
    return int(np.argmax(np.where(rank.reshape(-1) == rank.min(), figures, -np.inf)))


def _meaning(tail_shape: float) -> str:
    if math.isinf(tail_shape):
        return "there are too few draws to fit a tail"
    if tail_shape >= 1:
        return "their mean is not finite"
    return f"such weights ask for about {short(needed_draws(tail_shape))} draws"


def _beyond(
    figure: npt.NDArray[np.float64], limit: float, worse: str, *, closed: bool
) -> npt.NDArray[np.bool_]:
    """Where figures are beyond a limit; one that is not a number is beyond every limit."""
    sign = -1.0 if worse == "below" else 1.0
    past = sign * figure >= sign * limit if closed else sign * figure > sign * limit
    return np.asarray(past | np.isnan(figure))


def judge(
    code: str,
    figure: npt.ArrayLike = math.nan,
    *,
    strained: float | None = None,
    refit: float | None = None,
    spoken: npt.NDArray[np.bool_] | None = None,
    **words: str,
) -> Finding:
    """Hold figures against the rule named `code`, with its own limits unless others are given."""
    rule = RULES[code]
    return Finding(
        code,
        np.asarray(figure, dtype=np.float64),
        rule.strained if strained is None else strained,
        rule.refit if refit is None else refit,
        words,
        spoken,
    )


class Verdict:
    """
    Whether an answer can be used, and why.

    Attributes
    ----------
    level : Level or numpy.ndarray of Level
        ``"refit" < "strained" < "sound"``; an array for a quantity that is one.
    is_sound : bool or numpy.ndarray of bool
        Whether the level is ``"sound"``.
    reasons : tuple of Reason
        The reasons, worst first; notes (which leave the level alone) last. For an array, the
        worst case of each reason; index the verdict for the reasons of one element.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> answer = sy.weigh(0.1 * rng.normal(size=1000))
    >>> answer.verdict.is_sound
    True
    """

    __slots__ = ("_findings", "_shape")

    def __init__(self, findings: Iterable[Finding], shape: tuple[int, ...] = ()) -> None:
        self._findings = tuple(findings)
        self._shape = shape

    @property
    def findings(self) -> tuple[Finding, ...]:
        """All rules that were held against figures, including the silent ones."""
        return self._findings

    @property
    def level(self) -> Any:
        """The level, or an array of levels."""
        rank = self._rank()
        if not self._shape:
            return Level(LEVELS[int(rank)])
        levels = np.array([Level(name) for name in LEVELS], dtype=object)
        return frozen(levels[rank])

    @property
    def is_sound(self) -> Any:
        """Whether the level is ``"sound"``; an array of bool for an array of levels."""
        sound = self._rank() == LEVELS.index("sound")
        return sound if self._shape else bool(sound)

    def _rank(self) -> npt.NDArray[np.int8]:
        """The place of each level among `LEVELS`."""
        rank = np.full(self._shape, len(LEVELS) - 1, dtype=np.int8)
        for finding in self._findings:
            rank = np.minimum(rank, finding.rank)
        return rank

    @property
    def reasons(self) -> tuple[Reason, ...]:
        """The reasons, worst first, notes last."""
        found = []
        for finding in self._findings:
            rank = finding.rank
            is_note = RULES[finding.code].worse == "note"
            if rank.size == 0 or (not is_note and rank.min() == 2):
                continue
            if finding.spoken is not None and not finding.spoken.any():
                continue  # a note about other elements
            worst = _worst(finding, rank)
            found.append(finding.reason(float(finding.figure.flat[worst]), int(rank.flat[worst])))
        return tuple(sorted(found, key=lambda reason: rank_of(str(reason.level))))

    def __getitem__(self, index: Any) -> Verdict:
        if not self._shape:
            raise ArgumentTypeError(
                "verdict", "no index, since it is a single one", repr(index), "Read .level at once."
            )
        shape = np.empty(self._shape, dtype=np.bool_)[index].shape
        return Verdict((f.at(index, self._shape) for f in self._findings), shape)

    def __bool__(self) -> bool:
        raise TruthValueError(
            "verdict",
            "a question about it",
            "bool(verdict)",
            "Write verdict.is_sound, or compare verdict.level with 'sound', 'strained' or 'refit'.",
        )

    def __str__(self) -> str:
        level = self.level
        head = str(level) if isinstance(level, Level) else _counted(level)
        lines = [head, *(f"  {r.level}: {r}" for r in self.reasons if r.level < "sound")]
        lines += [f"  note: {r}" for r in self.reasons if r.level == "sound"]
        return "\n".join(lines)

    def __repr__(self) -> str:
        codes = ", ".join(r.code for r in self.reasons)
        level = self.level
        head = str(level) if isinstance(level, Level) else _counted(level)
        return f"<Verdict {head}{': ' + codes if codes else ''}>"

    def _repr_html_(self) -> str:
        items = "".join(
            f"<li>{'note' if r.level == 'sound' else r.level}: {escape(str(r))}</li>"
            for r in self.reasons
        )
        level = self.level
        head = str(level) if isinstance(level, Level) else _counted(level)
        return f"<p><b>{escape(head)}</b></p><ul>{items}</ul>"


def _counted(levels: npt.NDArray[Any]) -> str:
    counts = [(name, int(np.sum(levels == name))) for name in reversed(LEVELS)]
    return ", ".join(f"{count} {name}" for name, count in counts if count)
