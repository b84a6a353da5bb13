"""Which options are dominated, which are efficient, and which an appetite leaves.

An option dominates another when it costs no more on average, in the worst year at any level of the table and
in the mean of the worst hundredth, less in one of them, and under every drawn set of parameters too.
Nothing is recommended without an appetite: between two efficient options only its owner can choose.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray


@dataclass(frozen=True, eq=False)
class Position:
    """Where an option stands.

    Args:
        name: the option.
        expected: expected total cost; None where it does not exist.
        worst: total cost in the worst year at each level compared, and in the mean of the tail; None
            likewise.
        drawn: per parameter draw, expected total cost and those of the worst years, shape
            (draws, 1 + levels); None where the draws cannot be computed for this option; NaN in draws where
            they do not exist.
    """

    name: str
    expected: float | None
    worst: tuple[float | None, ...]
    drawn: FloatArray | None = None


def dominators(positions: Sequence[Position], *, draws: int) -> dict[str, list[str]]:
    """Per option, the options that dominate it.

    Args:
        positions: all options of the table.
        draws: number of parameter draws; 0 where the laws are given and there is no range.
    """
    return {
        own.name: [other.name for other in positions if other is not own and _dominates(other, own, draws)]
        for own in positions
    }


def _dominates(other: Position, own: Position, draws: int) -> bool:
    mine, theirs = (np.array([[p.expected, *p.worst]], dtype=np.float64) for p in (own, other))
    if not _better(theirs, mine):
        return False
    if draws == 0:
        return True
    if own.drawn is None or other.drawn is None:
        return False
    return _better(other.drawn, own.drawn)


def _better(theirs: FloatArray, mine: FloatArray) -> bool:
    """No more in anything, less in something, in every row; a row that is not known is not better."""
    slack = 1e-9 * np.maximum(np.abs(mine), 1.0)
    no_more = (theirs <= mine + slack).all(axis=1)
    less = (theirs < mine - slack).any(axis=1)
    return bool((no_more & less).all())


@dataclass(frozen=True)
class Choice:
    """What a stated appetite leaves.

    Attributes:
        within: options whose worst year retained is within the appetite.
        efficient: those of them that none of them dominates.
        option: the efficient one with the least expected total cost; None where none is within.
        why: the choice in words.
    """

    within: tuple[str, ...]
    efficient: tuple[str, ...]
    option: str | None
    why: str


def choose(
    positions: Sequence[Position],
    retained: dict[str, float | None],
    dominated: dict[str, list[str]],
    *,
    limit: float,
    level: float,
) -> Choice:
    """The efficient set within an appetite, and the cheapest of it.

    Args:
        positions: all options, with the cost that is to be least in `expected`.
        retained: worst year retained by option.
        dominated: per option, those that dominate it.
        limit: the most to be retained in the worst year.
        level: the level of that year.
    """
    year = f"the worst year retained at {100 * level:g} %"
    within = tuple(name for name, worst in retained.items() if worst is not None and worst <= limit)
    efficient = tuple(name for name in within if not set(dominated[name]) & set(within))
    costs = {p.name: p.expected for p in positions if p.name in efficient and p.expected is not None}
    if not costs:
        return Choice(within, efficient, None, f"No option keeps {year} within {limit:,.0f}.")
    best = min(costs, key=lambda name: costs[name])
    why = (
        f"{len(within)} of {len(positions)} options keep {year} within the appetite of {limit:,.0f}; "
        f"{len(efficient)} of them are not dominated by another of them, and of these {best!r} has the "
        f"least expected total cost, capital included. Appetite and loads decide this as much as the losses."
    )
    return Choice(within, efficient, best, why)
