"""From checked rows to modelled losses: events, thresholds, censoring, trend, years, steps."""

import datetime as dt
import random
from math import fsum

import numpy as np
import pytest

from lossagg.errors import InputError
from lossagg.records import RecordsError, midpoint, prepare_losses, read_exposure

MIDPOINT = dt.datetime(2026, 7, 2, 12)


@pytest.fixture
def prepare(check):
    def _prepare(content: str, exposure=None, **options):
        split = ("forecast_midpoint", "reporting_threshold", "trend")
        how = {"forecast_midpoint": MIDPOINT, **{key: options.pop(key) for key in split if key in options}}
        options["reporting_threshold"] = how.get("reporting_threshold")
        return prepare_losses(check(content, **options), exposure=exposure, **how)

    return _prepare


def test_claims_of_one_event_are_one_loss(prepare) -> None:
    """Rows of 8k, 9k and 10k that share an event are one loss of 27k, not three."""
    losses = prepare(
        "amount,date,event\n8000,2024-05-02,E\n10000,2024-05-01,E\n9000,2024-05-03,E\n5000,2024-06-01,\n",
        reporting_threshold=5000,
    )
    assert losses.recorded.tolist() == [27000.0, 5000.0]
    assert losses.claims.tolist() == [3, 1]
    assert [str(day) for day in losses.date] == ["2024-05-01", "2024-06-01"]
    deductible = 10_000.0
    assert np.minimum(losses.recorded, deductible)[0] == 10_000.0
    assert losses.years.losses.tolist() == [2, 0]
    assert losses.years.claims.tolist() == [4, 0]


def test_trend_of_five_years_at_five_percent(prepare) -> None:
    """5 % for 5 years takes 20,000 to 25,525.63 and the threshold 10,000 to 12,762.82.

    Five years are 1826.25 days, so the midpoint is at six in the morning.
    """
    losses = prepare(
        "amount,date\n20000,2020-07-01\n",
        forecast_midpoint=dt.datetime(2025, 7, 1, 6),
        reporting_threshold=10000,
        trend=0.05,
    )
    assert round(float(losses.amount[0]), 2) == 25525.63
    assert round(float(losses.threshold[0]), 2) == 12762.82


def test_trend_zero_reproduces_the_records_bit_for_bit(prepare) -> None:
    rng = random.Random(1)
    amounts = [rng.lognormvariate(9, 2) for _ in range(300)]
    text = "amount,date\n" + "".join(f"{a!r},20{rng.randrange(10, 25)}-03-05\n" for a in amounts)
    losses = prepare(text, trend=0.0)
    assert sorted(losses.amount.tolist()) == sorted(amounts)
    assert np.array_equal(losses.amount, losses.recorded)


@pytest.mark.parametrize("trend", [0.07, -0.03])
def test_trend_against_day_counts_of_the_standard_library(prepare, trend: float) -> None:
    days = [dt.date(2011, 2, 28), dt.date(2016, 2, 29), dt.date(2025, 12, 31)]
    losses = prepare("amount,date\n" + "".join(f"1000,{day}\n" for day in days), trend=trend)
    for day, amount in zip(days, losses.amount, strict=True):
        years = (MIDPOINT - dt.datetime.combine(day, dt.time())) / dt.timedelta(days=365.25)
        assert amount == pytest.approx(1000 * (1 + trend) ** years, rel=1e-14)


@pytest.mark.parametrize("trend", [-0.5, 1.0, 4, 5.0, float("nan"), "0.04", True])
def test_trend_out_of_range_is_refused(prepare, trend: object) -> None:
    with pytest.raises(InputError, match=r"between -0.5 and 1.* Write 0.04 for 4 % a year\."):
        prepare("amount,date\n1,2024-01-01\n", trend=trend)


def test_midpoint_of_a_period() -> None:
    assert midpoint(dt.date(2027, 1, 1), dt.date(2027, 12, 31)) == dt.datetime(2027, 7, 2, 12)
    assert midpoint(dt.date(2028, 1, 1), dt.date(2028, 12, 31)) == dt.datetime(2028, 7, 2)
    assert midpoint(dt.date(2027, 1, 1), dt.date(2027, 1, 1)) == dt.datetime(2027, 1, 1, 12)
    with pytest.raises(InputError, match="ends before it starts"):
        midpoint(dt.date(2027, 1, 2), dt.date(2027, 1, 1))


def test_threshold_is_that_of_the_event_and_small_events_are_counted(prepare) -> None:
    losses = prepare(
        "amount,date,event,threshold\n4000,2024-01-01,A,5000\n4000,2024-01-01,A,\n100,2024-01-01,B,\n"
        "700,2024-01-01,C,600\n2000,2024-01-01,D,\n",
        reporting_threshold=1000,
    )
    assert losses.recorded.tolist() == [700.0, 2000.0, 8000.0]
    assert losses.threshold.tolist() == [600.0, 1000.0, 5000.0]
    assert losses.reconciliation.to_dict()["excluded"] == 1
    assert [(f.code, f.row) for f in losses.findings if f.row and f.action == "set aside"] == [
        ("below-threshold", 4)
    ]
    step = losses.steps[3]
    assert (step.step, step.count_before, step.count_after) == ("threshold", 4, 3)
    assert (step.amount_before, step.amount_after) == (10800.0, 10700.0)
    assert step.note.startswith("1 event below the reporting threshold set aside")


def test_too_many_below_the_reporting_threshold_stop(prepare) -> None:
    with pytest.raises(RecordsError, match=r"66\.7% of rows .*by reason: below-threshold 2"):
        prepare(
            "amount,date\n10,2024-01-01\n20,2024-01-01\n2000,2024-01-01\n",
            reporting_threshold=1000,
            tolerance=0.2,
        )


def test_an_event_is_censored_when_one_of_its_claims_reached_its_limit(prepare) -> None:
    losses = prepare(
        "amount,date,event,policy-limit\n100,2024-01-01,A,100\n7,2024-01-01,A,\n99.99,2024-01-01,B,100\n"
        "5,2024-01-01,C,\n"
    )
    assert dict(zip(losses.recorded.tolist(), losses.censored.tolist(), strict=True)) == {
        107.0: True,
        99.99: False,
        5.0: False,
    }


def test_years_without_losses_stay_and_the_last_is_observed_in_part(prepare) -> None:
    losses = prepare(
        "amount,date,status\n10,2021-05-01,closed\n20,2021-06-01,open\n5,2024-02-29,closed\n",
        valuation_date=dt.date(2024, 9, 30),
        trend=0.1,
    )
    years = losses.years
    assert years.year.tolist() == [2021, 2022, 2023, 2024]
    assert years.fraction.tolist() == [1.0, 1.0, 1.0, 274 / 366]
    assert years.exposure.tolist() == [1.0] * 4
    assert years.observed_exposure.tolist() == [1.0, 1.0, 1.0, 274 / 366]
    assert years.losses.tolist() == [2, 0, 0, 1]
    assert years.open.tolist() == [1, 0, 0, 0]
    assert years.amount.tolist() == [30.0, 0.0, 0.0, 5.0]
    assert years.largest.tolist() == [20.0, 0.0, 0.0, 5.0]
    assert years.trended_amount[0] == fsum(losses.amount[:2])
    assert losses.supported_level == 0.75
    codes = {f.code: f.message for f in losses.findings}
    assert codes["open-claims"].startswith("1 open claim, taken at the amounts as they stand")
    assert "begin in 2021, the year of the first loss" in codes["window-from-first-loss"]
    assert set(years.to_dicts()[0]) >= {
        *("year", "exposure", "fraction", "losses", "amount", "trended_amount", "largest", "threshold")
    }


def test_a_whole_last_year_is_observed_in_full(prepare) -> None:
    assert prepare("amount,date\n1,2025-01-01\n").years.fraction.tolist() == [1.0]


def test_declared_first_year_adds_years_without_losses(prepare) -> None:
    losses = prepare("amount,date\n1,2024-01-01\n", first_year=2019)
    assert losses.years.year.tolist() == list(range(2019, 2026))
    assert "window-from-first-loss" not in {f.code for f in losses.findings}


def test_missing_status_is_a_caution(prepare) -> None:
    found = [f for f in prepare("amount,date\n1,2024-01-01\n").findings if f.code == "open-claims"]
    assert found[0].message == (
        "the records do not say which claims are open; all amounts are taken as final"
    )


def test_thresholds_of_years_and_the_level_above_which_the_history_is_complete(prepare) -> None:
    losses = prepare(
        "amount,date,threshold\n900,2023-06-01,\n2000,2024-06-01,1500\n",
        reporting_threshold=500,
        trend=0.1,
        first_year=2022,
    )

    def trended(amount: float, moment: dt.datetime) -> float:
        return amount * 1.1 ** ((MIDPOINT - moment) / dt.timedelta(days=365.25))

    middles = [dt.datetime(2022, 7, 2, 12), dt.datetime(2023, 7, 2, 12), dt.datetime(2024, 7, 2)]
    expected = [trended(t, m) for t, m in zip((500, 500, 1500), middles, strict=True)]
    assert losses.years.threshold[:3] == pytest.approx(expected, rel=1e-14)
    assert losses.largest_threshold == pytest.approx(trended(1500, dt.datetime(2024, 1, 1)), rel=1e-14)
    assert losses.largest_threshold >= losses.threshold.max()


def test_steps_show_the_way_from_rows_to_losses(prepare) -> None:
    losses = prepare(
        "amount,date,event,recoveries\n8000,2024-05-02,E,100\n9000,2024-05-03,E,\n-1,2024-01-01,,\n"
        "10,2024-01-01,,\n",
        reporting_threshold=100,
        trend=0.05,
    )
    rows = [(s.step, s.count_before, s.count_after, s.amount_before, s.amount_after) for s in losses.steps]
    assert rows == [
        ("read", 4, 4, 17009.0, 17009.0),
        ("check", 4, 3, 17009.0, 17010.0),
        ("events", 3, 2, 17010.0, 17010.0),
        ("threshold", 2, 1, 17010.0, 17000.0),
        ("trend", 1, 1, 17000.0, float(losses.amount.sum())),
    ]
    assert "amounts are gross, recoveries of 100.00 are kept apart" in losses.steps[0].note
    assert set(losses.steps[0].to_dict()) == {
        *("step", "count_before", "count_after", "amount_before", "amount_after", "note")
    }


def test_no_loss_and_no_window_stops_but_a_declared_window_counts_zero_years(prepare) -> None:
    text = "amount,date\n0,2024-01-01\n"
    with pytest.raises(InputError, match="no loss is used and no observation window is known"):
        prepare(text)
    losses = prepare(text, first_year=2021)
    assert len(losses) == 0
    assert losses.years.losses.tolist() == [0] * 5
    assert losses.largest_threshold == 0.0


def test_several_lines_are_prepared_one_by_one(check) -> None:
    checked = check("amount,date,line\n1,2024-01-01,A\n2,2024-01-01,B\n", lines=["A", "B"])
    with pytest.raises(InputError, match="the records are of several lines"):
        prepare_losses(checked, forecast_midpoint=MIDPOINT)
    assert prepare_losses(checked.for_line("B"), forecast_midpoint=MIDPOINT).recorded.tolist() == [2.0]


def test_one_event_in_two_lines_is_a_loss_of_each(check) -> None:
    checked = check("amount,date,line,event\n1,2024-01-01,A,S\n2,2024-01-01,B,S\n", lines=["A", "B"])
    for line, amount in (("A", 1.0), ("B", 2.0)):
        losses = prepare_losses(checked.for_line(line), forecast_midpoint=MIDPOINT)
        assert losses.recorded.tolist() == [amount]


def test_results_are_read_only(prepare) -> None:
    losses = prepare("amount,date\n1,2024-01-01\n")
    with pytest.raises(ValueError, match="read-only"):
        losses.amount[0] = 2.0


def test_shuffled_rows_give_the_same_bits(prepare) -> None:
    rng = random.Random(5)
    rows = []
    for k in range(200):
        event = f"E{rng.randrange(60)}" if k % 2 else ""
        rows.append(
            f"{rng.lognormvariate(8, 2):.3f},20{rng.randrange(15, 25)}-0{rng.randrange(1, 9)}-11,{event},"
            f"{rng.choice(['', '0.5'])},{rng.choice(['', '1e9'])}"
        )
    heading = "amount,date,event,threshold,policy-limit\n"
    first = prepare(heading + "\n".join(rows) + "\n", trend=0.037, reporting_threshold=20)
    for _ in range(3):
        rng.shuffle(rows)
        again = prepare(heading + "\n".join(rows) + "\n", trend=0.037, reporting_threshold=20)
        for name in ("amount", "threshold", "censored", "date", "year", "recorded", "claims"):
            assert getattr(first, name).tobytes() == getattr(again, name).tobytes(), name
        assert first.years.to_dicts() == again.years.to_dicts()
        assert first.steps == again.steps
        assert first.reconciliation == again.reconciliation
        assert first.largest_threshold == again.largest_threshold


# ---- exposure


def test_exposure_by_year(prepare, write) -> None:
    path = write("Year,Payroll\n2023,100\n2024,110.5\n2025,120\n2026,130\n", "exposure.csv")
    exposure = read_exposure(path, columns={"exposure": "Payroll"})
    losses = prepare("amount,date\n1,2024-01-01\n", exposure)
    assert losses.years.year.tolist() == [2023, 2024, 2025]
    assert losses.years.exposure.tolist() == [100.0, 110.5, 120.0]
    assert losses.base == exposure.base == "Payroll"
    assert exposure.of_year(2026) == 130.0
    assert exposure.of_year(2027) is None
    assert exposure.rows == 4


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("year,exposure\n2024,0\n", "exposure is missing, zero, negative or infinite, in .*row 2.*seen: '0'"),
        ("year,exposure\n2024,-1\n", "seen: '-1'. Supply it"),
        ("year,exposure\n2024,\n", "seen: ''"),
        ("year,exposure\n2024,NaN\n", "seen: 'NaN'"),
        ("year,exposure\n2024,5k\n", "the exposure is not a plain number"),
        ("year,exposure\n24,5\n", "not a calendar year between 1900 and 2200.*seen: '24'"),
        ("year,exposure\n2024.5,5\n", "seen: '2024.5'"),
        ("year,exposure\n2024,5\n2024,6\n", "the year stands in more than one row, in .*row 3"),
        ("year,exposre\n2024,5\n", r"required column 'exposure' is missing.*Did you mean 'exposre'\?"),
    ],
)
def test_bad_exposures_stop(write, text: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_exposure(write(text, "exposure.csv"))


def test_a_year_without_exposure_stops(prepare, write) -> None:
    exposure = read_exposure(write("year,exposure\n2022,1\n2024,1\n2025,1\n", "exposure.csv"))
    with pytest.raises(InputError) as error:
        prepare("amount,date\n1,2020-01-01\n", exposure)
    assert str(error.value) == (
        "the exposure file has no row for 3 of the years observed, in file exposure.csv, column 'exposure'; "
        "seen: [2020, 2021, 2023]. Add the years, or declare a later first year of the observation window."
    )


def test_a_tenfold_jump_is_warned_of(prepare, write) -> None:
    table = read_exposure(write("year,exposure\n2022,1\n2023,9.9\n2024,99\n2025,9\n", "exposure.csv"))
    assert [f.message for f in table.findings] == [
        "the exposure changes tenfold or more from 2023 to 2024",
        "the exposure changes tenfold or more from 2024 to 2025",
    ]
    losses = prepare("amount,date\n1,2024-01-01\n", table)
    assert [f for f in losses.findings if f.code == "exposure-jump"] == list(table.findings)


def test_exposures_of_several_lines(prepare, write) -> None:
    path = write("year,exposure,line\n2025,1,A\n2024,2,A\n2024,500,B\n2025,600,B\n", "exposure.csv")
    table = read_exposure(path, lines=["A", "B"])
    assert table.for_line("a").year.tolist() == [2024, 2025]
    assert table.for_line("B").of_year(2024) == 500.0
    assert table.findings == ()
    with pytest.raises(InputError, match="the exposure is of several lines"):
        table.of_year(2024)
    with pytest.raises(InputError, match=r"no rows for a line.*seen: 'C'"):
        table.for_line("C")
    with pytest.raises(RecordsError, match=r"the line is not one of the portfolio.*seen: 'A'"):
        read_exposure(path, lines=["B"])
