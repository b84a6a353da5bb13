"""From the portfolio file to dependent years, the figures without dependence, and a year replayed."""

import json
import re
from pathlib import Path

import numpy as np
import pytest
from folders import GIVEN, given_portfolio
from scipy import stats
from typer.testing import CliRunner

import lossagg
from lossagg.commands.app import build_app
from lossagg.cover import Corridor, Cover, Reinstatements, Surplus
from lossagg.engines.book import Book, Line, PlacedCover
from lossagg.engines.correlation import correlation_interval
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.fourier import Fourier
from lossagg.errors import InputError
from lossagg.families import Lognormal, Mixture, Poisson, SizeTable
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.model_data import book_data, book_of
from lossagg.portfolio.years import read_assessment, replay_assessment

YEARS = 40_000
FACTOR = """
[[dependence]]
name = "Activity"
kind = "shared-frequency"
lines = ["Fire", "Theft"]
variance = 0.25
evidence = "invented for this test"
"""
POISSONS = GIVEN.replace('"negative-binomial", mean = 6, dispersion = 0.3', '"poisson", mean = 6')
COPULA = """
[[dependence]]
name = "Weather"
kind = "gaussian-copula"
lines = ["Theft", "Fire"]
correlation = [[1, 0.5], [0.5, 1]]
evidence-years = 10
"""
SHOCK = """
[[dependence]]
name = "Storm"
kind = "common-shock"
lines = ["Fire", "Theft"]
rate = 2.5
evidence = "invented for this test"
"""


def written(folder: Path, text: str) -> dict:
    portfolio = lossagg.read_portfolio(given_portfolio(folder / "portfolio", text))
    portfolio.assess(years=YEARS).write(folder / "out")
    return json.loads((folder / "out" / "assessment.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def factor(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict]:
    folder = tmp_path_factory.mktemp("factor")
    return folder, written(folder, POISSONS + FACTOR)


@pytest.fixture(scope="module")
def shock(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict]:
    folder = tmp_path_factory.mktemp("shock")
    return folder, written(folder, POISSONS + SHOCK)


@pytest.fixture(scope="module")
def copula(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict]:
    folder = tmp_path_factory.mktemp("copula")
    return folder, written(folder, GIVEN + COPULA)


def test_the_assumption_its_evidence_and_the_figures_without_it(factor: tuple[Path, dict]) -> None:
    """Independent lines with the same law each, computed exactly; the sum of the lines' own figures."""
    _, data = factor
    assert data["dependence"] == [
        {
            "name": "Activity",
            "kind": "shared-frequency",
            "lines": ["Fire", "Theft"],
            "description": "the expected number of losses of Fire, Theft is multiplied by one gamma factor "
            "with mean 1 and variance 0.25",
            "evidence": "invented for this test",
            "evidence_years": None,
            "correlations": [],
            "change": None,
        }
    ]
    lines = tuple(
        Line(
            name=name,
            frequency=lossagg.NegativeBinomial(mean=mean, dispersion=0.25),
            severity=severity,
        )
        for name, mean, severity in (
            ("Fire", 4.0, Lognormal(mu=9, sigma=1.2)),
            ("Theft", 6.0, lossagg.Exponential(mean=5000)),
        )
    )
    exact = Fourier().book(Book(lines=lines))
    for k, level in enumerate(data["portfolio"]["levels"]):
        gross = data["independent"]["gross"]["levels"][k]["var"]
        truth = next(loss for subject, loss in exact.losses.items() if subject.kind == "gross")
        assert gross["engine"] == "fourier"
        assert gross["value"] == pytest.approx(truth.value_at_risk(level), rel=1e-3)
        own = sum(line["levels"][k]["var"]["value"] for line in data["lines"])
        assert data["independent"]["sum_of_lines"][k]["var"]["value"] == pytest.approx(own, rel=1e-12)
        assert gross["value"] < data["gross"]["levels"][k]["var"]["high"] < own
    assert data["gross"]["engine"] == "fourier"
    assert {line["levels"][0]["var"]["engine"] for line in data["lines"]} == {"fourier"}
    assert data["crosscheck"]["verdict"] == "agree", data["crosscheck"]["summary"]
    assert "gross" not in {entry["subject"] for entry in data["crosscheck"]["refused"]}
    codes = [caution["code"] for caution in data["cautions"]]
    assert "dependence" in codes
    assert "independence" not in codes
    assert "dependence-without-evidence" not in codes


@pytest.mark.parametrize(("which", "engine"), [("factor", "fourier"), ("copula", "simulation")])
def test_the_capital_is_divided_among_the_lines(
    which: str, engine: str, request: pytest.FixtureRequest
) -> None:
    folder, data = request.getfixturevalue(which)
    found = data["allocation"]
    assert found["engine"] == engine
    assert found["level"] == data["portfolio"]["capital_level"]
    assert sum(line["value"] for line in found["lines"]) == pytest.approx(found["total"]["value"], rel=1e-9)
    assert sum(line["share"] for line in found["lines"]) == pytest.approx(1.0, abs=1e-12)
    for line in found["lines"]:
        assert line["low"] <= line["value"] <= line["high"]
        assert line["value"] < line["alone"]
    page = (folder / "out" / "report.html").read_text(encoding="utf-8")
    assert "Allocation of the gross TVaR at 99.5% to lines" in page
    assert "Saved by diversification" in page


def test_what_the_years_say_of_a_correlation_is_printed(copula: tuple[Path, dict]) -> None:
    """r = 0.5 from 10 years: -0.189 to 0.859 (Fisher 1921; computed here, two routes)."""
    folder, data = copula
    (pair,) = data["dependence"][0]["correlations"]
    assert pair["lines"] == ["Theft", "Fire"]
    reach = stats.norm.isf(0.025) / np.sqrt(7)
    assert pair["low"] == pytest.approx(np.tanh(0.5 * np.log(3) - reach), abs=1e-12)
    assert (pair["low"], pair["high"]) == pytest.approx((-0.189, 0.859), abs=5e-4)
    assert "-0.189 to 0.859" in (folder / "out" / "report.html").read_text(encoding="utf-8")
    assert correlation_interval(0.5, 3) == (-1.0, 1.0)
    assert correlation_interval(1.0, 50) == (1.0, 1.0)


def test_the_figure_between_independent_lines_and_the_worst_case(factor: tuple[Path, dict]) -> None:
    folder, data = factor
    bounds = data["dependence_bounds"]
    order = [bounds[key]["value"] for key in ("independent", "chosen", "comonotonic", "worst")]
    assert order == sorted(order)
    assert bounds["chosen"]["value"] == next(
        row["var"]["value"] for row in data["gross"]["levels"] if row["level"] == bounds["level"]
    )
    assert bounds["subadditive"] is True
    assert "Worst case over all dependences" in (folder / "out" / "report.html").read_text(encoding="utf-8")


def test_a_value_at_risk_above_the_sum_of_the_lines_is_shown_and_explained(tmp_path: Path) -> None:
    """Two independent lines with Pareto tails of alpha 0.8: VaR is not subadditive (Embrechts, McNeil and
    Straumann 2002, section 6): for such tails the sum's is about 2**(1 / 0.8) of one, not 2."""
    line = """
[[line]]
name = "{}"
frequency = {{ family = "poisson", mean = 1 }}
severity = {{ family = "pareto", alpha = 0.8, minimum = 1000 }}
"""
    head = GIVEN[: GIVEN.index("[[line]]")]
    data = written(tmp_path, head + line.format("A") + line.format("B"))
    bounds = data["dependence_bounds"]
    assert bounds["subadditive"] is False
    ratio = bounds["chosen"]["value"] / bounds["comonotonic"]["value"]
    assert ratio == pytest.approx(2**1.25 / 2, rel=0.02)
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "value at risk is not subadditive" in page
    assert data["allocation"]["reason"] == "there is no tail value at risk to divide: the mean is infinite"


def test_a_gaussian_copula_and_missing_evidence_are_warned_of(copula: tuple[Path, dict]) -> None:
    _, data = copula
    messages = {caution["code"]: caution["message"] for caution in data["cautions"]}
    assert "independent in the limit" in messages["gaussian-copula"]
    assert "sum of the lines' own figures" in messages["dependence-without-evidence"]
    assert data["dependence"][0]["evidence"] is None


def test_the_report_shows_dependence_and_the_years_near_capital(factor: tuple[Path, dict]) -> None:
    folder, data = factor
    page = (folder / "out" / "report.html").read_text(encoding="utf-8")
    for text in ("Activity", "invented for this test", "lines independent", "nearest to the capital figure"):
        assert text in page
    for year in data["years_near_capital"]["years"]:
        assert f"Year {year['year']:,}" in page


@pytest.mark.parametrize("which", ["factor", "copula", "shock"])
def test_the_years_near_capital_are_the_nearest(which: str, request: pytest.FixtureRequest) -> None:
    """Their net is next to the figure; their events, with the smaller ones, add up to the gross."""
    _, data = request.getfixturevalue(which)
    near = data["years_near_capital"]
    assert near["subject"] == "net"
    assert near["value"] == data["headline"]["value"]
    assert len(near["years"]) == 3
    for year in near["years"]:
        amounts = {entry["subject"]: entry["amount"] for entry in year["amounts"]}
        assert abs(amounts["net"] / near["value"] - 1) < 0.01
        total = sum(event["cost"] for event in year["events"]) + year["smaller"]["amount"]
        assert abs(total - amounts["gross"]) < 0.005
        paid = sum(payment["paid"] for payment in year["covers"])
        assert abs(amounts["gross"] - paid - amounts["net"]) < 0.005


@pytest.mark.parametrize("which", ["factor", "copula", "shock"])
def test_any_year_from_the_file_alone(which: str, request: pytest.FixtureRequest) -> None:
    """Rebuilt from assessment.json, a year has the annual figures of the run, to the cent."""
    folder, data = request.getfixturevalue(which)
    portfolio = read_portfolio(folder / "portfolio")
    models = portfolio.models()
    assert book_of(data["model"]).lines == tuple(model.line for model in models)
    run = lossagg.Simulation(years=YEARS, seed=1).book(book_of(data["model"]))
    read = read_assessment(folder / "out")
    for number in (1, 17, 32_768, 32_769, YEARS):
        year = replay_assessment(read, number)
        for subject, amount in year.amounts.items():
            assert abs(amount - run.losses[subject].annual[number - 1]) < 0.005


def test_a_shock_is_one_event_to_the_cover_of_its_lines(shock: tuple[Path, dict]) -> None:
    """Lines and gross stay exact; the layer and the net are simulated and say why; a replayed year shows the
    event with its parts, and the layer acts on their sum."""
    folder, data = shock
    assert not [own for own in data["cautions"] if own["code"] == "common-shock"]
    text = json.dumps(data)
    assert "'Layer' sees what 'Storm' costs several lines as one event" in text
    events = [event for year in data["years_near_capital"]["years"] for event in year["events"]]
    both = [event for event in events if event["shock"]]
    assert both
    for event in both:
        assert event["line"] == "Fire + Theft"
        assert abs(sum(part["cost"] for part in event["parts"]) - event["cost"]) < 0.005
        layer = event["payments"][0]
        assert abs(layer["paid"] - min(max(event["cost"] - 10_000, 0), 50_000)) < 0.005
    year = str(data["years_near_capital"]["years"][0]["year"])
    result = CliRunner().invoke(build_app(), ["replay", str(folder / "out"), "--year", year])
    assert result.exit_code == 0, result.output
    for words in ("Fire + Theft", "(one event)", "of it Fire", "of it Theft"):
        assert words in result.output
    page = (folder / "out" / "report.html").read_text(encoding="utf-8")
    assert "Fire + Theft (one event)" in page


def test_the_command_prints_events_payments_and_reasons(factor: tuple[Path, dict]) -> None:
    folder, data = factor
    year = data["years_near_capital"]["years"][1]
    result = CliRunner().invoke(
        build_app(), ["replay", str(folder / "out"), "--year", str(year["year"]), "--events", "12"]
    )
    assert result.exit_code == 0, result.output
    amounts = {entry["subject"]: entry["amount"] for entry in year["amounts"]}
    for words in (
        "Gross",
        "Net",
        "Line Fire",
        "Paid by Layer",
        "Factor Activity",
        "deductible",
        "annual retention",
    ):
        assert words in result.output
    assert f"{amounts['gross']:,.2f}" in result.output
    assert f"{amounts['net']:,.2f}" in result.output
    assert re.search(r"limit [\d,.]+", result.output)
    if year["smaller"]["events"]:
        assert f"{year['smaller']['events']:,} smaller events" in result.output


@pytest.mark.parametrize(
    ("change", "text"),
    [
        (
            lambda data: data["years_near_capital"]["years"][0]["amounts"][0].update(amount=1.0),
            "comes out otherwise",
        ),
        (lambda data: data["run"].update(seed=2), "comes out otherwise"),
        (lambda data: data["model"]["lines"][0]["severity"].update(sigma=1.3), "comes out otherwise"),
        (lambda data: data.pop("model"), "does not hold its model"),
        (lambda data: data["model"].pop("covers"), "model of the assessment cannot be read"),
        (lambda data: data["model"]["lines"][0]["severity"].update(family="magic"), "unknown size family"),
        (lambda data: data["model"]["lines"][0].update(colour=1), "cannot be read"),
        (lambda data: data.update(format="other"), "not an assessment that can be replayed"),
    ],
)
def test_a_changed_assessment_is_refused(
    change, text: str, factor: tuple[Path, dict], tmp_path: Path
) -> None:  # type: ignore[no-untyped-def]
    data = json.loads(json.dumps(factor[1]))
    change(data)
    (tmp_path / "assessment.json").write_text(json.dumps(data), encoding="utf-8")
    result = CliRunner().invoke(build_app(), ["replay", str(tmp_path), "--year", "5"])
    assert result.exit_code == 2
    assert text in result.output
    assert "Traceback" not in result.output


def test_other_files_and_years_are_refused_in_words(factor: tuple[Path, dict], tmp_path: Path) -> None:
    folder, _ = factor
    (tmp_path / "assessment.json").write_text("{", encoding="utf-8")
    for arguments, text in (
        ([str(folder / "out"), "--year", "40001"], "the run simulated years 1 to 40,000"),
        ([str(tmp_path), "--year", "1"], "not the JSON of an assessment"),
        ([str(tmp_path / "nowhere.json"), "--year", "1"], "there is no assessment"),
    ):
        result = CliRunner().invoke(build_app(), ["replay", *arguments])
        assert result.exit_code == 2
        assert text in result.output


def test_every_term_goes_through_the_file_and_back() -> None:
    """Nothing of a book may be lost on the way: laws, terms, places, dependences."""
    covers = (
        PlacedCover(name="s", terms=Cover(surplus=Surplus(kept_line=1e5, lines=2.0)), lines=("b",)),
        PlacedCover(
            name="x",
            terms=Cover(
                deductible=1 / 3,
                limit=1e6,
                share=0.9,
                retained_cap=5.0,
                corridor=Corridor(low=1.0, high=np.inf, share=0.5),
                order=("deductible", "limit", "corridor", "retained-cap", "share"),
            ),
            after=("s",),
            stated="as the file says",
        ),
        PlacedCover(
            name="r",
            terms=Cover(
                limit=10.0, reinstatements=Reinstatements(number=2, rates=(1.0, 0.5)), self_insured=False
            ),
        ),
    )
    size = Mixture(
        weights=[0.5, 0.5],
        parts=[Lognormal(mu=1 / 3, sigma=1.0), SizeTable(sizes=[0, 5], probabilities=[0.5, 0.5])],
    )
    lines = (
        Line(name="a", frequency=Poisson(mean=2.0), severity=size),
        Line(name="b", frequency=Poisson(mean=1.0), severity=size, sum_insured=3e5),
        Line(name="c", frequency=Poisson(mean=1.0), severity=size),
        Line(name="d", frequency=Poisson(mean=1.0), severity=size),
    )
    dependences = (
        SharedFactor(name="f", lines=("a", "b"), on="inflation", variance=0.1, law="lognormal"),
        CommonShock(name="k", lines=("a", "b"), rate=0.3),
        Copula(name="t", lines=("c", "d"), correlation=0.2, degrees_of_freedom=3.0),
    )
    book = Book(lines=lines, covers=covers, dependences=dependences)
    assert book_of(json.loads(json.dumps(book_data(book), allow_nan=False))) == book


BAD = [
    ('kind = "shared-frequency"\nlines = ["Fire", "Theft"]', "needs variance"),
    ('kind = "t-copula"\nlines = ["Fire", "Theft"]\ncorrelation = 0.2', "needs degrees-of-freedom"),
    ('kind = "common-shock"\nlines = ["Fire", "Theft"]\nrate = 1.0\nvariance = 0.1', "has no key 'variance'"),
    ('kind = "clayton"\nlines = ["Fire", "Theft"]', "kind"),
    ('kind = "gaussian-copula"\nlines = ["Fire"]\ncorrelation = 0.2', "lines"),
    ('kind = "gaussian-copula"\nlines = ["Fire", "Flood"]\ncorrelation = 0.2', "'Flood'.*Lines: Fire, Theft"),
    (
        'kind = "gaussian-copula"\nlines = ["Fire", "Theft"]\ncorrelation = [[1, 0.2], [0.3, 1]]',
        r"dependence\[1\].*\(0.2, 0.3\)",
    ),
    ('kind = "gaussian-copula"\nlines = ["Fire", "Theft"]\ncorrelation = 30.0', "Write 0.3 for 30 %"),
    ('kind = "gaussian-copula"\nlines = ["Fire", "Theft"]\ncorelation = 0.3', "Did you mean 'correlation'"),
]


@pytest.mark.parametrize(("keys", "text"), BAD, ids=[text[:24] for _, text in BAD])
def test_bad_dependences_are_refused_with_their_key(keys: str, text: str, tmp_path: Path) -> None:
    folder = given_portfolio(tmp_path, f'{GIVEN}\n[[dependence]]\nname = "x"\n{keys}\n')
    with pytest.raises(InputError, match=f"(?s){text}"):
        read_portfolio(folder)


def test_the_nearest_matrix_only_where_asked_and_with_the_change_printed(tmp_path: Path) -> None:
    third = '\n[[line]]\nname = "Flood"\nfrequency = { family = "poisson", mean = 1 }\n'
    third += 'severity = { family = "exponential", mean = 9000 }\n'
    bad = (
        '\n[[dependence]]\nname = "x"\nkind = "gaussian-copula"\nlines = ["Fire", "Theft", "Flood"]\n'
        "correlation = [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]]\n"
    )
    text = GIVEN.replace("\n[[cover]]", third + "\n[[cover]]", 1) + bad
    with pytest.raises(InputError, match="negative eigenvalue"):
        read_portfolio(given_portfolio(tmp_path / "a", text))
    data = (
        read_portfolio(given_portfolio(tmp_path / "b", text + "nearest = true\n"))
        .assess(years=2000)
        .to_dict()
    )
    assert "from 0.9 to 0.5" in data["dependence"][0]["change"]
    assert "nearest-correlation" in [caution["code"] for caution in data["cautions"]]
