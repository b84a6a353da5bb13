"""Money counted exactly, and the reconciliation that an auditor recomputes.

Every amount is kept as the decimal number written in the file, beside its float64 twin that the models
use. Sums over decimals are exact whatever the order of the rows, so what was read equals what is used
plus what is excluded to the last digit, not to a tolerance.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from decimal import Decimal, Inexact, localcontext

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray
from lossagg.errors import LossaggError

DecimalArray = npt.NDArray[np.object_]

# Amounts have at most 60 characters and fit a float64 (1e-400 to 1.8e308 as written): their sum over any
# file that fits a disk needs fewer digits than this, and the Inexact trap proves it each time.
_DIGITS = 1200
_ZERO = Decimal(0)


def exact_sum(amounts: Iterable[Decimal]) -> Decimal:
    """Sum decimal amounts without any rounding.

    Returns:
        The exact sum; zero for no amounts.
    """
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


def reconcile(exact: DecimalArray, used: BoolArray, unreadable: BoolArray) -> Reconciliation:
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
