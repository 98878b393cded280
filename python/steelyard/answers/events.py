"""Events as text: comparisons, and, or, not, arithmetic; parsed here, never run as code."""

from __future__ import annotations

import operator
import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, NoReturn

import numpy as np

from steelyard.base.draws import Array
from steelyard.errors import QuantityError

__all__ = ["evaluate_event", "is_expression"]

_TOKEN = re.compile(
    r"""\s*(?:
      (?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)
    | (?P<quoted>"[^"]*"|'[^']*')
    | (?P<name>[^\W\d][\w.]*(?:\[[^\[\]]*\])?)
    | (?P<sign><=|>=|==|!=|<|>|\*\*|[-+*/()])
    )""",
    re.VERBOSE,
)
_COMPARE: dict[str, Callable[[Any, Any], Any]] = {
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
    "==": operator.eq,
    "!=": operator.ne,
}
_WORDS = ("and", "or", "not")
_DEEPEST = 50
# Characters of an event that an error quotes.
_LONGEST = 80
# Draws of a name, and what an error calls it.
LookUp = Callable[[str, str], Array]


@dataclass(frozen=True)
class _Token:
    kind: str
    text: str
    place: int


def is_expression(text: str) -> bool:
    """Whether a text means to compare something, rather than being a name alone."""
    outside = re.sub(r"\[[^\[\]]*\]", "", text)
    return any(sign in outside for sign in ("<", ">", "=", "!"))


def evaluate_event(text: str, look_up: LookUp) -> Any:
    """
    Evaluate an event text on the draws: a boolean array ``(n, *shape)``.

    Names are parameters or elements of them; a name with other characters goes in quotes.

    Raises
    ------
    QuantityError
        Where the text does not parse (the position is shown) or is not an event.
    """
    parser = _Parser(text, _tokens(text), look_up)
    value = parser.either()
    if parser.at < len(parser.tokens):
        parser.fail("the end of the event, or an operator")
    if np.asarray(value).dtype != np.bool_:
        _fail(text, 0, "a comparison", "arithmetic alone")
    return value


def _tokens(text: str) -> list[_Token]:
    tokens, at = [], 0
    while text[at:].strip():
        match = _TOKEN.match(text, at)
        if match is None or match.lastgroup is None:
            at += len(text[at:]) - len(text[at:].lstrip())
            if text[at] == "=":
                _fail(text, at, "a comparison; equality is ==", "a single =")
            _fail(text, at, "a name, a number, a comparison or arithmetic", repr(text[at]))
        kind, word = match.lastgroup, match[match.lastgroup]
        if kind == "name" and word in _WORDS:
            kind = "sign"
        tokens.append(_Token(kind, word, match.start(match.lastgroup)))
        at = match.end()
    return tokens


def _fail(text: str, place: int, expected: str, came: str) -> NoReturn:
    raise QuantityError(
        "event",
        expected,
        f"{came} at position {place} of {_quoted(text, place)}",
        'Events compare parameters and numbers, as in "rate[3] > 0.12 and mu < 0.2".',
    )


def _quoted(text: str, place: int) -> str:
    """The text, or the part of a long one that surrounds a position."""
    if len(text) <= _LONGEST:
        return repr(text)
    start = max(0, min(place - _LONGEST // 2, len(text) - _LONGEST))
    part = text[start : start + _LONGEST]
    return repr(("…" if start else "") + part + ("…" if start + _LONGEST < len(text) else ""))


class _Parser:
    """Recursive descent, loosest operator first."""

    def __init__(self, text: str, tokens: list[_Token], look_up: LookUp) -> None:
        self.text, self.tokens, self.look_up = text, tokens, look_up
        self.at = 0
        self.depth = 0

    def peek(self) -> str:
        token = self.tokens[self.at] if self.at < len(self.tokens) else None
        return token.text if token is not None and token.kind == "sign" else ""

    def take(self, *texts: str) -> str:
        found = self.peek()
        if found in texts and found:
            self.at += 1
            return found
        return ""

    def fail(self, expected: str) -> NoReturn:
        if self.at < len(self.tokens):
            token = self.tokens[self.at]
            _fail(self.text, token.place, expected, repr(token.text))
        _fail(self.text, len(self.text), expected, "the end")

    def either(self) -> Any:
        value = self.both()
        while self.take("or"):
            one, other = self._aligned(self._truth(value), self._truth(self.both()))
            value = one | other
        return value

    def both(self) -> Any:
        value = self.negation()
        while self.take("and"):
            one, other = self._aligned(self._truth(value), self._truth(self.negation()))
            value = one & other
        return value

    def negation(self) -> Any:
        with self._nested():
            return ~self._truth(self.negation()) if self.take("not") else self.comparison()

    def comparison(self) -> Any:
        left, result = self.total(), None
        while sign := self.take(*_COMPARE):
            right = self.total()
            self._numbers(left, right)
            self._no_nan(left, right)
            part = _COMPARE[sign](*self._aligned(left, right))
            result = part if result is None else operator.and_(*self._aligned(result, part))
            left = right
        return left if result is None else result

    def total(self) -> Any:
        value = self.product()
        while sign := self.take("+", "-"):
            other = self.product()
            self._numbers(value, other)
            value, other = self._aligned(value, other)
            with np.errstate(invalid="ignore", over="ignore"):
                value = value + other if sign == "+" else value - other
        return value

    def product(self) -> Any:
        value = self.signed()
        while sign := self.take("*", "/"):
            other = self.signed()
            self._numbers(value, other)
            value, other = self._aligned(value, other)
            with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
                value = value * other if sign == "*" else np.divide(value, other)
        return value

    def signed(self) -> Any:
        with self._nested():
            if self.take("-"):
                value = self.signed()
                self._numbers(value)
                return -value
            return self.power()

    def power(self) -> Any:
        base = self.atom()
        if self.take("**"):
            exponent = self.signed()
            self._numbers(base, exponent)
            base, exponent = self._aligned(base, exponent)
            with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
                return np.asarray(base, dtype=np.float64) ** exponent
        return base

    def atom(self) -> Any:
        if self.take("("):
            value = self.either()
            if not self.take(")"):
                self.fail("a closing bracket")
            return value
        if self.at >= len(self.tokens) or self.tokens[self.at].kind == "sign":
            self.fail("a name or a number")
        token = self.tokens[self.at]
        self.at += 1
        if token.kind == "number":
            return np.float64(token.text)
        name = token.text[1:-1] if token.kind == "quoted" else token.text
        return self.look_up(name, f"event, position {token.place}")

    @contextmanager
    def _nested(self) -> Iterator[None]:
        self.depth += 1
        if self.depth > _DEEPEST:
            _fail(self.text, 0, f"at most {_DEEPEST} nested parts", "more")
        yield
        self.depth -= 1

    def _aligned(self, one: Any, other: Any) -> tuple[Any, Any]:
        """Both sides with the draw axis first; axes that one lacks come after it."""
        a, b = np.asarray(one), np.asarray(other)
        if a.ndim and b.ndim and a.ndim != b.ndim:
            most = max(a.ndim, b.ndim)
            a, b = (v.reshape(v.shape[:1] + (1,) * (most - v.ndim) + v.shape[1:]) for v in (a, b))
        try:
            np.broadcast_shapes(a.shape, b.shape)
        except ValueError:
            self.fail(f"shapes that go together, not {a.shape[1:]} and {b.shape[1:]}")
        return a, b

    def _no_nan(self, *values: Any) -> None:
        bad = sum(int(np.isnan(v).sum()) for v in values)
        if bad:
            _fail(self.text, 0, "arithmetic that has a value at every draw", f"{bad} times NaN")

    def _truth(self, value: Any) -> Any:
        if np.asarray(value).dtype != np.bool_:
            self.fail("comparisons on both sides of and, or, not")
        return value

    def _numbers(self, *values: Any) -> None:
        if any(np.asarray(v).dtype == np.bool_ for v in values):
            self.fail("numbers; write 'and' between comparisons, and brackets around them")
