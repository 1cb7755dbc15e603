"""Numbers with as many digits as their error allows."""

from __future__ import annotations

import math

WITHOUT_ERROR = 4
"""Significant digits of a number whose error is not known."""


def number(value: float, digits: int = WITHOUT_ERROR) -> str:
    """Return a number with so many significant digits, in plain notation where that is readable.

    >>> number(0.0123456), number(1234.56), number(2.5e-9)
    ('0.01235', '1235', '2.500e-09')
    """
    if value == 0:
        return "0"
    if not math.isfinite(value):
        return "not known"
    if not 1e-4 <= abs(value) < 1e7:
        return f"{value:.{digits - 1}e}"
    decimals = digits - 1 - math.floor(math.log10(abs(value)))
    return f"{value:.{max(decimals, 0)}f}"


def with_error(value: float, low: float | None, high: float | None, unit: str) -> str:
    """Return a value with its error and unit; the digits follow the error.

    Parameters
    ----------
    value, low, high
        The value and the ends of its interval, in ``unit``; None where an end is not known.
    unit
        Printed behind, for example ``"W/m"``.

    The error is rounded up so that value ± error covers [low, high]. It gets one significant
    digit, or two where one would overstate it by more than a quarter.

    >>> with_error(12.4321, 12.335, 12.5295, "W")
    '12.43 ± 0.10 W'
    >>> with_error(0.5397, 0.5391, 0.5401, "W")
    '0.5397 ± 0.0006 W'
    >>> with_error(1.5, None, None, "W/K")
    '1.500 W/K'
    """
    if low is None or high is None or not all(map(math.isfinite, (value, low, high))):
        return f"{number(value)} {unit}"
    half = max(high - value, value - low)
    if half <= 1e-9 * abs(value):
        return f"{number(value, 6)} {unit}"
    decimals = -math.floor(math.log10(half * (1 + 1e-9)))  # 0.1 less its rounding is 0.1
    if _covering(value, low, high, decimals) > 1.25 * half:
        decimals += 1
    error = _covering(value, low, high, decimals)
    shown = round(value, decimals) + 0.0
    return f"{shown:.{max(decimals, 0)}f} ± {error:.{max(decimals, 0)}f} {unit}"


def _covering(value: float, low: float, high: float, decimals: int) -> float:
    """Return the smallest error with so many decimals that covers the interval around the rounded value."""
    shown = round(value, decimals)
    step = 10.0**-decimals
    return math.ceil(max(high - shown, shown - low) / step - 1e-9) * step
