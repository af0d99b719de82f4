"""The one rounding rule: two significant digits of the uncertainty (GUM 7.2.6)."""

import math

MOST_DECIMALS = 7
MOST_ZEROS = 5
"""Beyond, a number is written with an exponent."""


def decimals_for(uncertainty: float, digits: int = 2) -> int:
    """Return the number of decimals (negative left of the point) that keeps ``digits`` digits of ``uncertainty``."""
    exponent = math.floor(math.log10(abs(uncertainty)))
    # 0.0996 to two digits is 0.10: rounding may carry into the next decade.
    if round(abs(uncertainty) / 10.0 ** (exponent - digits + 1)) >= 10**digits:
        exponent += 1
    return digits - 1 - exponent


def fixed(value: float, decimals: int) -> str:
    """Write ``value`` with ``decimals`` decimals, without an exponent where that stays readable."""
    rounded = round(value, decimals)
    if rounded == 0:
        rounded = 0.0  # no minus sign on a zero
    if decimals > MOST_DECIMALS or (decimals < -MOST_ZEROS and rounded != 0):
        magnitude = math.floor(math.log10(abs(rounded))) if rounded else 0
        return f"{rounded:.{max(0, decimals + magnitude)}e}"
    return f"{rounded:.{max(0, decimals)}f}"


def significant(value: float, digits: int = 3) -> str:
    """Write ``value`` with ``digits`` significant digits, for numbers that have no interval (limits, counts, times)."""
    if value == 0 or not math.isfinite(value):
        return "0" if value == 0 else str(value)
    return fixed(value, decimals_for(value, digits))


def rounded_up(value: float, digits: int = 2) -> str:
    """Write an upper bound with ``digits`` significant digits, never below the value."""
    if value == 0 or not math.isfinite(value):
        return significant(value)
    decimals = decimals_for(value, digits)
    step = 10.0**-decimals
    return fixed(math.ceil(value / step * (1.0 - 1e-12)) * step, decimals)


def plain(value: float, digits: int = 6) -> str:
    """Write a number that was given, not measured (a limit, a setting): as short as it was said."""
    return f"{value:.{digits}g}"


def with_interval(value: float, lower: float, upper: float) -> tuple[str, str, str]:
    """Write an estimate and the ends of its interval to two digits of the uncertainty.

    The uncertainty is half of the shorter side of the interval, or of the whole of it where one side vanishes.
    """
    sides = [abs(value - lower), abs(upper - value)]
    scale = min((side for side in sides if side > 0), default=0.0) / 2
    if scale == 0 or not math.isfinite(scale):
        return significant(value, 7), significant(lower, 7), significant(upper, 7)
    decimals = decimals_for(scale)
    return fixed(value, decimals), fixed(lower, decimals), fixed(upper, decimals)


def interval_text(value: float, lower: float, upper: float) -> str:
    """Write ``value (lower to upper)``, or ``value +- half`` where the interval is symmetric after rounding."""
    middle, low, high = with_interval(value, lower, upper)
    return f"{middle} ({low} to {high})"
