"""Numbers for readers: a value is shown to the digits that its uncertainty supports (GUM, JCGM 100:2008, 7.2.6)."""

from __future__ import annotations

import math
from decimal import ROUND_HALF_EVEN, Decimal

NORMAL_90 = 1.6448536269514722
"""Half width of a central 90 % interval of a normal quantity, in standard deviations."""

MINUS = "\u2212"
_SUPERSCRIPTS = str.maketrans("-0123456789", "\u207b\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079")
_MOST_DIGITS = 6
_FLOAT_DIGITS = 12
_PLAIN_FROM, _PLAIN_BELOW = -4, 6
_CERTAIN = 0.001
_RESERVE_PLACES = 4


def leading_exponent(value: float, digits: int) -> int:
    """Power of ten of the leading digit of ``value`` (finite, not 0) after rounding it to ``digits`` significant digits."""
    return int(f"{value:.{digits - 1}e}".split("e")[1])


def decimal_places(uncertainty: float, digits: int = 2) -> int:
    """Decimal places that leave the ``uncertainty`` (finite, not 0) with ``digits`` significant digits; negative for tens or hundreds."""
    return digits - 1 - leading_exponent(uncertainty, digits)


def at_places(value: float, places: int) -> str:
    """``value`` rounded half to even at ``places`` decimals; very small or large values as ``m × 10ⁿ`` with the same last digit."""
    if math.isnan(value):
        return "not a number"
    if math.isinf(value):
        return "\u221e" if value > 0 else MINUS + "\u221e"
    rounded = Decimal(repr(float(value))).quantize(Decimal(1).scaleb(-places), rounding=ROUND_HALF_EVEN)
    if rounded.is_zero():
        return f"{Decimal(0):.{max(places, 0)}f}" if places <= _MOST_DIGITS else "0"
    exponent = rounded.adjusted()
    if _PLAIN_FROM <= exponent < _PLAIN_BELOW:
        text = f"{rounded:.{max(places, 0)}f}"
    else:
        text = f"{rounded.scaleb(-exponent):.{max(places + exponent, 0)}f} \u00d7 10{str(exponent).translate(_SUPERSCRIPTS)}"
    return text.replace("-", MINUS)


def significant(value: float, digits: int = 3) -> str:
    """``value`` to ``digits`` significant digits, for numbers that come without an uncertainty."""
    if not math.isfinite(value) or value == 0:
        return at_places(value, 0)
    return at_places(value, decimal_places(value, digits))


def rounded(value: float, uncertainty: float | None, digits: int = 2) -> str:
    """``value`` rounded so that its standard ``uncertainty`` keeps at most ``digits`` significant digits.

    Args:
        value: in any unit.
        uncertainty: standard uncertainty in the same unit; None or 0 where there is none (three significant digits are shown then).
        digits: significant digits of the uncertainty, at most two by GUM 7.2.6.
    """
    if uncertainty is None or uncertainty == 0 or not (math.isfinite(uncertainty) and math.isfinite(value)):
        return significant(value)
    return at_places(value, min(decimal_places(uncertainty, digits), _finest(value, _FLOAT_DIGITS)))


def interval(median: float, low: float, high: float) -> tuple[str, str, str]:
    """Median and ends of a 90 % interval, all to the digits that the interval's standard uncertainty supports."""
    uncertainty = abs(high - low) / (2 * NORMAL_90)
    if uncertainty == 0 or not all(map(math.isfinite, (median, low, high))):
        return significant(median), significant(low), significant(high)
    # a strongly skewed interval spans decades: its low end would be rounded to nothing, so the shorter side rules
    shorter = min(abs(median - low), abs(high - median)) / NORMAL_90
    places = decimal_places(min(uncertainty, shorter) or uncertainty)
    return _capped(median, places), _capped(low, places), _capped(high, places)


def stated(value: float) -> str:
    """A number that somebody entered: as it was written, up to six significant digits."""
    if not math.isfinite(value) or value == 0:
        return at_places(value, 0)
    digits = f"{abs(value):.{_MOST_DIGITS - 1}e}".split("e")[0].rstrip("0").rstrip(".").replace(".", "")
    return at_places(value, decimal_places(value, _MOST_DIGITS) - (_MOST_DIGITS - len(digits)))


def probability(value: float, error: float | None = None) -> str:
    """A probability to the digits that its Monte Carlo standard ``error`` supports; never shown as certain."""
    if value > 1 - _CERTAIN:
        return f"> {1 - _CERTAIN:.3f}"
    if value < _CERTAIN:
        return f"< {_CERTAIN:.3f}"
    if error is None or error <= 0 or not math.isfinite(error):
        return at_places(value, 3)
    return at_places(value, min(max(decimal_places(error), 2), 4))


def reserve(ratio: float) -> str:
    """A reserve factor with enough digits to see on which side of 1 it lies (at least two decimals, at most four)."""
    if not math.isfinite(ratio) or ratio == 1:
        return at_places(ratio, 2)
    return at_places(ratio, min(max(2, decimal_places(ratio - 1)), _RESERVE_PLACES))


def against_limit(bound: float, difference: float) -> tuple[str, str]:
    """A bound and its distance from a limit at common decimals: three digits of the bound, two of the distance, at most six digits."""
    finite = [decimal_places(bound, 3)] if bound and math.isfinite(bound) else [0]
    if difference and math.isfinite(difference):
        finite.append(decimal_places(difference, 2))
    places = max(finite)
    if bound and math.isfinite(bound):
        places = min(places, _finest(bound))
    return at_places(bound, places), at_places(difference, places)


def _capped(value: float, places: int) -> str:
    """``value`` at ``places`` decimals, but never with more than four significant digits."""
    return at_places(value, min(places, decimal_places(value, 4)) if value else places)


def _finest(value: float, digits: int = _MOST_DIGITS) -> int:
    """Most decimal places that still make sense for ``value``: those of ``digits`` significant digits."""
    return decimal_places(value, digits) if value else digits
