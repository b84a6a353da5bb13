"""Records with a valuation history: the latest row is the claim, the earlier ones are its development."""

import datetime as dt
import random

import numpy as np
import pytest

from lossagg.errors import InputError
from lossagg.records import Development, RecordsError, prepare_losses

MIDPOINT = dt.datetime(2026, 7, 2, 12)
HEAD = "claim,valuation,date,amount,status\n"
# Three years, three valuations at the end of the year. 2023: A grows 100, 150, 150; B is known late, at 60.
# 2024: C 200, 240. 2025: D 80, open; E nil.
ROWS = [
    "A,2023-12-31,2023-03-01,100,open",
    "A,2024-12-31,2023-03-01,150,open",
    "A,2025-12-31,2023-03-01,150,closed",
    "B,2024-12-31,2023-09-01,60,closed",
    "B,2025-12-31,2023-09-01,60,closed",
    "C,2024-12-31,2024-05-01,200,open",
    "C,2025-12-31,2024-05-01,240,open",
    "D,2025-12-31,2025-02-01,80,open",
    "E,2025-12-31,2025-04-01,0,closed",
]
TAILS = {"count_tail": 1.0, "amount_tail": 1.1, "open_tail": 1.05}


@pytest.fixture
def prepare(check):
    def _prepare(rows: list[str], **options):
        split = ("development", "open_claims", "reporting_threshold", "net_of_recoveries", "hours_window")
        how = {key: options.pop(key) for key in split if key in options}
        content = options.pop("head", HEAD) + "\n".join(rows) + "\n"
        return prepare_losses(check(content, **options), forecast_midpoint=MIDPOINT, **how)

    return _prepare


def test_the_latest_valuation_is_the_claim(prepare) -> None:
    losses = prepare(ROWS)
    assert losses.recorded.tolist() == [150.0, 60.0, 240.0, 80.0]
    assert str(losses.reconciliation) == "9 read = 4 used + 5 excluded; 1040 = 530 + 510"
    codes = [(f.code, f.row) for f in losses.findings if f.action == "set aside"]
    assert codes == [
        ("nil-claim", 10), ("superseded", 2), ("superseded", 3), ("superseded", 5), ("superseded", 7),
    ]  # fmt: skip


def test_triangles_and_factors_by_hand(prepare) -> None:
    """2023 goes 1, 2, 2 events and 100, 210, 210; 2024 goes 1, 1 and 200, 240."""
    developed = prepare(ROWS, development=Development(**TAILS), open_claims="develop").developed
    history = developed.factors.history
    nan = np.nan
    np.testing.assert_array_equal(history.counts, [[1, 2, 2], [1, 1, nan], [1, nan, nan]])
    np.testing.assert_array_equal(history.amounts, [[100, 210, 210], [200, 240, nan], [80, nan, nan]])
    assert developed.factors.count.tolist() == [1.0, 1.0, 1.5]
    assert developed.factors.amount == pytest.approx([1.1, 1.1, 1.1 * 450 / 300])
    # Open at age 1: A 100 and C 200, both still open a year later, at 390. At age 2: A 150, closed at 150.
    assert developed.factors.open == pytest.approx([1.05, 1.0, 390 / 300])
    assert developed.amount_chain_ladder == pytest.approx([231.0, 264.0, 132.0])
    assert [str(date) for date in history.dates] == ["2025-12-31", "2024-12-31", "2023-12-31"]


def test_open_claims_reach_the_fit_at_ultimate_and_no_loss_is_invented(prepare) -> None:
    losses = prepare(ROWS, development=Development(**TAILS), open_claims="develop")
    assert losses.amount == pytest.approx([150.0, 60.0, 240.0 * 1.0, 80.0 * 1.3])
    assert losses.recorded.tolist() == [150.0, 60.0, 240.0, 80.0]
    years = losses.years
    assert years.losses.tolist() == [2, 1, 1]
    assert years.ultimate_losses.tolist() == [2.0, 1.0, 1.5]
    assert years.reported == pytest.approx([1, 1, 1 / 1.5])
    assert years.forecast_exposure == pytest.approx([1, 1, 1 / 1.5])
    steps = {step.step: step for step in losses.steps}
    assert (steps["open claims"].amount_before, steps["open claims"].amount_after) == (530.0, 554.0)
    assert (
        steps["open claims"].note == "2 open claims brought to ultimate by the factor of the age of its year"
    )
    assert steps["development"].note == (
        "factors history, chain-ladder: 4 events reported stand for 4.5, 530.00 recorded for 627.00; the "
        "exposure of each year counts for the part of its events that is reported, no loss is invented"
    )
    assert not [f for f in losses.findings if f.code == "open-claims"]


def test_open_claims_as_recorded_warn_and_censored_ones_are_marked(prepare) -> None:
    assert [f.code for f in prepare(ROWS).findings if f.action == "warn"][-1] == "open-claims"
    losses = prepare(ROWS, open_claims="censor")
    assert losses.censored.tolist() == [False, False, True, True]
    assert losses.amount.tolist() == [150.0, 60.0, 240.0, 80.0]
    assert "2 open claims taken as at least what is recorded" in losses.steps[3].note


def test_bornhuetter_ferguson_beside_the_chain_ladder(prepare) -> None:
    wanted = Development(
        count_factors=(1.5,), amount_factors=(1.8,), method="bornhuetter-ferguson",
        a_priori_count=2.0, a_priori_amount=150.0,
    )  # fmt: skip
    losses = prepare(ROWS, development=wanted)
    assert losses.developed.count_chain_ladder.tolist() == [2.0, 1.0, 1.5]
    assert losses.developed.count_bornhuetter_ferguson == pytest.approx([2, 1, 1 + 2 / 3])
    assert losses.developed.amount_bornhuetter_ferguson[2] == pytest.approx(80 + 150 * (1 - 1 / 1.8))
    assert losses.years.ultimate_losses[2] == pytest.approx(1 + 2 / 3)
    assert losses.years.reported[2] == pytest.approx(1 / 1.5)
    assert losses.amount.tolist() == losses.recorded.tolist()


def test_counts_are_of_events_above_the_threshold_as_they_stood(prepare) -> None:
    """At a threshold of 120 claim A counts from its second valuation on, B never."""
    losses = prepare(
        [*ROWS, "F,2025-12-31,2025-03-01,500,open"], reporting_threshold=120,
        development=Development(count_factors=(1.0,), amount_tail=1.0),
    )  # fmt: skip
    np.testing.assert_array_equal(
        losses.developed.factors.history.counts, [[0, 1, 1], [1, 1, np.nan], [1, np.nan, np.nan]]
    )


def test_a_valuation_date_within_the_year(prepare) -> None:
    """By 30 June 2024 one loss of 2024 was known; a year later two of those, and three of the second half."""
    rows = [
        "A,2024-06-30,2024-02-01,10,closed",
        "A,2025-06-30,2024-02-01,10,closed",
        "B,2025-06-30,2024-03-01,10,closed",
        *(f"C{k},2025-06-30,2024-09-0{k},10,closed" for k in (1, 2, 3)),
        "D,2025-06-30,2025-01-01,10,closed",
    ]
    losses = prepare(rows, development=Development(count_tail=1.0), valuation_date=dt.date(2025, 6, 30))
    assert losses.developed.factors.count.tolist() == [1.0, 2.0]
    assert losses.years.losses.tolist() == [5, 1]
    assert losses.years.ultimate_losses.tolist() == [5.0, 2.0]
    assert losses.years.forecast_exposure == pytest.approx([1.0, 181 / 365 / 2])


def test_claims_with_a_faulty_row_stay_out_of_the_triangle(prepare) -> None:
    rows = [*ROWS, "G,2024-12-31,2024-06-01,-5,open", "G,2025-12-31,2024-06-01,70,open"]
    history = prepare(rows, development=Development(count_tail=1.0)).developed.factors.history
    assert history.dropped == 1
    assert history.counts[1, :2].tolist() == [1, 1]


def test_the_order_of_the_rows_does_not_matter(prepare) -> None:
    rng = random.Random(3)
    rows = []
    for k in range(120):
        year, amount = rng.randrange(2018, 2026), rng.lognormvariate(7, 1)
        for valued in range(year + rng.randrange(2), 2026):
            amount *= rng.choice([1.0, 1.1, 0.95])
            status = rng.choice(["open", "closed"])
            rows.append(f"K{k},{valued}-12-31,{year}-0{rng.randrange(1, 10)}-17,{amount:.2f},{status}")
    settings = {"development": Development(**TAILS), "open_claims": "develop", "reporting_threshold": 300}
    first = prepare(rows, **settings)
    for _ in range(3):
        rng.shuffle(rows)
        again = prepare(rows, **settings)
        assert again.amount.tobytes() == first.amount.tobytes()
        assert again.developed.to_dict() == first.developed.to_dict()
        assert again.steps == first.steps
        assert again.years.to_dicts() == first.years.to_dicts()


@pytest.mark.parametrize(
    ("rows", "head", "message"),
    [
        (
            ["2025-12-31,2024-01-01,5"], "valuation,date,amount\n",
            "rows carry a valuation date but no claim.*row 2, column 'valuation'.*Map the column",
        ),
        (
            ["A,2025-12-31,2024-01-01,5", "A,2025-12-31,2024-01-01,6"], "claim,valuation,date,amount\n",
            "the claim stands twice at one valuation date with different content.*row 3.*Keep one",
        ),
    ],
)  # fmt: skip
def test_valuations_that_cannot_be_told_apart_stop(prepare, rows: list[str], head: str, message: str) -> None:
    with pytest.raises(RecordsError, match=message):
        prepare(rows, head=head)


def test_rows_that_cannot_be_placed_in_time_are_set_aside(prepare) -> None:
    rows = [
        "A,2026-03-31,2024-01-01,9", "A,2025-12-31,2024-01-01,5", ",2025-12-31,2024-01-01,6",
        "B,,2024-01-01,7", "C,2025-12-31,2024-01-01,8", "C,2025-12-31,2024-01-01,8",
    ]  # fmt: skip
    losses = prepare(rows, head="claim,valuation,date,amount\n")
    assert losses.recorded.tolist() == [5.0, 8.0]
    assert [(f.code, f.row) for f in losses.findings if f.action == "set aside"] == [
        ("duplicate-row", 7), ("later-valuation", 2), ("missing-valuation", 5), ("missing-claim", 4),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("rows", "head", "settings", "message"),
    [
        (
            ["2024-01-01,5"], "date,amount\n", {"development": Development(count_tail=1.0)},
            "factors are to be estimated from the records, which have no valuation history, in file "
            "losses.csv. Give a row per claim and valuation",
        ),
        (
            ROWS[-2:], HEAD, {"development": Development(count_tail=1.0)},
            r"need valuations in the year up to the valuation date and in the year before it.*"
            r"seen: \['2025-12-31'\]",
        ),
        (
            ROWS, HEAD, {"open_claims": "develop", "development": Development(count_tail=1.0)},
            "open claims are to be developed but there are no factors for them.*Give open-factors by age",
        ),
        (ROWS, HEAD, {"open_claims": "guess"}, "unknown treatment of open claims; seen: 'guess'. Use as-rec"),
        (
            ["2024-01-01,5"], "date,amount\n", {"open_claims": "censor"},
            r"open claims are to be treated \(censor\) but the records have no status",
        ),
    ],
)  # fmt: skip
def test_histories_that_do_not_support_what_is_asked(prepare, rows, head, settings, message: str) -> None:
    with pytest.raises(InputError, match=message):
        prepare(rows, head=head, **settings)


def test_a_history_drawn_at_random_is_developed_to_its_truth(prepare) -> None:
    """Losses reported late, at 70 % until they are closed: rate, amounts and open claims come out right.

    100 losses a year; ten draws, and the mean within four standard errors of them.
    """
    rates, amounts, reported = [], [], []
    for seed in range(10):
        rng = np.random.default_rng(seed)
        rows, truth = [], 0.0
        for k, year in enumerate(np.repeat(np.arange(2018, 2026), rng.poisson(100, 8))):
            day = dt.date(int(year), 1, 1) + dt.timedelta(days=int(rng.integers(365)))
            known = day + dt.timedelta(days=int(rng.exponential(120)))
            closed = known + dt.timedelta(days=int(rng.exponential(200)))
            size = float(rng.lognormal(8, 0.5))
            truth += size
            for valued in (dt.date(v, 12, 31) for v in range(known.year, 2026)):
                state = "closed" if closed <= valued else "open"
                rows.append(f"C{k},{valued},{day},{size * (1 if state == 'closed' else 0.7):.2f},{state}")
        losses = prepare(
            rows, first_year=2018, development=Development(count_tail=1.0, amount_tail=1.0, open_tail=1 / 0.7)
        )
        rates.append(losses.years.losses.sum() / losses.years.forecast_exposure.sum())
        amounts.append(losses.developed.amount_chain_ladder.sum() / truth)
        reported.append(losses.years.losses.sum() / 8)
        assert losses.developed.factors.open == pytest.approx(1 / 0.7, rel=1e-4)
    error = np.std(rates, ddof=1) / np.sqrt(10)
    assert abs(np.mean(rates) - 100) < 4 * error
    assert np.mean(reported) < 100 - 2 * error
    assert abs(np.mean(amounts) - 1) < 4 * np.std(amounts, ddof=1) / np.sqrt(10)
