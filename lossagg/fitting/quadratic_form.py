"""The law of the Anderson-Darling distance of excesses from the generalized Pareto law fitted to them.

For many excesses the distance is a weighted sum of squared normal variables; the weights are the
eigenvalues of the covariance of the estimated empirical process, divided by its weight function. For the
generalized Pareto law with both parameters estimated the covariance is known in closed form and depends on
the shape alone (Choulakian & Stephens 2001, Technometrics 43). Eigenvalues by Nystroem's method on a grid
crowded at both ends; tail probabilities by Imhof's formula (1961, Biometrika 48).
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np

from lossagg.arrays import FloatArray

_GRID = 120
_LEADING, _STEPS = 60, 1500
_FARTHEST = 120.0  # in units of the first weight: further out the probability is below 1e-20
_SHAPES = 0.05  # shapes are rounded to this step: the 5 % point moves by 0.01 from one to the next
_LEAST_SHAPE = -0.48  # beyond -1/2 the estimates are not regular (Smith 1985)


def darling_p_value(statistic: float, shape: float) -> float:
    """Probability of a larger Anderson-Darling distance if the excesses are generalized Pareto.

    Args:
        statistic: the distance of the excesses from the law fitted to them by maximum likelihood.
        shape: the fitted shape; one at or below -1/2 is taken as just above it.
    """
    step = max(round(shape / _SHAPES) * _SHAPES, _LEAST_SHAPE)
    return exceedance(statistic, _weights(round(step, 6)))


def exceedance(statistic: float, weights: FloatArray) -> float:
    """P(sum of weights[i] * Z[i]**2 > statistic) for independent standard normal Z, by Imhof's formula.

    Args:
        statistic: at least 0.
        weights: above 0, falling.
    """
    statistic = min(statistic, _FARTHEST * float(weights[0]))
    # The integrand falls like the product of (1 + (w t)**2)**-1/4: below 1e-7 at 4 / the tenth weight.
    end = 4.0 / weights[min(9, len(weights) - 1)]
    steps = int(max(_STEPS, end * statistic))  # a quarter of a turn between two of them at most
    t = (np.arange(steps) + 0.5) * (end / steps)
    turned = weights[:_LEADING, None] * t
    beyond = statistic - float(weights[_LEADING:].sum())  # the small weights hardly vary: their mean
    angle = 0.5 * (np.arctan(turned).sum(axis=0) - beyond * t)
    size = np.exp(0.25 * np.log1p(turned**2).sum(axis=0))
    value = 0.5 + float(np.sum(np.sin(angle) / (t * size))) * (end / steps) / np.pi
    return float(min(max(value, 0.0), 1.0))


@lru_cache(maxsize=256)
def _weights(shape: float) -> FloatArray:
    return darling_weights(estimation_loss(shape))


def darling_weights(loss: Callable[[FloatArray], FloatArray] | None = None) -> FloatArray:
    """Weights of the Anderson-Darling distance, falling.

    Args:
        loss: of points u of shape (m,), vectors L of shape (m, p) with L(s) . L(t) the part of the
            covariance min(s, t) - s t that estimating the parameters takes away; None for a law given
            in advance, whose weights are 1 / (j (j + 1)).
    """
    angle = (np.arange(_GRID) + 0.5) * (np.pi / _GRID)
    u = 0.5 * (1 - np.cos(angle))
    width = 0.5 * np.sin(angle) * (np.pi / _GRID)
    rest = u[::-1]  # 1 - u, exactly
    kernel = np.where(u[:, None] <= u, np.outer(u, rest), np.outer(rest, u))
    if loss is not None:
        taken = loss(u)
        kernel = kernel - taken @ taken.T
    root = np.sqrt(width / (u * rest))
    values = np.linalg.eigvalsh(kernel * np.outer(root, root))[::-1]
    return np.asarray(values[values > 1e-9])


def estimation_loss(shape: float) -> Callable[[FloatArray], FloatArray]:
    """What estimating shape and scale of a generalized Pareto law takes from the covariance.

    Derivatives of F in shape and scale at scale 1, times a root of the inverse information
    (1 + shape) [[1 + shape, -1], [-1, 2]] (Smith 1984, in Tiago de Oliveira, Statistical Extremes).
    """
    root = np.linalg.cholesky((1 + shape) * np.array([[1 + shape, -1.0], [-1.0, 2.0]]))

    def loss(u: FloatArray) -> FloatArray:
        rest = u[::-1]
        depth = -np.log(rest)
        if abs(shape) < 1e-6:
            reach, bend = depth, -0.5 * depth**2
        else:
            reach = -np.expm1(-shape * depth) / shape  # x / (1 + shape x)
            bend = (reach - depth) / shape
        return np.stack([rest * bend, -rest * reach], axis=1) @ root

    return loss
