"""Layers stacked on top of each other, checked for gaps and overlaps.

Layers of a tower look at the event itself, each from its own deductible up; they do not come after
each other. Where two of them pay for the same part of an event more than the whole of it, someone is
paid twice; where none pays, someone may believe to be covered and is not.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from lossagg.cover.terms import Cover
from lossagg.errors import InputError

_WHOLE = 1.0 + 1e-12
_SLIVER = 1e-9  # ends that differ by round-off alone are the same end


@dataclass(frozen=True)
class Tower:
    """The layers of a tower over events.

    Args:
        layers: from the lowest to the highest; layers side by side may share the same part.

    Raises:
        InputError: no layer, a layer that is none (a franchise, a disappearing deductible, a surplus, no
            limit below the top), layers out of order, or parts of an event covered more than once.
    """

    layers: tuple[Cover, ...]

    def __post_init__(self) -> None:
        if not self.layers:
            raise InputError("a tower needs layers", remedy="Give at least one.")
        for k, layer in enumerate(self.layers, start=1):
            if layer.franchise or layer.disappears_at < np.inf or layer.surplus is not None or layer.order:
                raise InputError(
                    "a layer of a tower has a deductible and a limit, in the usual order, and a share",
                    where=f"layer {k}",
                    value=layer.describe(),
                    remedy="Place a cover of another kind beside the tower.",
                )
        starts = [layer.deductible for layer in self.layers]
        if starts != sorted(starts):
            raise InputError(
                "the layers of a tower are listed from the lowest to the highest",
                value=", ".join(f"{start:,.0f}" for start in starts),
                remedy="Sort them by deductible.",
            )
        for low, high, share in self._parts():
            if share > _WHOLE:
                raise InputError(
                    f"layers overlap: {share:.0%} of an event from {low:,.0f} to {high:,.0f} is covered",
                    value=" and ".join(layer.describe() for layer in self._at(low)),
                    remedy="Start the upper layer where the lower one ends, or lower their shares.",
                )

    def gaps(self) -> tuple[tuple[float, float], ...]:
        """Parts of an event between the lowest and the highest layer that no layer pays."""
        return tuple((low, high) for low, high, share in self._parts() if share == 0.0)

    def partly_placed(self) -> tuple[tuple[float, float, float], ...]:
        """Parts of an event of which the layers pay less than the whole, with the share they pay."""
        return tuple(part for part in self._parts() if 0.0 < part[2] < 1.0 - 1e-12)

    def _parts(self) -> list[tuple[float, float, float]]:
        """(low, high, share covered) between all ends of layers, from the lowest layer up."""
        ends = sorted({end for layer in self.layers for end in self._ends(layer)})
        return [
            (low, high, sum(layer.share for layer in self._at(low)))
            for low, high in pairwise(ends)
            if high == np.inf or high - low > _SLIVER * high
        ]

    def _at(self, amount: float) -> list[Cover]:
        return [layer for layer in self.layers if self._ends(layer)[0] <= amount < self._ends(layer)[1]]

    @staticmethod
    def _ends(layer: Cover) -> tuple[float, float]:
        top = layer.limit if layer.limit_includes_deductible else layer.deductible + layer.limit
        return layer.deductible, top
