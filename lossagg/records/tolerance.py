"""The limit on what may be set aside: beyond it the file is not fit to be modelled."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.faults import Fault
from lossagg.records.findings import Finding, RecordsError, counted
from lossagg.records.table import LossTable

ONE_ROW = 0.5


def check_tolerance(
    table: LossTable,
    aside: Sequence[Fault],
    used: BoolArray,
    tolerance: float,
    findings: Sequence[Finding],
    line: str | None = None,
) -> None:
    """Stop when too much is set aside for faults, in rows or in money (by absolute amount).

    One row may be set aside where one row alone is more than tolerated, unless nothing is tolerated or the
    row is more than half the money.

    Raises:
        RecordsError: with all findings, the share and the main reasons.
    """
    faulty = np.zeros(len(table), dtype=np.bool_)
    for fault in aside:
        if not fault.tolerated:
            faulty |= fault.mask
    if not faulty.any():
        return
    count = int(np.count_nonzero(faulty))
    kept = table.exact[used].absolute().total()
    lost = table.exact[faulty].absolute().total()
    shares = {
        "rows": count / max(1, count + int(np.count_nonzero(used))),
        "the money": float(lost / (kept + lost)) if lost else 0.0,
    }
    worst = max(shares, key=lambda name: shares[name])
    # A file of ten rows would stop at its first bad one: one row is no share of anything yet.
    alone = count == 1 and 0 < tolerance < shares["rows"] and shares["the money"] <= max(tolerance, ONE_ROW)
    if shares[worst] <= tolerance or alone:
        return
    numbers = {fault.code: int(np.count_nonzero(fault.mask)) for fault in aside if not fault.tolerated}
    reasons = ", ".join(f"{code} {number}" for code, number in numbers.items() if number)
    first = int(np.flatnonzero(faulty)[0])
    of_line = f" of line {line!r}" if line else ""
    stop = Finding(
        "set-aside-share",
        "stop",
        table.file,
        None,
        None,
        None,
        f"{shares[worst]:.1%} of {worst}{of_line} ({counted(count, 'row')}) would be set aside for "
        f"faults, more than the tolerance of {tolerance:.1%}",
        f"Repair the file (first at row {table.row[first]}; by reason: {reasons}), or raise the tolerance.",
        sheet=table.sheet,
        line=line,
        count=count,
        amount=float(lost),
    )
    raise RecordsError([stop, *findings])
