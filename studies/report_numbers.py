"""Numbers for a reader: rounded to what is known of them, the interval beside them."""

import math
from typing import NamedTuple

NOTHING = "–"
DIGITS = 4  # of a number without an interval
SYMMETRIC = 0.12  # largest difference of a half-width from the other that one sign may stand for
SMALL = 1e-3  # below it, and above LARGE, powers of ten
LARGE = 1e7
MOST_DECIMALS = 8
SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


class Cell(NamedTuple):
    """What a cell shows. text : the number; interval : its interval, or nothing; sort : what it is sorted by"""

    text: str
    interval: str = ""
    sort: float | str = ""


def decimals_of(width: float) -> int:
    """Decimals at which an uncertainty shows two digits."""
    return 1 - int(f"{width:.1e}".split("e")[1])


def plain_number(value: float, digits: int = DIGITS) -> str:
    """A number without an interval."""
    if not math.isfinite(value):
        return NOTHING
    if value and not SMALL <= abs(value) < LARGE:
        return _power(value, digits - 1)
    if float(value).is_integer():
        return f"{value:,.0f}".replace(",", "\u202f")
    return f"{value:.{digits}g}" if abs(value) < 10**digits else f"{value:.0f}"


def _power(value: float, decimals: int) -> str:
    """A number as digits times a power of ten."""
    if not value:
        return "0"
    mantissa, exponent = f"{value:.{max(decimals, 0)}e}".split("e")
    if decimals >= DIGITS:  # as given, not rounded to an interval
        mantissa = mantissa.rstrip("0").rstrip(".")
    return f"{mantissa} × 10{str(int(exponent)).translate(SUPERSCRIPTS)}"


def alike(values: list[float], digits: int = DIGITS) -> list[str]:
    """Numbers of one column: as given where they are round, else with the same decimals where these do for all."""
    known = [abs(value) for value in values if math.isfinite(value) and value]
    rounded = all(float(f"{value:.{digits}g}") == value for value in known)
    if not known or rounded or min(known) < SMALL or max(known) >= 100 * min(known):
        return [plain_number(value, digits) for value in values]
    decimals = max(0, digits - 1 - math.floor(math.log10(max(known))))
    return [f"{value:.{decimals}f}" if math.isfinite(value) else NOTHING for value in values]


def is_symmetric(value: float, low: float, high: float) -> bool:
    """Whether plus-minus says the whole interval."""
    above, below = high - value, value - low
    return math.isfinite(above) and math.isfinite(below) and abs(above - below) <= SYMMETRIC * max(above, below)


def number_with_interval(
    value: float, low: float, high: float, *, plus_minus: bool, least: float = 0.0, whole: float = math.inf
) -> Cell:
    """A number rounded to its interval.

    plus_minus : one half-width stands for both sides, else both bounds are given
    least : what is surely smaller is not told apart from nothing; whole : what a number below it must not be rounded to
    """
    if math.isnan(value):
        return Cell(NOTHING, "not known", -math.inf)
    if math.isinf(value):
        bound = f"more than {plain_number(low)}" if math.isfinite(low) and value > 0 else "no bound"
        return Cell("none" if value > 0 else NOTHING, bound, value)
    if max(abs(value), abs(high)) < least:
        return Cell(f"< {least:g}", "", value)
    width = max((abs(bound - value) for bound in (low, high) if math.isfinite(bound)), default=0.0)
    if not width:
        return Cell(plain_number(value), "" if low == high else _bounds(low, high, plain_number), value)
    if not least and not SMALL <= max(abs(value), width) < LARGE:
        return _small(value, low, high, width)
    decimals = min(max(decimals_of(width), 0), MOST_DECIMALS)
    if least:
        decimals = min(decimals, round(-math.log10(least)))

    def shown(number: float) -> str:
        digits = decimals
        while number < whole and float(f"{number:.{digits}f}") >= whole and digits < MOST_DECIMALS:
            digits += 1
        if number < whole <= float(f"{number:.{digits}f}"):
            return f"> {whole - 10.0**-digits:.{digits}f}"
        return _fixed(number, digits)

    if plus_minus and shown(value) == _fixed(value, decimals):
        half = f"{width:.{decimals}f}"
        return Cell(shown(value), f"± {half}" if float(half) else f"± < {least:g}", value)
    return Cell(shown(value), _bounds(low, high, shown), value)


def _fixed(number: float, decimals: int) -> str:
    """A number with so many decimals; nothing has no sign."""
    rounded = f"{number:.{decimals}f}"
    return rounded if float(rounded) else rounded.lstrip("-")


def _small(value: float, low: float, high: float, width: float) -> Cell:
    """A number that is read as a power of ten; its bounds keep their own powers."""
    digits = max(0, min(MOST_DECIMALS, decimals_of(width) + math.floor(math.log10(abs(value))))) if value else 1
    return Cell(_power(value, digits), _bounds(low, high, lambda number: _power(number, digits)), value)


def _bounds(low: float, high: float, shown) -> str:
    """Both bounds; one that is infinite is said to be none."""
    ends = [shown(bound) if math.isfinite(bound) else "no bound" for bound in (low, high)]
    return f"{ends[0]} to {ends[1]}"
