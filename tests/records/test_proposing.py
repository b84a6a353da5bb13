"""A table that nobody described: what is proposed from it, what is left open, what is refused."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import numpy as np
import pytest

from lossagg.errors import InputError
from lossagg.records import check_losses, read_losses
from lossagg.records.amounts import NumberStyle
from lossagg.records.events import is_open
from lossagg.records.findings import RecordsError
from lossagg.records.propose import propose_reading
from lossagg.records.suggest import main_span, suggested_threshold

DEMOS = Path(__file__).resolve().parents[2] / "portfolios"


def written(folder: Path, rows: list[str], name: str = "t.csv") -> Path:
    path = folder / name
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    return path


def test_the_claims_export_is_read_as_its_portfolio_file_says() -> None:
    """Semicolons, decimal commas, day first: what the demo declares by hand is found."""
    proposal = propose_reading(DEMOS / "harbour-pool" / "liability.csv")
    assert (proposal.decimal, proposal.thousands, proposal.date_format) == (",", None, "%d.%m.%Y")
    assert not proposal.other_styles
    assert not proposal.other_dates
    assert dict(proposal.columns) == {
        "amount": "Incurred",
        "date": "Date of accident",
        "event": "Occurrence",
        "status": "State",
        "paid": "Paid to date",
        "outstanding": "Case reserve",
        "recoveries": "Recovered",
        "reported": "Date notified",
        "policy-limit": "Sum insured",
        "claim": "Claim no",
    }
    assert proposal.unread == ("Member",)
    assert proposal.latest == dt.date(2025, 12, 31)


def test_lines_and_their_thresholds_are_seen_in_the_losses_of_the_bank() -> None:
    proposal = propose_reading(DEMOS / "regional-bank" / "losses.csv")
    thresholds = {line.name: line.threshold for line in proposal.lines}
    assert thresholds["External fraud, retail payments"] == 10_000
    assert thresholds["Business practices, corporate lending"] == 20_000
    assert thresholds["System failure, payment services"] is None
    assert proposal.first_year == 2016
    assert proposal.last_few == 0


def test_a_few_losses_of_a_year_that_has_not_been_are_told_apart() -> None:
    """The demo plants one casualty of 2026 in records valued at the end of 2025."""
    proposal = propose_reading(DEMOS / "harbour-pool" / "quay.csv")
    assert proposal.last_few == 1
    assert proposal.latest_before.year == 2025


@pytest.mark.parametrize(
    ("amounts", "decimal", "thousands", "grouping"),
    [
        (["10", "2500"], ".", None, "three"),
        (["1,234.50", "99.10"], ".", ",", "three"),
        (["1.234,50", "99,10"], ",", ".", "three"),
        (["1 234,50", "99,10"], ",", " ", "three"),
        (["1234,5", "99,10"], ",", None, "three"),
        (["12,34,567.00", "99.10"], ".", ",", "indian"),
    ],
)
def test_numbers_that_can_be_read_in_one_way_only(
    tmp_path: Path, amounts: list[str], decimal: str, thousands: str | None, grouping: str
) -> None:
    path = written(tmp_path, ["Amount;Date", *(f"{amount};2024-03-01" for amount in amounts)])
    found = propose_reading(path)
    assert (found.decimal, found.thousands, found.grouping) == (decimal, thousands, grouping)
    assert not found.other_styles


@pytest.mark.parametrize("cell", ["1,234", "12.500"])
def test_a_mark_before_three_digits_is_not_decided(tmp_path: Path, cell: str) -> None:
    """1,234 is a thousand and some, or one and some: both are named."""
    found = propose_reading(written(tmp_path, ["Amount;Date", f"{cell};2024-03-01", "17;2024-04-01"]))
    marks = {(found.decimal, found.thousands), *((s.decimal, s.thousands) for s in found.other_styles)}
    assert {(",", None), (".", ",")} <= marks or {(".", None), (",", ".")} <= marks
    values = set()
    for style in (NumberStyle(found.decimal, found.thousands), *found.other_styles):
        table = read_losses(tmp_path / "t.csv", decimal=style.decimal, thousands=style.thousands)
        values.add(float(table.amount[0]))
    assert len(values) == 2


@pytest.mark.parametrize(
    ("dates", "form"),
    [
        (["2024-03-01", "2024-12-31"], None),
        (["31/12/2024", "01/02/2024"], "%d/%m/%Y"),
        (["12/31/2024", "01/02/2024"], "%m/%d/%Y"),
        (["01-Feb-2024", "31-Dec-2024"], "%d-%b-%Y"),
        (["20240201", "20241231"], "%Y%m%d"),
    ],
)
def test_dates_that_can_be_read_in_one_way_only(tmp_path: Path, dates: list[str], form: str | None) -> None:
    found = propose_reading(written(tmp_path, ["Loss,Loss date", *(f"100,{day}" for day in dates)]))
    assert found.date_format == form
    assert not found.other_dates
    assert found.latest == dt.date(2024, 12, 31)


def test_days_that_could_be_months_are_not_decided(tmp_path: Path) -> None:
    found = propose_reading(written(tmp_path, ["Loss,Loss date", "100,03/04/2025", "200,05/06/2025"]))
    assert {found.date_format, *found.other_dates} == {"%d/%m/%Y", "%m/%d/%Y"}


def test_a_heading_counts_only_where_the_cells_bear_it_out(tmp_path: Path) -> None:
    """A column "Gross loss" of words is no amount; the next heading that means one is taken."""
    rows = ["Gross loss,Incurred,Accident date,Date", "yes,100,spring,2024-01-05", "no,200,autumn,2024-02-05"]
    found = propose_reading(written(tmp_path, rows))
    assert found.columns["amount"] == "Incurred"
    assert found.columns["date"] == "Date"
    assert found.passed_over["amount"] == ("Gross loss",)


def test_what_cannot_be_a_table_of_losses_is_refused_without_repeating_its_cells(tmp_path: Path) -> None:
    for rows, said in (
        (["Anna Muster,1200.50,2024-01-05", "Bo Beispiel,100,2024-02-05"], "looks like data"),
        (["Name,When,Incurred", "Anna Muster,yesterday,100"], "no heading says"),
        (["Anna Muster,Ringstrasse", "Bo Beispiel,Markt"], "no heading says"),
        (["Name,Date,Incurred", "Anna Muster,01/02/24,100"], "are not dates"),
    ):
        with pytest.raises(InputError, match=said) as caught:
            propose_reading(written(tmp_path, rows))
        assert "Muster" not in str(caught.value)
        assert caught.value.remedy


def test_single_cells_that_are_no_numbers_are_named_for_repair(tmp_path: Path) -> None:
    rows = ["Amount,Date", *(f"{100 + k},2024-01-05" for k in range(40)), "5k,2024-02-05"]
    with pytest.raises(RecordsError, match="row 42"):
        propose_reading(written(tmp_path, rows))


def test_currency_by_column_by_heading_or_not_at_all(tmp_path: Path) -> None:
    day = "2024-01-05"
    column = propose_reading(written(tmp_path, ["Amount,Date,Currency", f"1,{day},chf", f"2,{day},CHF"]))
    heading = propose_reading(written(tmp_path, ["Gross loss (USD),Date", f"1,{day}"]))
    nowhere = propose_reading(written(tmp_path, ["Amount,Date", f"1,{day}"]))
    assert [found.currency for found in (column, heading, nowhere)] == ["CHF", "USD", "XXX"]


def test_a_threshold_is_seen_where_losses_are_cut_off_and_nowhere_else() -> None:
    """Lognormal losses, cut off at 25,000 or not at all; one row below the threshold does not hide it."""
    losses = np.random.Generator(np.random.PCG64(5)).lognormal(10.0, 1.5, 20_000)
    cut = losses[losses >= 25_000][:600]
    assert suggested_threshold(cut) == 25_000
    assert suggested_threshold(np.append(cut, 17_100.0)) == 25_000
    assert suggested_threshold(losses[:600]) is None
    assert suggested_threshold(losses) is None
    assert suggested_threshold(cut[:10]) is None


def test_a_slip_of_two_centuries_does_not_make_the_window() -> None:
    days = np.arange("2015-01-01", "2025-01-01", 7, dtype="datetime64[D]")
    first, last = main_span(np.append(days, np.datetime64("2204-05-01")))
    assert (first, last) == (days[0], days[-1])


def test_a_german_export_is_understood_to_the_status(tmp_path: Path) -> None:
    """Semicolons, decimal commas, day first, cp1252: nothing is left over, and open claims are open."""
    rows = [
        f"SCH-{k:03};{1 + k % 28:02}.{1 + k % 12:02}.2023;1.{k:03},50;{'offen' if k % 3 else 'Geschlossen'}"
        for k in range(40)
    ]
    text = "\r\n".join(["Schaden-Nr;Schadendatum;Schadenhöhe;Status", *rows]) + "\r\n"
    (tmp_path / "schaden.csv").write_bytes(text.encode("cp1252"))
    proposal = propose_reading(tmp_path / "schaden.csv", encoding="cp1252")
    table = read_losses(
        tmp_path / "schaden.csv",
        columns=proposal.columns,
        encoding="cp1252",
        decimal=",",
        thousands=".",
        date_format="%d.%m.%Y",
    )
    assert set(proposal.columns) == {"claim", "date", "amount", "status"}
    checked = check_losses(table, valuation_date=dt.date(2023, 12, 31), currency="EUR")
    assert "unknown-status" not in {finding.code for finding in checked.findings}
    assert int(is_open(table).sum()) == sum(k % 3 > 0 for k in range(40))
