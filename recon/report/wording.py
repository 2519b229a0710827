"""Numbers as the report prints them."""

from __future__ import annotations

import math
from typing import Any

_TINY = 1e-4
"""Below this, decimals would be mostly zeros."""


def number(value: Any, digits: int = 4) -> str:
    """Write a number with so many significant digits, tiny ones with a power of ten; none as a dash.

    Examples
    --------
    >>> number(0.054777), number(27.70), number(2.5), number(12345.6), number(float("inf")), number(None)
    ('0.05478', '27.7', '2.5', '12346', '∞', '–')
    >>> number(3.26e-7, 3)
    '3.26e−7'
    """
    if value is None:
        return "–"
    value = float(value)
    if math.isnan(value):
        return "–"
    if math.isinf(value):
        return "∞" if value > 0 else "−∞"
    if 0 < abs(value) < _TINY:
        mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
        return f"{mantissa}e{int(exponent)}".replace("-", "−")
    text = f"{value:.{_decimals(value, digits)}f}"
    text = text.rstrip("0").rstrip(".") if "." in text else text
    return text.replace("-", "−")


def with_spread(mean: float, deviation: float | None, digits: int = 4) -> tuple[str, str]:
    """Write a mean and its standard deviation with the same decimals; no deviation, no text.

    Examples
    --------
    >>> with_spread(0.0547767, 0.00489584), with_spread(27.72, 0.7585), with_spread(0.5, None)
    (('0.05478', '0.00490'), ('27.72', '0.76'), ('0.5000', ''))
    """
    if not math.isfinite(mean) or 0 < abs(mean) < _TINY:
        return number(mean, digits), "" if deviation is None else number(deviation, 2)
    decimals = _decimals(mean, digits)
    spread = "" if deviation is None else f"{deviation:.{decimals}f}"
    return f"{mean:.{decimals}f}".replace("-", "−"), spread


def duration(seconds: float) -> str:
    """Write a time.

    Examples
    --------
    >>> duration(0.0126), duration(42.0), duration(199.0), duration(7330.0)
    ('13 ms', '42 s', '3 min 19 s', '2 h 2 min')
    """
    if seconds < 1:
        return f"{1000 * seconds:.0f} ms"
    if seconds < 60:
        return f"{seconds:.3g} s"
    minutes, rest = divmod(round(seconds), 60)
    if minutes < 60:
        return f"{minutes} min {rest} s"
    return f"{minutes // 60} h {minutes % 60} min"


def counted(amount: int, noun: str) -> str:
    """Write a number of things.

    Examples
    --------
    >>> counted(1, "case"), counted(24000, "case")
    ('1 case', '24,000 cases')
    """
    return f"{amount:,} {noun}{'' if amount == 1 else 's'}"


def nice_below(value: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is not above `value`.

    Examples
    --------
    >>> nice_below(60.0), nice_below(19.9), nice_below(0.05)
    (50.0, 10.0, 0.05)
    """
    power = 10.0 ** math.floor(math.log10(value) + 1e-9)
    return next(step for factor in (5, 2, 1) if (step := factor * power) <= value * (1 + 1e-9))


def nice_above(value: float) -> float:
    """Return the smallest of 1, 1.5, 2, 3, 5 times a power of ten that is not below `value`.

    Examples
    --------
    >>> nice_above(60.0), nice_above(22.0), nice_above(0.1)
    (100.0, 30.0, 0.1)
    """
    power = 10.0 ** math.floor(math.log10(value) + 1e-9)
    return next(step for factor in (1, 1.5, 2, 3, 5, 10) if (step := factor * power) >= value * (1 - 1e-9))


def _decimals(value: float, digits: int) -> int:
    return max(0, digits - 1 - math.floor(math.log10(abs(value)))) if value else digits - 1
