"""Trend by an index, trend of the frequency, and events cut by an hours window."""

import datetime as dt
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.errors import InputError
from lossagg.records import (
    Development,
    check_losses,
    prepare_losses,
    read_losses,
    read_trend_index,
)

MIDPOINT = dt.datetime(2026, 7, 2, 12)
YEARLY = "year,index\n" + "".join(f"{year},{100 + 5 * (year - 2020)}\n" for year in range(2020, 2027))


@pytest.fixture
def prepare(check):
    def _prepare(content: str, **options):
        reading = {key: options.pop(key) for key in ("first_year", "valuation_date") if key in options}
        how = {"forecast_midpoint": MIDPOINT, **options}
        return prepare_losses(check(content, **reading), **how)

    return _prepare


# ---- index


def test_a_yearly_index_carries_losses_and_thresholds(prepare, write) -> None:
    index = read_trend_index(write(YEARLY, "index.csv"))
    losses = prepare("amount,date\n1000,2020-02-01\n1000,2025-12-31\n", trend=index, reporting_threshold=500)
    assert losses.amount.tolist() == [1300.0, 1000.0 * (130 / 125)]
    assert losses.threshold.tolist() == [650.0, 500.0 * (130 / 125)]
    assert losses.years.threshold == pytest.approx([500 * 130 / (100 + 5 * k) for k in range(6)])
    assert losses.largest_threshold == 650.0
    assert losses.steps[-1].note == (
        "index 'index' of index.csv: 130 of 2026, the year of the midpoint of the forecast period, over that "
        "of each loss date"
    )


def test_a_monthly_index_under_another_heading(prepare, write) -> None:
    months = [f"{2024 + k // 12}-{1 + k % 12:02d}" for k in range(36)]
    text = "month,construction prices,source\n"
    text += "".join(f"{m},{100 + k},own\n" for k, m in enumerate(months))
    index = read_trend_index(write(text, "index.csv"), columns={"index": "construction prices"})
    losses = prepare("amount,date\n1000,2024-01-31\n1000,2025-06-01\n", trend=index, reporting_threshold=10)
    assert losses.amount == pytest.approx([1000 * 130 / 100, 1000 * 130 / 117])
    assert losses.largest_threshold == pytest.approx(10 * 130 / 100)
    assert index.rows == 36
    unread = [f.message for f in losses.findings if f.file == "index.csv"]
    assert unread == ["1 column is not read: 'source'"]
    assert repr(index) == "TrendIndex('index.csv', 2024-01 to 2026-12)"


def test_an_index_of_steady_growth_is_the_rate_up_to_its_step(prepare, write) -> None:
    """A monthly index at 6 % a year differs from the rate by less than one month of it."""
    text = "month,index\n" + "".join(
        f"{2015 + k // 12}-{1 + k % 12:02d},{1.06 ** (k / 12)}\n" for k in range(144)
    )
    content = "amount,date\n" + "".join(f"1000,20{15 + k}-03-{10 + k}\n" for k in range(10))
    by_index = prepare(content, trend=read_trend_index(write(text, "index.csv")))
    by_rate = prepare(content, trend=0.06)
    assert np.abs(by_index.amount / by_rate.amount - 1).max() < 1.06 ** (1 / 12) - 1


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("year,index\n2020,1\n2022,1\n", r"the index misses 1 year between its first and its last, in file "
         r"index.csv, column 'year'; seen: \['2021'\]. Add them; an index is not filled in."),
        ("month,index\n2020-11,1\n2021-02,1\n", r"misses 2 months.*seen: \['2020-12', '2021-01'\]"),
        ("year,index\n2020,1\n2020,2\n", "the year stands in more than one row.*row 3"),
        ("year,index\n2020,0\n", "the index is missing, zero, negative or infinite.*row 2.*seen: '0'"),
        ("year,index\n2020,\n", "the index is missing, zero, negative or infinite.*seen: ''"),
        ("year,index\n2020,1k\n", "the index is not a plain number"),
        ("year,index\n20,1\n", "not a calendar year between 1900 and 2200.*seen: '20'"),
        ("month,index\n2020-13,1\n", "the month is not written YYYY-MM.*seen: '2020-13'"),
        ("year,month,index\n2020,2020-01,1\n", "an index needs either a year or a month column"),
        ("place,index\nX,1\n", "an index needs either a year or a month column"),
        ("year,index\n2020,100\n2021,205\n", r"the index changes by \+105% from 2020 to 2021.*seen: '100 to "
         "205'. Correct the value, or bring the index to one base"),
        ("year,index\n2020,100\n2021,40\n", "the index changes by -60% from 2020 to 2021"),
        ("year,value\n2020,1\n", "the required column 'index' is missing"),
    ],
)  # fmt: skip
def test_indices_that_cannot_be_used_stop(write, text: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_trend_index(write(text, "index.csv"))


def test_an_index_that_does_not_reach_stops(prepare, write) -> None:
    index = read_trend_index(write("year,index\n2021,1\n2022,1\n2023,1\n", "index.csv"))
    with pytest.raises(InputError) as error:
        prepare("amount,date\n1,2020-01-01\n1,2023-01-01\n", trend=index)
    assert str(error.value) == (
        "the index has no value for 2 of the periods needed, in file index.csv, column 'index'; seen: "
        "['2020', '2026']. Add them: from the first loss, or the first year of the window, to the midpoint "
        "of the forecast period; a value to come is an assumption and has to be stated."
    )


# ---- frequency


def test_frequency_trend_weighs_the_exposure_of_the_past(prepare) -> None:
    """Events grow by 10 % a year: a year ago stands for 1/1.1 of the exposure of the forecast year."""
    losses = prepare(
        "amount,date\n1,2023-01-01\n", frequency_trend=0.10, first_year=2023,
        valuation_date=dt.date(2025, 12, 31),
    )  # fmt: skip
    middles = [dt.datetime(2023, 7, 2, 12), dt.datetime(2024, 7, 2), dt.datetime(2025, 7, 2, 12)]
    expected = [1.1 ** -((MIDPOINT - middle) / dt.timedelta(days=365.25)) for middle in middles]
    assert losses.years.forecast_exposure == pytest.approx(expected, rel=1e-13)
    assert prepare("amount,date\n1,2023-01-01\n").years.forecast_exposure.tolist() == [1.0] * 3
    assert losses.amount.tolist() == [1.0]


def test_frequency_trend_out_of_range_is_refused(prepare, write) -> None:
    with pytest.raises(InputError, match=r"between -0\.5 and 1"):
        prepare("amount,date\n1,2024-01-01\n", frequency_trend=1.0)
    with pytest.raises(InputError, match="the trend of the frequency must be a rate per year"):
        prepare("amount,date\n1,2024-01-01\n", frequency_trend=read_trend_index(write(YEARLY, "index.csv")))


# ---- hours window


def test_an_event_longer_than_the_window_is_several(prepare) -> None:
    """72 hours are three days: 1 to 3 May, then from the next claim, 5 May, on, then 9 May."""
    content = "amount,date,event\n" + "".join(
        f"{amount},2024-05-{day:02d},{event}\n"
        for amount, day, event in [
            (1, 1, "S"), (2, 3, "S"), (4, 5, "S"), (8, 7, "S"), (16, 9, "S"), (32, 4, "T"), (64, 9, ""),
        ]
    )  # fmt: skip
    whole = prepare(content)
    assert sorted(whole.recorded.tolist()) == [31.0, 32.0, 64.0]
    parted = prepare(content, hours_window=72)
    assert sorted(parted.recorded.tolist()) == [3.0, 12.0, 16.0, 32.0, 64.0]
    assert sorted(parted.claims.tolist()) == [1, 1, 1, 2, 2]
    step = parted.steps[2]
    assert (step.step, step.count_before, step.count_after, step.amount_after) == ("events", 7, 5, 127.0)
    assert step.note.endswith("events longer than 72 hours divided from their first claim on: 2 more losses")


def test_a_part_below_the_threshold_is_no_fault_of_the_file(prepare) -> None:
    content = "amount,date,event\n900,2024-05-01,S\n30,2024-06-05,S\n50,2024-06-05,\n"
    losses = prepare(content, hours_window=24, reporting_threshold=100)
    assert [(f.code, f.row) for f in losses.findings if f.action == "set aside"] == [
        ("below-threshold", 4), ("below-threshold-as-modelled", 3),
    ]  # fmt: skip


@pytest.mark.parametrize("hours", [0, 36, -24, 72.0, True])
def test_windows_that_are_no_days_are_refused(prepare, hours: object) -> None:
    with pytest.raises(
        InputError, match=r"the hours window must be a whole number of days.*Write 72 for three"
    ):
        prepare("amount,date,event\n1,2024-01-01,E\n", hours_window=hours)


@settings(derandomize=True, deadline=None, max_examples=60)
@given(
    claims=st.lists(st.tuples(st.integers(0, 40), st.sampled_from("AB")), min_size=1, max_size=25),
    days=st.integers(1, 20),
)
def test_windows_against_a_plain_loop(tmp_path_factory, claims, days: int) -> None:
    """Claim by claim in order of date: a claim joins the running period of its event, or begins one."""
    path = tmp_path_factory.mktemp("window") / "losses.csv"
    start = dt.date(2024, 1, 1)
    rows = [f"{2**k},{start + dt.timedelta(days=day)},{event}" for k, (day, event) in enumerate(claims)]
    path.write_text("amount,date,event\n" + "\n".join(rows) + "\n")
    checked = check_losses(
        read_losses(path), valuation_date=dt.date(2025, 12, 31), currency="EUR", tolerance=0.9
    )
    losses = prepare_losses(checked, forecast_midpoint=MIDPOINT, hours_window=24 * days)
    sums = []
    for event in "AB":
        begins = None
        for day, amount in sorted((day, 2**k) for k, (day, name) in enumerate(claims) if name == event):
            if begins is None or day - begins >= days:
                begins = day
                sums.append(0)
            sums[-1] += amount
    assert sorted(losses.recorded.tolist()) == sorted(map(float, sums))


# ---- the chain of steps


@settings(derandomize=True, deadline=None, max_examples=60)
@given(
    rows=st.lists(
        st.tuples(
            st.decimals(0, 9999, places=2), st.integers(0, 1500), st.sampled_from(["", "", "E", "F"]),
            st.sampled_from(["open", "closed"]), st.decimals(0, 50, places=2),
        ),
        min_size=1, max_size=30,
    ),
    net=st.booleans(),
    window=st.sampled_from([None, 24, 168]),
    open_claims=st.sampled_from(["as-recorded", "censor", "develop"]),
    threshold=st.sampled_from([0.0, 40.0]),
)  # fmt: skip
def test_each_step_begins_with_what_the_one_before_left(
    tmp_path_factory, rows, net: bool, window, open_claims: str, threshold: float
) -> None:
    path = tmp_path_factory.mktemp("steps") / "losses.csv"
    start = dt.date(2021, 6, 1)
    lines = [
        f"{amount},{start + dt.timedelta(days=day)},{event},{status},{back}"
        for amount, day, event, status, back in rows
    ]
    path.write_text("amount,date,event,status,recoveries\n" + "\n".join(lines) + "\n")
    checked = check_losses(
        read_losses(path),
        valuation_date=dt.date(2025, 12, 31),
        currency="EUR",
        tolerance=1.0,
        first_year=2021,
    )
    losses = prepare_losses(
        checked, forecast_midpoint=MIDPOINT, reporting_threshold=threshold, net_of_recoveries=net,
        hours_window=window, open_claims=open_claims,
        development=Development(count_factors=(2.0, 1.2), open_factors=(1.5,)),
    )  # fmt: skip
    for before, after in pairwise(losses.steps):
        assert after.count_before == before.count_after, after.step
        assert after.amount_before == before.amount_after, after.step
    last = losses.steps[-1]
    assert last.count_after == len(losses) == losses.years.losses.sum()
    assert last.amount_after == pytest.approx(losses.amount.sum(), abs=1e-9)
    if not net and open_claims != "develop":
        # Without a factor the money is exact: what the steps leave is what the reconciliation says is used.
        trend = next(step for step in losses.steps if step.step == "trend")
        assert trend.amount_before == float(losses.reconciliation.amount_used)
        assert np.array_equal(losses.amount, losses.recorded)
