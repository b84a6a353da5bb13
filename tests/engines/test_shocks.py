"""Events that hit several lines: one event to every cover, against plain loops over the events."""

import itertools

import numpy as np
import pytest

from lossagg.cover import Cover, Surplus
from lossagg.engines.blocks import block_events, prepare_line, run_block
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.by_line import detail_subjects
from lossagg.engines.crosscheck import crosscheck
from lossagg.engines.dependence import CommonShock, SharedFactor
from lossagg.engines.fourier import Fourier
from lossagg.engines.joint import joint_block
from lossagg.engines.panjer import Panjer
from lossagg.engines.replay import Replay
from lossagg.engines.shocks import joint_payments, shock_losses
from lossagg.engines.simulation import Simulation
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.families import Exponential, Lognormal, Poisson, SizeTable

HULL = Line(name="hull", frequency=Poisson(mean=2.0), severity=Lognormal(mu=9.0, sigma=1.2))
CARGO = Line(name="cargo", frequency=Poisson(mean=3.0), severity=Lognormal(mu=8.0, sigma=1.5))
QUAY = Line(name="quay", frequency=Poisson(mean=1.5), severity=Exponential(mean=20_000.0))
STORM = CommonShock(name="storm", lines=("hull", "cargo"), rate=0.8)
PRICES = SharedFactor(name="prices", lines=("cargo", "quay"), on="inflation", variance=0.05)
COVERS = (
    PlacedCover(name="primary", terms=Cover(deductible=10_000.0, limit=30_000.0, share=0.9)),
    PlacedCover(
        name="second",
        terms=Cover(deductible=5_000.0, retained_cap=12_000.0, annual_limit=90_000.0),
        after=("primary",),
    ),
    PlacedCover(
        name="hulls only",
        terms=Cover(deductible=20_000.0, franchise=True),
        lines=("hull",),
        after=("primary",),
    ),
)
BOOK = Book(lines=(HULL, CARGO, QUAY), covers=COVERS, dependences=(STORM, PRICES))
SEED, YEARS = 6, 3000


def events_of(book, block, years):
    """Year by year, the events as mappings from line to loss."""
    joint = joint_block(book.lines, book.dependences, seed=SEED, block=block)
    found = [[] for _ in range(years)]
    lines = [prepare_line(line, book, book.subjects) for line in book.lines]
    for line in lines:
        counts, sizes = block_events(line, joint, seed=SEED, block=block, first=0, last=years)
        for year, own in enumerate(np.split(sizes, np.cumsum(counts)[:-1])):
            found[year] += [{line.name: float(x)} for x in own]
    tables = {line.name: line.sizes for line in lines}
    (shock,) = shock_losses(book, tables, joint, seed=SEED, block=block)
    for k, year in enumerate(shock.year.tolist()):
        if year < years:
            found[year].append({name: float(own[k]) for name, own in shock.losses.items()})
    return found


def naive_year(events):
    """The year's figures by the words of the terms of COVERS, event by event."""
    figures = dict.fromkeys(("hull", "cargo", "quay", "largest", "primary", "hulls only"), 0.0)
    over, under = 0.0, 0.0
    for event in events:
        whole = sum(event.values())
        for name, loss in event.items():
            figures[name] += loss
        figures["largest"] = max(figures["largest"], whole)
        first = min(max(whole - 10_000.0, 0.0), 30_000.0)
        figures["primary"] += 0.9 * first
        left = whole - 0.9 * first
        over += max(left - 5_000.0, 0.0)
        under += min(left, 5_000.0)
        hull = event.get("hull", 0.0)
        hull -= 0.9 * first * hull / whole if whole else 0.0
        figures["hulls only"] += hull if hull > 20_000.0 else 0.0
    figures["second"] = min(over + max(under - 12_000.0, 0.0), 90_000.0)
    return figures


@pytest.mark.parametrize("block", [0, 1])
def test_every_subject_against_a_loop_over_the_events(block):
    subjects = (*BOOK.subjects, *detail_subjects(BOOK))
    lines = tuple(prepare_line(line, BOOK, subjects) for line in BOOK.lines)
    seen = run_block(BOOK, subjects, lines, seed=SEED, block=block, years=YEARS)
    naive = [naive_year(events) for events in events_of(BOOK, block, YEARS)]
    column = {name: np.array([year[name] for year in naive]) for name in naive[0]}
    paid = {name: column[name] for name in ("primary", "second", "hulls only")}
    gross = column["hull"] + column["cargo"] + column["quay"]
    for name in ("hull", "cargo", "quay"):
        np.testing.assert_allclose(seen[Subject("line", name)], column[name], rtol=1e-12)
    for name, own in paid.items():
        np.testing.assert_allclose(seen[Subject("cover", name)], own, rtol=1e-9, atol=1e-6)
    np.testing.assert_allclose(seen[GROSS], gross, rtol=1e-12)
    np.testing.assert_allclose(seen[NET], gross - sum(paid.values()), rtol=1e-9, atol=1e-5)
    np.testing.assert_allclose(seen[Subject("largest")], column["largest"], rtol=1e-12)
    ceded = sum(seen[Subject("ceded", line.name)] for line in BOOK.lines)
    np.testing.assert_allclose(ceded, sum(paid.values()), rtol=1e-9, atol=1e-5)


def test_the_events_seen_as_one_matter():
    """Guards the loop above against a twin that never meets an event of two lines."""
    events = [event for year in events_of(BOOK, 0, YEARS) for event in year]
    both = [event for event in events if len(event) == 2]
    assert abs(len(both) - 0.8 * YEARS) < 4.5 * np.sqrt(0.8 * YEARS)
    apart = sum(max(x - 10_000.0, 0.0) for event in both for x in event.values())
    assert sum(max(sum(event.values()) - 10_000.0, 0.0) for event in both) > 1.1 * apart


def test_a_layer_across_lines_against_the_compound_poisson_sum():
    """Sizes 4 or 8 and 3 or 9, a layer of 6 above 5: rate and moments of its payments by enumeration, the
    probability of a year without one, and a caution that the exact engines leave it to the simulation."""
    lines = tuple(
        Line(
            name=name, frequency=Poisson(mean=mean), severity=SizeTable(sizes=sizes, probabilities=[0.5, 0.5])
        )
        for name, mean, sizes in (("a", 0.5, [4.0, 8.0]), ("b", 0.9, [3.0, 9.0]))
    )
    book = Book(
        lines=lines,
        covers=(PlacedCover(name="layer", terms=Cover(deductible=5.0, limit=6.0)),),
        dependences=(CommonShock(name="storm", lines=("a", "b"), rate=0.3),),
    )
    chances = [(0.1, [4.0]), (0.1, [8.0]), (0.3, [3.0]), (0.3, [9.0])]
    chances += [(0.075, pair) for pair in itertools.product([4.0, 8.0], [3.0, 9.0])]
    layer = [(rate, min(max(sum(sizes) - 5.0, 0.0), 6.0)) for rate, sizes in chances]
    annual = Simulation(years=400_000, seed=2).book(book).losses[Subject("cover", "layer")].annual
    mean, square = (sum(rate * paid**power for rate, paid in layer) for power in (1, 2))
    none = np.exp(-sum(rate for rate, paid in layer if paid > 0))
    for sample, truth in ((annual, mean), ((annual - mean) ** 2, square), (annual == 0.0, none)):
        assert abs(sample.mean() - truth) < 4.5 * sample.std() / np.sqrt(annual.size)


def test_exact_engines_do_what_they_can_and_name_the_shock():
    """Lines, gross and annual or proportional terms are exact; event terms across the lines are not."""
    covers = (
        PlacedCover(name="quota", terms=Cover(share=0.4)),
        PlacedCover(name="layer", terms=Cover(deductible=9_000.0, limit=30_000.0), lines=("hull", "cargo")),
        PlacedCover(name="one", terms=Cover(deductible=9_000.0), lines=("hull", "quay")),
        PlacedCover(name="behind", terms=Cover(limit=9_000.0), lines=("hull",), after=("layer",)),
        PlacedCover(name="stop", terms=Cover(annual_retention=50_000.0)),
    )
    book = Book(lines=(HULL, CARGO, QUAY), covers=covers, dependences=(STORM,))
    results = {engine.name: engine.book(book) for engine in (Fourier(), Simulation(years=60_000, seed=3))}
    refused = results["fourier"].refused
    assert set(refused) == {Subject("cover", "layer"), Subject("cover", "behind"), NET}
    assert "'layer' sees what 'storm' costs several lines as one event" in refused[NET]
    assert "simulation" in refused[NET]
    assert NET in Panjer().book(book).refused
    assert crosscheck(book, results, (0.9, 0.99)).agrees
    assert book.shock_across(covers[2]) is None
    assert book.independent().shock_across(covers[1]) is None


TERMS = {
    "layer": Cover(deductible=5.0, limit=20.0, share=0.5, expense_basis="inside"),
    "outside": Cover(deductible=5.0, limit=20.0, share=0.5, expense_basis="outside"),
    "self-insured": Cover(deductible=5.0, limit=20.0, self_insured=True, expense_basis="outside"),
    "pro-rata": Cover(deductible=5.0, limit=20.0, retained_cap=30.0, expense_basis="pro-rata"),
    "franchise": Cover(deductible=5.0, franchise=True, expense_basis="inside"),
    "share first": Cover(
        deductible=5.0, limit=20.0, share=0.5, order=("share", "deductible", "limit"), expense_basis="outside"
    ),
    "surplus": Cover(surplus=Surplus(kept_line=40.0, lines=2), limit=30.0, expense_basis="inside"),
}


@pytest.mark.parametrize("name", TERMS)
@pytest.mark.parametrize("after", [False, True])
def test_of_alike_lines_a_cover_pays_as_of_one_loss_of_their_sum(name, after):
    """Same expense and sum insured: paid and kept are the schedules at the sum, split in proportion; and a
    single line is paid as any of its losses."""
    lines = tuple(
        Line(
            name=key,
            frequency=Poisson(mean=1.0),
            severity=Exponential(mean=9.0),
            expense=0.1,
            sum_insured=100,
        )
        for key in "ab"
    )
    first = PlacedCover(name="first", terms=TERMS["layer"])
    own = PlacedCover(name="own", terms=TERMS[name], after=("first",) if after else ())
    book = Book(lines=lines, covers=(first, own))
    random = np.random.default_rng(1)
    losses = {key: np.append(random.exponential(15.0, 400), [0.0, 2.5]) for key in "ab"}
    found = joint_payments(book, losses)["own"]
    whole = losses["a"] + losses["b"]
    for parts, schedule in (
        (found.paid, book.event_payment(own, "a")),
        (found.kept, book.event_retained(own, "a")),
    ):
        np.testing.assert_allclose(parts["a"] + parts["b"], schedule(whole), rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(parts["a"] * losses["b"], parts["b"] * losses["a"], rtol=1e-9, atol=1e-9)
        alone = joint_payments(book, {"a": losses["a"]})["own"]
    np.testing.assert_allclose(
        alone.paid["a"], book.event_payment(own, "a")(losses["a"]), rtol=1e-9, atol=1e-9
    )
    np.testing.assert_allclose(
        alone.kept["a"], book.event_retained(own, "a")(losses["a"]), rtol=1e-9, atol=1e-9
    )


@pytest.mark.parametrize("workers", [2, 7])
def test_workers_do_not_reach_the_bytes_nor_does_the_order_of_lines(workers):
    years = BLOCK_YEARS + 50
    one = Simulation(years=years, seed=4, workers=1).book(BOOK).losses
    other = Book(lines=(QUAY, CARGO, HULL), covers=COVERS, dependences=(PRICES, STORM))
    many = Simulation(years=years, seed=4, workers=workers).book(other).losses
    for subject, loss in one.items():
        assert loss.annual.tobytes() == many[subject].annual.tobytes()


def test_a_replayed_year_tells_the_event_and_adds_up():
    annual = Simulation(years=400, seed=4).book(BOOK).losses
    replay = Replay(BOOK, 4, 400)
    shown = 0
    for number in range(1, 60):
        year = replay.year(number)
        for subject, amount in year.amounts.items():
            assert amount == pytest.approx(annual[subject].annual[number - 1], abs=0.005)
        for event in year.events:
            if event.shock:
                shown += 1
                primary = event.payments[0]
                assert [step.operation for step in primary.steps] == ["hull + cargo", "deductible", "limit"]
                assert primary.paid == pytest.approx(min(max(event.size - 10_000.0, 0.0), 30_000.0))
                second = event.payments[1]
                assert second.steps[0].operation == "left by primary of hull + cargo"
                assert second.steps[0].amount == pytest.approx(event.size - 0.9 * primary.paid)
    assert shown > 20


def test_longer_runs_keep_the_first_years():
    short, long = (Simulation(years=years, seed=4).book(BOOK).losses for years in (500, BLOCK_YEARS + 5))
    for subject, loss in short.items():
        np.testing.assert_array_equal(loss.annual, long[subject].annual[:500])
