"""Records of a line that had no loss and needs no file to say so."""

from __future__ import annotations

import hashlib

import numpy as np

from lossagg.records.money import Money
from lossagg.records.table import LossTable


def no_records(file: str) -> LossTable:
    """A table without rows, for a line declared to be without losses.

    Args:
        file: name of the file that declares it, to which findings point.
    """
    nowhere, numbers = np.zeros(0, dtype=np.bool_), np.zeros(0, dtype=np.int64)
    return LossTable(
        file=file,
        sheet=None,
        sha256=hashlib.sha256(b"").hexdigest(),
        row=numbers,
        headings={},
        cells={},
        numbers={"amount": np.zeros(0)},
        dates={"date": np.zeros(0, dtype="datetime64[D]")},
        words={},
        exact=Money.zeros(0),
        unreadable=nowhere,
        blank=nowhere,
        fingerprint=numbers,
        faults=(),
        findings=(),
    )
