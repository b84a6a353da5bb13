"""The loop of the far tail: what is left of each year when one of its losses is taken out."""

from __future__ import annotations

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled


@compiled
def leave_last(
    sizes: FloatArray,
    counts: IntArray,
    rest: FloatArray,
    largest: FloatArray,
    tied: FloatArray,
    last: FloatArray,
) -> None:
    """Split every year into its last loss and the others.

    Args:
        sizes: the losses at or above 0, year after year.
        counts: losses in each year, shape (years,).
        rest: receives the sum of the others, 0 where there are none.
        largest: receives the largest of the others, 0 where there are none.
        tied: receives how many of the others are the largest.
        last: receives the last loss, 0 in a year without losses.
    """
    place = 0
    for year in range(counts.shape[0]):
        total, most, ties = 0.0, 0.0, 0.0
        stop = place + counts[year]
        for i in range(place, stop - 1):
            x = sizes[i]
            total += x
            if x > most:
                most = x
                ties = 1.0
            elif x == most:
                ties += 1.0
        rest[year], largest[year], tied[year] = total, most, ties
        last[year] = sizes[stop - 1] if stop > place else 0.0
        place = stop
