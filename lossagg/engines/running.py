"""Sums that do not gather round-off."""

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


def product_sum(left: FloatArray, right: FloatArray) -> float:
    """The sum of products, in blocks as `running_sums`; `@` starts threads that get in the way of ours.

    Args:
        left: shape (n,).
        right: shape (n,).
    """
    whole = len(left) - len(left) % _BLOCK
    first, second = left[:whole].reshape(-1, _BLOCK), right[:whole].reshape(-1, _BLOCK)
    rest = float(np.einsum("i,i", left[whole:], right[whole:]))
    return float(np.einsum("ij,ij->i", first, second).sum()) + rest
