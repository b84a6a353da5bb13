"""Files of records in a given state, written for one test each."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from pathlib import Path

import pytest

from lossagg.records import CheckedLosses, LossTable, check_losses, read_losses

VALUED = dt.date(2025, 12, 31)
Write = Callable[..., Path]
Read = Callable[..., LossTable]
Check = Callable[..., CheckedLosses]


@pytest.fixture
def write(tmp_path: Path) -> Write:
    """Write text or bytes to a file and return its path."""

    def _write(content: str | bytes, name: str = "losses.csv") -> Path:
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return _write


@pytest.fixture
def read(write: Write) -> Read:
    """Write a table and read it as losses."""

    def _read(content: str | bytes, name: str = "losses.csv", **options: object) -> LossTable:
        return read_losses(write(content, name), **options)  # type: ignore[arg-type]

    return _read


@pytest.fixture
def check(read: Read) -> Check:
    """Write a table, read and check it; the tolerance is wide, since the files are tiny."""

    def _check(content: str | bytes, **options: object) -> CheckedLosses:
        reading = {"columns", "decimal", "thousands", "grouping", "date_format", "time_zone"}
        reading |= {"delimiter", "encoding"}
        how = {key: options.pop(key) for key in list(options) if key in reading}
        terms = {"valuation_date": VALUED, "currency": "EUR", "tolerance": 0.9, **options}
        return check_losses(read(content, **how), **terms)  # type: ignore[arg-type]

    return _check
