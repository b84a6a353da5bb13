"""The bad-input catalogue as files: one case for each state, with what must happen and what must be said.

Numbers are those of the catalogue of bad inputs that lossagg is built against: 1 to 40 and 48 to 63 concern
files and their rows, 67 to 69 probabilities, personal data and counts.
"""

from __future__ import annotations

from dataclasses import dataclass, field

GOOD = "10.5,2024-03-01"


@dataclass(frozen=True)
class Case:
    """A text file in one state.

    Attributes:
        number: row of the catalogue.
        state: what is the matter with the file.
        content: the file.
        action: "stop", "set aside", "warn", "normalise" or "use".
        text: what the error or the finding must say; "" for "use".
        used: rows that must be used, where the file does not stop.
        options: how it is read and checked.
    """

    number: int
    state: str
    content: str | bytes
    action: str
    text: str
    used: int = 1
    options: dict[str, object] = field(default_factory=dict)


def _table(rows: str, headings: str = "amount,date") -> str:
    return f"{headings}\n{rows}\n"


def _with(cell: str, column: str = "amount") -> str:
    quoted = f'"{cell}"'
    row = f"{quoted},2024-03-02" if column == "amount" else f"7,{quoted}"
    return _table(f"{GOOD}\n{row}")


PLAIN_NUMBER = "the amount is not a plain number, in file losses.csv, row 3, column 'amount'; seen: "
MISSING = "the amount is missing, in file losses.csv, row 3, column 'amount'; seen: "

TEXT_CASES = [
    Case(1, "byte order mark", _table(GOOD).encode("utf-8-sig"), "normalise", "a byte order mark says utf-8"),
    Case(
        2,
        "cp1252 without a declaration",
        _table(f"{GOOD},Zürich", "amount,date,event").encode("cp1252"),
        "stop",
        "the bytes are not utf-8, in file losses.csv, line 2, byte 35; seen: b'\\xfc'. Declare the encoding",
    ),
    Case(
        2,
        "cp1252 declared",
        _table(f"{GOOD},Zürich", "amount,date,event").encode("cp1252"),
        "use",
        "",
        options={"encoding": "cp1252"},
    ),
    Case(2, "UTF-16 by its mark", _table(GOOD).encode("utf-16"), "normalise", "mark says utf-16"),
    Case(
        3,
        "invalid bytes mid-file",
        _table(GOOD).encode() + b"11,2024-03-02\n12,\xff\xfe\n",
        "stop",
        "the bytes are not utf-8, in file losses.csv, line 4, byte 45",
    ),
    Case(
        3,
        "NUL bytes",
        _table(GOOD).encode() + b"11,2024-\x0003-02\n",
        "stop",
        "the file contains a NUL character, in file losses.csv, line 3, byte 36",
    ),
    Case(4, "semicolons", _table(GOOD).replace(",", ";"), "normalise", "divided by a semicolon"),
    Case(4, "tabs", _table(GOOD).replace(",", "\t"), "normalise", "divided by a tab"),
    Case(4, "bars", _table(GOOD).replace(",", "|"), "normalise", "divided by a bar"),
    Case(
        4,
        "two delimiters alike",
        "amount,x;date\n1,2;2024-01-01\n",
        "stop",
        "the delimiter is ambiguous: comma and semicolon both divide the rows alike",
    ),
    Case(
        4,
        "a first line for spreadsheets",
        "sep=;\n" + _table(GOOD).replace(",", ";"),
        "stop",
        "the first line tells a spreadsheet the delimiter and holds no headings, in file losses.csv, row 1; "
        "seen: 'sep=;'. Delete that line",
    ),
    *(
        Case(5, f"decimal comma {cell}", _with(cell), "stop", f"{PLAIN_NUMBER}'{cell}'")
        for cell in ("1.234,56", "1,234")
    ),
    Case(
        5,
        "decimal comma declared",
        "amount;date\n1.234,56;2024-03-01\n",
        "normalise",
        "divided by a semicolon",
        options={"decimal": ",", "thousands": "."},
    ),
    *(
        Case(6, f"thousands mark {mark!r}", _with(f"1{mark}234{mark}567"), "stop", PLAIN_NUMBER)
        for mark in (",", " ", "\u00a0", "'")
    ),
    Case(
        6,
        "Indian grouping undeclared",
        _with("12,34,567.50"),
        "stop",
        f"{PLAIN_NUMBER}'12,34,567.50'",
        options={"thousands": ","},
    ),
    Case(
        6,
        "Indian grouping declared",
        _table('"12,34,567.50",2024-03-01\n"12,34,568.50",2024-03-02'),
        "use",
        "",
        2,
        {"thousands": ",", "grouping": "indian"},
    ),
    Case(
        6,
        "marks in some rows only",
        _table(f'{GOOD}\n"12,345",2024-03-02\n12345,2024-03-03'),
        "warn",
        "the amount has no marks between its digits where others of the column have them, in file "
        "losses.csv, row 4, column 'amount'; seen: '12345'",
        3,
        {"thousands": ","},
    ),
    *(
        Case(7, f"written as {cell}", _with(cell), "stop", PLAIN_NUMBER)
        for cell in ("$5", "EUR 5", "(1,234)", "5-", "1.2m", "5k", "12%")
    ),
    Case(8, "scientific notation", _with("1.2E1"), "use", "", 2),
    Case(8, "above 2**53", _with("9007199254740993"), "warn", "the amount has more digits than a float64", 2),
    *(
        Case(9, f"amount {cell!r}", _with(cell), "set aside", f"{MISSING}'{cell}'")
        for cell in ("", "NaN", "N/A", "-", "null", "#REF!", "#N/A")
    ),
    Case(10, "inf", _with("inf"), "set aside", "the amount is not finite"),
    Case(10, "1e308", _with("1e308"), "set aside", "the amount is above 1e+18", options={"tolerance": 1.0}),
    Case(11, "negative", _with("-5"), "set aside", "the amount is negative"),
    Case(12, "zero", _with("0"), "set aside", "the amount is zero: closed without payment, counted apart"),
    Case(13, "whole numbers", _with("12"), "use", "", 2),
    Case(
        14,
        "the same claim twice, identical",
        _table(f"{GOOD},C1\n{GOOD},C1", "amount,date,claim"),
        "set aside",
        "the row repeats an earlier one of the same claim in every column, in file losses.csv, row 3, column "
        "'claim'; seen: 'C1'",
    ),
    Case(
        15,
        "the same claim with other values",
        _table(f"{GOOD},C1\n99,2024-03-01,C1", "amount,date,claim"),
        "stop",
        "the claim stands in several rows that differ, and no valuation date says which is the latest, in "
        "file losses.csv, row 2, column 'claim'; seen: 'C1'",
    ),
    Case(
        15,
        "the same claim at two valuation dates",
        _table(f"{GOOD},C1,2024-12-31\n99,2024-03-01,C1,2025-12-31", "amount,date,claim,valuation"),
        "set aside",
        "the claim has a later valuation, which is used; this one tells how it developed, in file "
        "losses.csv, row 2",
    ),
    Case(
        16,
        "near duplicates",
        _table(f"{GOOD},E1\n{GOOD},E2", "amount,date,event"),
        "warn",
        "rows agree in date and amount but not otherwise: 2 and 3",
        2,
    ),
    Case(
        17,
        "03/04/2025",
        _with("03/04/2025", "date"),
        "stop",
        "the date is not a date written YYYY-MM-DD, in file losses.csv, row 3, column 'date'; seen: "
        "'03/04/2025'",
    ),
    Case(
        17,
        "two forms in a column",
        _table("7,01/03/2024\n8,2024-03-01"),
        "stop",
        "the date is not in the declared format '%d/%m/%Y', in file losses.csv, row 3",
        options={"date_format": "%d/%m/%Y"},
    ),
    Case(18, "serial number", _with("45000", "date"), "stop", "the date is not a date written YYYY-MM-DD"),
    Case(19, "two-digit year", _with("25-03-04", "date"), "stop", "the date is not a date written"),
    Case(
        19,
        "two-digit years declared",
        _table("7,01/03/24"),
        "stop",
        "Two-digit years do not say the century.",
        options={"date_format": "%d/%m/%y"},
    ),
    Case(19, "year 0205", _with("0205-03-04", "date"), "set aside", "the date is before March 1900"),
    Case(19, "year 2925", _with("2925-03-04", "date"), "set aside", "the date is after the valuation date"),
    Case(19, "a future loss", _with("2026-03-04", "date"), "set aside", "the date is after the valuation"),
    Case(
        17,
        "a month in another language",
        _table("7,01 Mar 2024\n8,02 Dez 2024"),
        "stop",
        "the date is not in the declared format '%d %b %Y', in file losses.csv, row 3",
        options={"date_format": "%d %b %Y"},
    ),
    *(
        Case(20, f"the time {time}", _with(f"2024-03-02T{time}", "date"), "set aside", "that does not exist")
        for time in ("24:00", "25:10:00", "23:60", "23:59:60")
    ),
    Case(20, "31 February", _with("2024-02-31", "date"), "set aside", "the date names a day, or a time,"),
    Case(
        20,
        "a zone undeclared",
        _with("2024-03-01T23:30:00Z", "date"),
        "set aside",
        "the date carries a time zone, so its day here is not known",
    ),
    Case(
        20,
        "a zone declared",
        _with("2024-03-01T23:30:00Z", "date"),
        "normalise",
        "the date carries a time zone; its day in Asia/Kathmandu is used",
        2,
        {"time_zone": "Asia/Kathmandu"},
    ),
    *(
        Case(
            21,
            text,
            _table(f"{GOOD},{days}", "amount,date,reported,payment-date,closed-date"),
            "set aside",
            text,
            0,
            {"tolerance": 1.0},
        )
        for days, text in (
            ("2024-02-29,,", "the loss is reported before it occurred"),
            (",2024-02-29,", "a payment is made before it occurred"),
            ("2024-05-01,,2024-04-30", "the claim is closed before it was reported"),
            (",,2024-02-29", "the claim is closed before it occurred"),
            ("2026-01-02,,", "the loss is reported after the valuation date 2025-12-31"),
            (",2026-01-02,", "a payment is made after the valuation date 2025-12-31"),
            (",,2026-01-02", "the claim is closed after the valuation date 2025-12-31"),
        )
    ),
    Case(
        22,
        "closed with a reserve",
        _table("10,2024-03-01,closed,4,6", "amount,date,status,paid,outstanding"),
        "warn",
        "the claim is closed but has an outstanding amount",
    ),
    Case(
        22,
        "open without a reserve",
        _table("10,2024-03-01,open,10,0", "amount,date,status,paid,outstanding"),
        "warn",
        "the claim is open but nothing is outstanding",
    ),
    Case(
        22,
        "no status where others have one",
        _table(f"{GOOD},open\n10,2024-03-02,", "amount,date,status"),
        "warn",
        "the status is missing and counts as not open, in file losses.csv, row 3, column 'status'; seen: ''",
        2,
    ),
    Case(
        23,
        "parts that do not add up",
        _table(f"{GOOD},10.5,0\n10,2024-03-01,4,6.02", "amount,date,paid,outstanding"),
        "set aside",
        "paid and outstanding do not add to the amount within 0.01",
    ),
    Case(
        24,
        "below its threshold",
        _table(f"{GOOD},5\n4,2024-03-01,5", "amount,date,threshold"),
        "set aside",
        "Records below the threshold contradict it; lower the threshold if they are complete.",
    ),
    Case(
        25,
        "a threshold in some years only",
        _table(f"{GOOD},5\n40,2023-03-01,", "amount,date,threshold"),
        "stop",
        "the reporting threshold is missing where other records have one, in file losses.csv, row 3",
    ),
    Case(
        25,
        "a threshold declared for the others",
        _table(f"{GOOD},5\n40,2023-03-01,", "amount,date,threshold"),
        "use",
        "",
        2,
        {"reporting_threshold": 3.0},
    ),
    Case(
        26,
        "above the policy limit",
        _table(f"{GOOD},50\n60,2024-03-01,50", "amount,date,policy-limit"),
        "set aside",
        "the amount is above its policy limit",
    ),
    Case(
        27,
        "recoveries above gross",
        _table(f"{GOOD},0\n60,2024-03-01,61", "amount,date,recoveries"),
        "set aside",
        "the recoveries exceed the gross amount",
    ),
    Case(
        28,
        "mixed currencies without rates",
        _table(f"{GOOD},EUR\n{GOOD},USD", "amount,date,currency"),
        "stop",
        "the currency is not that of the portfolio, EUR, in file losses.csv, row 3, column 'currency'; seen: "
        "'USD'",
    ),
    Case(
        34,
        "before the observation window",
        _table(f"{GOOD}\n10,2019-12-31"),
        "set aside",
        "the date is before the observation window, which begins in 2020",
        options={"first_year": 2020},
    ),
    Case(35, "headings only", "amount,date\n", "stop", "the table has headings but no rows"),
    Case(37, "equal amounts", _table("5,2024-03-01\n5,2024-03-02"), "warn", "all 2 amounts are equal", 2),
    Case(
        37,
        "heaped amounts",
        _table("\n".join(f"{1000 * k},2024-01-01" for k in range(1, 22))),
        "warn",
        "21 of 21 amounts have at most two significant digits",
        21,
    ),
    Case(
        37,
        "many equal to one limit",
        _table("\n".join(f"{100.01 + k},2024-01-01" for k in range(15)) + "\n7777,2024-02-01" * 6),
        "warn",
        "6 of 21 amounts are equal to 7777",
        21,
    ),
    Case(
        39,
        "one claim is nearly everything",
        _table("1,2024-01-01\n2,2024-01-02\n97,2024-01-03"),
        "warn",
        "one loss is 97.0% of the total (row 4)",
        3,
    ),
    Case(48, "a heading twice", _table("1,2024-01-01,2", "amount,date,Amount "), "stop", "same heading"),
    Case(48, "outer spaces and case", _table(GOOD, " Amount , DATE"), "use", ""),
    Case(48, "an empty heading", _table("1,2,2024-01-01", "amount,,date"), "stop", "heading of column 2"),
    Case(
        48,
        "a row of totals",
        _table("10,2024-01-01\n20,2024-01-02\n30,Total"),
        "set aside",
        "the last row is a total of the others and would count every loss twice",
        2,
    ),
    Case(
        48,
        "subtotals between the rows, and a total",
        _table("10,2024-01-01\n20,2024-01-02\n30,\n5,2024-02-01\n7,2024-02-02\n12,\n42,"),
        "set aside",
        "the row is the total of the rows above it and would count their losses twice, in file losses.csv, "
        "row 4, column 'amount'; seen: '30'",
        4,
    ),
    Case(48, "notes above the headings", f"Export of May\n{_table(GOOD)}", "stop", "remove notes above"),
    Case(50, "text like a formula", _table(f"{GOOD},=cmd|x", "amount,date,event"), "use", ""),
    Case(
        53,
        "ten thousand columns and one",
        _table("", ",".join(f"c{k}" for k in range(10_001))),
        "stop",
        "too many columns, in file losses.csv, row 1; seen: 10001",
    ),
    Case(
        56,
        "a ragged row",
        _table(f"{GOOD}\n1,2024-01-01,x"),
        "stop",
        "a row has 3 fields where the headings have 2, in file losses.csv, row 3, line 3",
    ),
    Case(
        56,
        "an open quote",
        _table(f'{GOOD},a\n1,2024-01-01,"b\n2,2024-01-02,c', "amount,date,event"),
        "stop",
        "a quote is opened and never closed, in file losses.csv, row 3, line 3",
    ),
    Case(
        56,
        "line breaks in cells",
        _table(f'{GOOD},"a\nb"', "amount,date,event"),
        "warn",
        "1 line break inside quoted cells; rows are counted by record",
    ),
    Case(56, "old line ends", _table(GOOD).replace("\n", "\r"), "use", ""),
    Case(
        57,
        "no final newline",
        _table(GOOD).rstrip("\n"),
        "warn",
        "the last line has no end: the file may be cut off in it, in file losses.csv. Compare the last row",
    ),
    Case(58, "empty", "", "stop", "the file is empty, in file losses.csv"),
    Case(58, "a workbook named .csv", b"PK\x03\x04rest", "stop", "the suffix says text but the content"),
    Case(
        62,
        "identifier in scientific form",
        _table(f"{GOOD},1.2E+11", "amount,date,event"),
        "warn",
        "the event looks like an identifier that a spreadsheet turned into a number",
    ),
    Case(
        62,
        "leading zeros lost",
        _table("\n".join(f"{k}.5,2024-01-{k:02d},{10_000 + k}" for k in range(1, 13)) + "\n7,2024-02-01,123",
               "amount,date,claim"),
        "warn",
        "the claim has fewer digits than nearly all others: leading zeros may be lost, in file losses.csv, "
        "row 14, column 'claim'; seen: '123'",
        13,
    ),
    Case(
        63,
        "zero-width space and decomposed letters",
        _table(f"{GOOD},Zu\u0308rich\u200b1", "amount,date,event"),
        "normalise",
        "the event is compared without outer spaces and invisible characters",
    ),
    Case(
        63,
        "two alphabets in a word",
        _table(f"{GOOD},M\u043etor 1", "amount,date,event"),
        "warn",
        "the event has letters of two alphabets, some of which look alike",
    ),
    Case(
        68,
        "columns of personal data",
        _table(f"{GOOD},Jane Miller,850412-1234", "amount,date,claimant,national id"),
        "warn",
        "2 columns are not read: 'claimant', 'national id'",
    ),
]  # fmt: skip

ELSEWHERE = {
    13: "tests/records/test_catalogue.py::test_13_whole_numbers_of_a_parquet_file_become_floats",
    15: "tests/records/test_history.py::test_the_latest_valuation_is_the_claim",
    28: "tests/records/test_basis_and_currency.py::test_rates_that_cannot_be_used_stop",
    29: "tests/records/test_mixups.py::test_29_a_file_that_mixes_units_row_by_row_warns_with_both_heaps",
    50: "tests/report/test_workbook.py::test_text_never_runs_as_a_formula",
    52: "tests/report/test_page.py::test_names_cannot_inject",
    54: "tests/portfolio/test_portfolio_file.py::test_faults_name_their_key_and_remedy",
    59: "tests/records/test_previous.py::test_59_last_quarters_file_again_stops_unless_it_is_confirmed",
    60: "tests/records/test_previous.py::test_60_claims_that_vanished_or_were_rewritten_are_listed",
    69: "tests/records/test_count_table.py::test_69_counts_and_claims_that_disagree_stop_with_both_shown",
    **{
        number: f"tests/portfolio/test_catalogue_of_portfolios.py::test_{number}_{name}"
        for number, name in (
            (30, "a_year_without_exposure_stops"),
            (31, "a_year_without_losses_stays_a_year"),
            (32, "exposures_that_are_zero_stop_and_jumps_warn"),
            (33, "the_year_of_the_valuation_date_counts_in_part"),
            (35, "no_claims_at_all"),
            (36, "one_claim_supports_no_free_shape"),
            (37, "equal_amounts_are_warned_of_and_not_fitted"),
            (38, "constant_counts_have_no_negative_binomial"),
            (40, "a_tail_without_a_mean_is_said"),
            (51, "a_link_out_of_the_folder_is_refused"),
            (61, "two_portfolios_of_one_name_stop_and_none_shares_a_folder"),
            (67, "probabilities_that_do_not_sum_to_one_stop"),
        )
    },
}
"""Rows that concern preparing, fitting, names and reports: where they are tested."""
