"""The same records handed in again for a new quarter, and records whose claims cannot be followed."""

from __future__ import annotations

import numpy as np

from lossagg.records.check import CheckedLosses
from lossagg.records.findings import Action, Finding, RecordsError
from lossagg.records.table import LossTable


def same_records(table: LossTable, earlier: LossTable, unchanged: bool) -> list[Finding]:
    """Refuse the same records for a new quarter, and a confirmation of records that differ.

    Args:
        table: the records.
        earlier: those of the previous quarter.
        unchanged: True where it is confirmed that they are the same.

    Returns:
        A warning where they are the same, as confirmed.

    Raises:
        RecordsError: the same bytes, or the same rows, without a confirmation; or a wrong confirmation.
    """
    same = table.sha256 == earlier.sha256 or (
        len(table) == len(earlier)
        and np.array_equal(np.sort(table.fingerprint), np.sort(earlier.fingerprint))
    )
    if unchanged and not same:
        raise RecordsError(
            [
                _finding(
                    "stop",
                    table,
                    None,
                    f"the records are confirmed to be those of {earlier.file}, but they differ from them",
                    "Take unchanged = true out.",
                )
            ]
        )
    if same and not unchanged:
        digest = f"SHA-256 {table.sha256[:16]}..." if table.sha256 == earlier.sha256 else "every row the same"
        raise RecordsError(
            [
                _finding(
                    "stop",
                    table,
                    digest,
                    f"the records are those of the previous quarter, {earlier.file}, handed in again",
                    "Supply the new extract; if nothing happened since, confirm it with unchanged = true.",
                )
            ]
        )
    if not same:
        return []
    return [
        _finding(
            "warn",
            table,
            None,
            f"the records are those of the previous quarter, {earlier.file}, as confirmed",
            "None needed if really nothing happened since.",
        )
    ]


def _finding(action: Action, table: LossTable, value: str | None, what: str, remedy: str) -> Finding:
    return Finding(
        "same-records",
        action,
        table.file,
        None,
        None,
        value,
        what,
        remedy,
        sheet=table.sheet,
        count=len(table),
    )


def not_followed(checked: CheckedLosses, earlier: CheckedLosses) -> Finding:
    """The warning that no identifier leads from one file to the other."""
    return Finding(
        "claims-not-followed",
        "warn",
        checked.table.file,
        None,
        None,
        None,
        f"claims cannot be followed from {earlier.table.file}: one of the two has neither claim nor event",
        "Map the column that identifies the claim.",
        sheet=checked.table.sheet,
        line=checked.line,
        count=0,
    )
