"""A replayed year is the simulated one: its events add up to the annual figures, cover by cover."""

import numpy as np
import pytest

from lossagg.cover import Cover
from lossagg.cover.clauses import Corridor, Surplus
from lossagg.cover.reinstatement import Reinstatements
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.replay import Replay, nearest_years
from lossagg.engines.simulation import Simulation
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.errors import InputError
from lossagg.families import GeneralizedPareto, Lognormal, NegativeBinomial, Poisson, SizeTable, Spliced

SPLICED = Spliced(
    body=Lognormal(mu=9.0, sigma=1.2),
    tail=GeneralizedPareto(shape=0.4, scale=30_000.0, threshold=40_000.0),
    threshold=40_000.0,
    tail_probability=0.1,
)
LINES = (
    Line(name="hull", frequency=NegativeBinomial(mean=3.0, dispersion=0.4), severity=SPLICED),
    Line(
        name="crew",
        frequency=Poisson(mean=6.0),
        severity=SizeTable(sizes=[0, 5_000, 90_000], probabilities=[0.3, 0.6, 0.1]),
    ),
    Line(name="quay", frequency=Poisson(mean=0.7), severity=Lognormal(mu=11.0, sigma=1.0), sum_insured=4e5),
    Line(name="legal", frequency=Poisson(mean=2.0), severity=Lognormal(mu=8.0, sigma=1.0), expense=0.1),
)
COVERS = (
    PlacedCover(name="surplus", terms=Cover(surplus=Surplus(kept_line=1e5, lines=2.0)), lines=("quay",)),
    PlacedCover(
        name="primary",
        terms=Cover(deductible=5_000.0, limit=40_000.0, share=0.9),
        lines=("hull", "crew", "quay"),
        after=("surplus",),
    ),
    PlacedCover(
        name="capped",
        terms=Cover(
            deductible=20_000.0,
            limit=80_000.0,
            retained_cap=50_000.0,
            annual_retention=10_000.0,
            corridor=Corridor(low=30_000.0, high=60_000.0, share=0.5),
            annual_limit=150_000.0,
        ),
        lines=("hull", "crew"),
        after=("primary",),
    ),
    PlacedCover(
        name="lawyers",
        terms=Cover(
            deductible=2_000.0,
            limit=10_000.0,
            expense_basis="pro-rata",
            annual_limit=15_000.0,
            share=0.5,
            order=("deductible", "share", "limit", "annual-limit"),
        ),
        lines=("legal",),
    ),
    PlacedCover(
        name="top",
        terms=Cover(deductible=100_000.0, limit=200_000.0, reinstatements=Reinstatements(number=1)),
        lines=("hull",),
    ),
    PlacedCover(
        name="stop",
        terms=Cover(annual_retention=20_000.0, share=0.8),
        lines=("hull", "crew"),
        after=("capped",),
    ),
)
DEPENDENCES = (
    SharedFactor(name="activity", lines=("hull", "legal"), on="frequency", variance=0.2),
    SharedFactor(name="prices", lines=("hull", "crew"), on="inflation", variance=0.02, law="lognormal"),
    Copula(name="harbour", lines=("quay", "cargo"), correlation=0.6, degrees_of_freedom=4.0),
    CommonShock(name="storm", lines=("crew", "ferry"), rate=1.5),
)
MORE = (
    Line(name="cargo", frequency=Poisson(mean=1.0), severity=Lognormal(mu=9.0, sigma=1.0)),
    Line(name="ferry", frequency=Poisson(mean=2.0), severity=Lognormal(mu=9.0, sigma=0.5)),
)
PLAIN = Book(lines=LINES, covers=COVERS)
TIED = Book(lines=(*LINES, *MORE), covers=COVERS, dependences=DEPENDENCES)
YEARS = BLOCK_YEARS + 500
ASKED = (1, 2, 777, BLOCK_YEARS, BLOCK_YEARS + 1, YEARS)


@pytest.fixture(scope="module", params=[PLAIN, TIED], ids=["independent", "dependent"])
def run(request):
    result = Simulation(years=YEARS, seed=9).book(request.param)
    annual = {subject: loss.annual for subject, loss in result.losses.items()}
    return Replay(request.param, 9, YEARS), annual


@pytest.mark.parametrize("year", ASKED)
def test_every_annual_figure_is_met_to_the_cent(run, year):
    """In the first block, at its end, in an incomplete last one; lines, gross, covers, net."""
    replay, annual = run
    book, again = replay.book, replay.year(year)
    assert set(again.amounts) == set(book.subjects)
    for subject, amount in again.amounts.items():
        assert abs(amount - annual[subject][year - 1]) < 0.005, subject
    for line in book.lines:
        own = [event.cost_of(line.name) for event in again.events]
        assert sum(own) == pytest.approx(annual[Subject("line", line.name)][year - 1], abs=0.005)
    assert sum(event.cost for event in again.events) == pytest.approx(annual[GROSS][year - 1], abs=0.005)
    paid = {payment.cover: payment.paid for payment in again.covers}
    assert again.amounts[GROSS] - sum(paid.values()) == pytest.approx(again.amounts[NET], abs=0.005)


def test_every_payment_is_the_end_of_its_steps(run):
    """Event by event and for the year, over forty years: the last term acting leaves what is paid."""
    replay, _ = run
    for year in range(1, 41):
        again = replay.year(year)
        for event in again.events:
            for payment in event.payments:
                end = payment.steps[-1].amount if payment.steps else event.cost
                assert payment.paid == pytest.approx(end, abs=1e-6), payment
        for payment in again.covers:
            assert payment.paid == pytest.approx(payment.steps[-1].amount, abs=1e-6), payment


def test_the_steps_name_the_terms_in_their_order():
    again = Replay(PLAIN, 9, YEARS).year(3)
    steps = {
        payment.cover: [step.operation for step in payment.steps]
        for event in again.events
        for payment in event.payments
    }
    assert steps["capped"] == ["left by primary", "deductible", "limit"]
    assert steps["lawyers"] == ["deductible", "share", "limit", "with expense"]
    by_year = {payment.cover: [step.operation for step in payment.steps] for payment in again.covers}
    assert by_year["primary"] == ["paid of the events", "share"]
    assert by_year["capped"] == [
        "paid of the events",
        "annual retention",
        "corridor",
        "excess over the retained cap",
        "annual limit",
    ]
    assert by_year["lawyers"] == ["paid of the events", "annual limit"]
    assert by_year["stop"] == ["paid of the events", "less capped", "annual retention", "share"]


def test_steps_by_hand():
    """A loss of 70,000 after a primary of 40,000 above 5,000 at 90 %: 34,000 left, then 14,000."""
    line = Line(
        name="hull", frequency=Poisson(mean=5.0), severity=SizeTable(sizes=[70_000], probabilities=[1])
    )
    covers = [cover for cover in COVERS if cover.name in ("primary", "capped")]
    book = Book(
        lines=(line, LINES[1], LINES[2]),
        covers=(PlacedCover(name="primary", terms=covers[0].terms, lines=("hull", "crew")), covers[1]),
    )
    again = Replay(book, 1, 10).year(1)
    primary, capped = next(event for event in again.events if event.line == "hull").payments
    assert [(step.operation, step.amount) for step in primary.steps] == [
        ("deductible", 65_000.0),
        ("limit", 40_000.0),
    ]
    assert [(step.operation, round(step.amount, 6)) for step in capped.steps] == [
        ("left by primary", 34_000.0),
        ("deductible", 14_000.0),
        ("limit", 14_000.0),
    ]


def test_factors_and_shocks_are_told(run):
    replay, _ = run
    again = [replay.year(year) for year in range(1, 31)]
    if not replay.book.dependences:
        assert all(not year.factors and not any(event.shock for event in year.events) for year in again)
        return
    assert set(again[0].factors) == {"activity", "prices"}
    for year in again:
        for event in year.events:
            assert event.shock == (event.line == "crew + ferry") == bool(event.parts)
            if event.shock:
                assert [part.line for part in event.parts] == ["crew", "ferry"]
                assert sum(part.cost for part in event.parts) == pytest.approx(event.cost)
                for payment in event.payments:
                    parts = sum(part.paid.get(payment.cover, 0.0) for part in event.parts)
                    assert parts == pytest.approx(payment.paid)
    assert any(event.shock for year in again for event in year.events)


def test_the_nearest_years_and_their_order():
    amounts = np.array([5.0, 1.0, 9.0, 4.0, 6.0, 5.5, 4.0, 4.0])
    years = np.arange(1, 9)
    assert nearest_years(years, amounts, 5.1, 3) == [1, 6, 5]
    assert nearest_years(years, amounts, 4.0, 2) == [4, 7]
    assert nearest_years(years[::-1], amounts[::-1], 4.0, 2) == [4, 7]
    assert nearest_years(years, amounts, 0.0, 20) == [2, 4, 7, 8, 1, 6, 5, 3]


@pytest.mark.parametrize("year", [0, 11, True, 2.0])
def test_other_years_are_refused(year):
    with pytest.raises(InputError, match="the run simulated years 1 to 10"):
        Replay(PLAIN, 9, 10).year(year)
