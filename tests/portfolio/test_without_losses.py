"""A line that had no loss: bound or prior for its rate, a severity given with its source, and the label."""

import json

import numpy as np
import pytest
from folders import given_portfolio
from scipy import integrate, optimize, stats

from lossagg.batch.checks import check_folder
from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.checking import check_portfolio
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.fit_report import fit_report
from lossagg.portfolio.parameter_draws import uncertain
from lossagg.pricing import price_options
from lossagg.report.fitting import fit_tables, render_fit
from lossagg.report.option_summary import summarise_options
from lossagg.report.options import render_options
from lossagg.report.page import line_section, render_report
from lossagg.report.summary import summarise
from lossagg.report.tables.totals import headline

SOURCE = 'source = "study of 40 ports, 2024"'
SEVERITY = f'{{ family = "lognormal", mu = 9, sigma = 1.2, {SOURCE} }}'
BOUND = "upper-bound"
HEAD = """
[portfolio]
name = "Quiet"
currency = "EUR"
valuation-date = 2024-12-31
levels = [0.9, 0.99]
capital-level = 0.99
"""
FIRE = """
[[line]]
name = "Fire"
frequency = { family = "poisson", mean = 2 }
severity = { family = "exponential", mean = 5000 }
"""


def quiet(*keys, frequency='{ fit = ["poisson"] }', severity=SEVERITY):
    """The table of a line without losses."""
    more = "\n".join(keys)
    return f'[[line]]\nname = "Cyber"\n{more}\nfrequency = {frequency}\nseverity = {severity}\n'


DECLARED = quiet("without-losses = true", "first-year = 2020")


def model_of(folder, line=DECLARED):
    return read_portfolio(given_portfolio(folder, HEAD + line)).models()[0]


def stops(folder, line):
    """What a check stops at, once per finding: message and remedy."""
    check = check_portfolio(given_portfolio(folder, HEAD + line))
    assert check["status"] == "stopped"
    return [(f["message"], f["remedy"]) for f in check["findings"] if f["severity"] == "stop"]


@pytest.mark.parametrize(("years", "bound", "mean"), [(5, 0.59915, 0.1), (10, 0.29957, 0.05)])
def test_the_rate_is_the_upper_bound_or_the_posterior_mean_and_never_zero(tmp_path, years, bound, mean):
    """Closed form -log(0.05) / years, by two other routes: the root of the probability of no loss, and the
    chi-square quantile of Garwood 1936, Biometrika 28; the mean by integrating Jeffreys' posterior."""
    root = optimize.brentq(lambda rate: stats.poisson.pmf(0, rate * years) - 0.05, 1e-6, 10, xtol=1e-14)
    assert root == pytest.approx(stats.chi2.ppf(0.95, 2) / 2 / years, rel=1e-10)
    assert root == pytest.approx(bound, abs=5e-6)
    keys = ("without-losses = true", f"first-year = {2025 - years}")
    assert model_of(tmp_path / "bound", quiet(*keys)).frequency.mean() == pytest.approx(root, rel=1e-12)
    weight, _ = integrate.quad(lambda root_rate: 2 * np.exp(-(root_rate**2) * years), 0, np.inf)
    moment, _ = integrate.quad(
        lambda root_rate: 2 * root_rate**2 * np.exp(-(root_rate**2) * years), 0, np.inf
    )
    assert moment / weight == pytest.approx(mean, rel=1e-9)
    asked = quiet(*keys, frequency='{ fit = ["poisson"], rate-without-losses = "posterior-mean" }')
    assert model_of(tmp_path / "mean", asked).frequency.mean() == pytest.approx(moment / weight, rel=1e-9)


def test_exposure_and_threshold_widen_the_bound_and_the_forecast_scales_it(tmp_path):
    given_portfolio(tmp_path)
    (tmp_path / "exposure.csv").write_text("year,exposure\n2022,10\n2023,20\n2024,30\n")
    keys = ("without-losses = true", 'exposure = "exposure.csv"', "forecast-exposure = 40")
    model = model_of(tmp_path, quiet(*keys, "reporting-threshold = 8000"))
    seen = 60 * stats.lognorm(1.2, scale=np.exp(9)).sf(8000)
    assert model.seen.sum() == pytest.approx(seen, rel=1e-9)
    assert model.frequency.mean() == pytest.approx(40 * -np.log(0.05) / seen, rel=1e-9)


def test_a_prior_is_weighed_against_the_years_without_a_loss(tmp_path):
    """Gamma(0.2 * 15, 15) after no loss in 5 years: mean 3 / 20, from the definition."""
    prior = '{ fit = ["poisson"], prior = { rate = 0.2, source = "pool of ports", worth = 15 } }'
    model = model_of(tmp_path, quiet("without-losses = true", "first-year = 2020", frequency=prior))
    assert model.frequency.mean() == pytest.approx(0.15, rel=1e-12)
    assert model.bound is None
    assert "no-losses" not in {note.code for note in model.fit_notes}


def test_a_bound_has_no_error_of_its_own_and_says_what_it_is(tmp_path):
    model = model_of(tmp_path)
    assert not uncertain([model])
    entry = line_evidence(model, draws=1, thresholds=2)
    assert entry["label"] == "no own data"
    assert entry["frequency"]["standard_errors"] == {}
    assert entry["frequency"]["intervals"] == {}
    assert entry["frequency"]["notes"] == []
    assert entry["frequency"]["bound"] == {
        "rate": model.bound.rate,
        "level": 0.95,
        "losses": 0,
        "exposure": 5.0,
    }
    facts = dict(line_section(entry, 1, "EUR").facts)
    assert facts["Label"] == "no own data"
    assert facts["Source of the severity"] == "study of 40 ports, 2024"
    assert facts["Rate without losses"].startswith(
        "0.59915 per unit of exposure, the one-sided 95% upper bound"
    )


def test_the_headline_is_labelled_wherever_it_stands(tmp_path):
    assessment = read_portfolio(given_portfolio(tmp_path, HEAD + DECLARED)).assess(years=4000)
    data = json.loads(json.dumps(assessment.to_dict()))
    assert data["headline"]["label"] == "no own data"
    assert data["headline"]["value"] > 0
    assert "no own data" in repr(assessment)
    cautions = {caution["code"]: caution["message"] for caution in data["cautions"]}
    assert cautions["no-own-data"] == (
        "Line 'Cyber': no own data. There was no loss in 5 years; its rate of events is the one-sided 95% "
        "upper bound 0.59915 per unit of exposure, not an estimate. Its severity is given (source: study of "
        "40 ports, 2024). Nothing observed supports the size of its figures."
    )
    assert "extrapolation" not in cautions
    assert [(f["code"], f["severity"], f["line"]) for f in data["findings"]] == [
        ("no-own-data", "warning", "Cyber")
    ]
    assert '<p class="mark" id="label">no own data</p>' in render_report(data)
    assert "[no own data]" in summarise(data, None).headline[0]
    assert "no line has losses of its own" in " ".join(summarise(data, None).remarks)
    assert dict(zip([c.heading for c in headline(data).columns], headline(data).rows[0], strict=True))[
        "Label"
    ] == ("no own data")


def test_one_line_without_losses_beside_another_labels_the_figure_with_its_name(tmp_path):
    options = '[[option]]\nname = "Bare"\nuninsured = true\n[[option]]\nname = "Ten"\ndeductible = 10000\n'
    folder = given_portfolio(tmp_path, HEAD + FIRE + DECLARED + options)
    portfolio = read_portfolio(folder)
    data = portfolio.assess(years=4000).to_dict()
    assert data["headline"]["label"] == "no own data for Cyber"
    assert [line["label"] for line in data["lines"]] == [None, "no own data"]
    priced = price_options(portfolio, years=2000)
    assert priced["subject"]["label"] == "no own data for Cyber"
    assert "[no own data for Cyber]" in summarise_options(priced, None).headline[0]
    assert "no own data for Cyber" in render_options(priced)
    assert "no-own-data" in {caution["code"] for caution in priced["cautions"]}
    fits = fit_report(portfolio, draws=2)
    assert "no-own-data" in {caution["code"] for caution in fits["cautions"]}
    assert "Cyber: no own data." in fit_tables(fits)[0].notes
    assert "no own data" in render_fit(fits)
    alone = price_options(portfolio, years=2000, lines=["Fire"])
    assert alone["subject"]["label"] is None


def test_a_severity_that_no_loss_can_give_must_be_given_with_its_source(tmp_path):
    keys = ("without-losses = true", "first-year = 2020")
    ((what, remedy),) = stops(tmp_path / "fit", quiet(*keys, severity='{ fit = ["lognormal"] }'))
    assert what == "no loss of the line is left, so there is no severity to fit: it must be given"
    assert 'severity = { family = "lognormal", mu = ..., sigma = ..., source = "..." }' in remedy
    bare = '{ family = "lognormal", mu = 9, sigma = 1.2 }'
    ((what, remedy),) = stops(tmp_path / "bare", quiet(*keys, severity=bare))
    assert what.endswith("where its given severity comes from is not stated")
    assert remedy.startswith('Add source = "..." to its severity')
    given = '{ family = "poisson", mean = 0.1 }'
    ((what, _),) = stops(tmp_path / "rate", quiet(*keys, frequency=given))
    assert what.endswith("where its given frequency comes from is not stated")
    with pytest.raises(InputError, match="there is no severity to fit"):
        model_of(tmp_path / "fit", quiet(*keys, severity='{ fit = ["lognormal"] }'))


def test_a_given_rate_with_its_source_is_used_as_it_is(tmp_path):
    given = '{ family = "poisson", mean = 0.1, source = "board of the pool" }'
    model = model_of(tmp_path, quiet("without-losses = true", "first-year = 2020", frequency=given))
    assert model.frequency.mean() == 0.1
    assert not model.own_data


@pytest.mark.parametrize(
    "content", ["date,amount\n", "date,amount", "date;amount\n;\n;\n", "date,amount\n,\n"]
)
def test_headings_without_rows_are_an_answer_only_where_it_is_declared(tmp_path, content):
    keys = ('records = "losses.csv"', "first-year = 2020")
    given_portfolio(tmp_path)
    (tmp_path / "losses.csv").write_text(content)
    ((what, remedy),) = stops(tmp_path, quiet(*keys))
    assert what == "the table has headings but no rows"
    assert "without-losses = true" in remedy
    model = model_of(tmp_path, quiet(*keys, "without-losses = true"))
    assert model.frequency.mean() == pytest.approx(0.599146, abs=1e-6)
    check, _ = check_folder(tmp_path, tmp_path / "out")
    assert check["status"] == "usable"
    assert check["lines"][0]["window"]["supported_level"] == 0.0
    assert check["lines"][0]["records"]["read"] == 0
    assert (tmp_path / "out" / "trail.csv").read_text().count("\n") == 1


@pytest.mark.parametrize("kind", ["xlsx", "parquet"])
def test_workbook_and_parquet_without_rows(tmp_path, kind):
    import pandas as pd

    empty = pd.DataFrame(
        {"date": pd.Series([], dtype="datetime64[ns]"), "amount": pd.Series([], dtype=float)}
    )
    given_portfolio(tmp_path)
    if kind == "xlsx":
        empty.to_excel(tmp_path / "losses.xlsx", index=False)
    else:
        empty.to_parquet(tmp_path / "losses.parquet")
    line = quiet(f'records = "losses.{kind}"', "first-year = 2020", "without-losses = true")
    assert not model_of(tmp_path, line).own_data


def test_losses_in_a_line_declared_without_stop_the_run(tmp_path):
    given_portfolio(tmp_path)
    (tmp_path / "losses.csv").write_text("date,amount\n2024-03-01,500\n")
    line = quiet('records = "losses.csv"', "first-year = 2020", "without-losses = true")
    ((what, remedy),) = stops(tmp_path, line)
    assert what == "the line is declared without-losses, but its records hold 1 event"
    assert remedy.startswith("Take without-losses out")


def test_rows_all_set_aside_stop_and_claims_all_at_nil_do_not(tmp_path):
    given_portfolio(tmp_path)
    line = quiet('records = "losses.csv"', "first-year = 2020")
    (tmp_path / "losses.csv").write_text("date,amount\n2024-03-01,-500\n2024-04-01,n/a\n")
    found = stops(tmp_path, line)
    assert any("set aside" in what for what, _ in found)
    (tmp_path / "losses.csv").write_text("date,amount\n2024-03-01,0\n2024-04-01,0.00\n2019-04-01,700\n")
    model = model_of(tmp_path, line)
    assert not model.own_data
    assert model.prepared.reconciliation.to_dict()["excluded"] == 3


def test_a_line_of_a_shared_file_without_a_row_is_labelled(tmp_path):
    rows = "\n".join(f"2024-0{k}-01,{1000 + 37 * k},Fire" for k in range(1, 10))
    given_portfolio(tmp_path)
    (tmp_path / "losses.csv").write_text(f"date,amount,line\n{rows}\n")
    keys = ('records = "losses.csv"', "first-year = 2020")
    fire = quiet(*keys, severity='{ fit = ["exponential"] }').replace("Cyber", "Fire")
    fitted, bare = read_portfolio(given_portfolio(tmp_path, HEAD + fire + quiet(*keys))).models()
    assert (fitted.own_data, bare.own_data) == (True, False)
    assert [finding.code for finding in bare.findings] == ["no-own-data"]


@pytest.mark.parametrize(
    ("line", "message"),
    [
        (quiet("without-losses = true"), "needs the years in which there was none"),
        (quiet(), "or without-losses = true if there was no loss"),
        (
            quiet("without-losses = true", "first-year = 2020", severity=f'{{ fit = ["gamma"], {SOURCE} }}'),
            "source belongs to a given law",
        ),
        (
            quiet(
                "without-losses = true",
                "first-year = 2020",
                frequency=f'{{ family = "poisson", mean = 1, {SOURCE}, rate-without-losses = "{BOUND}" }}',
            ),
            "rate-without-losses belongs to a fit without a prior",
        ),
        (
            quiet(
                "without-losses = true",
                "first-year = 2020",
                frequency='{ fit = ["poisson"], rate-without-losses = "zero" }',
            ),
            "upper-bound",
        ),
    ],
)
def test_keys_that_do_not_fit_together_are_refused(tmp_path, line, message):
    with pytest.raises(InputError, match=message):
        read_portfolio(given_portfolio(tmp_path, HEAD + line))


def test_a_threshold_that_no_loss_could_exceed_gives_no_bound(tmp_path):
    line = quiet("without-losses = true", "first-year = 2020", "reporting-threshold = 1e300")
    with pytest.raises(InputError, match=r"no loss above the reporting threshold.*line\[1\]\.severity"):
        model_of(tmp_path, line)
