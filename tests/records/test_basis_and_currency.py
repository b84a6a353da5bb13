"""The loss that is modelled: in one currency, from the ground up, gross unless asked otherwise."""

import datetime as dt
from decimal import Decimal

import pytest

from lossagg.errors import InputError
from lossagg.records import (
    RecordsError,
    check_losses,
    convert_losses,
    ground_up_losses,
    line_rows,
    prepare_losses,
    read_rates,
    undeclared_deductibles,
)

MIDPOINT = dt.datetime(2026, 7, 2, 12)
TERMS = {"valuation_date": dt.date(2025, 12, 31), "currency": "EUR", "tolerance": 0.9}
RATES = (
    "date,currency,rate\n2024-01-01,USD,0.90\n2024-07-01,USD,0.95\n2023-12-31,JPY,0.0064\n2024-01-01,EUR,1\n"
)


def prepared(table, **options):
    return prepare_losses(check_losses(table, **TERMS), forecast_midpoint=MIDPOINT, **options)


# ---- currency


def test_every_amount_of_a_row_is_converted_at_the_latest_earlier_rate(read, write) -> None:
    table = read(
        "amount,date,currency,paid,outstanding,threshold,policy-limit\n"
        "1000.00,2024-06-30,USD,400,600,100,5000\n1000.00,2024-07-01,usd,1000,0,100,\n"
        "123456,2024-02-29,JPY,123456,0,0,\n77.77,2024-02-29,EUR,77.77,0,10,\n"
    )
    rates = read_rates(write(RATES, "rates.csv"), currency="EUR")
    one = convert_losses(table, rates, "EUR")
    assert one.exact.tolist() == [Decimal("900"), Decimal("950"), Decimal("790.12"), Decimal("77.77")]
    assert one.amount.tolist() == [900.0, 950.0, 790.12, 77.77]
    assert one.numbers["paid"].tolist() == [360.0, 950.0, 790.12, 77.77]
    assert one.numbers["threshold"].tolist() == [90.0, 95.0, 0.0, 10.0]
    assert one.numbers["policy-limit"][0] == 4500.0
    losses = prepared(one)
    assert [(s.step, s.amount_before, s.amount_after) for s in losses.steps[:3]] == [
        ("read", 125533.77, 125533.77),
        ("currency", 125533.77, 2717.89),
        ("check", 2717.89, 2717.89),
    ]
    assert losses.steps[1].note == (
        "3 rows converted to EUR at the latest rate of rates.csv on or before each loss date, to hundredths: "
        "JPY at 0.0064, USD at 0.9 to 0.95"
    )


def test_amounts_too_large_for_hundredths_are_converted_like_the_others(read, write) -> None:
    table = read("amount,date,currency\n1e17,2024-02-01,USD\n1e30,2024-02-01,USD\n")
    one = convert_losses(table, read_rates(write(RATES, "rates.csv"), currency="EUR"), "EUR")
    assert [float(amount) for amount in one.exact] == one.amount.tolist() == [9e16, 9e29]


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ("5,2024-06-30,GBP\n", r"the currency has no rate in rates.csv, in .*row 2, column 'currency'; seen: "
         r"'GBP'. Add its rates or correct the code; the file has EUR, JPY, USD."),
        ("5,2023-12-31,USD\n6,2023-01-01,USD\n", r"rates.csv has no rate of USD on or before the date of the "
         r"loss, in .*row 2, column 'date'; seen: '2023-12-31'. Add earlier quotations. 2 rows have this"),
    ],
)  # fmt: skip
def test_rows_without_a_rate_stop(read, write, rows: str, message: str) -> None:
    rates = read_rates(write(RATES, "rates.csv"), currency="EUR")
    with pytest.raises(RecordsError, match=message):
        convert_losses(read(f"amount,date,currency\n{rows}"), rates, "EUR")


def test_rows_without_a_currency_are_left_for_the_check(read, write) -> None:
    rates = read_rates(write(RATES, "rates.csv"), currency="EUR")
    one = convert_losses(read("amount,date,currency\n5,2024-06-30,\n6,2024-06-30,USD\n"), rates, "EUR")
    losses = prepared(one)
    assert losses.recorded.tolist() == [5.4]
    assert [f.code for f in losses.findings if f.action == "set aside"] == ["missing-currency"]
    with pytest.raises(InputError, match="rates are given but the records have no currency column"):
        convert_losses(read("amount,date\n5,2024-06-30\n"), rates, "EUR")


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ("2024-01-01,USD,0\n", r"the rate is missing, zero, negative or infinite, in file rates.csv, row 2, "
         r"column 'rate'; seen: '0'. Rates are units of the portfolio's currency for one unit of the other"),
        ("2024-01-01,USD,-1\n", "seen: '-1'"),
        ("2024-01-01,USD,\n", "seen: ''"),
        (",USD,1\n", "the date of a rate is missing or no day.*row 2, column 'date'"),
        ("2024-02-31,USD,1\n", "the date of a rate is missing or no day.*seen: '2024-02-31'"),
        ("2024-01-01,dollar,1\n", "the currency of a rate is not a code of three letters.*row 2"),
        ("2024-01-01,EUR,1.1\n", "the rate of the portfolio's own currency, EUR, is not 1.*seen: '1.1'"),
        ("2024-01-01,USD,0.9\n2024-01-01,USD,0.8\n", "the currency has two rates on one day.*row 3"),
        ("2024-01-01,JPY,0.0064\n2024-02-01,JPY,156\n", "the rate looks inverted: the one before it is "
         "0.0064, in file rates.csv, row 3, column 'rate'; seen: '156'"),
        ("2024-01-01,GBP,1.3\n2024-02-01,GBP,0.77\n", "the rate looks inverted: the one before it is 1.3"),
    ],
)  # fmt: skip
def test_rates_that_cannot_be_used_stop(write, rows: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_rates(write("date,currency,rate\n" + rows, "rates.csv"), currency="EUR")


def test_a_currency_that_fell_is_not_taken_for_inverted(write) -> None:
    rows = "date,currency,rate\n2021-01-01,TRY,0.11\n2022-01-01,TRY,0.066\n2023-01-01,TRY,0.03\n"
    assert read_rates(write(rows, "rates.csv"), currency="EUR").rows == 3


def test_a_rate_of_another_year_warns(read, write) -> None:
    rates = read_rates(write("date,currency,rate\n2020-01-01,USD,0.9\n", "rates.csv"), currency="EUR")
    one = convert_losses(read("amount,date,currency\n5,2024-06-30,USD\n"), rates, "EUR")
    found = [f for f in one.findings if f.code == "stale-rate"]
    assert found[0].message == "1 row converted at a rate more than a year older than the loss"


def test_a_table_upside_down_shows_in_the_sizes_by_currency(read, write) -> None:
    """From its first row to its last inverted: 156 euro for a yen. Only the amounts can tell."""
    rates = read_rates(write("date,currency,rate\n2020-01-01,JPY,156\n", "rates.csv"), currency="EUR")
    rows = [f"{1000 + 7 * k},2024-03-0{1 + k % 9},EUR\n" for k in range(12)]
    rows += [f"{150000 + 70 * k},2020-03-0{1 + k % 9},JPY\n" for k in range(6)]
    table = convert_losses(read("amount,date,currency\n" + "".join(rows)), rates, "EUR")
    found = [f.message for f in prepared(table).findings if f.code == "unit-mix-up"]
    assert found == [
        "the median amount of year 2020 is 22,559 times that of all other years",
        "the median amount of currency JPY is 22,559 times that of all other currencies",
    ]


def test_a_year_in_thousands_shows_and_ordinary_years_do_not(read) -> None:
    rows = [f"{1000 + 350 * k},{2019 + k % 5}-03-05\n" for k in range(50)]
    assert not [f for f in prepared(read("amount,date\n" + "".join(rows))).findings if "unit" in f.code]
    rows += [f"{1 + 0.35 * k:.3f},2024-03-05\n" for k in range(10)]
    found = [f for f in prepared(read("amount,date\n" + "".join(rows))).findings if f.code == "unit-mix-up"]
    assert [f.message for f in found] == [
        "the median amount of year 2024 is 1/3,718 of that of all other years"
    ]
    assert found[0].count == 10


# ---- deductibles


def test_amounts_net_of_a_deductible_are_raised_and_truncated(read) -> None:
    """The same claims from the ground up and net of their deductibles are the same losses."""
    net = read(
        "amount,date,deductible,threshold,policy-limit,paid,outstanding\n"
        "500.10,2024-01-01,1000,,9000,500.10,0\n4000,2024-02-01,2000,2500,4000,1000,3000\n"
        "0,2024-03-01,1000,,,0,0\n700,2024-04-01,,,,700,0\n"
    )
    whole = read(
        "amount,date,threshold,policy-limit,paid,outstanding\n1500.10,2024-01-01,1000,10000,1500.10,0\n"
        "6000,2024-02-01,2500,6000,3000,3000\n0,2024-03-01,,,0,0\n950,2024-04-01,300,,950,0\n",
        "ground.csv",
    )
    rows = line_rows(net, None)
    shifted = ground_up_losses(net, rows, deductible=250, reporting_threshold=300)
    assert shifted.exact.tolist() == whole.exact.tolist()
    one, two = prepared(shifted, reporting_threshold=300), prepared(whole, reporting_threshold=300)
    for name in ("amount", "threshold", "censored", "recorded"):
        assert getattr(one, name).tolist() == getattr(two, name).tolist(), name
    assert one.years.to_dicts() == two.years.to_dicts()
    step = one.steps[1]
    assert (step.step, step.amount_before, step.amount_after) == ("ground-up", 5200.10, 8450.10)
    assert step.note.startswith("3 rows net of their deductible raised by it")


def test_deductibles_of_odd_digits_are_added_exactly(read) -> None:
    table = read("amount,date,deductible\n0.001,2024-01-01,0.0005\n1e20,2024-01-01,1\n1.5,2024-01-01,2.25\n")
    shifted = ground_up_losses(table, line_rows(table, None))
    assert shifted.exact.tolist() == [Decimal("0.0015"), Decimal("100000000000000000001"), Decimal("3.75")]


@pytest.mark.parametrize(
    ("cell", "message"),
    [
        ("", "declared net of a deductible, but 1 row have no usable one, in file losses.csv, row 2, column "
         "'deductible'; seen: None. Fill the deductible column, or give the line a deductible."),
        ("-5", "no usable one.*seen: -5.0"),
    ],
)  # fmt: skip
def test_deductibles_that_cannot_be_used_stop(read, cell: str, message: str) -> None:
    table = read(f"amount,date,deductible\n5,2024-01-01,{cell}\n")
    with pytest.raises(InputError, match=message):
        ground_up_losses(table, line_rows(table, None))


def test_a_deductible_column_nobody_declared_warns(read) -> None:
    found = undeclared_deductibles(read("amount,date,deductible\n5,2024-01-01,100\n6,2024-01-01,0\n"))
    assert [f.message for f in found] == [
        "1 row with a deductible; the amounts are taken as ground-up",
    ]
    assert undeclared_deductibles(read("amount,date\n5,2024-01-01\n")) == []


# ---- recoveries


def test_losses_are_gross_unless_asked_for_net(read) -> None:
    """With recoveries, what is modelled is gross; netting is a step that says so."""
    table = read(
        "amount,date,recoveries,event\n1000.10,2024-01-01,200.05,\n3000,2024-02-01,3000,\n"
        "900,2024-03-01,500,\n400,2024-04-01,,E\n500,2024-04-02,100,E\n"
    )
    gross = prepared(table, reporting_threshold=600)
    assert gross.recorded.tolist() == gross.amount.tolist() == [1000.10, 3000.0, 900.0, 900.0]
    assert "recoveries" not in {step.step for step in gross.steps}
    net = prepared(table, reporting_threshold=600, net_of_recoveries=True)
    assert net.amount.tolist() == [800.05, 800.0]
    assert net.recorded.tolist() == [1000.10, 900.0]
    assert net.net
    assert [(s.step, s.count_after, s.amount_before, s.amount_after) for s in net.steps[2:5]] == [
        ("recoveries", 5, 5800.1, 2000.05),
        ("events", 4, 2000.05, 2000.05),
        ("threshold", 2, 2000.05, 1600.05),
    ]
    aside = [(f.code, f.row) for f in net.findings if f.action == "set aside"]
    assert aside == [("below-threshold-as-modelled", 3), ("below-threshold-as-modelled", 4)]
    assert str(net.reconciliation) == "5 read = 3 used + 2 excluded; 5800.10 = 1900.10 + 3900"


def test_a_loss_recovered_in_full_is_no_net_loss(read) -> None:
    losses = prepared(
        read("amount,date,recoveries\n5,2024-01-01,5\n6,2024-01-01,1\n"), net_of_recoveries=True
    )
    assert losses.amount.tolist() == [5.0]
