"""Accuracy asked for and resources: kept, stated or refused, and known before the work."""

import logging

import numpy as np
import pytest

from lossagg.cover import Cover
from lossagg.engines import fourier as module
from lossagg.engines.book import Book, Line
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.resources import BracketWarning, OutOfReachError
from lossagg.errors import EngineError
from lossagg.families import (
    CountTable,
    Exponential,
    Lognormal,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
)

LEVELS = ((0.995, 1.0), (0.999, 2.0))


def widths(loss):
    """Relative widths of the two brackets watched."""
    for level, factor in LEVELS:
        low, high = loss.accuracy("value_at_risk", level)
        yield (high - low) / low / factor


@pytest.mark.parametrize("accuracy", [3e-2, 5e-4])
@pytest.mark.parametrize(
    "model",
    [
        (Poisson(mean=4), Lognormal(mu=8, sigma=1.8)),
        (NegativeBinomial(mean=50, dispersion=0.3), Pareto(alpha=1.6, minimum=5)),
        (Poisson(mean=2000), Exponential(mean=3), Cover(deductible=2, limit=6)),
    ],
)
def test_what_is_asked_for_is_kept(model, accuracy):
    """An accuracy in the arguments is a promise: no bracket that is watched is wider."""
    loss = Fourier(accuracy=accuracy).annual_loss(*model)
    assert max(widths(loss)) <= accuracy


def test_by_default_the_width_reached_is_stated(monkeypatch):
    """Without an accuracy of its own: a warning with the widths and the points, and a value as well."""
    monkeypatch.setattr(module, "MOST_POINTS", 2**14)
    with pytest.warns(BracketWarning, match=r"was asked for; the lattice has [\d,]+ points") as caught:
        loss = Fourier().annual_loss(Poisson(mean=5), Lognormal(mu=0, sigma=2))
    warning = caught[0].message
    assert warning.asked in (1e-3, 2e-3)
    assert warning.width > warning.asked
    assert warning.points == loss.points <= 2**14
    assert warning.step == loss.step
    assert warning.level in (0.995, 0.999)
    low, high = loss.accuracy("value_at_risk", warning.level)
    assert warning.width == pytest.approx((high - low) / low, rel=1e-9)


def test_a_refusal_that_is_foreseen_comes_before_the_work(monkeypatch):
    """A million losses with tail index 0.8 to a hundred thousandth: refused from the coarse look alone; the
    accuracy named instead is one that can be had."""
    model = (Poisson(mean=1e6), Pareto(alpha=0.8, minimum=1))
    with monkeypatch.context() as patch:
        patch.setattr(module._Pass, "over", None)
        with pytest.raises(
            OutOfReachError, match=r"takes about [\d,]+ lattice points, and 4,194,304 \("
        ) as caught:
            Fourier(accuracy=1e-5).annual_loss(*model)
    error = caught.value
    assert error.asked == error.value == 1e-5
    assert error.width > 4e-5
    assert error.needed > module.MOST_POINTS
    assert "Ask for accuracy=0.009 or more, or leave accuracy out" in str(error)


def test_a_refusal_after_the_work_states_what_was_reached(monkeypatch):
    """Two thirds of what the lattice gives: too close to call before the work, refused after it. What is
    named instead works."""
    monkeypatch.setattr(module, "MOST_POINTS", 2**14)
    model = (Poisson(mean=50), Lognormal(mu=0, sigma=1.5))
    with pytest.warns(BracketWarning):
        reached = max(widths(Fourier(accuracy=None).annual_loss(*model)))
    asked = reached / 1.5
    with pytest.raises(OutOfReachError, match="is what is reached") as caught:
        Fourier(accuracy=asked).annual_loss(*model)
    error = caught.value
    factor = dict(LEVELS)[error.level]
    assert error.asked == pytest.approx(factor * asked)
    assert error.width == pytest.approx(factor * reached, rel=0.1)
    assert error.needed > 1.3 * 2**14
    instead = float(str(error).split("accuracy=")[1].split()[0])
    assert reached <= instead < 3 * reached
    assert max(widths(Fourier(accuracy=instead).annual_loss(*model))) <= instead


def test_an_accuracy_on_a_lattice_that_is_given():
    """Points or a step of the user's own do not switch the accuracy off."""
    model = (Poisson(mean=20), Exponential(mean=1.0))
    for lattice in ({"points": 500}, {"step": 0.1}, {"points": 500, "step": 0.1}):
        with pytest.raises(OutOfReachError, match="the lattice given has"):
            Fourier(accuracy=1e-3, **lattice).annual_loss(*model)
        assert Fourier(accuracy=0.5, **lattice).annual_loss(*model).points > 300


def test_a_book_names_the_subject_that_is_refused(monkeypatch):
    """In a book the refusal stands beside the subject, the others are computed."""
    monkeypatch.setattr(module, "MOST_POINTS", 2**16)
    lines = (
        Line(
            name="small", frequency=Poisson(mean=1), severity=SizeTable(sizes=[1, 2], probabilities=[0.5] * 2)
        ),
        Line(name="large", frequency=Poisson(mean=9e4), severity=Pareto(alpha=0.9, minimum=1)),
    )
    result = Fourier(accuracy=1e-4).book(Book(lines=lines))
    assert [subject.name for subject in result.losses] == ["small"]
    assert all("lattice points" in reason for reason in result.refused.values())
    assert "large" in {subject.name for subject in result.refused}


@pytest.mark.parametrize("engine", [Fourier(), Panjer(), Fourier(points=3000), Fourier(step=0.5)], ids=repr)
@pytest.mark.parametrize(
    "model",
    [
        (Poisson(mean=3), Exponential(mean=40.0)),
        (NegativeBinomial(mean=30, dispersion=0.5), Lognormal(mu=2, sigma=1.6)),
        (Poisson(mean=400), Pareto(alpha=2.2, minimum=5.0), Cover(limit=200.0)),
    ],
)
def test_the_estimate_is_what_happens(engine, model):
    """Points and step of the first pass, which is the last one too where it is good enough; the bracket is
    at most three times as wide as expected."""
    expected, loss = engine.resources(*model), engine.annual_loss(*model)
    assert expected.engine == engine.name
    assert (expected.points, expected.step) == (loss.points, loss.step)
    assert max(widths(loss)) <= 3 * expected.width
    assert max(widths(loss)) >= expected.width / 6
    assert expected.memory >= 8 * loss.points
    assert 0 < expected.seconds < 60
    assert f"{loss.points:,} lattice points" in str(expected)


def test_the_estimate_grows_with_the_accuracy_asked_for():
    model = (Poisson(mean=100), Lognormal(mu=0, sigma=2))
    coarse, fine = (Fourier(accuracy=accuracy).resources(*model) for accuracy in (1e-2, 1e-4))
    assert fine.points > 5 * coarse.points
    assert fine.memory > 5 * coarse.memory
    assert fine.seconds > 5 * coarse.seconds
    assert coarse.width <= 1.001e-2
    assert fine.width <= 1.001e-4


def test_an_estimate_where_nothing_is_rounded_or_nothing_happens():
    table = SizeTable(sizes=[1, 2, 3], probabilities=[0.5, 0.3, 0.2])
    for engine in (Fourier(), Panjer()):
        assert engine.resources(Poisson(mean=2), table).width == 0.0
        assert engine.resources(Poisson(mean=2), table, Cover(deductible=5)).memory == 0.0
    with pytest.raises(EngineError, match="retained cap"):
        Fourier().resources(Poisson(mean=2), table, Cover(deductible=1, retained_cap=4))
    with pytest.raises(EngineError, match="Panjer's recursion needs"):
        Panjer().resources(CountTable(probabilities=np.full(2000, 1 / 2000).tolist()), table)


def test_long_work_is_announced(caplog, monkeypatch):
    """What takes seconds is said before it begins, where the notes of a run are shown."""
    model = (Poisson(mean=100), Lognormal(mu=0, sigma=2))
    with caplog.at_level(logging.INFO, logger="lossagg"):
        Fourier().annual_loss(*model)
        assert not caplog.records
        monkeypatch.setattr(module, "_WORTH_A_NOTE", 0.01)
        loss = Fourier().annual_loss(*model)
    (record,) = caplog.records
    assert f"the Fourier engine needs about {loss.points:,} lattice points" in record.getMessage()
    assert "MB of memory" in record.getMessage()
