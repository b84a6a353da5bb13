"""Correlation matrices: what makes one, and the nearest where one is wanted and given is none."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from lossagg.arrays import FloatArray, as_floats
from lossagg.errors import InputError

ROUND_OFF = 1e-10
_PASSES = 1000


def equal_correlation(value: float, size: int, where: str) -> FloatArray:
    """The matrix with one correlation for every pair.

    Raises:
        InputError: a value below -1 / (size - 1) or above 1.
    """
    least = -1.0 / (size - 1)
    if not least <= value <= 1.0:
        raise InputError(
            f"one correlation for all pairs of {size} lines must lie between {least:.4g} and 1",
            where=where,
            value=value,
            remedy=f"Write {value / 100:g} for {value:g} %."
            if 1 < value <= 100
            else "Give it in that range.",
        )
    matrix = np.full((size, size), value)
    np.fill_diagonal(matrix, 1.0)
    return matrix


def checked_correlation(matrix: Sequence[Sequence[float]], size: int, where: str) -> FloatArray:
    """A correlation matrix of so many lines, or the reason why it is none.

    Raises:
        InputError: a wrong shape, a diagonal other than 1, entries outside [-1, 1], a matrix that is not
            symmetric, or one with a negative eigenvalue, which no random variables can have.
    """
    array = square(matrix, size, where)
    lowest = float(np.linalg.eigvalsh(array)[0])
    if lowest < -ROUND_OFF * size:
        raise InputError(
            "no random variables have these correlations: the matrix has a negative eigenvalue",
            where=where,
            value=lowest,
            remedy="Correct the entries that contradict each other, or ask for the nearest correlation "
            "matrix, whose changes are then printed.",
        )
    return array


def square(matrix: Sequence[Sequence[float]], size: int, where: str) -> FloatArray:
    """Check shape, diagonal, range and symmetry; arguments and errors as `checked_correlation`."""
    rows = [len(row) if isinstance(row, Sequence) else 0 for row in matrix]
    if rows != [size] * size:
        raise InputError(
            f"the correlation matrix must have {size} rows of {size}, in the order of the lines",
            where=where,
            value=f"rows of {', '.join(map(str, rows))}",
            remedy="Give one row and one column for each line.",
        )
    array = as_floats(matrix, "correlation")
    for i, j in zip(*np.nonzero(np.abs(array) > 1.0), strict=True):
        raise InputError(
            "a correlation must lie between -1 and 1", where=f"{where}, row {i + 1}, column {j + 1}",
            value=float(array[i, j]), remedy="Write 0.3 for 30 %.",
        )  # fmt: skip
    for i in np.flatnonzero(np.diag(array) != 1.0):
        raise InputError(
            "the correlation of a line with itself is 1", where=f"{where}, row {i + 1}, column {i + 1}",
            value=float(array[i, i]), remedy="Give a correlation matrix, not a covariance matrix.",
        )  # fmt: skip
    for i, j in zip(*np.nonzero(array != array.T), strict=True):
        raise InputError(
            "the correlation matrix is not symmetric", where=f"{where}, row {i + 1}, column {j + 1}",
            value=(float(array[i, j]), float(array[j, i])), remedy="Give both the same value.",
        )  # fmt: skip
    return array


def nearest_correlation(matrix: FloatArray) -> FloatArray:
    """The correlation matrix nearest to a symmetric matrix, in the sum of squared differences.

    Alternating projections on the matrices without negative eigenvalues and on those with a diagonal of 1
    (Higham 2002, "Computing the nearest correlation matrix", IMA Journal of Numerical Analysis 22).

    Args:
        matrix: symmetric, shape (n, n).
    """
    current, correction = matrix.copy(), np.zeros(matrix.shape)
    for _ in range(_PASSES):
        raised = current - correction
        values, vectors = np.linalg.eigh(raised)
        positive = (vectors * np.maximum(values, 0.0)) @ vectors.T
        correction = positive - raised
        previous, current = current, (positive + positive.T) / 2.0
        np.fill_diagonal(current, 1.0)
        if np.max(np.abs(current - previous)) < 1e-14:
            break
    # The last step set the diagonal; scaling it there instead leaves no negative eigenvalue but round-off.
    values, vectors = np.linalg.eigh(current)
    positive = (vectors * np.maximum(values, 0.0)) @ vectors.T
    scale = 1.0 / np.sqrt(np.diag(positive))
    nearest = positive * scale[:, None] * scale[None, :]
    nearest = np.clip((nearest + nearest.T) / 2.0, -1.0, 1.0)
    np.fill_diagonal(nearest, 1.0)
    return np.asarray(nearest)


def correlation_interval(value: float, years: int) -> tuple[float, float]:
    """The 95 % interval of a correlation seen in so many years, by Fisher's z (Fisher 1921, "On the probable
    error of a coefficient of correlation", Metron 1): atanh r is near normal with variance 1 / (years - 3).

    Args:
        value: the correlation, -1 to 1.
        years: number of years behind it, at least 1; three or fewer say nothing.
    """
    if years <= 3:
        return -1.0, 1.0
    if abs(value) == 1.0:
        return value, value
    centre, reach = np.arctanh(value), 1.959963984540054 / np.sqrt(years - 3.0)
    return float(np.tanh(centre - reach)), float(np.tanh(centre + reach))


def factor_of(matrix: FloatArray) -> FloatArray:
    """F with F F' = the matrix, also where it has eigenvalues of 0, shape (n, n)."""
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)))
