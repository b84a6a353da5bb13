"""Keys that say how records become losses: from the portfolio file to the fit and the report."""

import json
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from folders import RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio

HISTORY = """
[portfolio]
name = "With a history"
currency = "EUR"
valuation-date = 2024-12-31
levels = [0.9, 0.99]
capital-level = 0.99
rates = "rates.csv"

[[line]]
name = "Liability"
records = "losses.csv"
amount-basis = "excess"
deductible = 500
hours-window = 72
trend-index = "index.csv"
trend-index-columns = { index = "wages" }
frequency-trend = 0.02
open-claims = "develop"
frequency = { fit = ["poisson"] }
severity = { fit = ["exponential"] }

[line.development]
count-tail = 1.0
amount-tail = 1.05
open-tail = 1.02
method = "bornhuetter-ferguson"
a-priori-count = 12.0
a-priori-amount = 40000.0
"""


def history_portfolio(folder: Path, text: str = HISTORY) -> Path:
    """60 invented claims of five years, valued at the end of each, some in dollars, net of 500."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(text, encoding="utf-8")
    rows = ["claim,valuation,date,amount,status,currency,event"]
    for k in range(60):
        year = 2020 + k % 5
        amount = 300 + 61 * ((k * 7919) % 97)
        for valued in range(year + (k % 7 == 0), 2025):
            age = valued - year
            status = "open" if age < k % 3 else "closed"
            grown = amount * (1 + 0.2 * min(age, k % 3))
            currency = "USD" if k % 10 == 0 else "EUR"
            day = f"{year}-{1 + k % 12:02d}-10"
            rows.append(f"C{k},{valued}-12-31,{day},{grown:.2f},{status},{currency},E{k}")
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    index = ["year,wages", *(f"{year},{100 + 3 * (year - 2020)}" for year in range(2020, 2026))]
    (folder / "index.csv").write_text("\n".join(index) + "\n", encoding="utf-8")
    (folder / "rates.csv").write_text("date,currency,rate\n2019-12-31,USD,0.9\n2022-06-30,USD,0.95\n")
    return folder


@pytest.fixture(scope="module")
def assessed(tmp_path_factory: pytest.TempPathFactory) -> tuple[dict, Path]:
    out = tmp_path_factory.mktemp("out")
    import lossagg

    portfolio = lossagg.read_portfolio(history_portfolio(tmp_path_factory.mktemp("history")))
    assessment = portfolio.assess(years=2000, seed=1)
    assessment.write(out)
    return assessment.to_dict(), out


def test_everything_at_once_reaches_the_assessment(assessed: tuple[dict, Path]) -> None:
    data, _ = assessed
    line = data["lines"][0]
    json.dumps(data, allow_nan=False)
    assert [step["step"] for step in line["steps"]] == [
        "read", "currency", "ground-up", "check", "events", "open claims", "threshold", "trend",
        "development",
    ]  # fmt: skip
    for before, after in pairwise(line["steps"]):
        assert (after["count_before"], after["amount_before"]) == (
            before["count_after"],
            before["amount_after"],
        )
    assert [entry["path"] for entry in data["run"]["inputs"]] == [
        "portfolio.toml", "losses.csv", "index.csv", "rates.csv",
    ]  # fmt: skip
    developed = line["development"]
    assert developed["method"] == "bornhuetter-ferguson"
    assert developed["valuations"] == [f"{year}-12-31" for year in range(2024, 2019, -1)]
    latest = developed["years"][-1]
    assert latest["count_factor"] > 1.0
    expected = latest["count"] + 12.0 * (1 - 1 / latest["count_factor"])
    assert latest["count_bornhuetter_ferguson"] == pytest.approx(expected)
    assert line["by_year"][-1]["ultimate_losses"] == latest["count_bornhuetter_ferguson"]
    assert line["by_year"][-1]["losses"] == latest["count"] < latest["count_chain_ladder"]
    assert line["exposure"] == {"forecast": 1.0, "base": None, "last_year": 1.0}
    cautions = {caution["code"]: caution["message"] for caution in data["cautions"]}
    assert "58 events are reported and" in cautions["development"]
    assert "taken at their recorded amounts times a factor by age" in cautions["open-claims"]


def test_the_report_shows_the_years_at_ultimate(assessed: tuple[dict, Path]) -> None:
    _, out = assessed
    page = (out / "report.html").read_text(encoding="utf-8")
    assert "Development to ultimate, EUR" in page
    assert "factors history, from valuations of 2020-12-31" in page
    from openpyxl import load_workbook

    book = load_workbook(out / "tables.xlsx", read_only=True)
    assert "Development" in book.sheetnames
    book.close()


def test_reported_counts_stand_for_their_ultimate_in_the_rate(tmp_path: Path) -> None:
    """Exposure counts for the part reported: Poisson's rate is the sum of events over the sum of those parts.

    That is the estimate of Buhlmann and Straub known as Cape Cod.
    """
    extra = (
        "forecast-exposure = 120\nfrequency-trend = 0.05\n[line.development]\ncount-factors = [2.0, 1.25]\n"
    )
    text = RECORDS.replace('["poisson", "negative-binomial"]', '["poisson"]') + extra
    model = read_portfolio(recorded_portfolio(tmp_path, text)).models()[0]
    years = model.prepared.years
    weight = years.exposure * [1, 1, 1, 1 / 1.25, 1 / 2.0] / years.frequency_trend
    assert years.frequency_trend[0] == pytest.approx(1.05**5, rel=1e-3)
    expected = 120 * 60 / (weight * model.severity.sf(years.threshold)).sum()
    assert model.frequency.mean() == pytest.approx(expected, rel=1e-9)


def test_the_forecast_has_the_whole_exposure_of_the_last_year(tmp_path: Path) -> None:
    """Also where that year is observed in part; the rate itself is per exposure observed."""
    text = RECORDS.replace("2024-12-31", "2024-06-30").replace("reporting-threshold = 1000\n", "")
    folder = recorded_portfolio(tmp_path, text)
    kept = [
        row for row in (folder / "losses.csv").read_text().splitlines() if row.split(",")[1] <= "2024-06-30"
    ]
    (folder / "losses.csv").write_text("\n".join(["id,date,amount", *kept]) + "\n")
    model = read_portfolio(folder).models()[0]
    years = model.prepared.years
    assert model.forecast_exposure == 120.0 == years.exposure[-1]
    assert years.fraction[-1] == 182 / 366
    assert model.frequency.mean() == pytest.approx(
        120 * years.losses.sum() / (years.exposure[:4].sum() + 120 * 182 / 366)
    )


def test_twice_the_exposure_half_the_rate_same_forecast(tmp_path: Path) -> None:
    once = read_portfolio(recorded_portfolio(tmp_path / "once")).models()[0]
    folder = recorded_portfolio(tmp_path / "twice")
    rows = (folder / "exposure.csv").read_text().splitlines()
    doubled = [rows[0], *(f"{row.split(',')[0]},{2 * float(row.split(',')[1])}" for row in rows[1:])]
    (folder / "exposure.csv").write_text("\n".join(doubled) + "\n")
    twice = read_portfolio(folder).models()[0]
    assert twice.frequencies.chosen.model.mean() == pytest.approx(once.frequencies.chosen.model.mean() / 2)
    assert twice.frequency.mean() == pytest.approx(once.frequency.mean())


def test_both_bases_give_one_fit(tmp_path: Path) -> None:
    """The same claims from the ground up with their threshold, and net of a deductible of 1,000."""
    recorded_portfolio(tmp_path / "whole")
    text = RECORDS.replace("reporting-threshold = 1000", 'amount-basis = "excess"\ndeductible = 1000')
    folder = recorded_portfolio(tmp_path / "net", text)
    rows = [row.split(",") for row in (folder / "losses.csv").read_text().splitlines()]
    # One claim is at the deductible exactly: net of it there is nothing left, so it is no claim here.
    net = [[a, b, str(int(c) - 1000) if c.isdigit() else c] for a, b, c in rows]
    kept = [row for row in net if row[2] != "0"]
    (folder / "losses.csv").write_text("\n".join(map(",".join, kept)) + "\n")
    (tmp_path / "whole" / "losses.csv").write_text(
        "\n".join(",".join(row) for row, less in zip(rows, net, strict=True) if less[2] != "0") + "\n"
    )
    whole = read_portfolio(tmp_path / "whole").models()[0]
    shifted = read_portfolio(folder).models()[0]
    assert shifted.severity.family == whole.severity.family
    for name, value in whole.severity.parameters.items():
        assert shifted.severity.parameters[name] == pytest.approx(value, rel=1e-9)
    assert shifted.frequency.mean() == pytest.approx(whole.frequency.mean(), rel=1e-9)


def test_different_deductibles_in_one_year_do_not_bias_the_rate(tmp_path: Path) -> None:
    """Half the policies keep 1,000, half 5,000: by the largest threshold the rate would be twice too high."""
    rng = np.random.default_rng(12)
    rows, seen = ["date,amount,deductible"], 0
    for year in range(2015, 2025):
        for kept in (1000, 5000):
            for size in rng.exponential(4000, rng.poisson(200)):
                if size > kept:
                    rows.append(f"{year}-07-01,{size - kept:.6f},{kept}")
                    seen += 1
    folder = tmp_path / "mixed"
    folder.mkdir()
    text = RECORDS.replace("reporting-threshold = 1000\ntrend = 0.03\n", 'amount-basis = "excess"\n')
    text = text.replace('exposure = "exposure.csv"\n', "").replace(
        '["lognormal", "exponential"]', '["exponential"]'
    )
    (folder / "portfolio.toml").write_text(text)
    (folder / "losses.csv").write_text("\n".join(rows) + "\n")
    model = read_portfolio(folder).models()[0]
    assert model.prepared.years.mixed.all()
    assert model.frequency.mean() == pytest.approx(400, rel=4 / np.sqrt(seen))
    assert model.severity.mean() == pytest.approx(4000, rel=4 / np.sqrt(seen))


def test_net_of_recoveries_is_a_caution_and_a_step(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path, RECORDS.replace("trend = 0.03", "net-of-recoveries = true"))
    rows = (folder / "losses.csv").read_text().splitlines()
    recovered = [f"{row},{'recoveries' if k == 0 else 5 if k < 30 else ''}" for k, row in enumerate(rows)]
    (folder / "losses.csv").write_text("\n".join(recovered) + "\n")
    data = read_portfolio(folder).assess(years=1000, seed=1).to_dict()
    assert "recoveries" in [step["step"] for step in data["lines"][0]["steps"]]
    caution = next(c["message"] for c in data["cautions"] if c["code"] == "net-of-recoveries")
    assert caution.startswith("Line 'Fire': losses are modelled net of recoveries, as asked for.")


def test_a_deductible_column_without_a_word_on_it_warns(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path)
    rows = (folder / "losses.csv").read_text().splitlines()
    (folder / "losses.csv").write_text(
        "\n".join([rows[0] + ",deductible", *(f"{row},100" for row in rows[1:])])
    )
    found = read_portfolio(folder).records["Fire"].losses.findings
    assert "deductible-column" in {finding.code for finding in found}


@pytest.mark.parametrize(
    ("added", "message"),
    [
        ('trend-index = "i.csv"', "trend and trend-index would apply the trend twice.*Give one of them"),
        ("deductible = 500", "a deductible of a line says what its amounts are net of"),
        ('amount-basis = "net"', "amount-basis"),
        ("hours-window = 36", "multiple of 24, in .*hours-window"),
        ("frequency-trend = 2", "less than 1, in .*frequency-trend"),
        ('open-claims = "develop"', "open claims are to be developed without factors.*Give open-factors"),
        ('open-claims = "ignore"', "open-claims"),
        ("trend-index-columns = { index = 'x' }", "trend-index-columns needs a trend-index"),
        ("[line.development]", "development has neither factors nor a tail"),
        ("[line.development]\ncount-factor = [1.0]", "unknown key.*Did you mean 'count-factors'"),
        ("[line.development]\ncount-factors = [0.0]", "greater than 0, in .*count-factors"),
        ("[line.development]\nopen-factors = [1.1]", "factors of open claims are given but not used"),
        (
            '[line.development]\ncount-tail = 1.0\nmethod = "bornhuetter-ferguson"',
            "Bornhuetter-Ferguson needs an a-priori count.*Give a-priori-count",
        ),
    ],
)
def test_keys_that_contradict_each_other(tmp_path: Path, added: str, message: str) -> None:
    folder = recorded_portfolio(tmp_path, RECORDS + added + "\n")
    with pytest.raises(InputError, match=message):
        read_portfolio(folder)


def test_preparing_needs_records(tmp_path: Path) -> None:
    text = """
[portfolio]
name = "Given"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
hours-window = 72
frequency = { family = "poisson", mean = 4 }
severity = { family = "exponential", mean = 5000 }
"""
    (tmp_path / "portfolio.toml").write_text(text)
    with pytest.raises(InputError, match=r"hours-window needs records.*Add records"):
        read_portfolio(tmp_path)


def test_a_key_that_the_records_cannot_follow_stops(tmp_path: Path) -> None:
    """What is asked for and cannot be done must not pass for done."""
    for key, message in (
        ("hours-window = 72", "do not say which claims are of one event, in file losses.csv"),
        ("net-of-recoveries = true", "but the records have no recoveries, in file losses.csv"),
    ):
        folder = recorded_portfolio(tmp_path, RECORDS.replace("trend = 0.03", key))
        with pytest.raises(InputError, match=message):
            read_portfolio(folder).models()


def test_rates_beside_records_that_name_no_currency_are_said(tmp_path: Path) -> None:
    text = RECORDS.replace("capital-level", 'rates = "rates.csv"\ncapital-level')
    folder = recorded_portfolio(tmp_path, text)
    (folder / "rates.csv").write_text("date,currency,rate\n2019-12-31,USD,0.9\n")
    found = {f.code: f for f in read_portfolio(folder).records["Fire"].losses.findings}["no-currency-column"]
    assert found.action == "warn"
    assert found.message.endswith("every amount is taken as EUR")


def test_rates_must_lie_in_the_folder(tmp_path: Path) -> None:
    text = HISTORY.replace('"rates.csv"', '"../rates.csv"')
    with pytest.raises(InputError, match="must lie in its folder"):
        read_portfolio(history_portfolio(tmp_path / "in", text))
