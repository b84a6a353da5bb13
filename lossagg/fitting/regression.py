"""Poisson regression with a logarithmic link and an exposure: rates that depend on known circumstances.

Maximum likelihood by Newton's method, which for this model is iteratively reweighted least squares
(McCullagh & Nelder, Generalized Linear Models, 1989, ch. 2.5 and 6). The likelihood is concave, so the
climb needs no guard beyond halving a step that overshoots.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, Floats, as_floats
from lossagg.errors import FitError, InputError

_STEPS = 60


@dataclass(frozen=True, eq=False)
class PoissonRegression:
    """log rate = design times coefficients, counts Poisson.

    Attributes:
        coefficients: shape (p,).
        covariance: inverse of the information, shape (p, p), for counts that vary as Poisson counts do.
        fitted: expected counts, shape (n,).
        log_likelihood: at the coefficients.
        deviance: twice the log-likelihood that one parameter per count would gain.
        pearson: sum of (count - fitted)**2 / fitted.
        degrees: counts less coefficients.
    """

    coefficients: FloatArray
    covariance: FloatArray
    fitted: FloatArray
    log_likelihood: float
    deviance: float
    pearson: float
    degrees: int

    @property
    def standard_errors(self) -> FloatArray:
        """Of the coefficients, shape (p,)."""
        return np.asarray(np.sqrt(np.diag(self.covariance)))

    @property
    def aic(self) -> float:
        """Akaike's information criterion, 2 p - 2 log L."""
        return 2.0 * len(self.coefficients) - 2.0 * self.log_likelihood


def poisson_regression(counts: Floats, design: Floats, exposure: Floats | None = None) -> PoissonRegression:
    """Fit a Poisson regression.

    Args:
        counts: whole numbers at or above 0, shape (n,).
        design: one row per count, shape (n, p); a column of ones for the level.
        exposure: above 0, shape (n,); None where all are alike.

    Raises:
        InputError: shapes that differ, an exposure not above 0, more columns than counts.
        FitError: columns that depend on each other, or counts that drive a coefficient to infinity.
    """
    numbers, rows = as_floats(counts, "counts"), as_floats(design, "design")
    weights = np.broadcast_to(as_floats(1.0 if exposure is None else exposure, "exposure"), numbers.shape)
    if rows.ndim != 2 or numbers.shape != rows.shape[:1] or rows.shape[1] > rows.shape[0]:
        raise InputError(
            "design must have one row per count and no more columns than rows",
            value=f"{numbers.shape} counts, design {rows.shape}",
            remedy="Give a matrix of shape (counts, coefficients).",
        )
    if not (weights > 0).all() or (numbers < 0).any():
        raise InputError(
            "exposures must be above 0 and counts at or above 0",
            value=float(np.min(np.minimum(weights, numbers))),
            remedy="Leave out rows without exposure.",
        )
    if np.linalg.matrix_rank(rows) < rows.shape[1]:
        raise FitError(
            "columns of the design depend on each other",
            value=f"rank {np.linalg.matrix_rank(rows)} of {rows.shape[1]}",
            remedy="Leave one of them out.",
        )
    return _climb(numbers, rows, weights)


def _climb(numbers: FloatArray, rows: FloatArray, weights: FloatArray) -> PoissonRegression:
    start = np.log((numbers + 0.5) / weights)
    at = np.asarray(np.linalg.lstsq(rows, start, rcond=None)[0], dtype=np.float64)
    value = _value(at, numbers, rows, weights)
    for _ in range(_STEPS):
        means = weights * np.exp(rows @ at)
        information = rows.T @ (means[:, None] * rows)
        step = np.linalg.solve(information, rows.T @ (numbers - means))
        following = _value(np.asarray(at + step), numbers, rows, weights)
        while not following >= value - 1e-12 * abs(value) and np.max(np.abs(step)) > 1e-14:
            step = step / 2
            following = _value(np.asarray(at + step), numbers, rows, weights)
        at, value = np.asarray(at + step, dtype=np.float64), following
        if np.max(np.abs(step)) < 1e-11:
            return _result(at, numbers, rows, weights)
        if np.max(np.abs(at)) > 1e3:
            break
    raise FitError(
        "the Poisson regression has no maximum: a coefficient runs to infinity",
        value=f"{numbers.sum():g} losses",
        remedy="Merge groups without losses.",
    )


def _value(at: FloatArray, numbers: FloatArray, rows: FloatArray, weights: FloatArray) -> float:
    with np.errstate(over="ignore"):
        log_means = rows @ at + np.log(weights)
        return float(np.sum(numbers * log_means - np.exp(log_means)))


def _result(at: FloatArray, numbers: FloatArray, rows: FloatArray, weights: FloatArray) -> PoissonRegression:
    means = weights * np.exp(rows @ at)
    loss = special.xlogy(numbers, numbers) - special.xlogy(numbers, means) - numbers + means
    return PoissonRegression(
        coefficients=at,
        covariance=np.asarray(np.linalg.inv(rows.T @ (means[:, None] * rows)), dtype=np.float64),
        fitted=means,
        log_likelihood=float(np.sum(special.xlogy(numbers, means) - means - special.gammaln(numbers + 1))),
        deviance=2.0 * float(np.sum(loss)),
        pearson=float(np.sum((numbers - means) ** 2 / means)),
        degrees=len(numbers) - len(at),
    )
