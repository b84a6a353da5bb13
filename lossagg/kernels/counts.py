"""Counts whose mean differs from year to year."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled

PART = 256.0


@compiled
def poisson_counts(means: FloatArray, uniforms: FloatArray, out: IntArray) -> None:
    """Draw a Poisson count for each mean by adding up probabilities until they reach a uniform, exact but
    for the round-off of the sum, below 1e-13.

    A mean above 256 is drawn in parts of at most 256, whose sum it is: exp(-mean) does not underflow, and
    the work stays in proportion to the number of losses.

    Args:
        means: expected counts, at or above 0, shape (n,).
        uniforms: in (0, 1), one for each part of each mean, max(ceil(mean / 256), 1) of them.
        out: receives the counts, shape (n,).
    """
    used = 0
    for i in range(means.shape[0]):
        parts = max(int(np.ceil(means[i] / PART)), 1)
        mean = means[i] / parts
        total = 0
        for _ in range(parts):
            probability = np.exp(-mean)
            below, n = probability, 0
            # Far beyond the mean the sum no longer grows, and may have stopped just short of the uniform.
            while uniforms[used] > below and (n < mean or probability > 1e-19):
                n += 1
                probability *= mean / n
                below += probability
            used += 1
            total += n
        out[i] = total
