"""A prior for the rate of a line: weighed as stated, printed, refused where it makes no sense."""

import numpy as np
import pytest
from folders import RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.fitting import fit_frequency, posterior_rate
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.evidence_cautions import evidence_cautions
from lossagg.portfolio.prior import PriorSection, weighted_rate
from lossagg.portfolio.what_if import refitted_frequency
from lossagg.report.page import line_section

WORTH = '{ rate = 0.3, source = "market study", worth = 200 }'
STANDARD = '{ rate = 0.3, source = "market study", full-credibility = { probability = 0.9, margin = 0.05 } }'


def with_prior(folder, prior, fit='["poisson"]'):
    old = 'frequency = { fit = ["poisson", "negative-binomial"] }'
    assert old in RECORDS
    return recorded_portfolio(folder, RECORDS.replace(old, f"frequency = {{ fit = {fit}, prior = {prior} }}"))


def model_of(folder, prior, fit='["poisson"]'):
    (model,) = read_portfolio(with_prior(folder, prior, fit)).models()
    return model


def test_a_prior_worth_exposure_gives_the_posterior_of_a_gamma_prior(tmp_path):
    model = model_of(tmp_path, WORTH)
    seen = float(model.seen.sum())
    expected = posterior_rate(60, seen, prior_rate=0.3, prior_exposure=200)
    assert model.rate.weight == pytest.approx(seen / (seen + 200), rel=1e-12)
    assert model.frequency.mean() == pytest.approx(expected.mean * model.forecast_exposure, rel=1e-9)
    # Variance of a gamma law of shape n + r k and rate E + k, from the definition.
    assert model.rate.standard_error == pytest.approx(np.sqrt(60 + 0.3 * 200) / (seen + 200), rel=1e-9)


def test_limited_fluctuation_takes_the_square_root_of_losses_over_the_standard(tmp_path):
    # 1,082 losses for probability 0.9 and margin 0.05: Klugman, Panjer & Willmot, Loss Models, example on
    # full credibility of Poisson counts, (1.645 / 0.05)**2; value from memory, recomputed here.
    standard = (1.6448536269514722 / 0.05) ** 2
    assert standard == pytest.approx(1082.217, abs=1e-3)
    model = model_of(tmp_path, STANDARD)
    weight = np.sqrt(60 / standard)
    own = 60 / float(model.seen.sum())
    assert model.rate.weight == pytest.approx(weight, rel=1e-9)
    wanted = (weight * own + (1 - weight) * 0.3) * model.forecast_exposure
    assert model.frequency.mean() == pytest.approx(wanted, rel=1e-9)


def test_enough_losses_are_believed_alone(tmp_path):
    own = model_of(tmp_path / "own", '{ rate = 5, source = "x", full-credibility = { losses = 60 } }')
    assert own.rate.weight == 1.0
    assert own.frequency.mean() == pytest.approx(60 / own.seen.sum() * own.forecast_exposure, rel=1e-12)
    much = model_of(tmp_path / "much", '{ rate = 5, source = "x", worth = 1e-9 }')
    assert much.frequency.mean() == pytest.approx(own.frequency.mean(), rel=1e-9)


def test_without_a_loss_the_prior_is_what_there_is():
    none = fit_frequency([0, 0, 0, 0], "poisson", [10.0, 10.0, 10.0, 10.0])
    section = {"rate": 0.02, "source": "x"}
    standard = PriorSection.model_validate({**section, "full-credibility": {"losses": 100}})
    found = weighted_rate(standard, none, "line[1].frequency")
    assert found.rate == 0.02
    assert found.law(none, 7.0).mean() == pytest.approx(0.14, rel=1e-12)
    worth = PriorSection.model_validate({**section, "worth": 60.0})
    found = weighted_rate(worth, none, "line[1].frequency")
    # Posterior of Gamma(0.02 * 60, 60) after no loss in 40: (1.2 + 0) / (60 + 40).
    assert found.rate == pytest.approx(0.012, rel=1e-12)
    assert found.law(none, 7.0).mean() == pytest.approx(0.084, rel=1e-12)
    assert found.own_interval[0] == 0.0


def test_a_line_counted_without_one_loss_is_fitted_again_with_its_prior(tmp_path):
    model = model_of(tmp_path, WORTH)
    again = refitted_frequency(model, model.severity, (0, -1))
    seen = float(model.seen.sum())
    wanted = posterior_rate(59, seen, prior_rate=0.3, prior_exposure=200).mean * model.forecast_exposure
    assert again.mean() == pytest.approx(wanted, rel=1e-9)


def test_the_weights_are_told_and_a_prior_the_records_contradict_is_a_caution(tmp_path):
    model = model_of(tmp_path, '{ rate = 3.0, source = "a guess", worth = 50 }')
    entry = line_evidence(model, draws=1, thresholds=2)
    credibility = entry["frequency"]["credibility"]
    assert credibility["weight"] == model.rate.weight
    assert entry["frequency"]["mean"] == model.frequency.mean()
    found = {caution["code"]: caution["message"] for caution in evidence_cautions([entry])}
    assert "a guess" in found["prior-rate"]
    assert "outside the 95 % interval" in found["prior-contradicted"]
    facts = dict(line_section(entry, 1, "EUR").facts)
    assert "a guess" in facts["Credibility of the rate"]
    assert "Buhlmann" in facts["Credibility of the rate"]
    assert "no-losses" not in {note.code for note in model.fit_notes}


@pytest.mark.parametrize(
    ("prior", "fit", "message"),
    [
        ('{ rate = 0.3, source = "x" }', '["poisson"]', "Give worth"),
        (
            '{ rate = 0.3, source = "x", worth = 1, full-credibility = { losses = 9 } }',
            '["poisson"]',
            "one of",
        ),
        (
            '{ rate = 0.3, source = "x", full-credibility = { margin = 0.1 } }',
            '["poisson"]',
            "probability and",
        ),
        ('{ rate = 0, source = "x", worth = 1 }', '["poisson"]', "rate"),
        ("{ rate = 0.3, worth = 1 }", '["poisson"]', "source"),
        ('{ rate = 0.3, source = "x", worths = 1 }', '["poisson"]', "Did you mean 'worth'"),
    ],
)
def test_a_prior_that_makes_no_sense_is_refused(tmp_path, prior, fit, message):
    with pytest.raises(InputError, match=message):
        model_of(tmp_path, prior, fit)


def test_a_prior_beside_a_given_law_is_refused(tmp_path):
    old = 'frequency = { fit = ["poisson", "negative-binomial"] }'
    text = RECORDS.replace(old, f'frequency = {{ family = "poisson", mean = 3, prior = {WORTH} }}')
    with pytest.raises(InputError, match="prior belongs to a fit"):
        read_portfolio(recorded_portfolio(tmp_path, text))


def test_a_law_whose_mean_is_not_free_takes_no_prior():
    fit = fit_frequency([3, 4, 5, 4, 4, 3, 5, 4], "binomial")
    prior = PriorSection.model_validate({"rate": 1.0, "source": "x", "worth": 1.0})
    with pytest.raises(InputError, match=r"line\[2\]\.frequency\.prior"):
        weighted_rate(prior, fit, "line[2].frequency")
