"""The workbook: full numbers, safe text, same bytes."""

from __future__ import annotations

import zipfile
from io import BytesIO

import pytest
from invented_assessment import sample_assessment, withheld_assessment
from openpyxl import load_workbook

from lossagg.report.tables import every_table
from lossagg.report.workbook import render_workbook, safe_text


def sheets(assessment):
    return load_workbook(BytesIO(render_workbook(every_table(assessment), "2026-09-30")))


def rows(sheet) -> list[dict[str, object]]:
    headings = [cell.value for cell in sheet[2]]
    return [
        dict(zip(headings, values, strict=True))
        for values in sheet.iter_rows(min_row=3, values_only=True)
        if any(value is not None for value in values)
    ]


def test_levels_are_the_numbers_of_the_assessment() -> None:
    assessment = sample_assessment()
    found = rows(sheets(assessment)["Levels"])
    for row, gross, net in zip(
        found, assessment["gross"]["levels"], assessment["net"]["levels"], strict=False
    ):
        assert row["Level"] == gross["level"]
        for prefix, source in (("Gross", gross), ("Net", net)):
            # A workbook keeps 16 digits of the 17 that a double can need.
            for heading, measure, part in (
                ("VaR", "var", "value"),
                ("VaR, low", "var", "low"),
                ("TVaR, high", "tvar", "high"),
            ):
                assert row[f"{prefix} {heading}"] == pytest.approx(source[measure][part], rel=1e-15)


def test_every_chart_has_its_numbers() -> None:
    assessment = sample_assessment()
    book = sheets(assessment)
    assert len(rows(book["Curves"])) == 120
    points = sum(len(line["fit"]["survival"]) for line in assessment["lines"] if line["fit"])
    assert len(rows(book["Fit survival"])) == points
    assert len(rows(book["Fit quantiles"])) == points
    assert len(rows(book["Fit counts"])) == 20


def test_numbers_are_numbers_with_formats() -> None:
    sheet = sheets(sample_assessment())["Covers"]
    expected = sheet["B3"]
    assert expected.data_type == "n"
    assert expected.number_format == "#,##0"
    assert sheet["H3"].number_format == "0.000%"


def test_missing_numbers_are_words() -> None:
    book = sheets(sample_assessment())
    lines = rows(book["Lines"])
    assert lines[2]["Expected annual loss"] == "does not exist"
    terms = rows(book["Cover terms"])
    assert (terms[1]["Limit per event"], terms[1]["Deductible per event"]) == ("no limit", 0)
    withheld = rows(sheets(withheld_assessment())["Levels"])
    assert withheld[0]["Gross VaR"] == "withheld"
    assert withheld[0]["Gross VaR, low"] is None


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t", "\r", "\n", "\0"])
def test_text_never_runs_as_a_formula(start: str) -> None:
    """OWASP Application Security Verification Standard 1.2.10, CWE-1236."""
    hostile = f'{start}HYPERLINK("http://example.org","x")'
    assessment = sample_assessment()
    assessment["lines"][0]["name"] = hostile
    assessment["findings"][0]["value"] = hostile
    book = sheets(assessment)
    for sheet, place in (("Lines", "A3"), ("Findings", "D3")):
        cell = book[sheet][place]
        assert cell.data_type == "s"
        assert str(cell.value).startswith("'")
    for sheet in book.worksheets:
        assert all(cell.data_type != "f" for row in sheet.iter_rows() for cell in row)


def test_negative_numbers_stay_numbers() -> None:
    assessment = sample_assessment()
    assessment["headline"]["less_mean"] = -5.0
    row = rows(sheets(assessment)["Headline"])[0]
    assert row["Capital less expected, EUR"] == -5.0


def test_safe_text_leaves_ordinary_text_alone() -> None:
    assert safe_text("Cargo handling, 5% - 10%") == "Cargo handling, 5% - 10%"
    assert len(safe_text("x" * 100_000)) < 32_767


def test_same_tables_same_bytes_without_clock_times() -> None:
    tables = every_table(sample_assessment())
    first, second = render_workbook(tables, "2026-09-30"), render_workbook(tables, "2026-09-30")
    assert first == second
    with zipfile.ZipFile(BytesIO(first)) as archive:
        assert {entry.date_time for entry in archive.infolist()} == {(1980, 1, 1, 0, 0, 0)}
        core = archive.read("docProps/core.xml").decode()
    assert core.count("2026-09-30T00:00:00Z") == 2
