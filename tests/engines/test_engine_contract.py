"""One contract over all engines: count law x size law x cover, the same figures from each.

Tolerances, beside the engine they belong to:
* fourier: the reference; its own central value lies inside its own bracket.
* panjer: both brackets are guaranteed, so they overlap, and the Fourier value lies inside Panjer's, which is
  the wider; anything else is a fault. P(0) to 1e-9; where an annual retention makes it a value of
  the distribution, to 1e-6: Panjer's rounding is of second order in its step.
* simulation: four of its own standard errors (a chance of 6e-5 each), or of those that follow from the
  exact distribution: where all the worst years hit an annual limit the sample sees no spread at all.
  Quantiles by the number of simulated years beyond the bracket, which is binomial whatever the tail.
"""

import dataclasses
import itertools
from pathlib import Path

import numpy as np
import oracle
import pytest

import lossagg
from lossagg.cover import Corridor, Cover, Reinstatements
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.simulation import Simulation
from lossagg.errors import DoesNotExistError
from lossagg.families import (
    Binomial,
    Burr,
    CountTable,
    Exponential,
    Gamma,
    GeneralizedPareto,
    InverseGaussian,
    LogGamma,
    LogLogistic,
    Lognormal,
    Lomax,
    Mixture,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    Spliced,
    Weibull,
    ZeroInflated,
    ZeroModified,
)
from lossagg.families.base import CountLaw, SizeLaw

COUNTS = {
    "poisson": Poisson(mean=3.0),
    "negative binomial": NegativeBinomial(mean=4.0, dispersion=0.7),
    "binomial": Binomial(trials=12, probability=0.3),
    "table": CountTable(probabilities=[0.2, 0.3, 0.25, 0.15, 0.1]),
    "zero-modified": ZeroModified(base=Poisson(mean=3.0), zero_probability=0.3),
    "never zero": ZeroModified(base=NegativeBinomial(mean=2.0, dispersion=0.8), zero_probability=0.0),
    "zero-inflated": ZeroInflated(base=Binomial(trials=9, probability=0.4), extra_zeros=0.25),
}
SIZES = {
    "exponential": Exponential(mean=1000.0),
    "lognormal": Lognormal(mu=6.0, sigma=1.3),
    "pareto": Pareto(alpha=2.6, minimum=300.0),
    "lomax": Lomax(alpha=2.4, scale=1500.0),
    "gamma": Gamma(shape=0.6, scale=1500.0),
    "weibull": Weibull(shape=0.8, scale=900.0),
    "generalized pareto": GeneralizedPareto(shape=0.3, scale=700.0),
    "inverse gaussian": InverseGaussian(mean=1000.0, shape=600.0),
    "log-logistic": LogLogistic(gamma=2.5, scale=800.0),
    "log-gamma": LogGamma(shape=1.5, rate=2.8, minimum=200.0),
    "burr": Burr(alpha=2.0, gamma=1.5, scale=1000.0),
    "table": SizeTable(sizes=[0, 250, 1000, 1250, 4000], probabilities=[0.1, 0.3, 0.3, 0.2, 0.1]),
    "spliced": Spliced(
        body=Lognormal(mu=6.0, sigma=1.0),
        tail=Pareto(alpha=2.5, minimum=2000.0),
        threshold=2000.0,
        tail_probability=0.1,
    ),
    "mixture with atoms": Mixture(
        weights=[0.3, 0.7],
        parts=[SizeTable(sizes=[0, 500], probabilities=[0.5, 0.5]), Exponential(mean=1200.0)],
    ),
}
COVERS = {
    "none": None,
    "deductible": Cover(deductible=500.0),
    "layer": Cover(deductible=500.0, limit=1500.0),
    "franchise": Cover(deductible=800.0, franchise=True),
    "annual terms": Cover(deductible=250.0, limit=2000.0, annual_retention=1000.0, annual_limit=6000.0),
    "share": Cover(limit=3000.0, share=0.4),
}
# Terms of other kinds: with every count and size through the exact engines; through all in test_terms_agree.
MORE_COVERS = {
    "disappearing": Cover(deductible=400.0, disappears_at=1500.0, limit=5000.0),
    "inclusive": Cover(deductible=400.0, limit=3000.0, limit_includes_deductible=True),
    "share first": Cover(deductible=300.0, limit=1500.0, share=0.6, order=["share", "deductible", "limit"]),
    "corridor": Cover(corridor=Corridor(low=3000.0, high=6000.0, share=0.7), annual_limit=12_000.0),
    "reinstatements": Cover(
        deductible=500.0, limit=1500.0, reinstatements=Reinstatements(number=1), annual_retention=300.0
    ),
    "self-insured": Cover(deductible=500.0, limit=2000.0, share=0.8, self_insured=True),
}
# Terms that need more than a count and a size (a sum insured, an expense) or follow two annual sums.
ELSEWHERE = {
    "surplus": "test_terms_agree.py",
    "expense_basis": "test_terms_agree.py",
    "retained_cap": "test_retained_cap.py",
}
# A third of all pairs of size and cover, every one with two of the other or more; the counts take turns.
CASES = [
    (list(COUNTS)[(i + j) % len(COUNTS)], size, cover)
    for (i, size), (j, cover) in itertools.product(enumerate(SIZES), enumerate(COVERS))
    if (i + j) % 3 == 0
]
YEARS = 20_000


@pytest.mark.parametrize(("count", "size", "cover"), CASES, ids=[", ".join(case) for case in CASES])
def test_the_engines_agree(count, size, cover):
    model = COUNTS[count], SIZES[size], COVERS[cover]
    fourier = Fourier().annual_loss(*model)
    for measure, level in measures():
        low, high = fourier.accuracy(measure, level)
        assert within(fourier.measure(measure, level), low, high), (measure, level)
    panjer = Panjer().annual_loss(*model)
    agree_exactly(fourier, panjer)
    assert panjer.sf(0.0) == pytest.approx(fourier.sf(0.0), abs=1e-6 if cover == "annual terms" else 1e-9)
    agree_by_chance(fourier, Simulation(years=YEARS, seed=11).annual_loss(*model))


def test_the_contract_covers_the_public_surface():
    """Every public count law, size law and term of a cover is in the tables above: a new one fails here until
    it is put there."""
    public = [getattr(lossagg, name) for name in lossagg.__all__]
    laws = [kind for kind in public if isinstance(kind, type)]
    for base, tested in ((CountLaw, COUNTS), (SizeLaw, SIZES)):
        assert {kind for kind in laws if issubclass(kind, base)} == {type(law) for law in tested.values()}
    tried = {
        term.name
        for cover in (*COVERS.values(), *MORE_COVERS.values())
        if cover is not None
        for term in dataclasses.fields(Cover)
        if getattr(cover, term.name) != term.default
    }
    assert tried | ELSEWHERE.keys() == {term.name for term in dataclasses.fields(Cover)}
    for term, file in ELSEWHERE.items():
        assert f"{term}=" in (Path(__file__).parent / file).read_text()


@pytest.mark.parametrize("cover", COVERS | MORE_COVERS)
@pytest.mark.parametrize("size", SIZES)
def test_every_count_size_and_cover(size, cover):
    """Every count law of the public surface with every size law and cover, the exact engines on coarse
    lattices: the brackets overlap, the better known value lies inside the wider bracket."""
    place = Fourier(points=128).annual_loss(
        COUNTS["negative binomial"], SIZES[size], (COVERS | MORE_COVERS)[cover]
    )
    step = getattr(place, "base", place).step
    for count in COUNTS.values():
        model = count, SIZES[size], (COVERS | MORE_COVERS)[cover]
        losses = (engine(points=256, step=step).annual_loss(*model) for engine in (Fourier, Panjer))
        agree_exactly(*losses, levels=(0.5, 0.99))


def measures(levels=(0.5, 0.9, 0.99, 0.995, 0.999)):
    yield from (("mean", None), ("sd", None))
    yield from itertools.product(("value_at_risk", "tail_value_at_risk"), levels)


def within(value, low, high):
    """Between two bounds, to the round-off of the laws and of the engines."""
    return low - 1e-8 * abs(low) - 1e-9 <= value <= high + 1e-8 * abs(high) + 1e-9


def agree_exactly(fourier, panjer, levels=(0.5, 0.9, 0.99, 0.995, 0.999)):
    for measure, level in measures(levels):
        ours, theirs = fourier.accuracy(measure, level), panjer.accuracy(measure, level)
        assert within(max(ours[0], theirs[0]), -np.inf, min(ours[1], theirs[1])), (measure, level)
        assert within(fourier.measure(measure, level), *theirs), (measure, level)
        assert within(panjer.measure(measure, level), *theirs), (measure, level)


def agree_by_chance(fourier, simulated):
    for measure, level in measures():
        if measure == "value_at_risk":
            quantile_by_chance(fourier, simulated, level)
            continue
        try:
            error = simulated.standard_error(measure, level)
        except DoesNotExistError:
            continue
        if level is not None:
            error = max(error, tail_error(fourier, level))
        low, high = fourier.accuracy(measure, level)
        value = simulated.measure(measure, level)
        assert within(value, low - 4 * error, high + 4 * error), (measure, level)
    nothing = fourier.cdf(0.0)
    assert abs(simulated.cdf(0.0) - nothing) <= 4 * np.sqrt(nothing * (1 - nothing) / YEARS) + 1e-12


def tail_error(loss, level):
    """Standard error of a simulated TVaR, from the exact moments of the excess over the VaR."""
    value = loss.value_at_risk(level)
    mean, square = loss.layer_mean(value), loss.layer_second_moment(value)
    return np.sqrt(max(square - mean**2, 0.0) / YEARS) / (1 - level)


def quantile_by_chance(fourier, simulated, level):
    low, high = fourier.accuracy("value_at_risk", level)
    allowed = 4 * np.sqrt(level * (1 - level) / YEARS) + 1 / YEARS
    assert simulated.sf(high * (1 + 1e-9)) <= 1 - level + allowed
    if low > 0:
        assert simulated.sf(low * (1 - 1e-9)) >= 1 - level - allowed


@pytest.mark.parametrize("cover", COVERS)
@pytest.mark.parametrize("count", COUNTS)
def test_tables_against_the_naive_twin(count, cover):
    """Arithmetic models need no lattice error: every figure against direct convolution and the cover's
    words applied loss by loss and year by year."""
    sizes = {0: 0.1, 250: 0.3, 1000: 0.3, 1250: 0.2, 4000: 0.1}
    law = SizeTable(sizes=list(sizes), probabilities=list(sizes.values()))
    counts = {
        "poisson": oracle.poisson(3.0, 40),
        "negative binomial": oracle.negative_binomial(4.0, 0.7, 150),
        "binomial": oracle.binomial(12, 0.3),
        "table": [0.2, 0.3, 0.25, 0.15, 0.1],
        "zero-modified": oracle.zero_modified(oracle.poisson(3.0, 40), 0.3),
        "never zero": oracle.zero_modified(oracle.negative_binomial(2.0, 0.8, 150), 0.0),
        "zero-inflated": oracle.zero_inflated(oracle.binomial(9, 0.4), 0.25),
    }[count]
    terms = COVERS[cover] or Cover()
    event = {"deductible": terms.deductible, "limit": terms.limit, "franchise": terms.franchise}
    paid = oracle.mapped(sizes, lambda loss: oracle.event_payment(loss, **event))
    unit = 250
    masses = [0.0] * (round(max(paid) / unit) + 1)
    for amount, p in paid.items():
        masses[round(amount / unit)] += p
    sums = numpy_sums(counts, masses)
    truth = oracle.mapped(
        {unit * k: p for k, p in enumerate(sums) if p > 0},
        lambda total: terms.share * min(max(total - terms.annual_retention, 0), terms.annual_limit),
    )
    for engine in (Fourier(), Panjer()):
        loss = engine.annual_loss(COUNTS[count], law, COVERS[cover])
        assert loss.mean() == pytest.approx(oracle.mean(truth), rel=1e-9)
        assert loss.sd() == pytest.approx(oracle.sd(truth), rel=1e-8)
        for level in (0.3, 0.5, 0.9, 0.99, 0.995, 0.999):
            value = oracle.value_at_risk(truth, level)
            assert loss.value_at_risk(level) == pytest.approx(value, rel=1e-12)
            assert loss.accuracy("value_at_risk", level) == pytest.approx((value, value), rel=1e-12)
            tail = oracle.tail_value_at_risk(truth, level)
            assert loss.tail_value_at_risk(level) == pytest.approx(tail, rel=1e-8)
            assert loss.accuracy("tail_value_at_risk", level) == pytest.approx((tail, tail), rel=1e-6)
        for x in (0.0, 999.0, 1000.0, 2600.0, 7000.0):
            assert loss.sf(x) == pytest.approx(oracle.exceedance(truth, x), abs=1e-11)
            assert loss.expected_excess(x) == pytest.approx(oracle.stop_loss(truth, x), abs=1e-6)


def numpy_sums(counts, masses):
    """The oracle's sum of powers, with NumPy's direct convolution for speed."""
    total, power = np.zeros((len(counts) - 1) * (len(masses) - 1) + 1), np.ones(1)
    for probability in counts:
        total[: len(power)] += probability * power
        power = np.convolve(power, masses)
    return total.tolist()


def test_the_fast_twin_is_the_slow_twin():
    """The sums used above are those of the double loop."""
    counts, masses = oracle.binomial(5, 0.4), [0.2, 0.5, 0.0, 0.3]
    assert numpy_sums(counts, masses) == pytest.approx(oracle.aggregate_on_lattice(counts, masses), abs=1e-15)
