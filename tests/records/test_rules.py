"""One test per rule of the checks: a file in that state, what becomes of the row, and the message."""

import datetime as dt

import pytest

from lossagg.errors import InputError
from lossagg.records import RecordsError

GOOD = "10,2024-03-01"


def only(checked, code: str):
    """The findings of one rule; every other finding about rows must be absent."""
    found = [finding for finding in checked.findings if finding.code == code]
    others = [f.code for f in checked.findings if f.row is not None and f.code != code]
    assert others == []
    return found


@pytest.mark.parametrize(
    ("columns", "row", "code", "text"),
    [
        pytest.param(
            "amount,date",
            "-5,2024-03-01",
            "negative-amount",
            "the amount is negative, in file losses.csv, row 3, column 'amount'; seen: '-5'. Give recoveries "
            "in their own column and amounts gross of them.",
            id="negative amount",
        ),
        pytest.param(
            "amount,date",
            "0.00,2024-03-01",
            "nil-claim",
            "the amount is zero: closed without payment, counted apart and no loss, in file losses.csv, row "
            "3, column 'amount'; seen: '0.00'. None needed; frequency and severity are those of losses above "
            "zero.",
            id="claim at nil",
        ),
        pytest.param(
            "amount,date",
            "5,1899-12-31",
            "early-date",
            "the date is before March 1900, in file losses.csv, row 3, column 'date'; seen: '1899-12-31'. "
            "Correct it; workbooks count a 29 February 1900 that never was, and show an empty date as 1900.",
            id="before March 1900",
        ),
        pytest.param(
            "amount,date",
            "5,2026-01-01",
            "future-date",
            "the date is after the valuation date 2025-12-31, in file losses.csv, row 3, column 'date'; "
            "seen: '2026-01-01'. Correct it, or the valuation date.",
            id="after the valuation date",
        ),
        pytest.param(
            "amount,date,reported",
            "5,2024-03-01,2024-02-29",
            "reported-early",
            "the loss is reported before it occurred, in file losses.csv, row 3, column 'reported'; "
            "seen: '2024-02-29'. Correct one of the dates.",
            id="reported before occurred",
        ),
        pytest.param(
            "amount,date,reported",
            "5,2024-03-01,2026-02-28",
            "reported-late",
            "the loss is reported after the valuation date 2025-12-31, in file losses.csv, row 3, column "
            "'reported'; seen: '2026-02-28'. Correct it, or the valuation date.",
            id="reported after the valuation date",
        ),
        pytest.param(
            "amount,date,threshold",
            "5,2024-03-01,6",
            "below-threshold",
            "the loss (all claims of its event) is below its reporting threshold, in file losses.csv, row 3, "
            "column 'amount'; seen: '5'. Records below the threshold contradict it; lower the threshold if "
            "they are complete.",
            id="below its threshold",
        ),
        pytest.param(
            "amount,date,threshold",
            "5,2024-03-01,-6",
            "negative-threshold",
            "the threshold is negative, in file losses.csv, row 3, column 'threshold'; seen: '-6'. "
            "Correct it.",
            id="negative threshold",
        ),
        pytest.param(
            "amount,date,policy-limit",
            "5.01,2024-03-01,5",
            "above-limit",
            "the amount is above its policy limit, in file losses.csv, row 3, column 'amount'; seen: '5.01'. "
            "Correct one of them; if amounts are before the limit, leave the limit out.",
            id="above its limit",
        ),
        pytest.param(
            "amount,date,recoveries",
            "5,2024-03-01,5.01",
            "recoveries-above-gross",
            "the recoveries exceed the gross amount, in file losses.csv, row 3, column 'recoveries'; seen: "
            "'5.01'. Give amounts gross of recoveries.",
            id="recoveries above gross",
        ),
        pytest.param(
            "amount,date,paid,outstanding",
            "5,2024-03-01,3,2.02",
            "parts-differ",
            "paid and outstanding do not add to the amount within 0.01, in file losses.csv, row 3, column "
            "'amount'; seen: '5'. Correct one of the three.",
            id="parts differ",
        ),
        pytest.param(
            "amount,date,currency",
            "5,2024-03-01,",
            "missing-currency",
            "the currency is missing, in file losses.csv, row 3, column 'currency'; seen: ''. Supply it, or "
            "leave the column out if all amounts are in one currency.",
            id="missing currency",
        ),
    ],
)
def test_row_is_set_aside(check, columns: str, row: str, code: str, text: str) -> None:
    good = {"amount,date,currency": f"{GOOD},EUR", "amount,date,threshold": f"{GOOD},1"}.get(
        columns, GOOD + "," * (columns.count(",") - 1)
    )
    checked = check(f"{columns}\n{good}\n{row}\n")
    (finding,) = only(checked, code)
    assert str(finding) == text
    assert finding.action == "set aside"
    assert finding.amount == float(row.split(",")[0])
    assert checked.used.tolist() == [True, False]
    assert checked.reconciliation.excluded == 1


@pytest.mark.parametrize(
    ("columns", "row"),
    [
        ("amount,date", "5,2025-12-31"),
        ("amount,date", "5,1900-03-01"),
        ("amount,date,reported", "5,2024-03-01,2024-03-01"),
        ("amount,date,reported", "5,2024-03-01,"),
        ("amount,date,threshold", "5,2024-03-01,5"),
        ("amount,date,policy-limit", "5,2024-03-01,5"),
        ("amount,date,recoveries", "5,2024-03-01,5"),
        ("amount,date,paid,outstanding", "5,2024-03-01,3,2.01"),
        ("amount,date,paid,outstanding", "5,2024-03-01,3,"),
        ("amount,date,paid,outstanding", "1000000000000.01,2024-03-01,500000000000.00,500000000000.02"),
        ("amount,date,currency", "5,2024-03-01,eur"),
    ],
)
def test_the_edge_of_each_rule_is_used(check, columns: str, row: str) -> None:
    checked = check(f"{columns}\n{row}\n")
    assert checked.used.tolist() == [True]
    assert not [f for f in checked.findings if f.row is not None]


def test_rows_before_the_declared_window_do_not_count_as_faults(check) -> None:
    text = f"amount,date\n{GOOD}\n5,2019-12-31\n6,2020-01-01\n" + "1,2001-01-01\n" * 50
    checked = check(text, first_year=2020, tolerance=0.01)
    found = only(checked, "outside-window")
    assert found[0].message == "the date is before the observation window, which begins in 2020"
    assert sum(finding.count for finding in found) == 51
    assert checked.reconciliation.used == 2


def test_another_currency_stops(check) -> None:
    with pytest.raises(RecordsError) as error:
        check(f"amount,date,currency\n{GOOD},EUR\n5,2024-01-01,USD\n6,2024-01-01,GBP\n")
    assert str(error.value) == (
        "the currency is not that of the portfolio, EUR, in file losses.csv, row 3, column 'currency'; seen: "
        "'USD'. Name a file of dated rates under [portfolio], or split the file. 2 rows have this fault: "
        "rows 3, 4."
    )


def test_an_unknown_line_stops_with_the_nearest_name(check) -> None:
    with pytest.raises(RecordsError, match=r"row 3, column 'line'; seen: 'Moter'. Did you mean 'Motor'\?"):
        check(f"amount,date,line\n{GOOD},Motor\n{GOOD},Moter\n", lines=["Motor", "Property"])
    with pytest.raises(RecordsError, match=r"the line is missing, in .*row 2"):
        check(f"amount,date,line\n{GOOD},\n", lines=["Motor", "Property"])


def test_several_lines_without_a_column_stop(check) -> None:
    with pytest.raises(InputError, match="several lines share the file but no column tells them apart"):
        check(f"amount,date\n{GOOD}\n", lines=["Motor", "Property"])


def test_a_row_repeated_in_every_column_is_set_aside_once(check) -> None:
    checked = check(f"amount,date,event\n{GOOD},E1\n{GOOD},E1\n{GOOD},E1\n{GOOD},E2\n")
    found = only(checked, "duplicate-row")
    assert [f.row for f in found] == [3, 4]
    assert found[0].message == "the row repeats an earlier one of the same event in every column"
    assert checked.used.tolist() == [True, False, False, True]


def test_claims_of_one_event_that_differ_in_an_unread_column_are_both_used(check) -> None:
    checked = check(f"amount,date,event,claimant\n{GOOD},E1,A\n{GOOD},E1,B\n")
    assert checked.used.all()
    near = next(f for f in checked.findings if f.code == "near-duplicate")
    assert near.message == "rows agree in date and amount but not otherwise: 2 and 3"


def test_twins_without_an_event_are_used_and_warned_of(check) -> None:
    checked = check(f"amount,date\n{GOOD}\n{GOOD}\n11,2024-01-01\n")
    (finding,) = only(checked, "twin-row")
    assert (finding.action, finding.row) == ("warn", 3)
    assert checked.used.all()


@pytest.mark.parametrize(
    "foot", ["60,", "60,Total", "61,Total", "x,TOTAL:", "60,2024-01-01", '"6,000",Grand total']
)
def test_a_row_of_totals_is_set_aside_and_is_no_fault(check, foot: str) -> None:
    text = (
        f"amount,date\n10,2024-01-01\n10.5,2024-01-02\n9.5,2024-01-03\n10,2024-01-04\n20,2024-01-05\n{foot}\n"
    )
    checked = check(text, tolerance=0.0)
    (finding,) = only(checked, "totals-row")
    assert (finding.row, finding.message) == (
        7,
        "the last row is a total of the others and would count every loss twice",
    )
    assert checked.reconciliation.used == 5
    assert float(checked.reconciliation.amount_used) == 60.0


@pytest.mark.parametrize("last", ["60.01,2024-01-01", "10,2024-01-01"])
def test_an_ordinary_last_row_is_no_total(check, last: str) -> None:
    text = (
        f"amount,date\n10,2024-01-01\n10.5,2024-01-02\n9.5,2024-01-03\n10,2024-01-04\n20,2024-01-05\n{last}\n"
    )
    assert check(text).reconciliation.used == 6


def test_a_small_file_whose_last_loss_is_the_sum_by_chance_keeps_it(check) -> None:
    assert check("amount,date\n2,2024-01-01\n3,2024-01-02\n5,2024-01-03\n").used.all()


def test_an_insured_called_total_is_no_total(check) -> None:
    assert check("amount,date,event\n2,2024-01-01,A\n3,2024-01-02,Total\n").used.all()


@pytest.mark.parametrize(
    ("rows", "code", "message"),
    [
        (
            ["1,2024-01-01", "2,2024-01-02", "97,2024-01-03"],
            "dominant-loss",
            "one loss is 97.0% of the total",
        ),
        (["5,2024-01-01", "5,2024-01-02"], "equal-amounts", "all 2 amounts are equal to 5"),
        (
            [f"{1000 * k},2024-01-01" for k in range(1, 22)],
            "heaped-amounts",
            "21 of 21 amounts have at most two significant digits",
        ),
        (
            [f"{100.01 + k},2024-01-01" for k in range(15)] + [f"7777,2024-02-{k + 1:02d}" for k in range(6)],
            "repeated-amount",
            "6 of 21 amounts are equal to 7777",
        ),
    ],
)
def test_warnings_about_the_whole(check, rows: list[str], code: str, message: str) -> None:
    checked = check("amount,date\n" + "\n".join(rows) + "\n")
    found = [f for f in checked.findings if f.action == "warn" and f.code == code]
    assert len(found) == 1
    assert message in found[0].message
    assert checked.used.all()


def test_ordinary_amounts_raise_no_warning(check) -> None:
    rows = "".join(f"{1234.56 * (1 + k * 0.37):.2f},2024-01-{k + 1:02d}\n" for k in range(28))
    assert check("amount,date\n" + rows, tolerance=0.0).findings == ()


def test_an_event_that_lasts_too_long_is_warned_of(check) -> None:
    checked = check("amount,date,event\n5,2022-01-01,E\n6,2024-01-01,E\n7,2024-01-01,F\n")
    found = next(f for f in checked.findings if f.code == "long-event")
    assert found.message == "1 event of more than a year (rows 2, 3)"


def test_an_event_that_lost_a_claim_is_warned_of(check) -> None:
    checked = check("amount,date,event\n5,2024-01-01,E\nN/A,2024-01-01,E\n7,2024-01-01,F\n")
    found = [f for f in checked.findings if f.code == "incomplete-event"]
    assert [(f.action, f.row, f.value) for f in found] == [("warn", 2, "E")]


def test_markers_in_the_event_column_do_not_join_losses(check) -> None:
    checked = check("amount,date,event\n5,2024-01-01,N/A\n6,2024-02-01,n/a\n7,2024-03-01,-\n")
    assert checked.table.words["event"].tolist() == ["", "", ""]
    assert [f.row for f in only(checked, "marker")] == [2, 3, 4]


def test_identifiers_that_a_spreadsheet_turned_into_numbers_are_warned_of(check) -> None:
    checked = check("amount,date,event\n5,2024-01-01,1.2E+11\n6,2024-02-01,7E1X\n")
    (finding,) = only(checked, "identifier-form")
    assert (finding.row, finding.value) == (2, "1.2E+11")


def test_identifiers_that_look_alike_are_one(check) -> None:
    """Composed and decomposed letters (Unicode NFC, NFD) and a zero-width space."""
    checked = check("amount,date,event\n5,2024-01-01,\u00e9\n6,2024-01-01,e\u0301\u200b\n")
    assert set(checked.table.words["event"]) == {"\u00e9"}


@pytest.mark.parametrize(
    ("row", "code"),
    [
        ("5,2024-01-01,closed,3,2", "closed-with-reserve"),
        ("5,2024-01-01,open,5,0", "open-without-reserve"),
        ("5,2024-01-01,Jane Miller,5,0", "unknown-status"),
    ],
)
def test_status_warnings(check, row: str, code: str) -> None:
    checked = check(f"amount,date,status,paid,outstanding\n{row}\n")
    (finding,) = only(checked, code)
    assert finding.action == "warn"
    assert "Miller" not in str(finding)
    assert checked.used.all()


def test_negative_recoveries_are_warned_of(check) -> None:
    (finding,) = only(check("amount,date,recoveries\n5,2024-01-01,-1\n"), "negative-recoveries")
    assert finding.action == "warn"


def test_a_row_with_several_faults_is_set_aside_once(check) -> None:
    checked = check(f"amount,date\n{GOOD}\n-5,2030-01-01\n")
    assert [f.code for f in checked.findings if f.row] == ["negative-amount"]
    assert checked.reconciliation.excluded == 1


def test_too_much_set_aside_stops_with_the_share_and_the_reasons(check) -> None:
    text = "amount,date\n" + f"{GOOD}\n" * 17 + "-1,2024-01-01\n,2024-01-01\n"
    with pytest.raises(RecordsError) as error:
        check(text, tolerance=0.05)
    assert str(error.value) == (
        "10.5% of rows (2 rows) would be set aside for faults, more than the tolerance of 5.0%, in file "
        "losses.csv. Repair the file (first at row 19; by reason: missing-amount 1, negative-amount 1), or "
        "raise the tolerance."
    )
    assert {f.code for f in error.value.findings} >= {"set-aside-share", "missing-amount", "twin-row"}
    assert check(text, tolerance=0.11).reconciliation.excluded == 2


def test_the_share_of_money_counts_too(check) -> None:
    text = "amount,date\n" + f"{GOOD}\n" * 99 + "-200,2024-01-01\n"
    with pytest.raises(RecordsError, match=r"16\.8% of the money \(1 row\)"):
        check(text, tolerance=0.05)


def test_claims_at_nil_do_not_count_as_faults(check) -> None:
    checked = check(f"amount,date\n{GOOD}\n" + "0,2024-01-01\n" * 30, tolerance=0.0)
    assert checked.reconciliation.excluded == 30
    assert sum(f.count for f in checked.findings if f.code == "nil-claim") == 30


def test_excluded_frame_lists_every_row_set_aside(check) -> None:
    checked = check(f"amount,date\n{GOOD}\n" + "0,2024-01-01\n" * 30 + "-2.5,2024-01-01\n")
    frame = checked.excluded_frame()
    assert frame["row"].tolist() == list(range(3, 34))
    assert frame["code"].tolist() == ["nil-claim"] * 30 + ["negative-amount"]
    assert float(frame["amount"].sum()) == -2.5


def test_lines_are_reconciled_apart_and_add_up(check) -> None:
    text = (
        "amount,date,line\n10,2024-01-01,Motor\n-1,2024-01-01,motor\n20,2024-01-01,Property\n"
        "0,2024-01-01,Property\n\n29,,\n"
    )
    checked = check(text, lines=["Motor", "Property"])
    motor, rest = checked.for_line("Motor"), checked.for_line(None)
    property_ = checked.for_line("Property")
    assert str(motor.reconciliation) == "2 read = 1 used + 1 excluded; 9 = 10 + -1"
    assert [f.code for f in motor.findings if f.row] == ["negative-amount"]
    assert {f.line for f in motor.findings if f.row} == {"Motor"}
    assert [f.code for f in rest.findings if f.row] == ["blank-row", "totals-row"]
    parts = [part.reconciliation for part in (motor, property_, rest)]
    whole = checked.reconciliation
    for name in ("read", "used", "excluded", "amount_read", "amount_used", "amount_excluded"):
        assert sum(getattr(part, name) for part in parts) == getattr(whole, name)
    with pytest.raises(InputError, match=r"not checked for this line.*Did you mean 'Motor'\?"):
        checked.for_line("Moto")


def test_a_file_taken_for_one_line_that_names_several_is_warned_of(check) -> None:
    found = [
        f for f in check(f"amount,date,line\n{GOOD},A\n11,2024-01-01,B\n").findings if f.action == "warn"
    ]
    assert [(f.code, f.message) for f in found] == [
        ("lines-pooled", "the rows are taken for one line but name 2")
    ]
    assert check(f"amount,date,line\n{GOOD},A\n11,2024-01-01,A\n").findings == ()


def test_first_years_by_line(check) -> None:
    checked = check(
        "amount,date,line\n10,2019-01-01,A\n10,2019-01-01,B\n",
        lines=["A", "B"],
        first_year={"A": 2020, "B": None},
    )
    assert checked.used.tolist() == [False, True]


@pytest.mark.parametrize(
    ("terms", "message"),
    [
        ({"first_year": 2030}, "first year must lie between 1900 and the valuation date"),
        ({"first_year": {"X": 2020}}, "a first year is declared for a line that is not there"),
        ({"valuation_date": "2025-12-31"}, "the valuation date must be a date"),
        ({"valuation_date": dt.datetime(2025, 12, 31)}, "the valuation date must be a date"),
        ({"tolerance": 5}, "tolerance must be a probability"),
        ({"lines": []}, "lines must be named, each once"),
        ({"lines": ["A", "a "]}, "lines must be named, each once"),
    ],
)
def test_bad_terms_are_refused(check, terms: dict[str, object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        check(f"amount,date,line\n{GOOD},A\n", **terms)


def test_findings_use_the_keys_and_severities_of_an_assessment(check) -> None:
    finding = check(f"amount,date\n{GOOD}\n-5,2024-01-01\n").findings[0]
    data = finding.to_dict()
    assert data["severity"] == "set aside"
    assert {"severity", "code", "file", "row", "column", "value", "message", "remedy"} <= set(data)


def test_one_bad_row_does_not_stop_a_small_file_unless_it_is_most_of_the_money(check) -> None:
    nine = "".join(f"10,2024-01-{day:02d}\n" for day in range(1, 10))
    assert check(f"amount,date\n{nine}-12,2024-02-01\n", tolerance=0.05).reconciliation.excluded == 1
    with pytest.raises(RecordsError, match=r"52\.6% of the money \(1 row\) would be set aside"):
        check(f"amount,date\n{nine}-100,2024-02-01\n", tolerance=0.05)
    with pytest.raises(RecordsError, match=r"18\.2% of rows \(2 rows\)"):
        check(f"amount,date\n{nine}-1,2024-02-01\n-1,2024-02-02\n", tolerance=0.05)
    with pytest.raises(RecordsError, match=r"more than the tolerance of 0\.0%"):
        check(f"amount,date\n{nine}-12,2024-02-01\n", tolerance=0.0)
