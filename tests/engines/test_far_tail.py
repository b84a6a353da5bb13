"""The far-tail engine against published values, closed forms, naive twins and the exact engines.

Every random check is within four standard errors, those the engine states itself; that these are honest
is tested apart, over seeds.
"""

import itertools

import numpy as np
import oracle
import pytest

import lossagg
from lossagg.cover import Cover
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.conditional import smallest_root
from lossagg.engines.far_tail import FarTail, _chunks
from lossagg.engines.fourier import Fourier
from lossagg.errors import DoesNotExistError, EngineError, InputError
from lossagg.families import (
    Binomial,
    CountTable,
    Exponential,
    GeneralizedPareto,
    Lognormal,
    Mixture,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
)
from lossagg.kernels.far_tail import leave_last

# Poisson(12) x lognormal(9, 1.5): conditional Monte Carlo with 6 million years, made independently of this
# package; (amount, probability, its standard error). A lattice gave 0.0195570, 0.00236066, 1.355302e-4 and
# 1.388192e-5.
FAR_OUT = [
    (1e6, 0.0195540, 8.3e-6),
    (2e6, 0.00236083, 7.4e-7),
    (5e6, 1.355283e-4, 2.5e-8),
    (1e7, 1.388291e-5, 2.0e-9),
]


@pytest.fixture(scope="module")
def lognormal():
    return FarTail(samples=200_000).annual_loss(Poisson(mean=12.0), Lognormal(mu=9.0, sigma=1.5))


@pytest.mark.parametrize(("amount", "probability", "error"), FAR_OUT)
def test_a_far_tail_known_by_two_other_methods(lognormal, amount, probability, error):
    estimate = lognormal.exceedance(amount)
    assert abs(estimate.value - probability) <= 4 * np.hypot(estimate.standard_error, error)


def test_once_in_seventy_thousand_years_to_a_thousandth(lognormal):
    """The accuracy that plain simulation of as many years misses by a factor of several hundred."""
    estimate = lognormal.exceedance(1e7)
    assert estimate.standard_error <= 1e-3 * estimate.value
    plain = np.sqrt(estimate.value / lognormal.samples)
    assert estimate.standard_error < plain / 100


@pytest.fixture(scope="module")
def exact_lognormal():
    return Fourier().annual_loss(Poisson(mean=12.0), Lognormal(mu=9.0, sigma=1.5))


@pytest.mark.parametrize("level", [0.99, 0.9999, 0.999999])
def test_measures_against_the_fourier_engine(lognormal, exact_lognormal, level):
    """Inside its bracket, which is wide at one in a million years: there the lattice ends."""
    for measure in ("value_at_risk", "tail_value_at_risk"):
        error = lognormal.standard_error(measure, level)
        low, high = exact_lognormal.accuracy(measure, level)
        assert low - 4 * error <= lognormal.measure(measure, level) <= high + 4 * error
        if level < 0.99999:
            exact = exact_lognormal.measure(measure, level)
            assert abs(lognormal.measure(measure, level) - exact) <= 4 * error + 1e-4 * exact
        low, high = lognormal.accuracy(measure, level)
        assert low < lognormal.measure(measure, level) < high
        assert high - low == pytest.approx(2 * 1.959964 * error, rel=1e-6)


def test_beyond_every_lattice_the_single_loss_decides():
    """P(S > x) / (E[N] P(X > x)) tends to 1 for subexponential sizes (Embrechts, Klueppelberg and Mikosch
    1997, "Modelling Extremal Events", theorem 1.3.9), from above as the others shift the sum by their mean:
    at one in 10**12 years, P(S > x) = E[N] P(X > x - E[S]) to first order."""
    size = Pareto(alpha=1.8, minimum=1000.0)
    loss = FarTail(samples=20_000).annual_loss(Poisson(mean=3.0), size)
    x = loss.value_at_risk(1.0 - 1e-12)
    estimate = loss.exceedance(x)
    assert estimate.value == pytest.approx(1e-12, rel=1e-4)
    assert estimate.standard_error < 1e-4 * estimate.value
    assert estimate.value == pytest.approx(3.0 * size.sf(x - loss.mean()), rel=1e-4)


def test_geometric_sums_of_exponentials_have_a_closed_form():
    """P(S > x) = m / (1 + m) exp(-x / (b (1 + m))): the sum is exponential again (Klugman, Panjer and
    Willmot, Loss Models, section 9.4)."""
    m, b = 4.0, 1000.0
    loss = FarTail(samples=100_000).annual_loss(NegativeBinomial(mean=m, dispersion=1.0), Exponential(mean=b))
    for x in (0.0, 5_000.0, 20_000.0):
        truth = m / (1 + m) * np.exp(-x / (b * (1 + m)))
        estimate = loss.exceedance(x)
        assert abs(estimate.value - truth) <= 4 * estimate.standard_error
        excess = loss.excess(x)
        assert abs(excess.value - truth * b * (1 + m)) <= 4 * excess.standard_error
    assert loss.mean() == pytest.approx(m * b, rel=1e-12)
    assert loss.accuracy("mean") == (loss.mean(), loss.mean())
    # Var[S] = m (1 + m) b**2 + m b**2
    spread = np.sqrt(m * (1 + m) + m) * b
    assert abs(loss.sd() - spread) <= 4 * loss.standard_error("sd")


SIZES = {0: 0.2, 1: 0.35, 4: 0.3, 9: 0.15}
TABLE = SizeTable(sizes=list(SIZES), probabilities=list(SIZES.values()))


@pytest.mark.parametrize(
    ("law", "counts"),
    [
        (Poisson(mean=2.5), oracle.poisson(2.5, 60)),
        (CountTable(probabilities=[0.1, 0.2, 0.3, 0.4]), [0.1, 0.2, 0.3, 0.4]),
        (Binomial(trials=6, probability=0.5), oracle.binomial(6, 0.5)),
        (CountTable(probabilities=[0.0, 0.0, 0.0, 1.0]), [0.0, 0.0, 0.0, 1.0]),
    ],
    ids=["poisson", "table", "binomial", "always three"],
)
def test_tied_losses_against_direct_convolution(law, counts):
    """Where many losses are equal, the largest is not one: each must count for its share of the tie."""
    masses = [SIZES.get(k, 0.0) for k in range(10)]
    sums = dict(enumerate(oracle.aggregate_on_lattice(counts, masses)))
    loss = FarTail(samples=30_000, seed=3).annual_loss(law, TABLE)
    for x in (0.0, 3.5, 8.999, 9.0, 22.0):
        for estimate, truth in (
            (loss.exceedance(x), oracle.exceedance(sums, x)),
            (loss.excess(x), oracle.stop_loss(sums, x)),
            (loss.excess(x, x + 5.0), oracle.stop_loss(sums, x) - oracle.stop_loss(sums, x + 5.0)),
        ):
            assert abs(estimate.value - truth) <= 4 * estimate.standard_error + 1e-12
    second = sum(p * max(s - 9.0, 0.0) ** 2 for s, p in sums.items())
    assert loss.layer_second_moment(9.0) == pytest.approx(second, rel=0.1)
    for level in (0.2, 0.55, 0.9):
        assert loss.value_at_risk(level) == oracle.value_at_risk(sums, level)


def test_two_lines_that_tie_with_each_other():
    """The same table in two lines: the largest loss of the year may belong to either or both."""
    one, two = oracle.poisson(1.2, 40), oracle.binomial(4, 0.4)
    masses = [SIZES.get(k, 0.0) for k in range(10)]
    first, second = (oracle.aggregate_on_lattice(counts, masses) for counts in (one, two))
    sums = dict(enumerate(np.convolve(first, second)))
    book = Book(
        lines=(
            Line(name="a", frequency=Poisson(mean=1.2), severity=TABLE),
            Line(name="b", frequency=Binomial(trials=4, probability=0.4), severity=TABLE),
        )
    )
    loss = FarTail(samples=40_000).book(book).losses[GROSS]
    for x in (0.0, 5.0, 9.0, 18.0, 25.0):
        estimate = loss.exceedance(x)
        assert abs(estimate.value - oracle.exceedance(sums, x)) <= 4 * estimate.standard_error


LINES = (
    Line(name="b", frequency=Poisson(mean=8.0), severity=Lognormal(mu=8.0, sigma=1.6)),
    Line(
        name="a",
        frequency=NegativeBinomial(mean=1.5, dispersion=0.6),
        severity=GeneralizedPareto(shape=0.45, scale=20_000.0, threshold=5_000.0),
    ),
    Line(
        name="c",
        frequency=Poisson(mean=2.0),
        severity=Mixture(
            weights=[0.3, 0.7],
            parts=[SizeTable(sizes=[0, 500], probabilities=[0.5, 0.5]), Exponential(mean=9_000.0)],
        ),
    ),
)
STOP = PlacedCover(name="stop", terms=Cover(annual_retention=400_000.0, annual_limit=2e6, share=0.9))


@pytest.fixture(scope="module")
def book():
    return FarTail(samples=40_000).book(Book(lines=LINES, covers=(STOP,)))


@pytest.fixture(scope="module")
def exact_book():
    return Fourier().book(Book(lines=LINES, covers=(STOP,)))


@pytest.mark.parametrize("subject", [GROSS, Subject("cover", "stop"), NET, Subject("line", "a")], ids=str)
def test_a_book_against_the_fourier_engine(book, exact_book, subject):
    ours, exact = book.losses[subject], exact_book.losses[subject]
    for level, measure in itertools.product((0.99, 0.999, 0.9999), ("value_at_risk", "tail_value_at_risk")):
        low, high = exact.accuracy(measure, level)
        error = ours.standard_error(measure, level)
        assert low - 4 * error <= ours.measure(measure, level) <= high + 4 * error, (measure, level)
    for x in (1e5, 1e6):
        assert ours.sf(x) == pytest.approx(exact.sf(x), rel=0.02)
    assert ours.sd() == pytest.approx(exact.sd(), rel=0.02)
    assert ours.mean() == pytest.approx(exact.mean(), rel=0.01)


def test_the_order_of_lines_does_not_reach_the_bytes(book):
    again = FarTail(samples=40_000).book(Book(lines=LINES[::-1], covers=(STOP,)))
    for subject in (GROSS, NET):
        assert book.losses[subject].sf(1e6) == again.losses[subject].sf(1e6)


def test_stated_errors_are_honest():
    """Over 100 seeds the errors against a closed form have the spread that is stated: their mean square
    over the stated one is 1 within four standard errors, sqrt(2 / 100). About 400 years carry each."""
    m, b, x = 4.0, 1.0, 20.0
    truth = m / (1 + m) * np.exp(-x / (b * (1 + m)))
    scores = []
    for seed in range(100):
        engine = FarTail(samples=32_000, seed=seed)
        loss = engine.annual_loss(NegativeBinomial(mean=m, dispersion=1.0), Exponential(mean=b))
        estimate = loss.exceedance(x)
        scores.append((estimate.value - truth) / estimate.standard_error)
    assert abs(np.mean(np.square(scores)) - 1.0) <= 4 * np.sqrt(2 / 100)
    assert abs(np.mean(scores)) <= 4 / np.sqrt(100)


def test_an_infinite_mean_has_quantiles_and_says_so():
    loss = FarTail(samples=20_000).annual_loss(Poisson(mean=2.0), Pareto(alpha=0.8, minimum=1.0))
    exact = Fourier().annual_loss(Poisson(mean=2.0), Pareto(alpha=0.8, minimum=1.0))
    low, high = exact.accuracy("value_at_risk", 0.99)
    error = loss.standard_error("value_at_risk", 0.99)
    assert low - 4 * error <= loss.value_at_risk(0.99) <= high + 4 * error
    assert loss.mean() == np.inf
    assert loss.tail_value_at_risk(0.99) == np.inf
    with pytest.raises(DoesNotExistError, match="moments of order 1"):
        loss.accuracy("tail_value_at_risk", 0.99)
    with pytest.raises(DoesNotExistError, match="moments of order 4"):
        loss.accuracy("sd")
    assert loss.excess(100.0, 1000.0).value == pytest.approx(exact.layer_mean(100.0, 1000.0), rel=0.01)


def test_the_tail_value_has_an_error_where_the_variance_is_infinite():
    """Plain simulation has none there: given the others, the largest loss adds a finite spread."""
    size = Pareto(alpha=1.5, minimum=1000.0)
    loss = FarTail(samples=50_000).annual_loss(Poisson(mean=2.0), size)
    exact = Fourier().annual_loss(Poisson(mean=2.0), size)
    error = loss.standard_error("tail_value_at_risk", 0.999)
    low, high = exact.accuracy("tail_value_at_risk", 0.999)
    assert error < 0.01 * high
    assert low - 4 * error <= loss.tail_value_at_risk(0.999) <= high + 4 * error


@pytest.mark.parametrize("kernel", [leave_last, leave_last.py_func], ids=["compiled", "plain"])
def test_the_loop_against_its_definition(kernel):
    random = np.random.default_rng(5)
    counts = random.poisson(1.5, size=400)
    counts[:3] = (0, 1, 7)
    sizes = random.integers(0, 4, size=counts.sum()).astype(float)
    rest, largest, tied, last = (np.empty(counts.size) for _ in range(4))
    kernel(sizes, counts, rest, largest, tied, last)
    for year, own in enumerate(np.split(sizes, np.cumsum(counts)[:-1])):
        others = own[:-1].tolist()
        assert rest[year] == sum(others)
        assert largest[year] == max(others, default=0.0)
        assert tied[year] == others.count(max(others, default=0.0))
        assert last[year] == (own[-1] if own.size else 0.0)


def test_chunks_cover_every_year_once(monkeypatch):
    monkeypatch.setattr("lossagg.engines.far_tail.CHUNK", 10)
    counts = np.array([0, 3, 25, 0, 4, 6, 1, 0, 12, 0])
    parts = _chunks(counts, slice(1, 10))
    assert np.concatenate([np.arange(part.start, part.stop) for part in parts]).tolist() == list(range(1, 10))
    assert all(counts[part].sum() <= 10 or part.stop - part.start == 1 for part in parts)


def test_small_chunks_draw_as_good_years(monkeypatch):
    """Each chunk leaves the last words of the generator's lanes unused: other losses, the same law."""
    model = Poisson(mean=5.0), Lognormal(mu=0.0, sigma=1.0)
    whole = FarTail(samples=20_000).annual_loss(*model)
    monkeypatch.setattr("lossagg.engines.far_tail.CHUNK", 7)
    small = FarTail(samples=20_000).annual_loss(*model)
    np.testing.assert_allclose(small.sf([5.0, 40.0]), whole.sf([5.0, 40.0]), rtol=0.05)


def test_the_surface():
    """By name, by object, from the top of the package; the same seed gives the same bytes."""
    model = Poisson(mean=2.0), Lognormal(mu=0.0, sigma=1.0)
    named = lossagg.annual_loss(*model, engine="far-tail")
    made = lossagg.annual_loss(*model, engine=lossagg.FarTail())
    assert named.engine == made.engine == "far-tail"
    assert named.sf(50.0) == made.sf(50.0) != FarTail(seed=2).annual_loss(*model).sf(50.0)
    assert named.sf([-1.0, 1e200]).tolist() == [1.0, 0.0]
    assert "samples" in repr(named)
    frame = FarTail(samples=5000).annual_loss(*model).to_frame((0.99, 0.9999))
    assert (frame.value_at_risk_low < frame.value_at_risk_high).all()


def test_a_light_tail_carried_by_few_years_is_refused():
    """Sums of exponentials reach 40 times the mean loss by many losses. With 10,000 samples the stated
    errors would be three times too small on average over seeds; it must not state them."""
    model = NegativeBinomial(mean=4.0, dispersion=1.0), Exponential(mean=1.0)
    loss = FarTail(samples=10_000).annual_loss(*model)
    for figure in (
        lambda: loss.exceedance(40.0),
        lambda: loss.excess(40.0),
        lambda: loss.value_at_risk(0.9999),
        lambda: loss.tail_value_at_risk(0.9999),
        lambda: loss.sf([1.0, 40.0]),
    ):
        with pytest.raises(EngineError, match="simulated years carry the estimate"):
            figure()
    assert loss.sf(5.0) == pytest.approx(0.8 * np.exp(-1.0), rel=0.03)


def test_a_bounded_year_that_never_came_up_is_not_impossible():
    loss = FarTail(samples=1000).annual_loss(Binomial(trials=20, probability=0.1), TABLE)
    with pytest.raises(EngineError, match="only 0 of 1,000"):
        loss.sf(170.0)


def test_nothing_ever_happens():
    """No simulated year has a loss: the quantile is known, a probability is not."""
    loss = FarTail(samples=1000).annual_loss(Poisson(mean=1e-9), Exponential(mean=1.0))
    assert loss.value_at_risk(0.9999) == 0.0
    with pytest.raises(EngineError, match="only 0 of 1,000"):
        loss.sf(0.0)


@pytest.mark.parametrize(
    ("settings", "text"),
    [
        ({"samples": 999}, "samples must be a whole number from 1,000 to 10,000,000"),
        ({"samples": True}, "samples must be a whole number"),
        ({"samples": 1e5}, "samples must be a whole number"),
        ({"seed": -1}, "seed must be a whole number from 0"),
    ],
)
def test_settings_out_of_range_are_refused(settings, text):
    with pytest.raises(InputError, match=text):
        FarTail(**settings)


def test_what_it_cannot_do_is_refused_with_an_engine_that_can():
    size = Lognormal(mu=9.0, sigma=1.5)
    with pytest.raises(EngineError, match=r"terms act on single events.*Fourier engine"):
        FarTail().annual_loss(Poisson(mean=12.0), size, Cover(deductible=1e4, limit=1e6))
    with pytest.raises(EngineError, match="retained cap"):
        FarTail().annual_loss(Poisson(mean=12.0), size, Cover(deductible=1e4, retained_cap=1e6))
    with pytest.raises(EngineError, match="Ask for at most 20,000 samples"):
        FarTail().annual_loss(Poisson(mean=1e6), size)
    with pytest.raises(EngineError, match="not that of a single loss"):
        FarTail().annual_loss(Poisson(mean=1e9), size)
    book = Book(
        lines=LINES,
        covers=(PlacedCover(name="layer", terms=Cover(deductible=1e4, limit=1e6)),),
    )
    result = FarTail(samples=1000).book(book)
    assert set(result.refused) == {Subject("cover", "layer"), NET}
    assert GROSS in result.losses


@pytest.mark.parametrize("jump", [3.0, 1e-290, 1e280])
def test_roots_at_jumps_are_found_to_the_last_digit(jump):
    assert smallest_root(lambda x: 1.0 if x < jump else -1.0, 1.0, exact=True) == jump
