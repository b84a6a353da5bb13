"""The predictive value at risk of the annual loss: closed forms, repeated samples, and what it is not for.

One loss a year makes the annual loss the size of a loss, whose predictive quantile is known.
"""

import numpy as np
import pytest
from scipy import special

import lossagg
from lossagg.cover import Cover
from lossagg.engines import Fourier
from lossagg.engines.book import GROSS, NET, Book, PlacedCover
from lossagg.fitting import compare_severities
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.predictive import DRAWS, _row, predictive_data
from lossagg.report.tables.predictive import predictive, sentence

ONCE = lossagg.CountTable(probabilities=[0.0, 1.0])


def once_a_year(losses, name="line"):
    tried = compare_severities(losses, ["lognormal"])
    return LineModel(name=name, frequency=ONCE, severity=tried.chosen.model, severities=tried)


def of(models, covers=(), levels=(0.995,), seed=1):
    book = Book(lines=tuple(model.line for model in models), covers=covers)
    losses = Fourier(accuracy=0.02).book(book).losses
    return predictive_data(book, models, losses, levels, seed=seed)


def exact_quantile(losses, level):
    """Quantile of a further lognormal loss: Student's law (Gerrard & Tsanakas 2011, Risk Analysis 31)."""
    logs, n = np.log(losses), len(losses)
    student = special.stdtrit(n - 1, level) * np.sqrt((n + 1) / (n - 1))
    return float(np.exp(logs.mean() + logs.std() * student))


def test_one_lognormal_loss_a_year():
    """The figure over the draws agrees with the exact one, inside its interval; the fitted one is the
    engine's own."""
    losses = np.exp(9 + 1.2 * np.random.default_rng(12).standard_normal(25))
    model = once_a_year(losses)
    entry = of([model], levels=(0.9, 0.99, 0.995))
    assert entry["draws"] == DRAWS
    assert (entry["subject"], entry["reason"]) == ("gross", None)
    for row in entry["levels"]:
        assert row["fitted"] == pytest.approx(float(model.severity.ppf(row["level"])), rel=1e-4)
        exact = exact_quantile(losses, row["level"])
        assert row["low"] < exact < row["high"]
        assert row["predictive"] == pytest.approx(exact, rel=0.05)
        assert row["predictive"] > row["fitted"]
        assert row["exceedance_of_fitted"] > 1 - row["level"]


def test_repeated_samples_fail_near_the_level_where_the_plug_in_fails_more_often(monkeypatch):
    """12 records of 20 losses from a known law: the true chance of a year beyond each figure, averaged. That
    of the figure as fitted is 1.2072 % in truth (computed in tests/fitting), that of the other 0.5 %."""
    monkeypatch.setattr("lossagg.portfolio.predictive.DRAWS", 32)
    random = np.random.default_rng(77)
    misses = []
    for k in range(12):
        model = once_a_year(np.exp(9 + 1.2 * random.standard_normal(20)))
        row = of([model], seed=k)["levels"][0]
        misses.append(special.ndtr(-(np.log([row["fitted"], row["predictive"]]) - 9) / 1.2))
    means, errors = np.mean(misses, axis=0), np.std(misses, axis=0) / np.sqrt(len(misses))
    assert abs(means[0] - 0.012072) < 4 * errors[0]
    assert abs(means[1] - 0.005) < 4 * errors[1]
    assert means[1] < 0.6 * means[0]


def test_same_seed_same_figures_and_another_stream():
    models = [once_a_year(np.exp(9 + np.random.default_rng(1).standard_normal(30)))]
    assert of(models, seed=3) == of(models, seed=3)
    assert of(models, seed=3) != of(models, seed=4)


def test_annual_terms_are_applied_to_the_quantile():
    """A stop loss leaves at most its retention until its limit is used up: as fitted and predictive alike."""
    model = once_a_year(np.exp(9 + 1.2 * np.random.default_rng(12).standard_normal(25)))
    gross = of([model], levels=(0.9, 0.995))
    stop = PlacedCover(name="stop", terms=Cover(annual_retention=30_000, annual_limit=100_000))
    net = of([model], covers=(stop,), levels=(0.9, 0.995))
    assert net["subject"] == "net"
    for before, after in zip(gross["levels"], net["levels"], strict=True):
        amount = before["predictive"]
        kept = amount - min(max(amount - 30_000, 0), 100_000)
        assert after["predictive"] == pytest.approx(kept, rel=1e-6)


def test_laws_that_are_given_have_no_uncertain_parameters():
    book = Book(
        lines=(LineModel(name="a", frequency=ONCE, severity=lossagg.Exponential(mean=5)).line,),
    )
    model = LineModel(name="a", frequency=ONCE, severity=lossagg.Exponential(mean=5))
    losses = Fourier().book(book).losses
    assert {GROSS, NET} <= set(losses)
    entry = predictive_data(book, [model], losses, (0.99,), seed=1)
    assert entry["levels"] == []
    assert (
        entry["reason"] == "no parameter was estimated from losses, so nothing tells how uncertain they are"
    )
    assert predictive_data(book, [model], losses, (0.99,), seed=1, withheld="why")["reason"] == "why"


def test_the_table_and_the_sentence():
    model = once_a_year(np.exp(9 + 1.2 * np.random.default_rng(12).standard_normal(25)))
    entry = of([model], levels=(0.9, 0.995))
    assessment = {
        "portfolio": {"currency": "EUR"},
        "headline": {"level": 0.995, "subject": "gross"},
        "predictive": entry,
    }
    table = predictive(assessment)
    assert table.title == "Value at risk with the parameters uncertain, gross, EUR"
    assert [row[0] for row in table.rows] == [0.9, 0.995]
    assert table.rows[1][5].value == entry["levels"][1]["predictive"]
    assert table.rows[1][3].words == "not computed"
    assert " to " in table.rows[1][4]
    assert f"drawn {DRAWS} times" in table.notes[1]
    assert "above the figure as fitted, which a year then exceeds with probability" in sentence(assessment)
    assert sentence(assessment).endswith("not 0.5%")
    none = {**assessment, "predictive": {**entry, "levels": [], "reason": "every law was given"}}
    assert predictive(none).rows == ()
    assert sentence(none) == "not in the figure; every law was given"
    assert sentence({**assessment, "predictive": None}) == ""


def test_more_simulated_years_narrow_the_interval_of_the_simulation_and_not_that_of_the_parameters():
    """Ten times the years: over twelve seeds the interval of the simulation is narrower by 3.16, within four
    standard errors of the mean logarithm; that of the parameters stays as it is, about 1.96 standard errors
    of log VaR by the delta method to either side."""
    model = once_a_year(np.exp(9 + 1.2 * np.random.default_rng(12).standard_normal(60)))
    book = Book(lines=(model.line,))
    exact = Fourier().book(book).losses
    ratios, rows = [], []
    for seed in range(12):
        both = [lossagg.Simulation(years=years, seed=seed).book(book).losses for years in (20_000, 200_000)]
        widths = [np.diff(np.log(one[GROSS].accuracy("value_at_risk", 0.995)))[0] for one in both]
        ratios.append(np.log(widths[0] / widths[1]))
        if not rows:
            for one in both:
                made = predictive_data(book, [model], exact, (0.995,), simulated=one, seed=1)
                rows.append(made["levels"][0])
                assert rows[-1]["simulation"] == list(one[GROSS].accuracy("value_at_risk", 0.995))
    assert abs(np.mean(ratios) - np.log(10) / 2) < 4 * np.std(ratios) / np.sqrt(len(ratios))
    assert rows[0]["parameters"] == rows[1]["parameters"]
    low, high = rows[0]["parameters"]
    assert low < rows[0]["fitted"] < high
    error = model.severity.sigma * np.sqrt((1 + special.ndtri(0.995) ** 2 / 2) / 60)
    assert np.log(high / low) == pytest.approx(2 * 1.96 * error, rel=0.25)


def test_a_draw_whose_tail_outruns_the_lattice_has_no_figure_there():
    """It is a large figure that is not known, not none: the lower end stays, the upper one is open."""
    tails = np.array([[0.5, 0.1, 0.01, 0.001]] * 61 + [[0.9, 0.5, 0.1, 0.02]] * 4)
    model = LineModel(name="line", frequency=ONCE, severity=lossagg.Exponential(mean=2.0))
    loss = Fourier(accuracy=0.02).book(Book(lines=(model.line,))).losses[GROSS]
    row = _row(tails, 1.0, 0.99, loss)
    assert row["parameters"] == [pytest.approx(row["fitted"]), None]
