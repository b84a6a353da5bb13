"""Large files of invented records, and the memory that reading and checking ten million rows takes.

    python validation/large_records.py [--rows 10000000]

writes a Parquet file of that many rows in parts, reads and checks it in a process of its own, and prints the
time and the most memory that process ever held, beside the bytes of the columns of amounts and dates (8 and 8
a row). Leaves with exit code 1 when the process held more than twelve times these columns.
"""

from __future__ import annotations

import argparse
import datetime as dt
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

VALUED = dt.date(2025, 12, 31)
BYTES_PER_ROW = 16
MOST_TIMES = 12.0
_PART = 500_000
_LINES = np.array(["Motor", "Property", "Cargo"])


def columns(rows: int, first: int, seed: int) -> dict[str, np.ndarray]:
    """Amounts in cents, dates of ten years, claim numbers and lines of some invented records."""
    random = np.random.default_rng((seed, first))
    days = np.datetime64("2016-01-01") + random.integers(0, 3650, rows)
    return {
        "amount": np.round(random.lognormal(9.0, 1.5, rows), 2),
        "date": days.astype("datetime64[D]"),
        "event": np.char.add("C", np.char.zfill(np.arange(first, first + rows).astype(str), 8)),
        "line": _LINES[random.integers(0, 3, rows)],
    }


def write_csv(path: Path, rows: int, seed: int = 1) -> Path:
    """A text file of invented records: amount, date, event, status and recoveries."""
    made = columns(rows, 0, seed)
    status = np.where(np.random.default_rng(seed).random(rows) < 0.1, "open", "closed")
    cells = zip(
        np.char.mod("%.2f", made["amount"]), made["date"].astype(str), made["event"], status, strict=True
    )
    with path.open("w") as stream:
        stream.write("amount,date,event,status,recoveries\n")
        stream.writelines(f"{amount},{date},{event},{state},0.00\n" for amount, date, event, state in cells)
    return path


def write_parquet(path: Path, rows: int, seed: int = 1) -> Path:
    """A Parquet file of invented records: amount, date and line, and a claim number that is not read."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    kinds = [("amount", pa.float64()), ("date", pa.date32()), ("number", pa.string()), ("line", pa.string())]
    with pq.ParquetWriter(path, pa.schema(kinds)) as writer:
        for first in range(0, rows, _PART):
            made = columns(min(_PART, rows - first), first, seed)
            arrays = [pa.array(made[name]) for name in ("amount", "date", "event", "line")]
            writer.write_table(pa.table([a.cast(kind) for a, (_, kind) in zip(arrays, kinds, strict=True)],
                                        schema=writer.schema))  # fmt: skip
    return path


def read_and_check(path: Path) -> str:
    """Read and check the file; what it took, as printed."""
    from lossagg.records import check_losses, read_losses

    start = time.perf_counter()
    table = read_losses(path)
    checked = check_losses(table, valuation_date=VALUED, currency="EUR", lines=[str(line) for line in _LINES])
    took = time.perf_counter() - start
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    times = most / (BYTES_PER_ROW * len(table))
    print(f"{checked.reconciliation}")
    print(f"{len(table):,} rows read and checked in {took:.1f} s")
    return f"most memory held {most / 1e6:,.0f} MB, {times:.1f} times the amounts and dates"


def main() -> int:
    """Write the file, read it in another process, print what that took."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawTextHelpFormatter)
    parser.add_argument("--rows", type=int, default=10_000_000)
    parser.add_argument("--read", type=Path, help="read and check this file in this process")
    given = parser.parse_args()
    if given.read:
        text = read_and_check(given.read)
        print(text)
        return 0 if float(text.split(", ")[-1].split(" ")[0]) <= MOST_TIMES else 1
    with tempfile.TemporaryDirectory() as folder:
        path = write_parquet(Path(folder) / "large.parquet", given.rows)
        return subprocess.run([sys.executable, __file__, "--read", str(path)], check=False).returncode


if __name__ == "__main__":
    sys.exit(main())
