"""Means that may not exist are marked beside the figure, where no limit stands in the way; those of a fitted
law without a mean are not printed (Neslehova, Embrechts & Chavez-Demoulin 2006, J. Operational Risk 1).
"""

import numpy as np
import pytest

import lossagg
from lossagg.cover import Cover
from lossagg.engines import Fourier
from lossagg.engines.book import GROSS, Book, PlacedCover
from lossagg.fitting import compare_severities
from lossagg.portfolio.alarms import alarms_data
from lossagg.portfolio.assessment import subject_of
from lossagg.portfolio.line import LineModel

HEAVY = 1_000 * (1 - np.random.default_rng(6).random(25)) ** (-1 / 1.25)


def line(name, losses, family, **how):
    tried = compare_severities(losses, [family], **how)
    law = tried.chosen.model
    return LineModel(name=name, frequency=lossagg.Poisson(mean=3), severity=law, severities=tried)


@pytest.fixture(scope="module")
def models():
    calm = np.exp(7 + np.random.default_rng(2).standard_normal(40))
    return line("heavy", HEAVY, "pareto", truncation=1_000), line("calm", calm, "lognormal")


def test_the_interval_reaches_one_and_the_estimate_does_not(models):
    fit = models[0].severities.chosen
    assert fit.model.tail_index > 1
    assert fit.profile_interval("alpha")[0] < 1
    assert "infinite-mean-possible" in {note.code for note in fit.notes}


@pytest.mark.parametrize(
    ("covers", "marked"),
    [
        ((), ["line heavy", "gross", "net"]),
        # A limit caps what is paid, not what is left.
        ([Cover(deductible=5_000, limit=1e6)], ["line heavy", "gross", "net"]),
        # Without one, what is paid has no largest loss, and what is left is capped.
        ([Cover(deductible=5_000)], ["line heavy", "gross", "cover 0"]),
        ([Cover(deductible=5_000, annual_limit=1e7)], ["line heavy", "gross", "net"]),
        ([Cover(annual_retention=1e5)], ["line heavy", "gross", "cover 0"]),
        ([Cover(annual_retention=1e5, annual_limit=1e6)], ["line heavy", "gross", "net"]),
        (
            [Cover(deductible=5_000, limit=1e6), Cover(deductible=1_005_000)],
            ["line heavy", "gross", "cover 1"],
        ),
    ],
    ids=["no cover", "limit", "no limit", "annual limit", "stop loss", "limited stop loss", "two layers"],
)
def test_which_subjects_are_marked(models, covers, marked):
    placed = tuple(PlacedCover(name=str(k), terms=terms) for k, terms in enumerate(covers))
    book = Book(lines=tuple(model.line for model in models), covers=placed)
    found = alarms_data(book, models)
    assert [entry["subject"] for entry in found] == marked
    assert all(entry["lines"] == ["heavy"] for entry in found)


def test_a_cover_of_another_line_is_not_marked(models):
    cover = PlacedCover(name="other", terms=Cover(deductible=5_000), lines=("calm",))
    book = Book(lines=tuple(model.line for model in models), covers=(cover,))
    assert "cover other" not in [entry["subject"] for entry in alarms_data(book, models)]


def test_a_fitted_law_without_a_mean_prints_no_mean():
    """Alpha 0.53: no mean, no tail value at risk, with the reason; the value at risk is there."""
    model = line(
        "heavier", np.array([15e3, 30e3, 100e3]), "pareto", truncation=10e3, censored=[False, False, True]
    )
    assert model.severity.tail_index < 1
    book = Book(lines=(model.line,))
    loss = Fourier().book(book).losses[GROSS]
    entry = subject_of(loss, (0.9, 0.99), exact=True, withheld="", note=None)
    assert entry["mean"] is None
    for row in entry["levels"]:
        assert row["var"]["value"] > 0
        assert row["tvar"]["value"] is None
        assert row["tvar"]["reason"] == "does not exist: the mean is infinite"
    assert alarms_data(book, [model]) == []  # nothing printed, nothing to mark
    capped = Book(lines=(model.line,), covers=(PlacedCover(name="c", terms=Cover(limit=1e6)),))
    paid = Fourier().book(capped).losses[capped.subjects[2]]
    assert np.isfinite(paid.mean())
