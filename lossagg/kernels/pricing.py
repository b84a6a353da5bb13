"""One pass over the probabilities of a sum: survival function and its integral."""

from __future__ import annotations

from lossagg.arrays import FloatArray
from lossagg.kernels.compile import compiled


@compiled
def survival_and_areas(
    tilted: FloatArray, untilt: FloatArray, survival: FloatArray, areas: FloatArray
) -> None:
    """Fill P(S > kh) and the integral of the survival function from 0 to kh, in steps.

    Args:
        tilted: probabilities times exp(-theta k), shape (n,).
        untilt: exp(theta k), shape (n,).
        survival: filled, shape (n,).
        areas: filled, shape (n,).
    """
    above, area = 1.0, 0.0
    for k in range(tilted.shape[0]):
        areas[k] = area
        above -= tilted[k] * untilt[k]
        survival[k] = above
        area += above
