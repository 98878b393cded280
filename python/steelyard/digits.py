"""How numbers are printed: no digit that the error does not support."""

from __future__ import annotations

import math

__all__ = ["chance", "rounded", "short"]


def short(value: float) -> str:
    """A figure for a sentence: three significant digits, no trailing noise."""
    if not math.isfinite(value):
        return {math.inf: "inf", -math.inf: "-inf"}.get(value, "nan")
    if value == int(value) and abs(value) < 1e6:
        return f"{int(value):,}" if abs(value) >= 1e4 else str(int(value))
    if 1000 <= abs(value) < 1e9:
        return f"{float(f'{value:.3g}'):,.0f}"
    return f"{value:.3g}"


def chance(probability: float) -> str:
    """A Monte Carlo probability of being right, which no number of draws makes a certainty."""
    return "over 0.999" if probability > 0.999 else short(probability)


def decimals_of(error: float) -> int | None:
    """
    Decimal places that an error supports: its first digit, or two where that digit is a 1.

    None where the error says nothing (zero, infinite, not a number).
    """
    if not (math.isfinite(error) and error > 0):
        return None
    # The text of the error itself says its first digit and exponent, without overflow.
    mantissa, _, exponent = f"{error:.1e}".partition("e")
    return -int(exponent) + (1 if float(mantissa) < 1.95 else 0)


def rounded(value: float, error: float) -> str:
    """`value` to the digits that `error` supports; five significant digits without an error."""
    if not math.isfinite(value):
        return short(value)
    if math.isinf(error):
        return f"{value:.1g}"
    decimals = decimals_of(error)
    if decimals is None:
        return f"{value:.5g}"
    if decimals > 12 or decimals < -12:
        return _in_powers(value, decimals)
    # Adding zero turns the negative zero that rounding leaves into zero.
    return f"{round(value, decimals) + 0.0:.{max(decimals, 0)}f}"


def _in_powers(value: float, decimals: int) -> str:
    """`value` to so many decimal places in powers of ten, for very small and very large units."""
    if value == 0:
        return "0"
    digits = decimals + int(f"{value:e}".partition("e")[2])
    return f"{value:.{digits}e}" if digits >= 0 else "0"
