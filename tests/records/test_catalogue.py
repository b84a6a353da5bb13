"""Every row of the bad-input catalogue that concerns files of records: a file in that state, what becomes
of it, and the message. `catalogue.py` holds the text files; workbooks, Parquet and odd files are here."""

import datetime as dt
import importlib.util
import re
import zipfile
from pathlib import Path

import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from catalogue import ELSEWHERE, TEXT_CASES, Case

from lossagg.errors import InputError
from lossagg.records import check_losses, columnar, delimited, read_losses

ROOT = Path(__file__).resolve().parents[2]
DAY = dt.date(2024, 5, 6)
OTHER_FILES = {13, 18, 48, 49, 53, 55, 57, 58, 62}
"""Rows with cases among the workbooks, Parquet and odd files of this module."""


@pytest.mark.parametrize("case", TEXT_CASES, ids=[f"{case.number} {case.state}" for case in TEXT_CASES])
def test_text_file(check, case: Case) -> None:
    if case.action == "stop":
        with pytest.raises(InputError) as error:
            check(case.content, **case.options)
        assert case.text in str(error.value)
        assert error.value.remedy
        return
    checked = check(case.content, **case.options)
    assert checked.reconciliation.used == case.used
    assert checked.reconciliation.read == checked.reconciliation.used + checked.reconciliation.excluded
    if case.action == "use":
        assert {found.action for found in checked.findings} <= {"normalise"}
        return
    found = [finding for finding in checked.findings if case.text in str(finding)]
    assert [finding.action for finding in found] == [case.action]
    assert found[0].remedy
    assert set(re.findall("Miller|850412", " ".join(map(str, checked.findings)))) == set()


def workbook(path: Path, rows: list[list[object]], headings: tuple[str, ...] = ("amount", "date")) -> Path:
    book = openpyxl.Workbook()
    for row in [list(headings), *rows]:
        book.active.append(row)
    book.save(path)
    return path


def repacked(path: Path, **parts: bytes) -> Path:
    """The same package with parts added or replaced, their names with / for __."""
    with zipfile.ZipFile(path) as package:
        content = {name: package.read(name) for name in package.namelist()}
    content |= {name.replace("__", "/").replace("_dot_", "."): part for name, part in parts.items()}
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as package:
        for name, part in content.items():
            package.writestr(name, part)
    return path


def notes(path: Path, **options: object) -> list[tuple[str, str]]:
    table = read_losses(path, **options)  # type: ignore[arg-type]
    checked = check_losses(table, valuation_date=dt.date(2025, 12, 31), currency="EUR", tolerance=0.9)
    return [(finding.code, str(finding)) for finding in checked.findings]


def test_49_a_workbook_that_fetches_its_data_is_read_as_stored_and_said(tmp_path: Path) -> None:
    path = repacked(
        workbook(tmp_path / "a.xlsx", [[5, DAY], [6, DAY]]), xl__connections_dot_xml=b"<connections/>"
    )
    found = dict(notes(path))["data-connection"]
    assert found.startswith("the workbook fetches data from elsewhere; the values stored in it are read")


def test_13_whole_numbers_of_a_parquet_file_become_floats(tmp_path: Path) -> None:
    """An integer grid truncates silently later on; the table is all float64 and the sum exact."""
    amounts = pa.array([7, 2**53 + 1], pa.int64())
    pq.write_table(pa.table({"amount": amounts, "date": [DAY] * 2}), tmp_path / "a.parquet")
    table = read_losses(tmp_path / "a.parquet")
    assert table.amount.dtype == "float64"
    assert table.exact.total() == 2**53 + 8
    assert ("precision", "warn") in {(fault.code, fault.action) for fault in table.faults}


def test_18_a_29_february_1900_and_an_empty_date_that_became_one(tmp_path: Path) -> None:
    """Serial 60 is a day that never was, 1 the first of January 1900: what a workbook makes of nothing."""
    book = openpyxl.Workbook()
    for row in (["amount", "date"], [5, DAY], [6, 60], [7, 1], [8, 61]):
        book.active.append(row)
    for row in (3, 4, 5):
        book.active.cell(row, 2).number_format = "yyyy-mm-dd"
    book.save(tmp_path / "a.xlsx")
    assert [text for code, text in notes(tmp_path / "a.xlsx") if code == "early-date"] == [
        f"the date is before March 1900, in file a.xlsx, sheet 'Sheet', row {row}, column 'date'; seen: "
        f"'{seen}'. Correct it; workbooks count a 29 February 1900 that never was, and show "
        "an empty date as 1900."
        for row, seen in ((3, "1900-02-28"), (4, "1900-01-01"))
    ]


def test_18_a_day_number_beyond_the_calendar(tmp_path: Path, recwarn: pytest.WarningsRecorder) -> None:
    book = openpyxl.Workbook()
    for row in (["amount", "date"], [5, DAY], [6, 2958466]):
        book.active.append(row)
    book.active.cell(3, 2).number_format = "yyyy-mm-dd"
    book.save(tmp_path / "a.xlsx")
    assert "missing-date" in dict(notes(tmp_path / "a.xlsx"))
    assert not recwarn.list


def test_18_serial_and_text_dates_in_one_column(tmp_path: Path) -> None:
    path = workbook(tmp_path / "a.xlsx", [[5, DAY], [6, "2024-05-07"]])
    assert notes(path)[0] == (
        "text-date",
        "the date is written as text where others of the column are dates of the workbook, in file a.xlsx, "
        "sheet 'Sheet', row 3, column 'date'; seen: '2024-05-07'. Make all of them dates; a text may have "
        "escaped a conversion of day and month.",
    )
    with pytest.raises(InputError, match=r"the date is not a date written.*row 3, .*seen: '45000'"):
        read_losses(workbook(tmp_path / "b.xlsx", [[5, DAY], [6, 45000]]))


def test_18_days_counted_from_1904(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    book.epoch = openpyxl.utils.datetime.CALENDAR_MAC_1904
    for row in (["amount", "date"], [5, DAY]):
        book.active.append(row)
    book.save(tmp_path / "a.xlsx")
    table = read_losses(tmp_path / "a.xlsx")
    assert str(table.date[0]) == "2024-05-06"
    assert [str(finding) for finding in table.findings] == [
        "the workbook counts its days from 1904, in file a.xlsx, sheet 'Sheet'. None needed."
    ]


def test_48_merged_cells_hidden_rows_and_hidden_sheets(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    for row in (["amount", "date"], [5, DAY], [6, DAY]):
        book.active.append(row)
    book.create_sheet("Old").sheet_state = "hidden"
    book.active.row_dimensions[2].hidden = True
    book.save(tmp_path / "a.xlsx")
    assert notes(tmp_path / "a.xlsx")[-2:] == [
        (
            "hidden-cells",
            "the sheet, or some of its rows or columns, are hidden; they are read like the others, in file "
            "a.xlsx, sheet 'Sheet'. Unhide them and check that they belong to the records.",
        ),
        (
            "hidden-sheets",
            "the workbook has 1 hidden sheet, not read, in file a.xlsx, sheet 'Sheet'. Unhide them and check "
            "that no records are left out.",
        ),
    ]
    book.active.merge_cells("A2:A3")
    book.save(tmp_path / "a.xlsx")
    with pytest.raises(InputError, match=r"the sheet has merged cells, in file a\.xlsx, .*Unmerge"):
        read_losses(tmp_path / "a.xlsx")


@pytest.mark.parametrize(
    ("part", "message"),
    [
        ("xl__vbaProject_dot_bin", "the workbook contains macros"),
        ("xl__externalLinks__externalLink1_dot_xml", "the workbook links to other workbooks"),
    ],
)
def test_49_macros_and_links(tmp_path: Path, part: str, message: str) -> None:
    path = repacked(workbook(tmp_path / "a.xlsx", [[5, DAY]]), **{part: b"x"})
    with pytest.raises(InputError, match=message):
        read_losses(path)


def test_49_formula_without_a_stored_value_and_password(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"a formula has no stored value, in file a\.xlsx, .*row 2"):
        read_losses(workbook(tmp_path / "a.xlsx", [["=1+1", DAY]]))
    (tmp_path / "b.xlsx").write_bytes(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(600))
    with pytest.raises(InputError, match=r"an encrypted or an old binary workbook.*Remove the password"):
        read_losses(tmp_path / "b.xlsx")


def test_53_a_document_type_that_could_expand_without_end(tmp_path: Path) -> None:
    bomb = b'<?xml version="1.0"?><!DOCTYPE x [<!ENTITY a "aaaa"><!ENTITY b "&a;&a;&a;">]><x>&b;</x>'
    path = repacked(workbook(tmp_path / "a.xlsx", [[5, DAY]]), xl__workbook_dot_xml=bomb)
    with pytest.raises(InputError, match=r"declares a document type.*seen: 'xl/workbook\.xml'"):
        read_losses(path)


def test_53_a_package_that_unpacks_to_far_more_than_it_weighs(tmp_path: Path) -> None:
    path = repacked(workbook(tmp_path / "a.xlsx", [[5, DAY]]), xl__media__x_dot_bin=bytes(30 * 1024**2))
    with pytest.raises(InputError, match=r"the workbook unpacks to \d+ bytes from \d+, in file a\.xlsx"):
        read_losses(path)


def test_53_sizes_are_refused_before_parsing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    pq.write_table(pa.table({"amount": [1.0] * 9, "date": [DAY] * 9}), tmp_path / "a.parquet")
    monkeypatch.setattr(columnar, "MOST_ROWS", 8)
    with pytest.raises(InputError, match=r"the Parquet file has 9 rows and unpacks to \d+ bytes"):
        read_losses(tmp_path / "a.parquet")
    (tmp_path / "a.csv").write_text("amount,date\n" + "1,2024-01-01\n" * 9)
    monkeypatch.setattr(delimited, "MOST_ROWS", 8)
    with pytest.raises(InputError, match=r"the file has 10 lines, in file a\.csv\. Split it"):
        read_losses(tmp_path / "a.csv")


def test_55_types_of_parquet(tmp_path: Path) -> None:
    codes = pa.array(["12.50", None, "7"]).dictionary_encode()
    pq.write_table(pa.table({"amount": codes, "date": [DAY] * 3}), tmp_path / "a.parquet")
    table = read_losses(tmp_path / "a.parquet")
    assert table.exact.tolist()[::2] == [table.exact[0], 7]
    assert str(table.exact[0]) == "12.50"
    assert notes(tmp_path / "a.parquet")[0][0] == "missing-amount"
    pq.write_table(pa.table({"amount": [[1.0]], "date": [DAY]}), tmp_path / "b.parquet")
    with pytest.raises(InputError, match=r"the column 'amount' holds neither numbers, dates nor text"):
        read_losses(tmp_path / "b.parquet")


@pytest.mark.parametrize("name", ["a.csv", "a.parquet"])
def test_57_a_file_that_changes_while_it_is_read(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str
) -> None:
    path = tmp_path / name
    if name == "a.csv":
        path.write_text("amount,date\n1,2024-01-01\n")
    else:
        pq.write_table(pa.table({"amount": [1.0], "date": [DAY]}), path)
    module, reader = (delimited, "parse_plain") if name == "a.csv" else (columnar, "_fill")
    whole = getattr(module, reader)

    def grows(*arguments: object) -> object:
        with path.open("ab") as stream:
            stream.write(b"2,2024-01-02\n")
        return whole(*arguments)

    monkeypatch.setattr(module, reader, grows)
    with pytest.raises(InputError, match=r"the file changed while it was read.*Wait until it is written"):
        read_losses(path)


def test_57_a_file_cut_off(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    pq.write_table(pa.table({"amount": [1.0], "date": [DAY]}), path)
    path.write_bytes(path.read_bytes()[:-20])
    with pytest.raises(InputError, match="the Parquet file is damaged or only partly written"):
        read_losses(path)
    book = workbook(tmp_path / "a.xlsx", [[5, DAY]])
    book.write_bytes(book.read_bytes()[:-40])
    with pytest.raises(InputError, match="the workbook is damaged or only partly written"):
        read_losses(book)


def test_58_another_kind_of_file_under_the_name(tmp_path: Path) -> None:
    (tmp_path / "a.xlsx").write_text("amount,date\n1,2024-01-01\n")
    with pytest.raises(InputError, match="the suffix says workbook but the content is of another kind"):
        read_losses(tmp_path / "a.xlsx")


def test_62_identifiers_that_are_numbers_among_texts(tmp_path: Path) -> None:
    path = workbook(tmp_path / "a.xlsx", [[5, DAY, "00123"], [6, DAY, 123]], ("amount", "date", "event"))
    assert notes(path)[0] == (
        "identifier-number",
        "the event is a number where others of the column are text: leading zeros may be lost, in file "
        "a.xlsx, sheet 'Sheet', row 3, column 'event'; seen: '123'. Format the column as text before the "
        "identifiers are entered or pasted.",
    )


def test_every_row_of_the_catalogue_is_tested() -> None:
    """So that no row is forgotten: each is a case here or points to a test that exists."""
    asked = {*range(1, 41), *range(48, 64), 67, 68, 69}
    here = {case.number for case in TEXT_CASES} | OTHER_FILES
    source = Path(__file__).read_text()
    own = {int(number) for number in re.findall(r"def test_(\d+)_", source)}
    assert own == OTHER_FILES
    assert asked - here - set(ELSEWHERE) == set()


@pytest.mark.parametrize(("number", "where"), ELSEWHERE.items())
def test_pointers_lead_to_tests(number: int, where: str) -> None:
    file, _, name = where.partition("::")
    assert importlib.util.spec_from_file_location("pointed", ROOT / file)
    assert f"def {name}(" in (ROOT / file).read_text(), number
