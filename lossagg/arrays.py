"""The array types of lossagg, and the one door through which numbers become float64 arrays."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from lossagg.errors import InputError

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]
Floats = npt.ArrayLike


def as_floats(values: Floats, name: str) -> FloatArray:
    """Convert numbers to float64, whole numbers included, and refuse what is not a number.

    Integer money must not reach the arithmetic: an integer-typed grid truncates silently.

    Raises:
        InputError: values that are not numbers, or that are NaN.
    """
    try:
        array = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InputError(
            f"{name} must be numbers", value=values, remedy="Give a number or an array of numbers."
        ) from error
    if np.isnan(array).any():
        raise InputError(
            f"{name} must not be NaN", value=values, remedy="Remove or repair the missing values first."
        )
    return array


def elementwise(
    function: Callable[[FloatArray], FloatArray], values: Floats, name: str
) -> FloatArray | float:
    """Apply a function of arrays to a scalar or an array and hand back the same kind."""
    array = as_floats(values, name)
    result = function(np.atleast_1d(array))
    return float(result[0]) if array.ndim == 0 else result.reshape(array.shape)


def require_positive(value: float, name: str, *, zero: bool = False, infinite: bool = False) -> float:
    """Check that one parameter is a number above zero (or at zero, or infinite, where allowed).

    Raises:
        InputError: with the name, the allowed range and the value seen.
    """
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = float("nan")
    if (
        isinstance(value, bool)
        or not (number > 0 or (zero and number == 0))
        or (number == np.inf and not infinite)
    ):
        bound = "at least 0" if zero else "above 0"
        finite = "" if infinite else " and finite"
        raise InputError(
            f"{name} must be {bound}{finite}", value=value, remedy=f"Give {name} as a number {bound}."
        )
    return number


def require_probability(value: float, name: str, *, open_low: bool = False, open_high: bool = False) -> float:
    """Check that one number is a probability, with its ends excluded where asked.

    Raises:
        InputError: with the allowed range, the value seen, and the likely slip (99.5 for 0.995).
    """
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = float("nan")
    low = number > 0 if open_low else number >= 0
    high = number < 1 if open_high else number <= 1
    if isinstance(value, bool) or not (low and high):
        interval = f"{'(' if open_low else '['}0, 1{')' if open_high else ']'}"
        remedy = (
            f"Write {number / 100:g} for {number:g} %."
            if 1 < number < 100
            else f"Give a number in {interval}."
        )
        raise InputError(f"{name} must be a probability in {interval}", value=value, remedy=remedy)
    return number
