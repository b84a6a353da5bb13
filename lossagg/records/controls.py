"""Control totals: what a ledger says a file should hold, against what it holds.

The totals are compared with the rows that stand for a claim: those that are used and those that are set
aside for a fault, but neither copies of other rows, earlier valuations, rows of totals nor blank rows. A
break says that the file is not the ledger's (BCBS 239, principles 3 and 4: accuracy, integrity and
completeness of risk data, reconciled with accounting); what is computed from it cannot be a headline.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from decimal import Decimal

import numpy as np

from lossagg.arrays import BoolArray, require_positive
from lossagg.errors import InputError, place
from lossagg.records.check import USED, CheckedLosses
from lossagg.records.findings import Finding, RecordsError
from lossagg.records.money import Money

COUNT = "count"
MONEY = ("amount", "paid", "outstanding", "recoveries")
CENT_TOLERANCE = 0.005
NOT_CLAIMS = ("duplicate-row", "superseded", "later-valuation", "blank-row", "totals-row", "subtotal-row")
_THOUSAND, _NEARLY = 1000, 0.02


@dataclass(frozen=True, kw_only=True)
class ControlTotal:
    """Totals that another source, usually a ledger, states for the records of a line.

    Args:
        totals: {"count", "amount", "paid", "outstanding" or "recoveries": total}.
        year: calendar year of the loss dates they are of; None: all.
        tolerance: largest difference in money that is none; counts must agree exactly.

    Raises:
        InputError: no total, another name, a count that is no whole number, a negative tolerance.
    """

    totals: Mapping[str, float]
    year: int | None = None
    tolerance: float = CENT_TOLERANCE

    def __post_init__(self) -> None:
        unknown = [name for name in self.totals if name not in (COUNT, *MONEY)]
        if unknown or not self.totals:
            raise InputError(
                "a control total states a count or an amount",
                value=unknown or "nothing",
                remedy=f"Give one or more of {COUNT}, {', '.join(MONEY)}.",
            )
        if COUNT in self.totals and self.totals[COUNT] != int(self.totals[COUNT]):
            raise InputError(
                "a control total of records must be a whole number",
                value=self.totals[COUNT],
                remedy="Give the number of claims.",
            )
        require_positive(self.tolerance, "tolerance", zero=True)


@dataclass(frozen=True, kw_only=True)
class ControlResult:
    """One control total beside what the records hold.

    Args:
        measure: "count", "amount", "paid", "outstanding" or "recoveries".
        year: calendar year; None: all.
        stated: the control total.
        used: what the rows that are used hold of it.
        set_aside: what the rows set aside for faults hold of it.
        difference: used + set aside - stated.
        tolerance: largest difference that is none.
    """

    measure: str
    year: int | None
    stated: Decimal
    used: Decimal
    set_aside: Decimal
    tolerance: float
    difference: Decimal = field(init=False)

    def __post_init__(self) -> None:
        difference = Money.of([self.used, self.set_aside, self.stated.copy_negate()]).total()
        object.__setattr__(self, "difference", difference)

    @property
    def agrees(self) -> bool:
        """Whether the difference is within the tolerance."""
        return abs(self.difference) <= Decimal(repr(float(self.tolerance)))

    def to_dict(self) -> dict[str, object]:
        """The result as plain values; money as the nearest float64."""
        return {
            "measure": self.measure,
            "year": self.year,
            "stated": float(self.stated),
            "used": float(self.used),
            "set_aside": float(self.set_aside),
            "difference": float(self.difference),
            "tolerance": float(self.tolerance),
            "agrees": self.agrees,
        }


def reconcile_controls(checked: CheckedLosses, controls: Sequence[ControlTotal]) -> tuple[ControlResult, ...]:
    """Compare control totals with the records of a line, each difference exact.

    Amounts are those of the file, in the currency of the portfolio where they were converted and before
    deductibles are added back.

    Args:
        checked: the records of one line, or of a file.
        controls: the totals stated.

    Returns:
        One result for each figure of each total, in their order.

    Raises:
        RecordsError: a total of money a thousand times what the records hold, or a thousandth of it.
        InputError: a total of a column the records do not have, or that was changed before the checks.
    """
    claims = standing_claims(checked)
    results = tuple(
        _compare(checked, claims, control, measure) for control in controls for measure in control.totals
    )
    for result in results:
        _refuse_other_unit(checked, result)
    return results


def standing_claims(checked: CheckedLosses) -> BoolArray:
    """True for the rows that stand for a claim: used, or set aside for a fault; shape (rows,)."""
    numbers = [number for number, fault in enumerate(checked.faults) if fault.code in NOT_CLAIMS]
    claims: BoolArray = checked.member & ~checked.table.blank & ~np.isin(checked.reason, numbers)
    return claims


def control_findings(checked: CheckedLosses, results: Sequence[ControlResult]) -> list[Finding]:
    """A warning for every control total that the records do not meet."""
    table = checked.table
    return [
        Finding(
            "control-total",
            "warn",
            table.file,
            None,
            table.headings.get(result.measure),
            None,
            f"{result.measure}{_of_year(result)}: the control total is {_number(result.stated)}, the records "
            f"hold {_number(result.used)} used and {_number(result.set_aside)} set aside, a difference of "
            f"{_number(result.difference)} where {result.tolerance:g} is tolerated",
            "Find the missing or added records with whoever keeps the ledger; no headline until then.",
            sheet=table.sheet,
            line=checked.line,
            count=0,
            amount=None if result.measure == COUNT else float(result.difference),
        )
        for result in results
        if not result.agrees
    ]


def _compare(checked: CheckedLosses, claims: BoolArray, control: ControlTotal, measure: str) -> ControlResult:
    mask = claims
    if control.year is not None:
        mask = claims & (checked.table.date.astype("datetime64[Y]").astype(np.int64) + 1970 == control.year)
    used = checked.reason == USED
    sides = [_sum(checked, mask & used, measure), _sum(checked, mask & ~used, measure)]
    return ControlResult(
        measure=measure,
        year=control.year,
        stated=Decimal(repr(control.totals[measure])),
        used=sides[0],
        set_aside=sides[1],
        tolerance=0.0 if measure == COUNT else control.tolerance,
    )


def _sum(checked: CheckedLosses, mask: BoolArray, measure: str) -> Decimal:
    table = checked.table
    if measure == COUNT:
        return Decimal(int(np.count_nonzero(mask)))
    raised = [change for change in table.changes if change.step == "ground-up"]
    if measure == "amount":
        return (raised[0].before if raised else table.exact)[mask].total()
    if measure not in table.numbers or (raised and measure == "paid"):
        raise InputError(
            f"a control total is given for {measure!r}, which "
            + ("was changed before it could be compared" if raised else "the records do not have"),
            where=place(file=table.file, sheet=table.sheet),
            remedy="Leave it out, or map the column.",
        )
    values = table.numbers[measure][mask]
    return Money.of([Decimal(repr(value)) for value in values[np.isfinite(values)].tolist()]).total()


def _refuse_other_unit(checked: CheckedLosses, result: ControlResult) -> None:
    """Stop where amounts are in thousands and the total in units, or the other way round."""
    held = float(result.used + result.set_aside)
    if result.measure == COUNT or not (held and result.stated):
        return
    ratio = abs(float(result.stated) / held)
    if min(abs(ratio * _THOUSAND - 1), abs(ratio / _THOUSAND - 1)) > _NEARLY:
        return
    table = checked.table
    stop = Finding(
        "control-unit",
        "stop",
        table.file,
        None,
        table.headings.get(result.measure),
        None,
        f"the records hold {held:,.2f} of {result.measure}{_of_year(result)} where the control total is "
        f"{float(result.stated):,.2f}, a factor of {max(ratio, 1 / ratio):,.0f}",
        "One of them is in thousands: give both in one unit.",
        sheet=table.sheet,
        line=checked.line,
        count=0,
        amount=held,
    )
    raise RecordsError([stop])


def _of_year(result: ControlResult) -> str:
    return "" if result.year is None else f" of {result.year}"


def _number(value: Decimal) -> str:
    return f"{value:,f}"
