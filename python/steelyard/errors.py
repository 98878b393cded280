"""
Every error that Steelyard raises on purpose.

The tree::

    SteelyardError
    ├── DrawsError            ValueError   draws, chains or their names cannot be read
    ├── ShapeError            ValueError   two shapes disagree
    ├── UnknownNameError      ValueError   a parameter, term, label or position that is not there
    ├── AmbiguousNameError    ValueError   a name or number that could mean two things
    ├── PriorError            ValueError   prior terms: not stated, improper, or left by the draws
    ├── LikelihoodError       ValueError   likelihood terms: not stated, or values that cannot be
    ├── ChangeError           ValueError   edits that contradict each other or do not fit the base
    ├── RatioError            ValueError   log ratios that are NaN, +inf, or all −inf
    ├── QuantityError         ValueError   a quantity or event that cannot be evaluated
    ├── ArgumentError         ValueError   any other argument with an unusable value
    ├── ArgumentTypeError     TypeError    an argument of a type that cannot be used
    ├── TruthValueError       TypeError    a yes/no asked of something that holds more than that
    └── MissingExtraError     ImportError  an optional library is needed and absent

Each message says which argument, what was expected, what came, and what to do; the four parts
are also attributes.
"""

from __future__ import annotations

__all__ = [
    "AmbiguousNameError",
    "ArgumentError",
    "ArgumentTypeError",
    "ChangeError",
    "DrawsError",
    "LikelihoodError",
    "MissingExtraError",
    "PriorError",
    "QuantityError",
    "RatioError",
    "ShapeError",
    "SteelyardError",
    "TruthValueError",
    "UnknownNameError",
]


class SteelyardError(Exception):
    """
    Base of all errors raised on purpose.

    Parameters
    ----------
    argument : str
        The argument, term or parameter at fault.
    expected : str
        What would have been accepted.
    came : str
        What was received instead, with its shape, number or text.
    next_step : str
        What the caller can do.
    """

    def __init__(self, argument: str, expected: str, came: str, next_step: str) -> None:
        parts = [_readable(part) for part in (argument, expected, came, next_step)]
        super().__init__(*parts)
        self.argument, self.expected, self.came, self.next_step = parts

    def __str__(self) -> str:
        return f"{self.argument}: expected {self.expected}; got {self.came}. {self.next_step}"


# Longer parts of a message are cut: what came may be an array of a million numbers.
_LONGEST = 300


def _readable(part: str) -> str:
    return part if len(part) <= _LONGEST else f"{part[:_LONGEST]}… ({len(part)} characters)"


class DrawsError(SteelyardError, ValueError):
    """Draws, chains or their names cannot be read."""


class ShapeError(SteelyardError, ValueError):
    """Two shapes disagree; the message shows both."""


class UnknownNameError(SteelyardError, ValueError):
    """A parameter, term, label or position that is not there."""


class AmbiguousNameError(SteelyardError, ValueError):
    """A name or number that could mean two things."""


class PriorError(SteelyardError, ValueError):
    """Prior terms that are not stated, are improper, or do not contain the draws."""


class LikelihoodError(SteelyardError, ValueError):
    """Likelihood terms that are not stated, or values that no log likelihood has."""


class ChangeError(SteelyardError, ValueError):
    """Edits that contradict each other or do not fit the base."""


class RatioError(SteelyardError, ValueError):
    """Log ratios that are NaN or +inf, or −inf for every draw."""


class QuantityError(SteelyardError, ValueError):
    """A quantity or event that cannot be evaluated on the draws."""


class ArgumentError(SteelyardError, ValueError):
    """An argument with an unusable value."""


class ArgumentTypeError(SteelyardError, TypeError):
    """An argument of a type that cannot be used."""


class TruthValueError(SteelyardError, TypeError):
    """A yes/no asked of something that holds more than that."""


class MissingExtraError(SteelyardError, ImportError):
    """An optional library is needed and is not installed."""
