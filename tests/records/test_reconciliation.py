"""read = used + excluded, exactly, whatever is wrong with the file; and no row vanishes.

The expected figures are computed here from the text alone, with `fractions` and `csv`, which share no
code with the package.
"""

import csv
import datetime as dt
import io
import random
import re
from fractions import Fraction
from pathlib import Path

import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.errors import InputError, LossaggError
from lossagg.records import CheckedLosses, Reconciliation, check_losses, prepare_losses, read_losses

HEADINGS = ["amount", "date", "event", "status", "paid", "outstanding", "threshold", "policy-limit", "line"]
LINES = ["Motor", "Property"]
NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
HARM = {
    0: [
        "",
        "NaN",
        "-5.25",
        "0",
        "inf",
        "#REF!",
        "1e308",
        "0.00000000000000000001",
        "123456789012345678.91",
        "5k",
    ],
    1: ["", "2025-02-31", "1850-01-01", "2031-01-01", "2024-01-01T10:00Z", "03/04/2025", "N/A"],
    2: ["", "E1", "E2", "N/A", " E1 ", "1.2E+11"],
    3: ["open", "", "weird"],
    4: ["", "1", "NaN", "1e400"],
    5: ["", "2", "-3"],
    6: ["", "1000000", "-1"],
    7: ["", "0", "100"],
    8: ["motor", "Boat", ""],
}


def good_rows(count: int, rng: random.Random) -> list[list[str]]:
    rows = []
    for k in range(count):
        amount = f"{rng.randrange(100_000, 9_999_999) / 100:.2f}"
        day = dt.date(2018, 1, 1) + dt.timedelta(days=rng.randrange(2500))
        event = f"E{k % 5}" if k % 3 == 0 else f"F{k:04d}"
        rows.append([amount, day.isoformat(), event, "closed", amount, "0", "50", "1e9", LINES[k % 2]])
    return rows


def as_text(rows: list[list[str]]) -> str:
    text = io.StringIO()
    csv.writer(text, lineterminator="\n").writerows([HEADINGS, *rows])
    return text.getvalue()


def write(path: Path, rows: list[list[str]]) -> None:
    """Write the rows as the kind of file the suffix says; plain amounts of a workbook as numbers."""
    if path.suffix == ".csv":
        path.write_text(as_text(rows))
    elif path.suffix == ".parquet":
        cells = [pa.array([row[at] or None for row in rows], pa.string()) for at in range(len(HEADINGS))]
        pq.write_table(pa.table(cells, names=HEADINGS), path)
    else:
        book = openpyxl.Workbook()
        book.active.append(HEADINGS)
        for row in rows:
            book.active.append([as_number(row[0]), *[cell or None for cell in row[1:]]])
        book.save(path)


def as_number(cell: str) -> float | str | None:
    """A number where the cell is one that a float64 keeps to its last digit."""
    return float(cell) if NUMBER.fullmatch(cell) and repr(float(cell)) == cell else cell or None


def value(cell: str) -> Fraction:
    """The money a row is worth by its text: its number if it is a finite one, else nothing."""
    cell = cell.strip()
    if not NUMBER.fullmatch(cell) or float(cell) in (float("inf"), float("-inf")):
        return Fraction(0)
    return Fraction(cell)


def corrupt(rows: list[list[str]], harm: list[tuple]) -> None:
    for place, what, *which in harm:
        at = place % len(rows)
        if what == "repeat":
            rows.append(list(rows[at]))
        elif what == "blank":
            rows.insert(at, [""] * len(HEADINGS))
        elif what == "total":
            total = min(sum(value(row[0]) for row in rows), Fraction(10) ** 308)
            rows.append([str(float(total)), *[""] * 8])
        else:
            rows[at][what] = HARM[what][which[0] % len(HARM[what])]


def money(rows: list[list[str]]) -> Fraction:
    return sum((value(row[0]) for row in rows), Fraction(0))


def accounts_hold(path: Path, rows: list[list[str]]) -> bool:
    """Write, read and check the rows; False if the file was stopped, else every account must hold."""
    write(path, rows)
    while len(rows) > 1 and not any(rows[-1]):
        rows.pop()
    terms = {"valuation_date": dt.date(2025, 6, 30), "currency": "EUR", "lines": LINES, "tolerance": 1.0}
    try:
        checked = check_losses(read_losses(path), **terms)
    except InputError:
        return False
    whole = checked.reconciliation
    assert whole.read == len(rows) == whole.used + whole.excluded
    assert Fraction(whole.amount_read) == money(rows)
    for side, wanted in ((whole.amount_used, True), (whole.amount_excluded, False)):
        assert Fraction(side) == money(
            [row for row, used in zip(rows, checked.used, strict=True) if used == wanted]
        )
    assert checked.excluded_frame()["row"].tolist() == [
        k + 2 for k, used in enumerate(checked.used) if not used
    ]
    aside = [finding for finding in checked.findings if finding.action == "set aside"]
    assert sum(finding.count for finding in aside) == whole.excluded
    parts = [checked.for_line(name) for name in (*LINES, None)]
    assert sum(part.reconciliation.read for part in parts) == whole.read
    assert sum(Fraction(part.reconciliation.amount_used) for part in parts) == Fraction(whole.amount_used)
    for part in parts[:2]:
        if part.used.any():
            prepared_accounts_hold(part)
    return True


def prepared_accounts_hold(part: CheckedLosses) -> None:
    prepared = prepare_losses(
        part, forecast_midpoint=dt.date(2026, 7, 2), reporting_threshold=1000, trend=0.03
    )
    total = prepared.reconciliation
    assert total.read == part.reconciliation.read == total.used + total.excluded
    assert Fraction(total.amount_used) + Fraction(total.amount_excluded) == Fraction(total.amount_read)
    assert int(prepared.claims.sum()) == int(prepared.years.claims.sum()) == total.used
    assert int(prepared.years.losses.sum()) == len(prepared)
    recorded = sum(map(Fraction, prepared.recorded.tolist()), Fraction(0))
    assert float(recorded) == pytest.approx(float(total.amount_used), rel=1e-12)
    for before, after in zip(prepared.steps, prepared.steps[1:], strict=False):
        assert (before.count_after, before.amount_after) == (after.count_before, after.amount_before)


@settings(derandomize=True, deadline=None, max_examples=150)
@given(
    suffix=st.sampled_from([".csv", ".csv", ".xlsx", ".parquet"]),
    count=st.integers(1, 25),
    seed=st.integers(0, 2**32),
    harm=st.lists(
        st.one_of(
            st.tuples(st.integers(0, 24), st.integers(0, 8), st.integers(0, 9)),
            st.tuples(st.integers(0, 24), st.sampled_from(["repeat", "blank", "total"])),
        ),
        max_size=12,
    ),
)
def test_corrupted_files_reconcile_or_stop(
    tmp_path_factory, suffix: str, count: int, seed: int, harm
) -> None:
    """Corrupt a good file at random: it stops with an InputError, or every row and cent is accounted for."""
    rows = good_rows(count, random.Random(seed))
    corrupt(rows, harm)
    accounts_hold(tmp_path_factory.mktemp("harm") / f"losses{suffix}", rows)


def test_corruption_that_does_not_stop_reaches_the_accounts(tmp_path) -> None:
    """Guards the property above against passing because every file is stopped."""
    rng = random.Random(7)
    for suffix in (".csv", ".xlsx", ".parquet"):
        reached = 0
        for _ in range(20):
            rows = good_rows(20, rng)
            corrupt(rows, [(rng.randrange(20), rng.randrange(8), rng.randrange(9)) for _ in range(6)])
            reached += accounts_hold(tmp_path / f"losses{suffix}", rows)
        assert reached >= 8, suffix


def test_one_hundred_rows_with_seven_planted_faults(check) -> None:
    """100 read = 93 used + 7 excluded, and the money splits to the cent."""
    rows = [f"{1000 + k}.{k:02d},2024-01-{k % 28 + 1:02d},E{k:03d}" for k in range(93)]
    faults = ["-1.11,2024-01-01,X1", "NaN,2024-01-01,X2", "2.22,2031-01-01,X3", "3.33,1850-01-01,X4"]
    faults += ["4.44,2024-02-30,X5", "5.55,,X6", rows[0]]
    checked = check("amount,date,event\n" + "\n".join([*rows, *faults]) + "\n", tolerance=0.08)
    total = checked.reconciliation
    assert (total.read, total.used, total.excluded, total.unvalued) == (100, 93, 7, 1)
    used = sum((Fraction(row.split(",")[0]) for row in rows), Fraction(0))
    excluded = Fraction("-1.11") + sum(
        map(Fraction, ("2.22", "3.33", "4.44", "5.55", "1000.00")), Fraction(0)
    )
    assert (Fraction(total.amount_used), Fraction(total.amount_excluded)) == (used, excluded)
    assert Fraction(total.amount_read) == used + excluded


def test_sums_that_float64_gets_wrong_are_exact(check) -> None:
    """Ten times 0.1 and one third of a cent: a float64 sum of the first is 0.9999999999999999."""
    checked = check("amount,date\n" + "0.1,2024-01-01\n" * 10 + "1e16,2024-01-01\n1e-16,2024-01-01\n")
    assert str(checked.reconciliation.amount_read) == "10000000000000001.0000000000000001"


def test_a_reconciliation_that_does_not_hold_cannot_be_made() -> None:
    from decimal import Decimal

    with pytest.raises(LossaggError, match="the reconciliation does not hold"):
        Reconciliation(2, 1, 1, Decimal("3"), Decimal("1"), Decimal("1.99"))
    with pytest.raises(LossaggError, match="the reconciliation does not hold"):
        Reconciliation(2, 1, 0, Decimal("3"), Decimal("1"), Decimal("2"))
