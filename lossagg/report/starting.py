"""What a new portfolio assumes, as a table to be confirmed line by line."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from lossagg.report.cells import Column, Table
from lossagg.report.checking import printed_tables
from lossagg.report.reading import Entry


def assumptions_table(assumptions: Sequence[Any]) -> Table:
    """One row for each assumption: the key, what is assumed, and why.

    Args:
        assumptions: each with `key`, `assumed` and `why`.
    """
    rows = tuple((entry.key, entry.assumed, entry.why) for entry in assumptions)
    columns = (Column("Key"), Column("Assumed"), Column("Why"))
    return Table("To confirm", "Assumed, to be confirmed line by line", columns, rows)


def started_tables(assumptions: Sequence[Any], check: Entry) -> tuple[Table, ...]:
    """What a new portfolio assumes and, where it cannot be used as it stands, what stops it.

    Args:
        assumptions: see `assumptions_table`.
        check: the check of it, format "lossagg.check/1".
    """
    stops = [finding for finding in check["findings"] if finding["severity"] == "stop"]
    stopped = printed_tables({**check, "lines": [], "findings": stops}) if stops else ()
    return (assumptions_table(assumptions), *stopped)
