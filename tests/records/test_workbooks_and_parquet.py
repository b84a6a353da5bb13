"""Workbooks and Parquet: the same losses as the CSV, and refusals of what could run, reach out or mislead."""

import datetime as dt
import zipfile
from decimal import Decimal
from pathlib import Path

import numpy as np
import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from lossagg.errors import InputError
from lossagg.records import RecordsError, check_losses, midpoint, prepare_losses, read_exposure, read_losses

HEADINGS = ["amount", "date", "event", "status", "policy-limit", "note"]
ROWS = [
    [1234.56, dt.date(2021, 3, 4), "007", "closed", None, "x"],
    [0.1, dt.date(2022, 12, 31), "008", "open", 5000, None],
    [250000, dt.date(2023, 2, 28), "008", "closed", 250000, "y"],
    [-5.5, dt.date(2024, 2, 29), None, "closed", None, "z"],
    [None, dt.date(2024, 3, 1), "009", "open", None, "z"],
    [1e-7, dt.date(2024, 3, 1), "010", "open", None, "z"],
    [123456789012.5, dt.date(2025, 3, 1), "011", "closed", None, "z"],
]


def as_csv(path: Path) -> Path:
    lines = [",".join("" if cell is None else str(cell) for cell in row) for row in [HEADINGS, *ROWS]]
    path.write_text("\n".join(lines) + "\n")
    return path


def as_workbook(path: Path, rows=ROWS, headings=HEADINGS) -> Path:
    book = openpyxl.Workbook()
    for row in [headings, *rows]:
        book.active.append(row)
    book.save(path)
    return path


def as_parquet(path: Path) -> Path:
    columns = list(zip(*ROWS, strict=True))
    table = pa.table(
        {
            "amount": pa.array(columns[0], pa.float64()),
            "date": pa.array(columns[1], pa.date32()),
            "event": pa.array(columns[2], pa.string()).dictionary_encode(),
            "status": pa.array(columns[3], pa.large_string()),
            "policy-limit": pa.array(columns[4], pa.int64()),
            "note": pa.array(columns[5], pa.string()),
        }
    )
    pq.write_table(table, path)
    return path


def prepared(path: Path):
    terms = {"valuation_date": dt.date(2025, 12, 31), "currency": "EUR", "tolerance": 0.9}
    checked = check_losses(read_losses(path), **terms)
    half = midpoint(dt.date(2026, 1, 1), dt.date(2026, 12, 31))
    return checked, prepare_losses(checked, forecast_midpoint=half, trend=0.04)


@pytest.mark.parametrize("write_as", [as_workbook, as_parquet])
def test_the_same_records_give_the_same_losses(tmp_path, write_as) -> None:
    of_csv, losses_csv = prepared(as_csv(tmp_path / "a.csv"))
    suffix = {as_workbook: ".xlsx", as_parquet: ".parquet"}[write_as]
    other, losses = prepared(write_as(tmp_path / f"a{suffix}"))
    assert other.reconciliation == of_csv.reconciliation
    assert losses.amount.tobytes() == losses_csv.amount.tobytes()
    assert losses.censored.tolist() == losses_csv.censored.tolist()
    assert losses.years.to_dicts() == losses_csv.years.to_dicts()
    seen = [(f.code, f.row, f.value, f.column) for f in other.findings]
    assert seen == [(f.code, f.row, f.value, f.column) for f in of_csv.findings]


def test_declared_formats_do_not_touch_cells_that_are_numbers_and_dates(tmp_path) -> None:
    path = as_workbook(
        tmp_path / "a.xlsx",
        [[1234.5, dt.date(2024, 5, 6)], ["1.234,5", "06.05.2024"]],
        ["amount", "date"],
    )
    table = read_losses(path, decimal=",", thousands=".", date_format="%d.%m.%Y")
    assert table.amount.tolist() == [1234.5, 1234.5]
    assert [str(day) for day in table.date] == ["2024-05-06", "2024-05-06"]


def test_a_serial_number_in_the_date_column_is_not_guessed(tmp_path) -> None:
    path = as_workbook(tmp_path / "a.xlsx", [[5, 45000]], ["amount", "date"])
    with pytest.raises(RecordsError, match=r"sheet 'Sheet', row 2, column 'date'; seen: '45000'"):
        read_losses(path)


def test_workbooks_that_count_from_1904(tmp_path) -> None:
    book = openpyxl.Workbook()
    book.epoch = openpyxl.utils.datetime.CALENDAR_MAC_1904
    for row in (["amount", "date"], [5, dt.date(2024, 5, 6)]):
        book.active.append(row)
    book.save(tmp_path / "a.xlsx")
    assert str(read_losses(tmp_path / "a.xlsx").date[0]) == "2024-05-06"


def test_true_and_false_are_no_amounts(tmp_path) -> None:
    path = as_workbook(tmp_path / "a.xlsx", [[True, dt.date(2024, 5, 6)]], ["amount", "date"])
    with pytest.raises(RecordsError, match="the amount is not a plain number"):
        read_losses(path)


def test_the_sheet_must_be_clear(tmp_path) -> None:
    book = openpyxl.Workbook()
    book.active.title = "Losses"
    for row in (["amount", "date"], [5, dt.date(2024, 5, 6)]):
        book.active.append(row)
    book.create_sheet("Notes")
    book.save(tmp_path / "a.xlsx")
    with pytest.raises(InputError, match=r"2 visible sheets and none is chosen.*\['Losses', 'Notes'\]"):
        read_losses(tmp_path / "a.xlsx")
    with pytest.raises(InputError, match=r"sheet is not in the workbook.*Did you mean 'Losses'\?"):
        read_losses(tmp_path / "a.xlsx", sheet="Loses")
    assert read_losses(tmp_path / "a.xlsx", sheet="Losses").sheet == "Losses"
    with pytest.raises(InputError, match="sheet is empty or its first row is blank"):
        read_losses(tmp_path / "a.xlsx", sheet="Notes")


def test_a_formula_without_a_stored_value_stops(tmp_path) -> None:
    path = as_workbook(
        tmp_path / "a.xlsx",
        [[5, dt.date(2024, 5, 6)], ["=1+1", dt.date(2024, 5, 6)]],
        ["amount", "date"],
    )
    with pytest.raises(InputError) as error:
        read_losses(path)
    assert str(error.value) == (
        "a formula has no stored value, in file a.xlsx, sheet 'Sheet', row 3, column 'amount'. Open the "
        "workbook, let it calculate, save it; or paste the values."
    )


def rewrite(path: Path, change) -> Path:
    """Copy a workbook part by part, changed, as another program would have saved it."""
    with zipfile.ZipFile(path) as package:
        parts = {name: package.read(name) for name in package.namelist()}
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as package:
        for name, content in change(parts).items():
            package.writestr(name, content)
    return path


def test_the_stored_value_of_a_formula_is_used_and_nothing_computed(tmp_path) -> None:
    path = as_workbook(tmp_path / "a.xlsx", [["=1+1", dt.date(2024, 5, 6)]], ["amount", "date"])

    def store(parts):
        sheet = "xl/worksheets/sheet1.xml"
        assert b"<f>1+1</f><v />" in parts[sheet] or b"<f>1+1</f><v></v>" in parts[sheet]
        for empty in (b"<f>1+1</f><v />", b"<f>1+1</f><v></v>"):
            parts[sheet] = parts[sheet].replace(empty, b"<f>1+1</f><v>77.5</v>")
        return parts

    assert read_losses(rewrite(path, store)).amount.tolist() == [77.5]


def test_formulas_in_columns_that_are_not_read_do_not_matter(tmp_path) -> None:
    path = as_workbook(tmp_path / "a.xlsx", [[5, dt.date(2024, 5, 6), "=A2"]], ["amount", "date", "x"])
    assert read_losses(path).amount.tolist() == [5.0]


@pytest.mark.parametrize(
    ("part", "message"),
    [
        ("xl/vbaProject.bin", "the workbook contains macros"),
        ("xl/externalLinks/externalLink1.xml", "the workbook links to other workbooks"),
    ],
)
def test_macros_and_external_links_are_refused(tmp_path, part: str, message: str) -> None:
    path = rewrite(as_workbook(tmp_path / "a.xlsx"), lambda parts: {**parts, part: b"x"})
    with pytest.raises(InputError, match=message):
        read_losses(path)


def test_a_package_that_unpacks_to_far_more_than_it_weighs_is_refused(tmp_path) -> None:
    path = rewrite(
        as_workbook(tmp_path / "a.xlsx"), lambda parts: {**parts, "xl/media/x.bin": bytes(30 * 1024**2)}
    )
    with pytest.raises(InputError, match=r"unpacks to \d+ bytes from \d+"):
        read_losses(path)


def test_another_zip_package_is_no_workbook(tmp_path) -> None:
    with zipfile.ZipFile(tmp_path / "a.xlsx", "w") as package:
        package.writestr("readme.txt", "x")
    with pytest.raises(InputError, match="a zip package but no workbook"):
        read_losses(tmp_path / "a.xlsx")


@pytest.mark.parametrize("part", ["xl/workbook.xml", "xl/worksheets/sheet1.xml", "xl/styles.xml"])
def test_broken_parts_are_reported_as_damage(tmp_path, part: str) -> None:
    path = rewrite(as_workbook(tmp_path / "a.xlsx"), lambda parts: {**parts, part: parts[part][:-30]})
    with pytest.raises(InputError, match=r"the workbook is damaged, in file a\.xlsx"):
        read_losses(path)


def test_merged_cells_stop_and_hidden_rows_are_warned_of(tmp_path) -> None:
    book = openpyxl.Workbook()
    for row in (["amount", "date"], [5, dt.date(2024, 5, 6)], [6, dt.date(2024, 5, 6)]):
        book.active.append(row)
    book.active.row_dimensions[2].hidden = True
    book.save(tmp_path / "a.xlsx")
    table = read_losses(tmp_path / "a.xlsx")
    assert table.amount.tolist() == [5.0, 6.0]
    assert [(f.code, f.action) for f in table.findings] == [("hidden-cells", "warn")]
    book.active.merge_cells("A2:A3")
    book.save(tmp_path / "a.xlsx")
    with pytest.raises(InputError, match="the sheet has merged cells"):
        read_losses(tmp_path / "a.xlsx")


def test_values_beyond_the_headings_stop(tmp_path) -> None:
    path = as_workbook(tmp_path / "a.xlsx", [[5, dt.date(2024, 5, 6), 7]], ["amount", "date"])
    with pytest.raises(InputError, match=r"values to the right of the last of 2 headings, .* row 2"):
        read_losses(path)


def test_parquet_types_are_read_exactly(tmp_path) -> None:
    from decimal import Decimal

    table = pa.table(
        {
            "amount": pa.array([Decimal("12345678901234567.89"), Decimal("0.01")], pa.decimal128(25, 2)),
            "date": pa.array([dt.datetime(2024, 1, 2, 3, 4), dt.datetime(2024, 1, 3)], pa.timestamp("us")),
            "paid": pa.array([0.1, 0.2], pa.float32()),
            "event": pa.array([7, 8], pa.int32()),
        }
    )
    pq.write_table(table, tmp_path / "a.parquet")
    losses = read_losses(tmp_path / "a.parquet")
    assert losses.exact.tolist() == [Decimal("12345678901234567.89"), Decimal("0.01")]
    assert [str(day) for day in losses.date] == ["2024-01-02", "2024-01-03"]
    assert losses.numbers["paid"].tolist() == [0.1, 0.2]
    assert losses.words["event"].tolist() == ["7", "8"]


def test_parquet_moments_with_a_zone_are_set_aside(tmp_path) -> None:
    moments = pa.array([dt.datetime(2024, 1, 2, 23)], pa.timestamp("us", tz="UTC"))
    pq.write_table(pa.table({"amount": [1.0], "date": moments}), tmp_path / "a.parquet")
    assert [fault.code for fault in read_losses(tmp_path / "a.parquet").faults] == ["date-zone"]


def test_parquet_lists_are_refused_where_they_are_read(tmp_path) -> None:
    table = pa.table({"amount": [[1.0]], "date": [dt.date(2024, 1, 1)], "x": [[1]]})
    pq.write_table(table, tmp_path / "a.parquet")
    with pytest.raises(InputError, match=r"'amount' holds neither numbers, dates nor text.*seen: 'list"):
        read_losses(tmp_path / "a.parquet")
    pq.write_table(table.set_column(0, "amount", [[1.0]]), tmp_path / "a.parquet")
    assert read_losses(tmp_path / "a.parquet").amount.tolist() == [1.0]


def test_parquet_without_rows_stops(tmp_path) -> None:
    empty = pa.table({"amount": pa.array([], pa.float64()), "date": pa.array([], pa.date32())})
    pq.write_table(empty, tmp_path / "a.parquet")
    with pytest.raises(InputError, match="the table has headings but no rows"):
        read_losses(tmp_path / "a.parquet")


def test_exposures_from_a_workbook(tmp_path) -> None:
    path = as_workbook(tmp_path / "e.xlsx", [[2024, 10.5], [2025, 11]], ["year", "exposure"])
    assert np.array_equal(read_exposure(path).exposure, [10.5, 11.0])


def test_decimals_of_more_digits_than_a_float64_keeps_are_told(tmp_path: Path) -> None:
    """Behind the point as before it: as text would be; the sum stays exact."""
    digits = [Decimal("1.12345678901234567890"), Decimal("1.5"), Decimal("12345.67890000000000000001")]
    table = {"amount": pa.array(digits, pa.decimal128(30, 20)), "date": [dt.date(2024, 1, 1)] * 3}
    pq.write_table(pa.table(table), tmp_path / "a.parquet")
    read = read_losses(tmp_path / "a.parquet")
    (lossy,) = (fault.mask.tolist() for fault in read.faults if fault.code == "precision")
    assert lossy == [True, False, True]
    assert read.exact.total() == sum(digits)
