"""Numbers and dates: exact where plain or declared, stopped where ambiguous, set aside where unknown."""

import random
import struct
from decimal import Decimal

import numpy as np
import pytest

from lossagg.errors import InputError
from lossagg.records import RecordsError


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("1234.56", "1234.56"),
        ("+5", "5"),
        (" 7 ", "7"),
        ("\u00a08\u00a0", "8"),
        (".5", "0.5"),
        ("5.", "5"),
        ("1.2e3", "1200"),
        ("1E-2", "0.01"),
        ("0.1", "0.1"),
        ("00012", "12"),
    ],
)
def test_plain_numbers_are_exact(read, text: str, number: str) -> None:
    table = read(f'amount,date\n"{text}",2024-01-01\n')
    assert table.exact[0] == Decimal(number)
    assert table.amount[0] == float(number)


@pytest.mark.parametrize(
    "text",
    [
        *("1,234", "1.234,56", "(1,234)", "5k", "12%", "EUR 5", "$5", "5-", "1 234", "1'234", "1_000"),
        *("0x10", "--5", "1e", "=1+1", "TRUE", "5 EUR", "1.2m", "\u0661\u0662", "9" * 61),
    ],
)
def test_other_forms_are_not_guessed(read, text: str) -> None:
    with pytest.raises(RecordsError, match=r"the amount is not a plain number, in .*row 3, column 'amount'"):
        read(f'amount,date\n1,2024-01-01\n"{text}",2024-01-01\n')


def test_the_error_names_row_column_value_remedy_and_every_place(read) -> None:
    with pytest.raises(RecordsError) as error:
        read('amount,date\n"1,234",2024-01-01\n5k,03/04/2025\n"(7)",2024-01-01\n')
    assert str(error.value) == (
        "the amount is not a plain number, in file losses.csv, row 2, column 'amount'; seen: '1,234'. Write "
        'plain numbers with a decimal point, or declare the marks of the file: decimal = "," or thousands = '
        '",". Units, signs and brackets are not guessed. 3 rows have this fault: rows 2, 3, 4. Also: the '
        "date is not a date written YYYY-MM-DD (row 3). Write dates as YYYY-MM-DD, or declare the format, "
        'for example date-format = "%d/%m/%Y".'
    )
    assert [finding.row for finding in error.value.findings] == [2, 3, 4, 3]
    assert error.value.exit_code == 2


def test_many_faults_are_counted_not_printed_one_by_one(read) -> None:
    with pytest.raises(RecordsError, match=r"500 rows have this fault: rows 2, 3, 4, 5, 6 and 495 more") as e:
        read("amount,date\n" + "5k,2024-01-01\n" * 500)
    assert sum(finding.count for finding in e.value.findings) == 500
    assert len(e.value.findings) < 30


@pytest.mark.parametrize(
    ("text", "decimal", "thousands", "number"),
    [
        ("1.234,56", ",", ".", 1234.56),
        ("1234,5", ",", ".", 1234.5),
        ("1,234", ".", ",", 1234.0),
        ("-1,234,567.25", ".", ",", -1234567.25),
        ("1 234,5", ",", " ", 1234.5),
        ("1\u00a0234", ".", "\u00a0", 1234.0),
        ("1'234.5", ".", "'", 1234.5),
        ("12,5", ",", None, 12.5),
    ],
)
def test_declared_marks(read, text: str, decimal: str, thousands: str | None, number: float) -> None:
    table = read(f'amount;date\n"{text}";2024-01-01\n', delimiter=";", decimal=decimal, thousands=thousands)
    assert table.amount.tolist() == [number]


@pytest.mark.parametrize("text", ["1,23", "1234,567", "12,34,567", "1,234,56", ",234", "1.5,000"])
def test_groups_that_are_not_of_three_stop(read, text: str) -> None:
    with pytest.raises(RecordsError, match="not a plain number"):
        read(f'amount;date\n"{text}";2024-01-01\n', delimiter=";", thousands=",")


def test_a_decimal_point_is_wrong_in_a_file_with_decimal_commas(read) -> None:
    with pytest.raises(RecordsError, match=r"seen: '12\.5'"):
        read("amount;date\n12.5;2024-01-01\n", decimal=",")


@pytest.mark.parametrize(("decimal", "thousands"), [(";", None), (".", "."), (",", "x")])
def test_impossible_marks_are_refused(read, decimal: str, thousands: str | None) -> None:
    with pytest.raises(InputError, match="mark must be a"):
        read("amount,date\n1,2024-01-01\n", decimal=decimal, thousands=thousands)


@pytest.mark.parametrize(
    "text", ["", "NaN", "nan", "N/A", "na", "null", "NULL", "-", "#REF!", "#N/A", "#VALUE!", " "]
)
def test_markers_for_unknown_are_set_aside_and_never_zero(check, text: str) -> None:
    checked = check(f"amount,date\n5,2024-01-01\n{text},2024-01-01\n")
    finding = checked.findings[0]
    assert (finding.code, finding.action, finding.row) == ("missing-amount", "set aside", 3)
    assert "a missing amount is not zero" in finding.remedy
    assert np.isnan(checked.table.amount[1])
    assert checked.reconciliation.unvalued == 1


@pytest.mark.parametrize("text", ["inf", "-inf", "Infinity", "1e309", "-1e400"])
def test_infinite_amounts_are_set_aside(check, text: str) -> None:
    checked = check(f"amount,date\n5,2024-01-01\n{text},2024-01-01\n")
    assert [(f.code, f.value) for f in checked.findings if f.row] == [("infinite-amount", text)]
    assert checked.reconciliation.amount_read == 5


def test_every_number_is_the_nearest_float64_as_python_reads_it(read) -> None:
    """Independent check of the fast conversion: `float` of the standard library, over all magnitudes."""
    rng = random.Random(3)
    texts = [repr(struct.unpack("<d", rng.randbytes(8))[0]) for _ in range(3000)]
    texts += [f"{rng.randrange(10**25)}.{rng.randrange(10**20)}" for _ in range(500)]
    texts = [text for text in texts if text not in ("nan", "inf", "-inf")]
    table = read("amount,date\n" + "".join(f"{text},2024-01-01\n" for text in texts))
    assert table.amount.tolist() == [float(text) for text in texts]
    assert table.exact.tolist() == [Decimal(text) for text in texts]


def test_huge_amounts_are_set_aside_and_still_valued_exactly(check) -> None:
    checked = check("amount,date\n0.01,2024-01-01\n1e308,2024-01-01\n", tolerance=1.0)
    assert checked.findings[0].code == "large-amount"
    assert checked.reconciliation.amount_read == Decimal("1" + "0" * 308 + ".01")
    assert checked.reconciliation.amount_used == Decimal("0.01")


def test_digits_beyond_float64_are_counted_and_warned_of(check) -> None:
    checked = check("amount,date\n9007199254740993,2024-01-01\n0.1,2024-01-01\n")
    assert [(f.code, f.row) for f in checked.findings if f.row] == [("precision", 2)]
    assert checked.reconciliation.amount_read == Decimal("9007199254740993.1")


@pytest.mark.parametrize(
    "text", ["03/04/2025", "2025/04/03", "4.3.2025", "25-03-04", "20250304", "March 4", "5"]
)
def test_dates_in_other_forms_stop(read, text: str) -> None:
    with pytest.raises(RecordsError, match=r"the date is not a date written YYYY-MM-DD, in .*row 2") as error:
        read(f"amount,date\n1,{text}\n")
    assert "date-format" in str(error.value)


@pytest.mark.parametrize(
    ("text", "date_format"),
    [
        ("04/03/2025", "%d/%m/%Y"),
        ("4/3/2025", "%d/%m/%Y"),
        ("03-04-2025", "%m-%d-%Y"),
        ("20250304", "%Y%m%d"),
        ("04.03.2025", "%d.%m.%Y"),
        ("04-Mar-2025", "%d-%b-%Y"),
        ("2025-3-4", "%Y-%m-%d"),
    ],
)
def test_declared_date_formats(read, text: str, date_format: str) -> None:
    table = read(f"amount,date\n1,{text}\n", date_format=date_format)
    assert str(table.date[0]) == "2025-03-04"


def test_declared_format_holds_for_the_whole_column(read) -> None:
    with pytest.raises(RecordsError, match=r"not in the declared format '%d/%m/%Y'.*seen: '2025-03-04'"):
        read("amount,date\n1,04/03/2025\n2,2025-03-04\n", date_format="%d/%m/%Y")


@pytest.mark.parametrize("date_format", ["%d/%m/%y", "%d/%m", "%x", "%Y-%m-%d %H", "%Y%Y%m%d"])
def test_formats_without_year_month_and_day_are_refused(read, date_format: str) -> None:
    with pytest.raises(InputError, match="must give year, month and day once each"):
        read("amount,date\n1,04/03/25\n", date_format=date_format)


@pytest.mark.parametrize(
    "text", ["2025-02-29", "2025-02-31", "2025-13-01", "2025-00-10", "2025-04-31", "2025-01-00", "0000-01-01"]
)
def test_days_that_do_not_exist_are_set_aside(check, text: str) -> None:
    checked = check(f"amount,date\n1,2024-02-29\n1,{text}\n")
    assert [(f.code, f.row, f.value) for f in checked.findings if f.row] == [("impossible-date", 3, text)]


def test_every_day_of_four_centuries_agrees_with_the_calendar_of_python(read) -> None:
    """Independent check: the proleptic Gregorian calendar of the standard library."""
    import datetime as dt

    days = [dt.date(1800, 1, 1) + dt.timedelta(days=n) for n in range(0, 146_097, 97)]
    table = read("amount,date\n" + "".join(f"1,{day.isoformat()}\n" for day in days))
    assert table.date.astype(object).tolist() == days


def test_time_of_day_is_let_go_and_zones_are_set_aside(check) -> None:
    checked = check(
        "amount,date\n1,2024-01-01 00:00:00\n2,2024-01-01T23:59\n3,2024-01-01T23:59:00Z\n"
        "4,2024-01-01T10:00+05:45\n"
    )
    assert [(f.code, f.row) for f in checked.findings if f.row] == [
        ("date-zone", 4),
        ("date-zone", 5),
        ("time-of-day", 3),
    ]
    assert str(checked.table.date[1]) == "2024-01-01"


def test_missing_dates_are_set_aside(check) -> None:
    checked = check("amount,date\n1,2024-01-01\n2,\n4,N/A\n")
    assert [(f.code, f.row) for f in checked.findings if f.row] == [("missing-date", 3), ("missing-date", 4)]
