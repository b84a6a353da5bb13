"""How many digits of a figure are shown.

One rule everywhere: the digits end where the accuracy puts them in doubt. The accuracy, the half-width
of a range or a standard error, keeps two digits when it begins with 10 to 35 and one otherwise, and
the figure ends at the same place (the rounding rule of the Particle Data Group, Review of Particle
Physics, introduction; from memory). A range is rounded outwards, so the range on paper still holds
the range computed. Six significant digits at most, because no input supports more; money of 100 and
more in whole units. Decimal arithmetic, so that a figure never changes by how it is written.
"""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal

MOST_DIGITS = 6
DIGITS_WITHOUT_RANGE = 5
DIGITS_WITHOUT_ACCURACY = 2
TWO_DIGITS_BELOW = Decimal("3.55")


def _magnitude(value: float) -> int:
    return Decimal(repr(float(value))).adjusted()


def _last_place(accuracy: float) -> int:
    """The place at which a figure of this accuracy ends, as a power of ten."""
    place = _magnitude(accuracy)
    leading = Decimal(repr(float(accuracy))).scaleb(-place)
    return place - 1 if leading < TWO_DIGITS_BELOW else place


def supported_unit(value: float, low: float | None, high: float | None) -> Decimal:
    """The place of the last digit worth showing, 1, 10, 100 or 0.1, for a figure and its range.

    Args:
        value: the figure.
        low, high: its range; `None` where there is none, then five significant digits are kept.
    """
    if value == 0:
        return Decimal(1)
    known = low is not None and high is not None
    place = _magnitude(value) - (MOST_DIGITS if known else DIGITS_WITHOUT_RANGE) + 1
    if low is not None and high is not None:
        width = max(value - low, high - value)
        if width > 0:
            place = max(place, min(_last_place(width), _magnitude(value)))
    if abs(value) >= 100:
        place = max(place, 0)
    return Decimal(1).scaleb(place)


def _placed(value: float, unit: Decimal, rounding: str) -> Decimal:
    places = Decimal(repr(float(value))) / unit
    return places.quantize(Decimal(1), rounding=rounding) * unit


def _written(number: Decimal, unit: Decimal) -> str:
    decimals = max(0, -unit.adjusted())
    text = f"{number:,.{decimals}f}"
    return text.removeprefix("-") if not number else text.replace("-", "−")


def rounded(value: float, unit: Decimal) -> str:
    """A figure in multiples of `unit`, with thousands separated by commas."""
    return _written(_placed(value, unit, ROUND_HALF_EVEN), unit)


def enclosing(low: float, high: float, unit: Decimal) -> str:
    """A range rounded outwards to multiples of `unit`: what is shown holds what was computed."""
    below, above = _placed(low, unit, ROUND_FLOOR), _placed(high, unit, ROUND_CEILING)
    return f"{_written(below, unit)} to {_written(above, unit)}"


def significant(value: float, count: int) -> str:
    """A figure with at most `count` significant digits, without trailing zeros."""
    number = Decimal(repr(float(value)))
    if not number:
        return "0"
    if not -5 <= number.adjusted() < 15:
        return f"{value:.{count - 1}e}".replace("-", "−")
    unit = Decimal(1).scaleb(number.adjusted() - count + 1)
    text = _written(_placed(value, unit, ROUND_HALF_EVEN), unit)
    return text.rstrip("0").rstrip(".") if "." in text else text


def estimated(value: float, error: float | None, *, probability: bool = False) -> str:
    """A figure to the place its standard error supports; five digits when no error is known."""
    if probability:
        return _estimated_chance(value, error)
    unit = _error_unit(value, error)
    return significant(value, DIGITS_WITHOUT_RANGE) if unit is None else rounded(value, unit)


def with_error(value: float, error: float | None) -> str:
    """A figure and its standard error, both to the place the error supports: 1.346 ± 0.030."""
    unit = _error_unit(value, error)
    if unit is None or error is None:
        return significant(value, MOST_DIGITS)
    return f"{rounded(value, unit)} ± {rounded(error, unit)}"


def _error_unit(value: float, error: float | None) -> Decimal | None:
    if error is None or error <= 0 or value == 0:
        return None
    place = min(_last_place(error), _magnitude(value))
    place = max(place, _magnitude(value) - MOST_DIGITS + 1, 0 if abs(value) >= 100 else place)
    return Decimal(1).scaleb(place)


def _estimated_chance(value: float, error: float | None) -> str:
    if error is None or error <= 0 or value == 0:
        return chance(value)
    kept = _magnitude(value) - _magnitude(error) + 1
    return chance(value, max(1, min(3, kept)))


def unsupported(value: float) -> str:
    """A figure whose accuracy cannot be stated: two significant digits."""
    if value == 0:
        return "0"
    return rounded(value, Decimal(1).scaleb(_magnitude(value) - DIGITS_WITHOUT_ACCURACY + 1))


def percent(level: float) -> str:
    """A level as a percentage, with every digit it was given with: 0.995 is 99.5%."""
    number = (Decimal(repr(float(level))) * 100).normalize()
    return f"{number:f}%"


def chance(probability: float, count: int = 3) -> str:
    """A probability as a percentage with `count` significant digits."""
    if probability in (0.0, 1.0):
        return f"{probability * 100:.0f}%"
    smaller = min(probability, 1 - probability)
    if smaller < 0.001 and probability > 0.5:
        return f"{significant(100 * probability, 3 + count)}%"
    return f"{significant(100 * probability, count)}%"


def return_period(years: float) -> str:
    """A return period in words: 1 in 200 years."""
    return f"1 in {significant(round(years, 6), 4)} years"
