"""Laws of the field that the exact engines must obey, and brackets that must hold, on random models."""

import itertools

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from lossagg.cover import Cover
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.recursive import Lines
from lossagg.engines.running import running_sums
from lossagg.engines.span import common_span
from lossagg.engines.transform import LatticeTransform
from lossagg.families import (
    Binomial,
    Exponential,
    Gamma,
    Lognormal,
    Lomax,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    Weibull,
)

COUNTS = st.one_of(
    st.builds(lambda m: Poisson(mean=m), st.floats(0.05, 10)),
    st.builds(lambda m, d: NegativeBinomial(mean=m, dispersion=d), st.floats(0.1, 8), st.floats(0.05, 1)),
    st.builds(lambda n, p: Binomial(trials=n, probability=p), st.integers(1, 12), st.floats(0.05, 0.9)),
)
SIZES = st.one_of(
    st.builds(lambda m: Exponential(mean=m), st.floats(1, 1e6)),
    st.builds(lambda m, s: Lognormal(mu=m, sigma=s), st.floats(0, 10), st.floats(0.3, 1.4)),
    st.builds(lambda a, m: Pareto(alpha=a, minimum=m), st.floats(1.2, 4), st.floats(1, 1e4)),
    st.builds(lambda a, s: Lomax(alpha=a, scale=s), st.floats(1.2, 5), st.floats(10, 1e5)),
    st.builds(lambda k, s: Gamma(shape=k, scale=s), st.floats(0.3, 5), st.floats(1, 1e4)),
    st.builds(lambda k, s: Weibull(shape=k, scale=s), st.floats(0.5, 3), st.floats(1, 1e4)),
)
MODELS = st.tuples(COUNTS, SIZES)
# Quick and still far more accurate than what is asserted.
QUICK = Fourier(points=2**14)
FIGURES = tuple(itertools.product(("value_at_risk", "tail_value_at_risk"), (0.5, 0.95, 0.995)))
COARSE = (Fourier(points=400), Panjer(points=400))


@given(MODELS, st.floats(0.2, 0.9), st.floats(1.1, 4))
@settings(derandomize=True, deadline=None, max_examples=25, phases=[Phase.explicit, Phase.generate])
def test_the_bracket_holds_the_truth(model, quantile, spread):
    """25 random models with and without a layer, two engines: brackets from 400 points contain the
    value from a lattice forty times as fine, for VaR, TVaR and the survival function."""
    count, size = model
    start = float(size.ppf(quantile))
    for cover in (None, Cover(deductible=start, limit=spread * start)):
        truth = QUICK.annual_loss(count, size, cover)
        for engine in COARSE:
            loss = engine.annual_loss(count, size, cover)
            for measure, level in itertools.product(
                ("value_at_risk", "tail_value_at_risk"), (0.5, 0.95, 0.995)
            ):
                low, high = loss.accuracy(measure, level)
                value = truth.measure(measure, level)
                assert low * (1 - 1e-9) <= value <= high * (1 + 1e-9), (engine.name, cover, measure, level)
                assert low * (1 - 1e-9) <= loss.measure(measure, level) <= high * (1 + 1e-9)
            for x in np.linspace(0.0, truth.value_at_risk(0.999), 7):
                low, high = (side.sf(x) for side in loss.bounds())
                assert low - 1e-9 <= truth.sf(x) <= high + 1e-9


@given(MODELS, st.floats(0.3, 0.9))
@settings(derandomize=True, deadline=None, max_examples=10)
def test_layers_stacked_end_to_end(model, quantile):
    """Per event, what the layers pay adds up to the ground-up mean; per year, so do stop-loss layers."""
    count, size = model
    cut = float(size.ppf(quantile))
    whole = QUICK.annual_loss(count, size)
    parts = (
        Cover(limit=cut),
        Cover(deductible=cut, limit=2 * cut),
        Cover(deductible=3 * cut),
    )
    means = [QUICK.annual_loss(count, size, part).mean() for part in parts]
    assert sum(means) == pytest.approx(whole.mean(), rel=1e-10)
    points = [0.0, whole.value_at_risk(0.4), whole.value_at_risk(0.9), whole.value_at_risk(0.99), np.inf]
    layers = [whole.layer_mean(a, b) for a, b in itertools.pairwise(points)]
    assert sum(layers) == pytest.approx(whole.mean(), rel=1e-9)


@given(MODELS)
@settings(derandomize=True, deadline=None, max_examples=10)
def test_the_cost_falls_and_is_convex_in_the_retention(model):
    """E[(S - x)+] never rises with x and its slope, minus the exceedance probability, never falls; its
    slope between two points lies between the exceedance probabilities at them."""
    loss = QUICK.annual_loss(*model)
    x = np.linspace(0.0, loss.value_at_risk(0.999), 25)
    costs = loss.expected_excess(x)
    assert (np.diff(costs) <= 1e-9 * loss.mean()).all()
    slopes = -np.diff(costs) / np.diff(x)
    sf = loss.sf(x)
    slack = 1e-7 + 1e-9 * loss.mean() / x[1]
    assert (slopes <= sf[:-1] + slack).all()
    assert (slopes >= sf[1:] - slack).all()


@given(MODELS, st.floats(1e-6, 1e6))
@settings(derandomize=True, deadline=None, max_examples=8)
def test_scaling_the_currency_scales_every_measure(model, factor):
    """No unit is hidden anywhere: cents or millions give the same model."""
    count, size = model
    loss, scaled = QUICK.annual_loss(count, size), QUICK.annual_loss(count, size.scaled(factor))
    for measure, level in (
        ("mean", None),
        ("sd", None),
        ("value_at_risk", 0.99),
        ("tail_value_at_risk", 0.95),
    ):
        assert scaled.measure(measure, level) == pytest.approx(
            factor * loss.measure(measure, level), rel=1e-6
        )


@given(MODELS, st.floats(1.05, 2))
@settings(derandomize=True, deadline=None, max_examples=8)
def test_more_risk_never_lowers_the_measures(model, factor):
    """More losses or larger losses: VaR and TVaR never fall (DR 2018/959, Art. 32(g))."""
    count, size = model
    base = QUICK.annual_loss(count, size)
    more = count if isinstance(count, Binomial) else count.with_exposure(factor)
    for riskier in (QUICK.annual_loss(more, size), QUICK.annual_loss(count, size.scaled(factor))):
        for level in (0.6, 0.9, 0.99, 0.999):
            assert riskier.value_at_risk(level) >= base.value_at_risk(level) * (1 - 1e-6)
            assert riskier.tail_value_at_risk(level) >= base.tail_value_at_risk(level) * (1 - 1e-6)
            assert base.tail_value_at_risk(level) >= base.value_at_risk(level)


@given(MODELS, st.floats(0.3, 0.95))
@settings(derandomize=True, deadline=None, max_examples=8)
def test_retained_and_ceded_make_the_whole(model, quantile):
    """In the mean, the deductible's part and the cover's part are the loss."""
    count, size = model
    cut = float(size.ppf(quantile))
    kept, paid = (QUICK.annual_loss(count, size, c).mean() for c in (Cover(limit=cut), Cover(deductible=cut)))
    assert kept + paid == pytest.approx(QUICK.annual_loss(count, size).mean(), rel=1e-10)


@pytest.mark.parametrize("engine", ["fourier", "panjer"])
def test_refining_the_lattice_converges_at_its_order(engine):
    """Halving the step divides the error by 16 in the Fourier engine, by 4 in Panjer's (closed form C07)."""
    exact = 5000 * np.log(0.8 / 0.01)
    errors = []
    for points in (300, 600):
        settings_ = {"points": points, "step": 60_000 / points}
        chosen = Fourier(**settings_) if engine == "fourier" else Panjer(**settings_)
        loss = chosen.annual_loss(NegativeBinomial(mean=4, dispersion=1), Exponential(mean=1000))
        errors.append(abs(loss.value_at_risk(0.99) - exact))
    assert errors[0] / errors[1] == pytest.approx(16 if engine == "fourier" else 4, rel=0.25)


@pytest.mark.parametrize("cover", [None, Cover(deductible=1000.0, limit=3000.0)], ids=["ground up", "layer"])
def test_two_engines_on_one_lattice(cover):
    """On the same step both engines round down and up alike, keep the means alike and bound the limited means
    alike, by transform and by recursion: exceedance probabilities of 1e-9 still to six digits."""
    model = (NegativeBinomial(mean=3, dispersion=0.4), Lognormal(mu=7, sigma=1.1), cover)
    fourier, panjer = (engine(points=4001, step=50.0).annual_loss(*model) for engine in (Fourier, Panjer))
    transform = LatticeTransform(fourier.compound, 50.0, 4001)
    lines = Lines(panjer.compound, 50.0, 4001)
    for ours, (theirs, _) in zip(transform.sides(), (lines.down(), lines.up()), strict=True):
        sums = [1 - running_sums(probabilities) for probabilities in (ours.probabilities, theirs)]
        seen = sums[1] > 1e-9
        assert sums[0][seen] == pytest.approx(sums[1][seen], rel=1e-6)
    for name in ("least", "most"):
        ours, theirs = (getattr(loss.limited, name) for loss in (fourier, panjer))
        # What the transform adds to the upper bound may wrap around: too large by this much at most.
        assert ours == pytest.approx(theirs, rel=1e-8)
        assert ours[1:] == pytest.approx(theirs[1:], rel=2e-9)
    gaps = [loss.limited.most - loss.limited.line for loss in (fourier, panjer)]
    assert gaps[0] == pytest.approx(gaps[1], rel=1e-6, abs=1e-8 * gaps[1].max())
    for level in (0.5, 0.9, 0.99, 0.995):
        ours, theirs = (loss.accuracy("value_at_risk", level) for loss in (fourier, panjer))
        assert ours == pytest.approx(theirs, abs=50.0)


@pytest.mark.parametrize(
    "count",
    [
        Poisson(mean=0.05),
        Poisson(mean=6),
        NegativeBinomial(mean=30, dispersion=0.4),
        Binomial(trials=40, probability=0.3),
    ],
    ids=lambda count: f"{count.family} {count.mean():g}",
)
def test_two_engines_on_one_lattice_far_out(count):
    """Where the sizes lie on the lattice the exceedance probabilities themselves are equal to 1e-6 relative
    down to 1e-9, by transform and by recursion."""
    size = SizeTable(sizes=[1, 2, 5, 11, 40], probabilities=[0.4, 0.3, 0.2, 0.08, 0.02])
    x = np.arange(3000.0) + 0.5
    fourier, panjer = (
        engine(points=3000, step=1.0).annual_loss(count, size).sf(x) for engine in (Fourier, Panjer)
    )
    seen = panjer > 1e-9
    assert panjer[seen].min() < 1e-8
    assert fourier[seen] == pytest.approx(panjer[seen], rel=1e-6)


def test_beyond_the_lattice_the_bracket_still_holds():
    """A lattice that ends at the 90 % quantile: bounds from the largest loss and from Markov's inequality
    hold, and the mean beyond is counted; with an infinite mean the upper bound is infinite."""
    model = (Poisson(mean=2), Lomax(alpha=2.2, scale=1000))
    truth = Fourier().annual_loss(*model)
    short = Fourier(points=101, step=truth.value_at_risk(0.9) / 100).annual_loss(*model)
    for level in (0.95, 0.99, 0.999):
        low, high = short.accuracy("value_at_risk", level)
        assert low <= truth.value_at_risk(level) <= high
        low, high = short.accuracy("tail_value_at_risk", level)
        assert low <= truth.tail_value_at_risk(level) <= high
        assert short.value_at_risk(level) == pytest.approx(truth.value_at_risk(level), rel=0.25)
    assert short.layer_mean(short.top) == pytest.approx(truth.layer_mean(short.top), rel=1e-2)
    assert short.mean() == truth.mean()
    endless = Fourier(points=101, step=50.0).annual_loss(Poisson(mean=2), Lomax(alpha=0.9, scale=1000))
    low, high = endless.accuracy("value_at_risk", 0.999)
    assert 0 < low < high == np.inf
    assert endless.mean() == np.inf
    assert endless.layer_mean(0.0, 1e6) < 1e6


@pytest.mark.parametrize("engine", [Fourier, Panjer])
def test_an_atom_beyond_the_lattice_is_not_lost(engine):
    """A lattice that ends below the limit: years that reach the limit still count as years with a payment."""
    cover = Cover(deductible=2.0, limit=4.0)
    loss = engine(points=300, step=0.01).annual_loss(Poisson(mean=0.05), Exponential(mean=1.0), cover)
    assert loss.sf(0.0) == pytest.approx(-np.expm1(-0.05 * np.exp(-2.0)), rel=1e-9)
    assert loss.sf(2.99) >= -np.expm1(-0.05 * np.exp(-6.0))


def test_amounts_with_a_common_span():
    """The step divides limits and tabulated sizes wherever they have a common measure worth having."""
    assert common_span([250.0, 1000.0, 1250.0]) == 250.0
    assert common_span([0.3, 0.7]) == pytest.approx(0.1, rel=1e-12)
    assert common_span([1e6 / 3, 2e6 / 3]) == pytest.approx(1e6 / 3, rel=1e-12)
    assert common_span([1.0, np.pi, np.e]) is None
    assert common_span([]) is None


def test_sizes_off_the_lattice_are_bracketed():
    """Sizes without a common span are rounded down and up; the truth, by enumeration, lies between."""
    size = SizeTable(sizes=[1.0, np.pi, 7.3], probabilities=[0.5, 0.3, 0.2])
    loss = Fourier(points=4000, step=0.01).annual_loss(Binomial(trials=2, probability=0.5), size)
    sums = {}
    for (a, p), (b, q) in itertools.product([(0.0, 0.5), (1.0, 0.25), (np.pi, 0.15), (7.3, 0.1)], repeat=2):
        sums[a + b] = sums.get(a + b, 0) + p * q
    for level in (0.4, 0.8, 0.97, 0.985):
        truth = min(x for x in sums if sum(p for y, p in sums.items() if y <= x) >= level)
        low, high = loss.accuracy("value_at_risk", level)
        assert low <= truth + 1e-9
        assert truth <= high + 1e-9
        assert high - low <= 0.021


def test_running_sums_do_not_gather_round_off():
    """A million tenths: thirteen digits, where a plain running sum keeps ten."""
    sums = running_sums(np.full(1_000_000, 0.1))
    assert sums[-1] == pytest.approx(100_000.0, rel=1e-13)
    assert sums[[0, 1023, 1024]] == pytest.approx([0.1, 102.4, 102.5], rel=1e-13)
    assert len(running_sums(np.ones(3))) == 3
