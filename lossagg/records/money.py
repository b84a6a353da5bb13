"""Money counted exactly, and the reconciliation that an auditor recomputes.

Every amount is kept as the decimal number written in the file, as an integer with its decimal places,
beside its float64 twin that the models use. Sums of integers are exact whatever the order of the rows, so
what was read equals what is used plus what is excluded to the last digit, not to a tolerance.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from decimal import Decimal, Inexact, localcontext
from typing import overload

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import LossaggError

# Amounts have at most 60 characters and fit a float64 (1e-400 to 1.8e308 as written): their sum over any
# file that fits a disk needs fewer digits than this, and the Inexact trap proves it each time.
_DIGITS = 1200
_ZERO = Decimal(0)
_HALF = 32
_CHUNK = 1_000_000
_MOST_PLACES = 100
_MOST_UNITS = 2**62
_FLOAT_UNITS, _FLOAT_PLACES = 2**53, 22
"""Below these, units / 10**places divides two exact float64 numbers and is rounded once."""


@dataclass(frozen=True, eq=False)
class Money:
    """A column of amounts, each exactly as written: units * 10**-places, in integers.

    An amount whose digits do not fit 62 bits stands in `odd` and counts as zero units.

    Args:
        units: whole numbers; shape (rows,).
        places: decimal places of each; shape (rows,).
        odd: {position: amount} of the amounts that do not fit.
    """

    units: IntArray
    places: npt.NDArray[np.int8]
    odd: dict[int, Decimal] = field(default_factory=dict)

    @classmethod
    def zeros(cls, rows: int) -> Money:
        """A column of zeros."""
        return cls(np.zeros(rows, dtype=np.int64), np.zeros(rows, dtype=np.int8))

    @classmethod
    def of(cls, amounts: Sequence[Decimal]) -> Money:
        """A column of given finite amounts."""
        column = cls.zeros(len(amounts))
        for at, amount in enumerate(amounts):
            column.put(at, amount)
        return column

    def put(self, at: int, amount: Decimal) -> None:
        """Set one amount while the column is being made."""
        units, places = self.units, self.places
        self.odd.pop(at, None)
        units[at], places[at] = 0, 0
        sign, digits, exponent = amount.as_tuple()
        exponent = int(exponent)
        whole = int("".join(map(str, digits))) * 10 ** min(max(exponent, 0), 400)
        if whole < _MOST_UNITS and -exponent <= _MOST_PLACES:
            units[at], places[at] = -whole if sign else whole, max(-exponent, 0)
        else:
            self.odd[at] = amount

    def copy(self) -> Money:
        """A column of its own, to be changed."""
        return Money(self.units.copy(), self.places.copy(), dict(self.odd))

    def __setitem__(self, at: int, amount: Decimal) -> None:
        """Set one amount of a column that is being made."""
        self.put(at, amount)

    def __len__(self) -> int:
        """Number of amounts."""
        return len(self.units)

    @overload
    def __getitem__(self, at: int) -> Decimal: ...
    @overload
    def __getitem__(self, at: IntArray | BoolArray | slice) -> Money: ...
    def __getitem__(self, at: int | IntArray | BoolArray | slice) -> Decimal | Money:
        """One amount as a decimal, or a column of those at positions or under a mask."""
        if isinstance(at, int | np.integer):
            index = int(at) % len(self) if -len(self) <= at < len(self) else int(at)
            if index in self.odd:
                return self.odd[index]
            return Decimal(int(self.units[index])).scaleb(-int(self.places[index]))
        odd = {}
        if self.odd:
            chosen = np.arange(len(self))[at].tolist()
            odd = {new: self.odd[old] for new, old in enumerate(chosen) if old in self.odd}
        return Money(self.units[at], self.places[at], odd)

    def __iter__(self) -> Iterator[Decimal]:
        """The amounts one by one, as decimals."""
        return (self[at] for at in range(len(self)))

    def tolist(self) -> list[Decimal]:
        """The amounts as decimals."""
        return list(self)

    def absolute(self) -> Money:
        """The amounts without their signs."""
        odd = {at: amount.copy_abs() for at, amount in self.odd.items()}
        return Money(np.abs(self.units), self.places, odd)

    def total(self) -> Decimal:
        """The exact sum, zero for no amounts."""
        by_places = dict.fromkeys(range(_MOST_PLACES + 1), 0)
        for start in range(0, len(self), _CHUNK):
            units, places = self.units[start : start + _CHUNK], self.places[start : start + _CHUNK]
            for count in np.flatnonzero(np.bincount(places)).tolist():
                some = units[places == count]
                # Two halves, since a sum of 62-bit integers may leave 64 bits.
                high, low = int((some >> _HALF).sum()), int((some & (2**_HALF - 1)).sum())
                by_places[count] += (high << _HALF) + low
        parts = [_scaled(units, count) for count, units in by_places.items() if units]
        return exact_sum([*parts, *self.odd.values()])

    def by_group(self, group: IntArray, groups: int) -> Money:
        """Exact sums by group.

        Args:
            group: group of each amount, from 0; shape (rows,).
            groups: number of groups.

        Returns:
            The sums, shape (groups,).
        """
        if groups == len(self) and (np.bincount(group, minlength=groups) == 1).all():
            return self._placed(group)
        most = np.zeros(groups, dtype=np.int8)
        np.maximum.at(most, group, self.places)
        lift = most[group] - self.places
        room = np.abs(self.units) < _MOST_UNITS // 10 ** np.minimum(lift, 18).astype(np.int64)
        safe = room & (lift <= 18)
        units = np.where(safe, self.units, 0) * 10 ** np.where(safe, lift, 0).astype(np.int64)
        high, low = np.zeros(groups, dtype=np.int64), np.zeros(groups, dtype=np.int64)
        np.add.at(high, group, units >> _HALF)
        np.add.at(low, group, units & (2**_HALF - 1))
        high, low = high + (low >> _HALF), low & (2**_HALF - 1)
        fits = np.abs(high) < 2**29
        column = Money(np.where(fits, (high << _HALF) + low, 0), most)
        hard = set(np.flatnonzero(~fits).tolist()) | set(group[~safe].tolist())
        hard |= {int(group[at]) for at in self.odd}
        if hard:
            _sum_hard_groups(self, column, group, hard)
        return column

    def _placed(self, place: IntArray) -> Money:
        """The amounts in other places, each of which is taken once."""
        column = Money.zeros(len(self))
        column.units[place], column.places[place] = self.units, self.places
        column.odd.update({int(place[at]): amount for at, amount in self.odd.items()})
        return column

    def to_floats(self) -> FloatArray:
        """The nearest float64 of each amount; shape (rows,)."""
        easy = (np.abs(self.units) <= _FLOAT_UNITS) & (self.places <= _FLOAT_PLACES)
        scale = np.power(10.0, np.arange(_FLOAT_PLACES + 1))
        floats: FloatArray = self.units / scale[np.minimum(self.places, _FLOAT_PLACES)]
        for at in {*np.flatnonzero(~easy).tolist(), *self.odd}:
            floats[at] = float(self[at])
        return floats


def _sum_hard_groups(amounts: Money, column: Money, group: IntArray, hard: set[int]) -> None:
    members: dict[int, list[Decimal]] = {number: [] for number in hard}
    for at in np.flatnonzero(np.isin(group, list(hard))).tolist():
        members[int(group[at])].append(amounts[at])
    for number, parts in members.items():
        column.put(number, exact_sum(parts))


def _scaled(units: int, places: int) -> Decimal:
    with localcontext() as context:
        context.prec = _DIGITS
        return Decimal(units).scaleb(-places)


def exact_sum(amounts: Money | Iterable[Decimal]) -> Decimal:
    """Sum amounts without any rounding.

    Returns:
        The exact sum; zero for no amounts.
    """
    if isinstance(amounts, Money):
        return amounts.total()
    with localcontext() as context:
        context.prec = _DIGITS
        context.traps[Inexact] = True
        return sum(amounts, _ZERO)


@dataclass(frozen=True)
class Reconciliation:
    """The proof that no row and no cent vanished: read = used + excluded, in count and in money.

    Args:
        read: rows read, without headings and without blank rows at the foot.
        used: rows that reach the model.
        excluded: rows set aside.
        amount_read: exact sum of the amounts read.
        amount_used: exact sum of the amounts used.
        amount_excluded: exact sum of the amounts set aside.
        unvalued: rows read whose amount is no number (missing or infinite): counted, valued at 0.

    Raises:
        LossaggError: the two sides differ, which would be a defect of lossagg and not of the file.
    """

    read: int
    used: int
    excluded: int
    amount_read: Decimal
    amount_used: Decimal
    amount_excluded: Decimal
    unvalued: int = 0

    def __post_init__(self) -> None:
        # copy_negate: a plain minus would round to the precision of the surrounding context.
        balance = exact_sum([self.amount_used, self.amount_excluded, self.amount_read.copy_negate()])
        if self.read != self.used + self.excluded or balance != 0:
            raise LossaggError(
                "the reconciliation does not hold",
                value=(self.read, self.used, self.excluded, balance),
                remedy="This is a defect of lossagg: keep the file and report it.",
            )

    def to_dict(self) -> dict[str, float | int]:
        """The reconciliation as plain numbers; money as the nearest float64."""
        return {
            "read": self.read,
            "used": self.used,
            "excluded": self.excluded,
            "amount_read": float(self.amount_read),
            "amount_used": float(self.amount_used),
            "amount_excluded": float(self.amount_excluded),
            "unvalued": self.unvalued,
        }

    def __str__(self) -> str:
        """One line: counts and money on both sides of the equation."""
        return (
            f"{self.read} read = {self.used} used + {self.excluded} excluded; "
            f"{self.amount_read:f} = {self.amount_used:f} + {self.amount_excluded:f}"
        )


def reconcile(exact: Money, used: BoolArray, unreadable: BoolArray) -> Reconciliation:
    """Count and value the rows of a table on both sides, each side summed on its own.

    Args:
        exact: amount of each row as written, zero where it is no number; shape (rows,).
        used: True for the rows that are used; shape (rows,).
        unreadable: True where the amount is no number; shape (rows,).

    Returns:
        The reconciliation of these rows.
    """
    return Reconciliation(
        read=len(exact),
        used=int(np.count_nonzero(used)),
        excluded=int(np.count_nonzero(~used)),
        amount_read=exact_sum(exact),
        amount_used=exact_sum(exact[used]),
        amount_excluded=exact_sum(exact[~used]),
        unvalued=int(np.count_nonzero(unreadable)),
    )
