"""The error the simulation states: ranks, standard errors, coverage, and what it refuses to state."""

import itertools

import numpy as np
import pytest
from scipy import stats
from scipy.optimize import brentq

from lossagg.cover import Cover
from lossagg.engines.blocks import prepare_line, run_block
from lossagg.engines.book import GROSS, Book, Line, PlacedCover, Subject
from lossagg.engines.sampled import SimulatedAnnualLoss, quantile_ranks
from lossagg.engines.simulation import Simulation
from lossagg.errors import DoesNotExistError, InputError
from lossagg.families import Exponential, Lognormal, Pareto, Poisson


def test_ranks_of_large_samples():
    """Ranks 994,861-995,139 of a million at 99.5 %, 9,989,804-9,990,196 of ten million at 99.9 %, computed
    here (normal approximation of the binomial; David and Nagaraja 2003, section 7.1)."""
    assert quantile_ranks(10**6, 0.995) == (994_861, 995_139)
    assert quantile_ranks(10**7, 0.999) == (9_989_804, 9_990_196)


@pytest.mark.parametrize(("years", "level"), [(100, 0.5), (1000, 0.99), (50_000, 0.995), (20, 0.9)])
def test_ranks_of_small_samples_are_exact(years, level):
    """By the binomial itself: coverage at least 95 %, and one rank closer on either side misses 2.5 %."""
    low, high = quantile_ranks(years, level)
    binomial = stats.binom(years, level)
    assert binomial.cdf(low - 1) <= 0.025 < binomial.cdf(low)
    assert binomial.sf(high - 1) <= 0.025 < binomial.sf(high - 2)


def test_the_value_at_risk_is_the_smallest_amount_reached_by_the_level():
    """Definition inf{x: F(x) >= level}, with levels that are not exact in binary."""
    loss = SimulatedAnnualLoss(np.random.default_rng(1).permutation(1000).astype(float))
    for k, level in ((995, 0.995), (700, 0.7), (290, 0.29), (1, 0.001), (1000, 0.9995)):
        assert loss.value_at_risk(level) == k - 1
    ties = SimulatedAnnualLoss(np.array([0.0, 0.0, 0.0, 5.0]))
    assert (ties.value_at_risk(0.75), ties.value_at_risk(0.76)) == (0.0, 5.0)
    assert ties.sf(np.array([-1.0, 0.0, 4.9, 5.0])).tolist() == [1.0, 0.25, 0.25, 0.0]


def test_measures_against_plain_arithmetic():
    annual = np.random.default_rng(2).lognormal(10.0, 1.0, 1000)
    loss = SimulatedAnnualLoss(annual)
    q = loss.value_at_risk(0.9)
    assert loss.mean() == pytest.approx(annual.mean(), rel=1e-13)
    assert loss.sd() == pytest.approx(annual.std(), rel=1e-13)
    assert loss.tail_value_at_risk(0.9) == pytest.approx(np.sort(annual)[900:].mean(), rel=1e-12)
    assert loss.layer_mean(q, 2 * q) == pytest.approx(np.clip(annual - q, 0, q).mean(), rel=1e-12)
    assert loss.layer_second_moment(q, 2 * q) == pytest.approx((np.clip(annual - q, 0, q) ** 2).mean())
    assert loss.expected_excess(q) == pytest.approx(np.maximum(annual - q, 0).mean(), rel=1e-12)


def test_sums_of_a_large_constant_do_not_drift():
    """Deviations, not a difference of squares: an sd of 1 on top of 1e12 survives."""
    annual = 1e12 + np.tile([-1.0, 1.0], 50_000)
    assert SimulatedAnnualLoss(annual).sd() == pytest.approx(1.0, rel=1e-9)
    assert SimulatedAnnualLoss(np.array([1e300, 3e300])).sd() == pytest.approx(1e300)


def test_standard_errors_of_known_laws():
    """Standard errors (Glasserman 2003; Manistre and Hancock 2005): exponential(1), 99 %, a million years:
    0.00994987 for the quantile, 0.0141067 for the tail value at risk; lognormal(0, 1), 99.5 %:
    0.0641068. Own numbers from the published formulas, within 5 %. One sample states a quantile's
    error to 10 % (it rests on the gap between two order statistics), so 40 samples are averaged."""
    n, samples = 10**5, 40
    rng = np.random.default_rng(3)
    exponential = [SimulatedAnnualLoss(rng.exponential(size=n)) for _ in range(samples)]
    lognormal = [SimulatedAnnualLoss(rng.lognormal(size=n)) for _ in range(samples)]
    for losses, measure, level, at_a_million in (
        (exponential, "value_at_risk", 0.99, 0.00994987437107),
        (exponential, "tail_value_at_risk", 0.99, 0.0141067359797),
        (lognormal, "value_at_risk", 0.995, 0.0641068474733),
        (exponential, "mean", None, 1e-3),
        # sqrt((m4 - s^4) / (4 s^2 n)) with m4 = 9, s = 1
        (exponential, "sd", None, np.sqrt(2.0) * 1e-3),
    ):
        stated = np.mean([loss.standard_error(measure, level) for loss in losses])
        assert stated == pytest.approx(at_a_million * np.sqrt(10.0), rel=0.05)


def test_intervals_cover_as_often_as_they_say():
    """1,000 simulations of 2,000 years, one seed each; the truth by closed form. Hits of a 95 % interval are
    binomial(1000, p): at least 95 % for the exact ranks, about 95 % for mean and standard deviation, and for
    the cost of a layer."""
    theta, levels = 1000.0, (0.9, 0.99)
    # Poisson(1) x exponential: P(S > x) = sum over n of pois(n) * gamma survival
    n = np.arange(1, 60)
    weights = stats.poisson.pmf(n, 1.0)

    def sf(x):
        return float(weights @ stats.gamma.sf(x / theta, n))

    truth = {level: brentq(lambda x, p=1 - level: sf(x) - p, 0.0, 50 * theta) for level in levels}
    # Memoryless: what a layer of one mean above one mean pays of a loss is e**-1 - e**-2 means.
    layer, cost = Cover(deductible=theta, limit=theta), theta * (np.exp(-1.0) - np.exp(-2.0))
    hits = dict.fromkeys((*levels, "mean", "sd", "layer"), 0)
    line = Line(name="fire", frequency=Poisson(mean=1.0), severity=Exponential(mean=theta))
    book = Book(lines=(line,), covers=(PlacedCover(name="layer", terms=layer),))
    prepared = (prepare_line(line, book, book.subjects),)
    for seed in range(1000):
        annual = run_block(book, book.subjects, prepared, seed=seed, block=0, years=2000)
        loss = SimulatedAnnualLoss(annual[GROSS])
        for level in levels:
            low, high = loss.accuracy("value_at_risk", level)
            hits[level] += low <= truth[level] <= high
        for measure, value in (("mean", theta), ("sd", np.sqrt(2.0) * theta)):
            low, high = loss.accuracy(measure)
            hits[measure] += low <= value <= high
        low, high = SimulatedAnnualLoss(annual[Subject("cover", "layer")]).accuracy("mean")
        hits["layer"] += low <= cost <= high
    for hit in hits.values():
        assert stats.binom.cdf(hit, 1000, 0.95) > 1e-3
    for key in ("mean", "sd", "layer"):
        assert stats.binom.sf(hits[key] - 1, 1000, 0.95) > 1e-3


def test_an_interval_says_when_the_sample_is_too_short():
    """99.9 % from 1,000 years: nothing bounds it above, unless the cover does."""
    engine = Simulation(years=1000)
    law = Poisson(mean=1.0), Lognormal(mu=9.0, sigma=1.0)
    assert engine.annual_loss(*law).accuracy("value_at_risk", 0.9999)[1] == np.inf
    capped = engine.annual_loss(*law, Cover(annual_limit=5000.0, share=0.5))
    assert capped.accuracy("value_at_risk", 0.9999) == (2500.0, 2500.0)
    assert engine.annual_loss(*law).accuracy("value_at_risk", 0.001)[0] == 0.0


@pytest.mark.parametrize(
    ("alpha", "finite", "missing"),
    [
        (0.9, ["value_at_risk"], ["mean", "tail_value_at_risk", "sd"]),
        (1.8, ["value_at_risk"], ["mean", "tail_value_at_risk", "sd"]),
        (3.0, ["value_at_risk", "mean", "tail_value_at_risk"], ["sd"]),
        (4.5, ["value_at_risk", "mean", "tail_value_at_risk", "sd"], []),
    ],
)
def test_no_error_is_stated_where_none_exists(alpha, finite, missing):
    """Mean and TVaR need a finite variance, the sd a finite fourth moment; a limit restores all."""
    engine = Simulation(years=2000)
    law = Poisson(mean=2.0), Pareto(alpha=alpha, minimum=100.0)
    loss, capped = engine.annual_loss(*law), engine.annual_loss(*law, Cover(annual_limit=1000.0))
    for measure, kind in itertools.chain(
        ((m, loss) for m in finite), ((m, capped) for m in (*finite, *missing))
    ):
        level = 0.9 if measure.endswith("risk") else None
        low, high = kind.accuracy(measure, level)
        assert low <= kind.measure(measure, level) <= high < np.inf
    for measure in missing:
        words = measure.replace("_", " ")
        with pytest.raises(
            DoesNotExistError, match=f"no standard error of the {words}: moments of order {alpha:.3g}"
        ):
            loss.accuracy(measure, 0.9 if measure.endswith("risk") else None)
    assert (loss.mean() == np.inf) == (alpha <= 1)
    assert (loss.tail_value_at_risk(0.9) == np.inf) == (alpha <= 1)
    assert (loss.sd() == np.inf) == (alpha <= 2)
    assert (loss.layer_second_moment(0.0) == np.inf) == (alpha <= 2)
    assert np.isfinite([capped.mean(), capped.sd(), capped.tail_value_at_risk(0.9)]).all()


def test_questions_without_an_answer():
    loss = SimulatedAnnualLoss(np.arange(10.0))
    with pytest.raises(InputError, match="unknown measure"):
        loss.standard_error("median")
    with pytest.raises(InputError, match=r"Write 0\.995 for 99\.5 %"):
        loss.value_at_risk(99.5)
    with pytest.raises(InputError, match="value_at_risk needs a level"):
        loss.accuracy("value_at_risk")
    assert repr(loss) == "SimulatedAnnualLoss(10 years, mean 4.5)"


def test_the_frame_says_what_the_measures_say():
    loss = Simulation(years=3000).annual_loss(Poisson(mean=2.0), Pareto(alpha=0.9, minimum=100.0))
    frame = loss.to_frame([0.9, 0.95])
    assert frame.loc[0.9, "value_at_risk"] == loss.value_at_risk(0.9)
    assert np.isinf(frame.loc[0.9, "tail_value_at_risk"])
    assert np.isnan(frame.loc[0.9, "tail_value_at_risk_low"])
    assert "3,000 years, mean inf" in repr(loss)
