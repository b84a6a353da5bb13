"""Every term of cover through every engine: the same figures, retained and ceded adding up, and the
published and computed check values."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.cover import Corridor, Cover, Reinstatements, Surplus
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.crosscheck import crosscheck
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.reinstated import reinstated_premium
from lossagg.engines.simulation import Simulation
from lossagg.errors import DoesNotExistError, InputError
from lossagg.families import Exponential, Lognormal, Lomax, NegativeBinomial, Pareto, Poisson, SizeTable

FIRE = Line(
    name="fire",
    frequency=Poisson(mean=3.0),
    severity=Lognormal(mu=6.0, sigma=1.2),
    expense=0.12,
    sum_insured=4000.0,
)
THEFT = Line(
    name="theft",
    frequency=NegativeBinomial(mean=2.0, dispersion=0.5),
    severity=Exponential(mean=900.0),
    expense=0.05,
    sum_insured=2500.0,
)
PLAIN = tuple(replace(line, expense=0.0) for line in (FIRE, THEFT))
COVERS = {
    "disappearing": Cover(deductible=400, disappears_at=1500, limit=5000),
    "inclusive": Cover(deductible=400, limit=3000, limit_includes_deductible=True),
    "share first": Cover(deductible=300, limit=1500, share=0.6, order=["share", "deductible", "limit"]),
    "share between": Cover(deductible=300, limit=1500, share=0.6, order=["deductible", "share", "limit"]),
    "share before the year": Cover(
        deductible=300, annual_limit=3000, share=0.6, order=["deductible", "share", "annual-limit"]
    ),
    "corridor": Cover(corridor=Corridor(low=3000, high=6000, share=0.7), annual_limit=12_000),
    "reinstatements": Cover(
        deductible=500, limit=1500, reinstatements=Reinstatements(number=1, rates=1.0), annual_retention=300
    ),
    "surplus": Cover(surplus=Surplus(kept_line=1000.0, lines=2.0), annual_limit=9000),
    "stop loss": Cover.stop_loss(premium=5000.0, retention_ratio=1.1, limit_ratio=0.8),
}


@pytest.mark.parametrize("name", COVERS)
def test_three_engines_agree_on_every_term(name: str) -> None:
    """The gate itself is the judge: brackets of the exact engines, four standard errors of the simulation."""
    agree(Book(lines=PLAIN, covers=(PlacedCover(name="cover", terms=COVERS[name]),)))


@pytest.mark.parametrize("basis", ["inside", "outside", "pro-rata"])
def test_three_engines_agree_on_expense(basis: str) -> None:
    """A layer, then a stop loss on what it leaves of losses and expense."""
    layer = PlacedCover(name="layer", terms=Cover(deductible=500, limit=2000, expense_basis=basis))
    stop = PlacedCover(
        name="stop",
        terms=Cover(annual_retention=4000, annual_limit=3000, expense_basis="inside"),
        after=("layer",),
    )
    agree(Book(lines=(FIRE, THEFT), covers=(layer, stop)))


def test_the_engines_agree_on_nets_of_nets() -> None:
    """Three covers, each on what the others leave, to the net."""
    covers = (
        PlacedCover(name="a", terms=Cover(deductible=400, limit=1000, share=0.5)),
        PlacedCover(name="b", terms=Cover(deductible=300, disappears_at=900), after=("a",)),
        PlacedCover(name="c", terms=Cover(share=0.3), after=("a", "b")),
        PlacedCover(name="d", terms=Cover(annual_retention=900), after=("a", "b", "c")),
    )
    agree(Book(lines=PLAIN, covers=covers))


def agree(book: Book) -> None:
    """Every subject but a net that takes two annual sums comes from all three engines."""
    results = {
        "fourier": Fourier().book(book),
        "panjer": Panjer().book(book),
        "simulation": Simulation(years=20_000, seed=5).book(book),
    }
    check = crosscheck(book, results, (0.9, 0.99))
    assert check.agrees, check.summary
    for reasons in check.refused.values():
        assert reasons == {NET: reasons[NET]}
        assert "annual terms on a part of the losses" in reasons[NET]
    for result in results.values():
        losses = result.losses
        if NET not in losses:
            continue
        ceded = sum(losses[Subject("cover", cover.name)].mean() for cover in book.covers)
        assert losses[NET].mean() + ceded == pytest.approx(losses[GROSS].mean(), rel=2e-4)


amounts = st.sampled_from([0.0, 300.0, 900.0])
event_covers = st.builds(
    lambda base, basis, **terms: Cover(**base, **terms, expense_basis=basis),
    st.sampled_from(
        [
            {},
            {"deductible": 300.0, "limit": 1500.0},
            {"deductible": 300.0, "franchise": True},
            {"deductible": 300.0, "disappears_at": 800.0},
            {"deductible": 300.0, "limit": 1500.0, "limit_includes_deductible": True},
            {"deductible": 300.0, "retained_cap": 500.0},
            {"limit": 700.0, "reinstatements": Reinstatements(number=1, rates=1.0)},
        ]
    ),
    st.just("inside"),
    annual_retention=amounts,
    corridor=st.sampled_from([None, Corridor(low=500.0, high=1500.0, share=0.5)]),
    share=st.sampled_from([0.4, 1.0]),
)


@given(event_covers)
@settings(derandomize=True, deadline=None, max_examples=40)
def test_retained_and_ceded_add_to_gross_in_every_year(terms: Cover) -> None:
    """Year by year, whatever the terms, expense included; nobody pays less than nothing."""
    book = Book(lines=(FIRE, THEFT), covers=(PlacedCover(name="cover", terms=terms),))
    losses = Simulation(years=300, seed=9).book(book).losses
    ceded, net = losses[Subject("cover", "cover")].annual, losses[NET].annual
    np.testing.assert_allclose(ceded + net, losses[GROSS].annual, rtol=1e-12, atol=1e-9)
    assert ceded.min() >= 0
    assert net.min() >= -1e-9


@pytest.mark.parametrize("engine", [Fourier(), Panjer()], ids=["fourier", "panjer"])
def test_a_cover_without_terms_changes_nothing(engine: Fourier | Panjer) -> None:
    law = Poisson(mean=3.0), Lognormal(mu=6.0, sigma=1.2)
    alone, covered = engine.annual_loss(*law), engine.annual_loss(*law, Cover())
    for level in (0.5, 0.99):
        assert covered.value_at_risk(level) == alone.value_at_risk(level)
    assert covered.mean() == alone.mean()


@pytest.mark.parametrize(
    "law", [Lognormal(mu=9.0, sigma=1.5), Lomax(alpha=1.4, scale=2e4), Exponential(mean=2e4)]
)
def test_layers_end_to_end_cost_the_whole(law) -> None:
    """The layers of a tower add to the ground-up cost to 1e-10."""
    ends = [0.0, 1e4, 2.5e4, 1e5, 4e5, np.inf]
    layers = [Cover(deductible=low, limit=high - low) for low, high in pairwise(ends)]
    cost = [Fourier(points=2**12).annual_loss(Poisson(mean=7.0), law, layer).mean() for layer in layers]
    assert sum(cost) == pytest.approx(7.0 * law.mean(), rel=1e-10)


@pytest.mark.parametrize("kind", ["ordinary", "cap"])
def test_cost_falls_and_is_convex_in_the_deductible(kind: str) -> None:
    law = Poisson(mean=5.0), Lomax(alpha=2.5, scale=3000.0)
    grid = np.linspace(0.0, 8000.0, 17)
    terms = {"annual_limit": 20_000.0} if kind == "cap" else {}
    cost = [Fourier(step=10.0).annual_loss(*law, Cover(deductible=d, **terms)).mean() for d in grid]
    assert (np.diff(cost) < 0).all()
    if kind == "ordinary":  # an annual limit cuts off the worst years, and convexity with them
        assert (np.diff(cost, 2) > 0).all()


def test_corridor_costs_a_layer_of_the_year() -> None:
    """Common practice, no source: k (E[min(S, c2)] - E[min(S, c1)]) is taken back."""
    law = Poisson(mean=3.0), Exponential(mean=1000.0)
    whole = Fourier().annual_loss(*law)
    cover = Cover(corridor=Corridor(low=2000, high=5000, share=0.4))
    taken_back = 0.4 * whole.layer_mean(2000, 5000)
    assert Fourier().annual_loss(*law, cover).mean() == pytest.approx(whole.mean() - taken_back, rel=1e-9)


EXACT = pytest.mark.parametrize("engine", [Fourier(), Panjer()], ids=["fourier", "panjer"])


@EXACT
@pytest.mark.parametrize(
    ("number", "rate", "recoveries", "premium"),
    [
        (0, 1.0, 3.73262099949, 3.73262099949),
        (1, 1.0, 4.39975886482, 3.20387409292),
        (2, 1.0, 4.47379293614, 3.10685267589),
        (1, 0.5, 4.39975886482, 3.70777325009),
        (3, 0.0, 4.47962869789, 4.47962869789),
    ],
)
def test_d33_initial_premium_with_reinstatements(engine, number, rate, recoveries, premium) -> None:
    """Sundt (1991), Walhin and Paris (1999): published formula, own numbers."""
    size = SizeTable(sizes=[2, 4, 6, 8, 10], probabilities=[0.3, 0.2, 0.15, 0.1, 0.25])
    cover = Cover(limit=10, reinstatements=Reinstatements(number=number, rates=rate))
    result = reinstated_premium(engine.annual_loss(Poisson(mean=0.8), size, cover), cover)
    assert result.recoveries == pytest.approx(recoveries, rel=1e-9)
    assert result.initial == pytest.approx(premium, rel=1e-9)
    assert result.initial + result.reinstatement == pytest.approx(recoveries, rel=1e-9)


@EXACT
def test_reinstatement_premium_of_the_practice_note(engine) -> None:
    """Computed here, two routes: Poisson(2) on {1, 2, 3}, 2 in excess of 1, one at 100 %."""
    size = SizeTable(sizes=[1, 2, 3], probabilities=[0.5, 0.3, 0.2])
    cover = Cover(deductible=1, limit=2, reinstatements=Reinstatements(number=1, rates=1.0))
    for share in (1.0, 0.25):
        terms = replace(cover, share=share)
        result = reinstated_premium(engine.annual_loss(Poisson(mean=2), size, terms), terms)
        assert result.recoveries == pytest.approx(share * 1.3380243637, abs=1e-10)
        assert result.initial == pytest.approx(share * 0.8792629863, abs=1e-10)
        assert result.reinstatement == pytest.approx(share * 0.4587613774, abs=1e-10)
    inner = Cover(deductible=1, limit=2, annual_retention=1, annual_limit=2)
    assert engine.annual_loss(Poisson(mean=2), size, inner).mean() == pytest.approx(0.6094157124, abs=1e-10)


def test_reinstatement_premiums_of_simulated_years_average_to_the_exact_one() -> None:
    """Paid reinstatements year by year: their mean is the premium computed from the lattice."""
    cover = Cover(deductible=500, limit=1500, reinstatements=Reinstatements(number=2, rates=[0.5, 1.0]))
    law = Poisson(mean=2.0), Exponential(mean=1000.0)
    exact = reinstated_premium(Fourier().annual_loss(*law, cover), cover)
    paid = Simulation(years=50_000, seed=2).annual_loss(*law, cover).annual
    premiums = cover.reinstatement_premium(paid, exact.initial)
    error = premiums.std() / np.sqrt(premiums.size)
    assert abs(premiums.mean() - exact.reinstatement) < 4 * error


def test_no_premium_without_reinstatements_or_without_a_mean() -> None:
    heavy = Poisson(mean=1.0), Pareto(alpha=0.8, minimum=1.0)
    loss = Fourier(points=2**10).annual_loss(*heavy)
    with pytest.raises(InputError, match="no reinstatements"):
        reinstated_premium(loss, Cover())
    cover = Cover(limit=5, reinstatements=Reinstatements(number=1))
    with pytest.raises(DoesNotExistError, match="recoveries are infinite"):
        reinstated_premium(loss, cover)


def test_d13_prescription_plan() -> None:
    """SOA exam question, value from memory, recomputed: Lomax(2, 2000), nothing to 250, 75 % to 2,250,
    nothing to 5,100, 95 % beyond: 1,163. Two covers side by side."""
    line = Line(name="loss", frequency=Poisson(mean=1.0), severity=Lomax(alpha=2.0, scale=2000.0))
    covers = (
        PlacedCover(name="lower", terms=Cover(deductible=250, limit=2000, share=0.75)),
        PlacedCover(name="upper", terms=Cover(deductible=5100, share=0.95)),
    )
    result = Fourier(points=2**12).book(Book(lines=(line,), covers=covers)).losses
    cost = sum(result[Subject("cover", name)].mean() for name in ("lower", "upper"))
    assert cost == pytest.approx(1162.662248, rel=1e-9)


@pytest.mark.parametrize(
    ("deductible", "limited", "franchise"),
    [(250, 209.8765, 0.034294), (500, 360.0, 0.104), (1000, 555.5556, 0.259259), (2000, 750.0, 0.5),
     (5000, 918.3673, 0.801749)],
)  # fmt: skip
def test_closed_forms_of_the_practice_note(deductible: float, limited: float, franchise: float) -> None:
    """Computed here, closed form, Lomax(3, 2000), mean 1,000: L(d), and a franchise's ratio."""
    law = Poisson(mean=1.0), Lomax(alpha=3.0, scale=2000.0)
    engine = Fourier(points=2**12)
    ordinary = engine.annual_loss(*law, Cover(deductible=deductible)).mean()
    assert 1000 - ordinary == pytest.approx(limited, abs=1e-4)
    under = engine.annual_loss(*law, Cover(deductible=deductible, franchise=True)).mean()
    assert 1 - under / 1000 == pytest.approx(franchise, abs=1e-6)
    # Disappearing, by the integral of the payment: L(g) less g / (g - d) (L(g) - L(d)) is kept.
    gone = 2.0 * deductible
    vanishing = engine.annual_loss(*law, Cover(deductible=deductible, disappears_at=gone)).mean()
    severity = law[1]
    low, high = float(severity.limited_mean(deductible)), float(severity.limited_mean(gone))
    above = float(severity.sf(gone))
    expected = gone / (gone - deductible) * (high - low) - gone * above + (1000 - high) + gone * above
    assert vanishing == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (
            lambda: Line(name="a", frequency=Poisson(mean=1), severity=Exponential(mean=1), expense=8),
            "Write 0.08",
        ),
        (
            lambda: Line(name="a", frequency=Poisson(mean=1), severity=Exponential(mean=1), sum_insured=0),
            "sum_insured must be above 0",
        ),
        (
            lambda: Book(lines=(FIRE,), covers=(PlacedCover(name="c", terms=Cover()),)),
            "does not say on which basis.*line 'fire'",
        ),
        (
            lambda: Book(lines=PLAIN, covers=(PlacedCover(name="c", terms=Cover(expense_basis="inside")),)),
            "none of its lines carries any",
        ),
        (
            lambda: Book(
                lines=(replace(PLAIN[0], sum_insured=None),),
                covers=(PlacedCover(name="c", terms=COVERS["surplus"]),),
            ),
            "one line of each band",
        ),
        (
            lambda: Book(
                lines=(FIRE,),
                covers=(
                    PlacedCover(name="c", terms=Cover(share=0.5, expense_basis="outside")),
                    PlacedCover(name="d", terms=Cover(deductible=5, expense_basis="inside"), after=("c",)),
                ),
            ),
            "in no fixed proportion",
        ),
        (
            lambda: Book(
                lines=PLAIN,
                covers=(
                    PlacedCover(name="c", terms=COVERS["corridor"]),
                    PlacedCover(name="d", terms=Cover(deductible=5), after=("c",)),
                ),
            ),
            "event terms cannot follow a cover with annual terms",
        ),
    ],
)
def test_places_without_a_meaning_are_refused(make, message: str) -> None:
    with pytest.raises(InputError, match=message):
        make()


@EXACT
@pytest.mark.parametrize("deductible", [2e5, 1e6, 1.2e7])
def test_a_layer_next_to_out_of_reach(engine, deductible: float) -> None:
    """Attached once in 1e5, 1e21 and 1e260 years: the cost keeps its digits and nothing divides by zero."""
    loss = engine.annual_loss(Poisson(mean=7.0), Exponential(mean=2e4), Cover(deductible=deductible))
    cost = 7 * 2e4 * np.exp(-deductible / 2e4)
    assert loss.mean() == pytest.approx(cost, rel=1e-9)
    assert loss.value_at_risk(0.999) == 0.0
    assert loss.tail_value_at_risk(0.999) == pytest.approx(1000 * cost, rel=1e-9)
