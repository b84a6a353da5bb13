"""The exact engines against published values and closed forms, one test per source, digits asserted.

"Value from memory, recomputed" marks a published figure quoted from memory and confirmed by an independent
computation.
"""

import numpy as np
import oracle
import pytest

from lossagg.cover import Cover, Schedule
from lossagg.engines.book import GROSS, Book, Line
from lossagg.engines.compound import CompoundSum
from lossagg.engines.exact import Rounded, bracket
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.transform import LatticeTransform, bounded_survivals
from lossagg.families import (
    Binomial,
    CountTable,
    Exponential,
    Gamma,
    GeneralizedPareto,
    Lognormal,
    Lomax,
    NegativeBinomial,
    Poisson,
    SizeTable,
)

EXACT = (Fourier(), Panjer())
engines = pytest.mark.parametrize("engine", EXACT, ids=lambda engine: engine.name)


def table(masses, unit=1):
    """A size table from P(X = 0), P(X = unit), ..."""
    pairs = [(unit * k, p) for k, p in enumerate(masses) if p > 0]
    return SizeTable(sizes=[x for x, _ in pairs], probabilities=[p for _, p in pairs])


def point(loss, x):
    """P(S = x) of a loss on whole numbers."""
    return loss.sf(x - 0.5) - loss.sf(x + 0.5)


def points(loss, most):
    return [point(loss, k) for k in range(most)]


def check(loss, expected, rel):
    for (measure, argument), value in expected.items():
        if measure == "sf":
            ours = loss.sf(argument)
        elif measure == "stop loss":
            ours = loss.expected_excess(argument)
        else:
            ours = loss.measure(measure, argument)
            low, high = loss.accuracy(measure, argument)
            assert low * (1 - 1e-9) <= value <= high * (1 + 1e-9), (measure, argument)
        assert ours == pytest.approx(value, rel=rel), (measure, argument)


def test_c01_group_dental():
    """Klugman, Panjer and Willmot, Loss Models; Panjer (2006), Operational Risk, example 6.3: counts 0-8,
    sizes in units of 25. Mean 12.58, variance 58.7464 (units), stop-loss 314.50, 290.75, 267.38."""
    counts = [0.05, 0.1, 0.15, 0.2, 0.25, 0.15, 0.06, 0.03, 0.01]
    sizes = [0, 0.15, 0.2, 0.25, 0.125, 0.075, 0.05, 0.05, 0.05, 0.025, 0.025]
    loss = Fourier().annual_loss(CountTable(probabilities=counts), table(sizes, unit=25))
    assert loss.mean() / 25 == pytest.approx(12.58, rel=1e-12)
    assert loss.sd() ** 2 / 25**2 == pytest.approx(58.7464, rel=1e-10)
    for x, published in ((0, 314.50), (25, 290.75), (50, 267.38)):
        assert round(loss.expected_excess(x) + 1e-9, 2) == published
    exact = oracle.aggregate_on_lattice(counts, sizes)
    assert [loss.sf(25 * k) for k in range(60)] == pytest.approx(
        [sum(exact[k + 1 :]) for k in range(60)], abs=1e-14
    )
    check(
        loss,
        {
            ("stop loss", 300): 83.7737358756,
            ("stop loss", 500): 20.5047315936,
            ("value_at_risk", 0.95): 26 * 25,
            ("value_at_risk", 0.99): 33 * 25,
            ("tail_value_at_risk", 0.95): 30.3941519699 * 25,
            ("tail_value_at_risk", 0.99): 36.5523826663 * 25,
        },
        rel=1e-11,
    )


def test_c02_bowers_direct_convolution():
    """Bowers et al., Actuarial Mathematics, example 12.2.2 (value from memory, recomputed)."""
    loss = Fourier().annual_loss(CountTable(probabilities=[0.1, 0.3, 0.4, 0.2]), table([0, 0.5, 0.4, 0.1]))
    published = [0.1, 0.15, 0.22, 0.215, 0.164, 0.095, 0.0408, 0.0126, 0.0024, 0.0002]
    assert points(loss, 10) == pytest.approx(published, abs=1e-14)


@engines
def test_c03_bowers_compound_poisson(engine):
    """Bowers et al., Actuarial Mathematics, example 12.4.2 (value from memory, recomputed), six digits."""
    loss = engine.annual_loss(Poisson(mean=0.8), table([0, 0.25, 0.375, 0.375]))
    assert [round(p, 6) for p in points(loss, 4)] == [0.449329, 0.089866, 0.143785, 0.162358]
    for d, value in ((1, 1.14932896412), (2, 0.688523721058), (3, 0.371503746516), (5, 0.112084332449)):
        assert loss.expected_excess(d) == pytest.approx(value, abs=1e-11)


@pytest.mark.parametrize(("engine", "rel"), [(Fourier(), 1e-10), (Panjer(), 2e-6)], ids=["fourier", "panjer"])
def test_c05_compound_poisson_exponential(engine, rel):
    """Loss Models; Panjer and Willmot (1992): Bessel closed form, 12 digits. The Fourier engine keeps ten."""
    loss = engine.annual_loss(Poisson(mean=3), Exponential(mean=1))
    assert loss.sf(0) == pytest.approx(1 - np.exp(-3), rel=1e-12)
    check(
        loss,
        {
            ("sf", 1): 0.77501529121,
            ("stop loss", 1): 2.13398697009,
            ("sf", 5): 0.185061227513,
            ("stop loss", 5): 0.378085256071,
            ("sf", 10): 0.014852747578,
            ("stop loss", 10): 0.0257101955432,
            ("value_at_risk", 0.9): 6.33356031058,
            ("tail_value_at_risk", 0.9): 8.26370996567,
            ("value_at_risk", 0.99): 10.7063757046,
            ("tail_value_at_risk", 0.99): 12.4103389145,
            ("value_at_risk", 0.999): 14.6011683003,
            ("tail_value_at_risk", 0.999): 16.1921078339,
        },
        rel=rel,
    )


@pytest.mark.parametrize(("engine", "rel"), [(Fourier(), 1e-10), (Panjer(), 3e-6)], ids=["fourier", "panjer"])
def test_c07_geometric_exponential(engine, rel):
    """Loss Models, chapter 9: P(S > x) = beta / (1 + beta) exp(-x / (theta (1 + beta)))."""
    loss = engine.annual_loss(NegativeBinomial(mean=4, dispersion=1), Exponential(mean=1000))
    expected = {}
    for x in (0.0, 1000.0, 10_000.0, 30_000.0):
        expected["sf", x] = 0.8 * np.exp(-x / 5000)
        expected["stop loss", x] = 4000 * np.exp(-x / 5000)
    for level in (0.9, 0.99, 0.999):
        quantile = 5000 * np.log(0.8 / (1 - level))
        expected["value_at_risk", level] = quantile
        expected["tail_value_at_risk", level] = quantile + 5000
    check(loss, expected, rel)


@pytest.mark.parametrize(("engine", "rel"), [(Fourier(), 1e-10), (Panjer(), 3e-6)], ids=["fourier", "panjer"])
def test_c08_negative_binomial_exponential(engine, rel):
    """Loss Models, chapter 9: NB with r = 2, beta = 2 is a binomial mixture of Erlang laws."""
    loss = engine.annual_loss(NegativeBinomial(mean=4, dispersion=0.5), Exponential(mean=100))
    check(
        loss,
        {
            ("sf", 200): 0.608494363298,
            ("stop loss", 200): 251.00392486,
            ("sf", 2000): 0.00490199686442,
            ("stop loss", 2000): 1.64028356617,
            ("value_at_risk", 0.9): 937.792733917,
            ("value_at_risk", 0.999): 2532.8193667,
            ("tail_value_at_risk", 0.999): 2861.54748329,
        },
        rel,
    )


@pytest.mark.parametrize(
    ("rate", "shape", "scale", "x", "cdf", "rel"),
    [
        (2.0, 1.0, 0.5, 1.0, 0.603500960612, 1e-9),
        (2.5, 4.0, 0.1, 2.0, 0.907345192613, 1e-9),
        (5.0, 0.25, 0.8, 0.5, 0.395671479792, 1e-6),
    ],
)
def test_c10_tweedie(rate, shape, scale, x, cdf, rel):
    """Dunn and Smyth (2005): Tweedie laws as compound Poisson-gamma sums. The third has a density with a
    pole at zero, which costs the lattice digits."""
    loss = Fourier().annual_loss(Poisson(mean=rate), Gamma(shape=shape, scale=scale))
    assert loss.cdf(x) == pytest.approx(cdf, rel=rel)
    assert loss.cdf(0.0) == pytest.approx(np.exp(-rate), rel=1e-12)


@engines
def test_c14_gerber_individual_model(engine):
    """Gerber (1979), portfolio of 31 policies, exact convolution (value from memory, recomputed):
    P(S = 0) = .23819, .01473, .08773, .11318."""
    numbers = {0.03: [2, 3, 1, 2, 0], 0.04: [0, 1, 2, 2, 1], 0.05: [0, 2, 4, 2, 2], 0.06: [0, 2, 2, 2, 1]}
    lines = tuple(
        Line(
            name=f"{q} {amount}",
            frequency=Binomial(trials=number, probability=q),
            severity=SizeTable(sizes=[amount], probabilities=[1]),
        )
        for q, row in numbers.items()
        for amount, number in enumerate(row, start=1)
        if number
    )
    loss = engine.book(Book(lines=lines)).losses[GROSS]
    assert [round(p, 5) for p in points(loss, 4)] == [0.23819, 0.01473, 0.08773, 0.11318]
    recomputed = [0.238194813289, 0.0147336997911, 0.0877341610382, 0.113183304738, 0.11070909138]
    assert points(loss, 5) == pytest.approx(recomputed, abs=1e-12)
    assert loss.mean() == pytest.approx(4.49, rel=1e-12)
    assert loss.sd() ** 2 == pytest.approx(15.3003, rel=1e-10)


@engines
def test_c15_panjer_with_mass_at_zero(engine):
    """Panjer (1981): sizes with a probability at zero, three counts of the class."""
    sizes = table([0.3, 0.25, 0.2, 0.15, 0.1])
    counts = {
        "poisson": Poisson(mean=2.5),
        "negbin": NegativeBinomial(mean=1.7 * 1.4, dispersion=1 / 1.7),
        "binomial": Binomial(trials=8, probability=0.3),
    }
    expected = {
        "poisson": [0.17377394345, 0.108608714657, 0.120827195055, 0.126540465983, 0.123968433433],
        "negbin": [0.313089985547, 0.0940851219193, 0.0977202289026, 0.0972693503626, 0.0917103251094],
        "binomial": [0.151710880991, 0.115223453917, 0.130465037378, 0.137661656884, 0.134845719394],
    }
    for name, count in counts.items():
        assert points(engine.annual_loss(count, sizes), 5) == pytest.approx(expected[name], abs=1e-12)


@engines
def test_c17_a_start_below_the_smallest_double(engine):
    """Panjer and Willmot (1986): rate 2000, P(S = 0) = exp(-2000); reference by a 40-digit recursion."""
    loss = engine.annual_loss(Poisson(mean=2000), table([0, 0.5, 0.3, 0.2]))
    expected = {
        3200: 0.00803644393678,
        3300: 0.116777598936,
        3400: 0.504268546206,
        3500: 0.884766074868,
        3600: 0.991216850597,
        3700: 0.999798132148,
    }
    for x, value in expected.items():
        assert loss.cdf(x) == pytest.approx(value, rel=1e-9)
    assert point(loss, 3400) == pytest.approx(0.0047679972421, rel=1e-9)


def test_c19_no_wrap_around():
    """Embrechts and Frei (2009), Grübel and Hermesmeier (1999): Poisson(20) on 32 points; a plain transform
    puts 3.36e-3 at zero instead of 2.06e-9."""
    one = SizeTable(sizes=[1], probabilities=[1])
    loss = Fourier(step=1, points=32).annual_loss(Poisson(mean=20), one)
    exact = {0: 2.06115362244e-09, 5: 5.49640965984e-05, 12: 0.0176251712677, 20: 0.0888353173921}
    assert [point(loss, k) for k in exact] == pytest.approx(list(exact.values()), abs=1e-12)


@engines
def test_c20_two_compound_poisson_lines(engine):
    """Bowers et al. (1997), theorem 12.4.1: sums of compound Poisson sums are compound Poisson."""
    lines = (
        Line(name="a", frequency=Poisson(mean=2), severity=table([0, 0.6, 0.4])),
        Line(name="b", frequency=Poisson(mean=3), severity=table([0, 0.2, 0.3, 0.5])),
    )
    loss = engine.book(Book(lines=lines)).losses[GROSS]
    expected = [0.00673794699909, 0.0121283045984, 0.022369984037, 0.0372743227989, 0.0494322743641]
    assert points(loss, 5) == pytest.approx(expected, abs=1e-12)
    mixed = engine.annual_loss(Poisson(mean=5), table([0, 0.36, 0.34, 0.30]))
    assert points(loss, 20) == pytest.approx(points(mixed, 20), abs=1e-13)


@engines
def test_c21_moments(engine):
    """Loss Models, chapter 9: mean and variance of compound Poisson(30) and NB(3, 10), lognormal(7, 1)."""
    for count, variance in (
        (Poisson(mean=30), 266583315.615),
        (NegativeBinomial(mean=30, dispersion=1 / 3), 1247288527.36),
    ):
        loss = engine.annual_loss(count, Lognormal(mu=7, sigma=1))
        assert loss.mean() == pytest.approx(54241.2724337, rel=1e-11)
        assert loss.sd() ** 2 == pytest.approx(variance, rel=1e-10)
        for measure, value in (("mean", loss.mean()), ("sd", loss.sd())):
            low, high = loss.accuracy(measure)
            assert low <= value <= high
            assert high - low < 1e-9 * value


LN = Lognormal(mu=0, sigma=2)
LUO_SHEVCHENKO = {
    "C30": (
        Poisson(mean=0.1),
        LN,
        (13.0767195053, 27.0543448739, 105.36281409),
        (56.7015584689, 275.53963835),
    ),
    "C32": (
        Poisson(mean=10),
        LN,
        (555.757260894, 797.51957352, 1779.15848156),
        (1094.5644877, 3242.57502248),
    ),
    "C35": (
        Poisson(mean=0.1),
        GeneralizedPareto(shape=1, scale=1),
        (9.09823815011, 19.175660249, 99.3521968719),
        None,
    ),
    "C36": (
        Poisson(mean=10),
        GeneralizedPareto(shape=1, scale=1),
        (1057.69287776, 2064.80783954, 10081.0596224),
        None,
    ),
    "C38": (
        NegativeBinomial(mean=10, dispersion=0.25),
        LN,
        (576.938163424, 819.317234388, 1800.71494588),
        (1116.1559776, 3263.63103732),
    ),
    "C39": (
        Poisson(mean=25),
        Lognormal(mu=1, sigma=1.5),
        (656.04469995, 792.449499208, 1246.50971622),
        (909.526563965, 1751.40346062),
    ),
    "C41": (
        Poisson(mean=20),
        GeneralizedPareto(shape=0.7, scale=2),
        (704.832617794, 1072.40680214, 3055.14961289),
        (2071.25802854, 9889.44359174),
    ),
    "C44": (
        Poisson(mean=5),
        GeneralizedPareto(shape=0.8, scale=1.5),
        (294.382006943, 496.600227728, 1735.34697781),
        (1378.5753848, 8563.67122644),
    ),
    "C45": (
        Poisson(mean=3),
        Lognormal(mu=0, sigma=1),
        (21.7011090082, 25.7075850927, 37.0011611843),
        (28.2759991792, 46.9644520593),
    ),
    "C48": (
        Poisson(mean=20),
        Lomax(alpha=4, scale=3),
        (42.9892646937, 47.1151898368, 58.302767133),
        (49.7298469949, 69.1838632736),
    ),
}


@pytest.mark.parametrize(
    ("engine", "rel"),
    # The references carry 12 digits; a pole or spike of the density at zero costs the Fourier engine a few.
    # Panjer's rounding is second order on a lattice a hundred times as coarse.
    [(Fourier(), 3e-8), (Panjer(), 2e-3)],
    ids=["fourier", "panjer"],
)
@pytest.mark.parametrize("case", LUO_SHEVCHENKO)
def test_luo_and_shevchenko(case, engine, rel):
    """Luo and Shevchenko (2009), Computing tails of compound distributions, J. Computational Finance 13(2);
    .999 quantiles recalled (105.36, 1779, 99.352, 10081), all recomputed by numerical inversion with 40
    digits. Infinite means give an infinite TVaR, never a number."""
    count, size, quantiles, tails = LUO_SHEVCHENKO[case]
    loss = engine.annual_loss(count, size)
    expected = {
        ("value_at_risk", level): value for level, value in zip((0.99, 0.995, 0.999), quantiles, strict=True)
    }
    if tails:
        expected |= {
            ("tail_value_at_risk", level): value for level, value in zip((0.99, 0.999), tails, strict=True)
        }
    check(loss, expected, rel)
    if tails is None:
        assert loss.mean() == loss.tail_value_at_risk(0.99) == np.inf
        assert loss.accuracy("tail_value_at_risk", 0.99) == (np.inf, np.inf)


def test_c34_a_thousand_heavy_losses():
    """Luo and Shevchenko (2009), Poisson(1000)-lognormal(0, 2): 21149 at 99.9 %; on a lattice for a bracket
    of 1 %, the value itself still has eight digits."""
    loss = Fourier(accuracy=0.01).annual_loss(Poisson(mean=1000), LN)
    check(
        loss,
        {
            ("value_at_risk", 0.99): 12895.1015755,
            ("value_at_risk", 0.999): 21149.3957417,
            ("tail_value_at_risk", 0.999): 29421.5209405,
        },
        rel=1e-7,
    )


@engines
def test_compound_poisson_by_hand(engine):
    """Compound Poisson(2) on {1, 2, 3}: P(S = 5) = (437/600) exp(-2) and risk measures, by hand from the
    recursion."""
    loss = engine.annual_loss(Poisson(mean=2), table([0, 0.5, 0.3, 0.2]))
    assert point(loss, 5) == pytest.approx(437 / 600 * np.exp(-2), abs=1e-14)
    quantiles = {0.9: 7, 0.95: 8, 0.99: 11, 0.995: 12, 0.999: 15}
    tails = {0.9: 8.79561, 0.95: 10.03901, 0.99: 12.57169, 0.995: 13.60006, 0.999: 15.92147}
    for level in quantiles:
        assert loss.value_at_risk(level) == quantiles[level]
        assert loss.accuracy("value_at_risk", level) == (quantiles[level], quantiles[level])
        assert loss.tail_value_at_risk(level) == pytest.approx(tails[level], abs=5e-6)
    assert loss.expected_excess(5) == pytest.approx(0.5051403307, abs=1e-10)


def test_d7_far_tail():
    """Poisson(12)-lognormal(9, 1.5), by conditional Monte Carlo (Asmussen and Kroese 2006), six million
    paths, and by a second lattice: within four standard errors and to six digits."""
    loss = Fourier().annual_loss(Poisson(mean=12), Lognormal(mu=9, sigma=1.5))
    conditional = {
        1e6: (0.0195540, 83e-7),
        2e6: (0.00236083, 74e-8),
        5e6: (1.355283e-4, 250e-10),
        1e7: (1.388291e-5, 200e-11),
    }
    for x, (value, error) in conditional.items():
        assert abs(loss.sf(x) - value) <= 4 * error
    assert loss.sf(5e6) == pytest.approx(1.355302e-4, rel=1e-6)
    assert loss.sf(1e7) == pytest.approx(1.388192e-5, rel=1e-5)


@pytest.mark.parametrize(
    ("step", "low", "high"),
    [
        (2000, 1_284_000, 1_312_000),
        (1000, 1_291_000, 1_305_000),
        (250, 1_296_250, 1_299_750),
        (50, 1_297_700, 1_298_400),
    ],
)
def test_bracket_by_rounding(step, low, high):
    """Poisson(12)-lognormal(9, 1.5) limited to 1m: bracket of VaR 99.5 % by rounding down and up, four steps,
    computed separately to the point; TVaR at the finest step. The engine's bracket lies inside."""
    loss = Fourier(step=step).annual_loss(Poisson(mean=12), Lognormal(mu=9, sigma=1.5), Cover(limit=1e6))
    plain = rounded_bracket(loss)
    assert [side.value_at_risk(0.995) for side in plain] == pytest.approx((low, high), rel=1e-12)
    if step == 50:
        tails = [side.tail_value_at_risk(0.995) for side in plain]
        assert tails == pytest.approx((1_488_239, 1_488_959), abs=1)
    for measure in ("value_at_risk", "tail_value_at_risk"):
        outer, inner = [side.measure(measure, 0.995) for side in plain], loss.accuracy(measure, 0.995)
        assert outer[0] <= inner[0] < loss.measure(measure, 0.995) < inner[1] <= outer[1]


def rounded_bracket(loss):
    """The bracket of a loss from payments rounded down and up alone."""
    transform = LatticeTransform(loss.compound, loss.step, loss.points)
    rounded = []
    for total, upward in zip(transform.sides(), (False, True), strict=True):
        least, most = bounded_survivals(total, transform.wrapped)
        index = np.arange(float(loss.points))
        inside = sum(line.expected_rounded(index, upward) for line in transform.lines)
        rounded.append(Rounded(least, most, loss.step * inside))
    return bracket("fourier", loss.compound, loss.step, *rounded)


@pytest.mark.parametrize(
    ("deductible", "mean", "sd", "quantiles", "tail"),
    [
        (10e3, 79_351.59, 26_142.54, (113_800, 124_900, 146_650), 158_049),
        (25e3, 135_865.53, 50_662.98, (203_000, 225_100, 268_900), 292_070),
        (50e3, 183_466.55, 77_453.22, (286_800, 321_900, 392_050), 429_517),
        (100e3, 226_920.16, 110_466.29, (375_700, 428_650, 535_950), 594_014),
    ],
)
def test_what_deductibles_keep(deductible, mean, sd, quantiles, tail):
    """What deductibles keep of Poisson(12)-lognormal(9, 1.5): closed-form moments; quantiles computed
    separately on a lattice of 50, checked by four million simulated years."""
    loss = Fourier().annual_loss(Poisson(mean=12), Lognormal(mu=9, sigma=1.5), Cover(limit=deductible))
    assert loss.mean() == pytest.approx(mean, abs=0.01)
    assert loss.sd() == pytest.approx(sd, abs=0.01)
    assert [loss.value_at_risk(level) for level in (0.9, 0.95, 0.99)] == pytest.approx(quantiles, abs=75)
    assert loss.tail_value_at_risk(0.99) == pytest.approx(tail, abs=75)


@engines
def test_d02_aggregate_deductible(engine):
    """SOA sample question with published solution: Poisson(2), losses 1-3, aggregate deductible 2: 2.36."""
    size = SizeTable(sizes=[1, 2, 3], probabilities=[1 / 3, 1 / 3, 1 / 3])
    loss = engine.annual_loss(Poisson(mean=2), size, Cover(annual_retention=2))
    assert loss.mean() == pytest.approx(2.36089408863, rel=1e-10)


@engines
def test_d04_geometric_stop_loss(engine):
    """SOA sample question with published solution: geometric count with mean 4, losses of 40, excess of 100:
    92.16."""
    size = SizeTable(sizes=[40], probabilities=[1])
    loss = engine.annual_loss(NegativeBinomial(mean=4, dispersion=1), size, Cover(annual_retention=100))
    assert loss.mean() == pytest.approx(92.16, rel=1e-10)


@engines
def test_d05_d06_means_with_deductibles(engine):
    """SOA sample questions with published solutions: 1,941 (exponential 200 over 100, 16 losses) and 22,500
    (dental, after 50 % inflation)."""
    fleet = engine.annual_loss(Poisson(mean=16), Exponential(mean=200), Cover(deductible=100))
    assert fleet.mean() == pytest.approx(1940.89811108, rel=1e-11)
    dental = SizeTable(sizes=[60, 120, 180, 300], probabilities=[0.25] * 4)
    count = NegativeBinomial(mean=300, dispersion=500 / 300**2)
    assert engine.annual_loss(count, dental, Cover(deductible=100)).mean() == pytest.approx(22_500, rel=1e-12)


@engines
def test_d07_concert_hall(engine):
    """SOA sample question (value from memory, recomputed): annual deductible 30, answer 14 (13.5128)."""
    size = SizeTable(sizes=[10, 20, 50], probabilities=[0.3, 0.3, 0.4])
    loss = engine.annual_loss(Poisson(mean=1), size, Cover(annual_retention=30))
    assert loss.mean() == pytest.approx(13.5128439542, rel=1e-10)


def test_d10_three_persons():
    """SOA sample question (answer from memory, recomputed): three persons, group deductible 1: 2.064."""
    size = SizeTable(sizes=[0, 1, 2, 3], probabilities=[0.4, 0.3, 0.2, 0.1])
    loss = Fourier().annual_loss(CountTable(probabilities=[0, 0, 0, 1]), size, Cover(annual_retention=1))
    assert loss.mean() == pytest.approx(2.064, rel=1e-12)


@engines
def test_d21_moments_from_moments(engine):
    """SOA sample question (value from memory, recomputed): N mean 110 variance 750, X mean 1101 sd 70."""
    size = SizeTable(sizes=[1031, 1171], probabilities=[0.5, 0.5])
    loss = engine.annual_loss(NegativeBinomial(mean=110, dispersion=640 / 110**2), size)
    assert loss.mean() == pytest.approx(121_110, rel=1e-12)
    assert loss.sd() ** 2 == pytest.approx(909_689_750, rel=1e-10)


def test_d23_two_factories():
    """SOA sample question (value from memory, recomputed): dividend .5888 after retained losses."""
    size = SizeTable(sizes=[0, 1, 2, 3], probabilities=[0.4, 0.3, 0.2, 0.1])
    kept = Fourier().annual_loss(CountTable(probabilities=[0, 0, 1]), size, Cover(limit=1))
    left = 3 - 0.15 * 3 - 2 * 1.1 * size.expected_excess(1)
    assert left - kept.layer_mean(0, left) == pytest.approx(0.5888, rel=1e-12)


@engines
def test_d24_a_point_probability(engine):
    """CAS exam 3 question (value from memory, recomputed): P(S = 600) = .0599."""
    size = SizeTable(sizes=[100, 500, 1000], probabilities=[0.8, 0.16, 0.04])
    loss = engine.annual_loss(Poisson(mean=5), size)
    assert loss.sf(599) - loss.sf(600) == pytest.approx(0.0598928622141, abs=1e-12)


@engines
def test_d25_binomial_stop_loss(engine):
    """SOA-style stop loss: binomial(3, .2), sizes 1-4, excess of 3: .12816."""
    size = SizeTable(sizes=[1, 2, 3, 4], probabilities=[0.6, 0.2, 0.1, 0.1])
    loss = engine.annual_loss(Binomial(trials=3, probability=0.2), size, Cover(annual_retention=3))
    assert loss.mean() == pytest.approx(0.12816, rel=1e-11)


@engines
def test_d33_sundt_reinstatements(engine):
    """Sundt (1991): layer of 10 with k reinstatements pays E[min(S, (k + 1) 10)]."""
    size = SizeTable(sizes=[2, 4, 6, 8, 10], probabilities=[0.3, 0.2, 0.15, 0.1, 0.25])
    recoveries = {0: 3.73262099949, 1: 4.39975886482, 2: 4.47379293614, 3: 4.47962869789}
    for k, value in recoveries.items():
        paid = engine.annual_loss(Poisson(mean=0.8), size, Cover(limit=10, annual_limit=10 * (k + 1)))
        assert paid.mean() == pytest.approx(value, rel=1e-10)
    once = engine.annual_loss(Poisson(mean=0.8), size).layer_mean(0, 10)
    assert recoveries[1] / (1 + once / 10) == pytest.approx(3.20387409292, rel=1e-10)


@engines
def test_reinstatements_by_hand(engine):
    """Poisson(2) on {1, 2, 3}, layer 2 in excess of 1, by hand: with one reinstatement 1.3380243637, with
    an annual retention of 1 and limit 2 .6094157124."""
    size = table([0, 0.5, 0.3, 0.2])
    layer = {"deductible": 1, "limit": 2}
    expected = {(0, 2): 1.0435134530, (0, 4): 1.3380243637, (1, 2): 0.6094157124}
    for (retention, limit), value in expected.items():
        cover = Cover(**layer, annual_retention=retention, annual_limit=limit)
        assert engine.annual_loss(Poisson(mean=2), size, cover).mean() == pytest.approx(value, abs=1e-10)


@engines
def test_d35_layer_of_an_exponential(engine):
    """Loss Models, chapters 8 and 9: 1500 in excess of 500, exponential(1000), Poisson(3)."""
    loss = engine.annual_loss(Poisson(mean=3), Exponential(mean=1000), Cover(deductible=500, limit=1500))
    assert loss.mean() == pytest.approx(1413.58612943, rel=1e-11)
    assert loss.sd() ** 2 == pytest.approx(1609154.70973, rel=1e-10)
    assert loss.cdf(0) == pytest.approx(0.162091874309, rel=1e-9)


def test_lomax_retained():
    """Lomax(3, 2000), Poisson(8), 500 kept of each loss: mean 2,880, sd sqrt(8 * 160,000) = 1131.3708."""
    loss = Fourier().annual_loss(Poisson(mean=8), Lomax(alpha=3, scale=2000), Cover(limit=500))
    assert loss.mean() == pytest.approx(2880, rel=1e-12)
    assert loss.sd() == pytest.approx(1131.3708, abs=5e-5)


@engines
def test_e17_atoms_at_the_quantile(engine):
    """Acerbi and Tasche (2002): VaR and TVaR of a discrete loss, the atom split at the level."""
    size = SizeTable(sizes=[0, 10, 20, 50, 100, 500], probabilities=[0.8, 0.08, 0.05, 0.04, 0.02, 0.01])
    loss = engine.annual_loss(Binomial(trials=1, probability=1 - 1e-15), size)
    for level, var, tail in (
        (0.9, 20, 96.0),
        (0.95, 50, 160.0),
        (0.975, 100, 260.0),
        (0.985, 100, 366.666666667),
    ):
        assert loss.value_at_risk(level) == var
        assert loss.tail_value_at_risk(level) == pytest.approx(tail, abs=1e-9)


def test_fourier_masses_of_the_textbook_example():
    """Loss Models, chapter 9 (value from memory, recomputed): exponential mean 10, span 2; first-moment
    matching puts .09365 at zero. The count is one, the correction for sampling taken off again."""
    compound = CompoundSum.of(
        (Line(name="x", frequency=CountTable(probabilities=[0, 1]), severity=Exponential(mean=10)),),
        {"x": Schedule.identity()},
    )
    masses = LatticeTransform(compound, 2.0, 64).lines[0].masses
    plain = [0.0936537653899, 0.164292699398, 0.134511485504, 0.110128689824, 0.0901657451551]
    assert masses.spread[:5] == pytest.approx(plain, abs=1e-12)
    assert masses.down[:2] == pytest.approx([1 - np.exp(-0.2), np.exp(-0.2) - np.exp(-0.4)], abs=1e-14)


def test_fourier_masses_keep_three_moments():
    """What the Fourier engine adds up has the probability, the mean and the second moment of the law."""
    law = Exponential(mean=10)
    compound = CompoundSum.of(
        (Line(name="x", frequency=CountTable(probabilities=[0, 1]), severity=law),),
        {"x": Schedule.identity()},
    )
    masses = LatticeTransform(compound, 2.0, 400).lines[0].masses
    places = 2.0 * np.arange(-1.0, 400.0)
    weights = np.concatenate((masses.under, masses.even))
    for power, moment in ((0, 1.0), (1, 10.0), (2, 200.0)):
        assert places**power @ weights == pytest.approx(moment, rel=1e-6)
