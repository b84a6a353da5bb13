"""The losses of one line as they are modelled, with the trail that led to them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.dates import DateArray
from lossagg.records.development import OpenClaims
from lossagg.records.faults import Fault
from lossagg.records.findings import Finding
from lossagg.records.money import Reconciliation
from lossagg.records.steps import Step
from lossagg.records.ultimate import Developed
from lossagg.records.years import YearTable


@dataclass(frozen=True)
class PreparedLosses:
    """The losses of one line as they are modelled; arrays of shape (events,), sorted by date and amount.

    Args:
        line: name of the line, None when the file is of one line.
        amount: amount of each event in the money of the forecast period.
        threshold: reporting threshold of each event in the same money.
        censored: True where the amount stopped at a policy limit, or is of a claim that is open and taken
            as at least what is recorded.
        date: date of the earliest claim.
        year: its calendar year.
        recorded: amount as recorded, gross of recoveries.
        claims: number of claims of the event.
        years: the history by year.
        largest_threshold: lowest amount, in the money of the forecast period, above which the whole
            window is complete.
        steps: the steps from rows to losses.
        findings: everything found on the way, that of the checks included.
        reconciliation: rows and money read, used and excluded at the end.
        base: what the exposure is, None without exposure.
        net: True when recoveries were taken off.
        open_claims: what was done with open claims.
        developed: the years at ultimate, None where development was not asked for.
        trend_factor: what each event was multiplied by.
        loss_of_row: event of each row of the file, -1 where it is in none; shape (rows,).
        row_amount: amount of each row as it is modelled, None where it is the one recorded; shape (rows,).
        small: the faults of the rows whose event is below its threshold.
    """

    line: str | None
    amount: FloatArray
    threshold: FloatArray
    censored: BoolArray
    date: DateArray
    year: IntArray
    recorded: FloatArray
    claims: IntArray
    years: YearTable
    largest_threshold: float
    steps: tuple[Step, ...]
    findings: tuple[Finding, ...]
    reconciliation: Reconciliation
    base: str | None
    trend_factor: FloatArray
    loss_of_row: npt.NDArray[np.int32]
    row_amount: FloatArray | None
    small: tuple[Fault, ...]
    net: bool = False
    open_claims: OpenClaims = "as-recorded"
    developed: Developed | None = None

    def __len__(self) -> int:
        """Number of events."""
        return len(self.amount)

    def __repr__(self) -> str:
        """One line: the line, its events and years."""
        years = f"{self.years.year[0]}-{self.years.year[-1]}"
        return f"PreparedLosses(line={self.line!r}, events={len(self)}, years={years})"

    @property
    def supported_level(self) -> float:
        """Level that the length of the history supports by itself: 1 - 1 / years."""
        return 1.0 - 1.0 / len(self.years)
