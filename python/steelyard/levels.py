"""The three levels, and the published limits that draws and tail shapes are held against."""

from __future__ import annotations

import math

from steelyard.errors import ArgumentError

__all__ = ["LEVELS", "Level", "needed_draws", "rank_of", "shape_limit"]

LEVELS = ("refit", "strained", "sound")


class Level(str):
    """
    One of ``"refit" < "strained" < "sound"``.

    Compares with those three strings only; another string is refused, so that a misspelt level
    cannot pass for a comparison.

    Parameters
    ----------
    name : str
        One of the three names.

    Raises
    ------
    ArgumentError
        For any other text.

    Examples
    --------
    >>> from steelyard.levels import Level
    >>> Level("strained") < "sound"
    True
    """

    __slots__ = ()

    def __new__(cls, name: str) -> Level:
        rank_of(name)
        return super().__new__(cls, name)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, str) and rank_of(str(self)) == rank_of(other)

    def __ne__(self, other: object) -> bool:
        return not self == other

    def __lt__(self, other: str) -> bool:
        return rank_of(str(self)) < rank_of(other)

    def __le__(self, other: str) -> bool:
        return rank_of(str(self)) <= rank_of(other)

    def __gt__(self, other: str) -> bool:
        return rank_of(str(self)) > rank_of(other)

    def __ge__(self, other: str) -> bool:
        return rank_of(str(self)) >= rank_of(other)

    def __hash__(self) -> int:
        return str.__hash__(self)

    def __repr__(self) -> str:
        return repr(str(self))

    def __str__(self) -> str:
        return str.__str__(self)


def rank_of(name: object) -> int:
    for rank, known in enumerate(LEVELS):
        if isinstance(name, str) and str.__eq__(known, name):
            return rank
    raise ArgumentError(
        "level",
        "one of 'refit', 'strained', 'sound'",
        repr(name) if not isinstance(name, Level) else str(name),
        "Compare a level with those strings only.",
    )


def shape_limit(draws: int) -> float:
    """
    Largest tail shape at which `draws` draws still give a sound answer.

    Parameters
    ----------
    draws : int
        Number of draws S.

    Returns
    -------
    float
        ``min(1 − 1/log10 S, 0.7)``, and −inf for a single draw.

    References
    ----------
    .. [1] Vehtari, Simpson, Gelman, Yao, Gabry (2024), JMLR 25.

    Examples
    --------
    >>> from steelyard.levels import shape_limit
    >>> shape_limit(100)
    0.5
    """
    return min(1 - 1 / math.log10(draws), 0.7) if draws > 1 else -math.inf


def needed_draws(tail_shape: float) -> float:
    """
    Number of draws that a tail shape asks for.

    Parameters
    ----------
    tail_shape : float
        Tail shape k of the weights.

    Returns
    -------
    float
        ``10^(1/(1 − max(0, k)))``; +inf from k = 1 on.

    References
    ----------
    .. [1] Vehtari, Simpson, Gelman, Yao, Gabry (2024), JMLR 25.

    Examples
    --------
    >>> from steelyard.levels import needed_draws
    >>> round(needed_draws(0.5))
    100
    """
    if math.isnan(tail_shape) or tail_shape >= 1:
        return math.inf
    exponent = 1 / (1 - max(0.0, tail_shape))
    return 10.0**exponent if exponent < 308 else math.inf
