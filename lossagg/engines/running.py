"""Running sums that do not gather round-off."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray

_BLOCK = 1024


def running_sums(values: FloatArray) -> FloatArray:
    """Cumulative sums, in blocks: an error of a few thousand roundings at most, whatever the length.

    Args:
        values: shape (n,).

    Returns:
        The sum of the first k + 1 values at index k, shape (n,).
    """
    blocks = -(-len(values) // _BLOCK)
    padded = np.zeros(blocks * _BLOCK)
    padded[: len(values)] = values
    within = np.cumsum(padded.reshape(blocks, _BLOCK), axis=1)
    before = np.concatenate(([0.0], np.cumsum(within[:-1, -1])))
    return (within + before[:, None]).reshape(-1)[: len(values)]
