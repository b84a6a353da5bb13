"""The page: well formed, true to the assessment, and impossible to inject into."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from typing import Any

import pytest
from invented_assessment import sample_assessment, withheld_assessment

from lossagg.report.page import render_report

VOID = {"meta", "br", "link", "img", "hr", "input"}


class Page(HTMLParser):
    """Checks that every element closes in order, and keeps texts, data values and identifiers."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.names: set[str] = set()
        self.ids: list[str] = []
        self.data: dict[str, tuple[str, str]] = {}
        self.links: list[str] = []
        self.texts: list[str] = []
        self._key: str | None = None
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        given = dict(attributes)
        self.names.add(tag)
        assert not any(name.startswith("on") for name in given), f"event handler in <{tag}>"
        self.links += [value or "" for name, value in attributes if name in ("href", "src", "xlink:href")]
        if given.get("id"):
            self.ids.append(str(given["id"]))
        if tag == "data" and given.get("id"):
            self._key = str(given["id"])
            self.data[self._key] = (str(given["value"]), "")
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attributes)
        if tag not in VOID:
            self.open.pop()

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> without a start"
        assert self.open.pop() == tag
        self._key = None

    def handle_data(self, data: str) -> None:
        if self._key:
            value, text = self.data[self._key]
            self.data[self._key] = (value, text + data)
        if self.open and self.open[-1] != "style":
            self.texts.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", " ".join(self.texts))


def without_figures(assessment: dict[str, Any]) -> dict[str, Any]:
    """The same assessment with nothing to draw for its lines: quicker, for tests of words."""
    for line in assessment["lines"]:
        line["fit"] = None
    return assessment


@pytest.fixture(scope="module")
def page() -> Page:
    return Page(render_report(sample_assessment()))


def test_every_element_is_closed_and_every_identifier_is_unique(page: Page) -> None:
    assert page.open == []
    assert len(page.ids) == len(set(page.ids))


def test_page_needs_nothing_from_outside(page: Page) -> None:
    assert "script" not in page.names
    assert all(link.startswith("#") for link in page.links)


def test_headline_is_the_figure_of_the_assessment(page: Page) -> None:
    """The full value is in the page; the text rounds it, and never by more than its range."""
    headline = sample_assessment()["headline"]
    for key, expected in (("capital", headline["value"]), ("less-mean", headline["less_mean"])):
        value, text = page.data[key]
        assert float(value) == expected
        assert abs(float(text.replace(",", "")) - expected) <= headline["high"] - headline["low"]
    assert "net of all covers" in page.text
    assert "value at risk at 99.5% (1 in 200 years)" in page.text


def test_every_var_of_the_total_stands_in_the_page() -> None:
    assessment = sample_assessment()
    text = render_report(assessment)
    for subject in ("gross", "net"):
        for row in assessment[subject]["levels"]:
            assert f'<data value="{row["var"]["value"]!r}">' in text
            assert f'<data value="{row["tvar"]["value"]!r}">' in text


def test_what_does_not_exist_says_so_and_why(page: Page) -> None:
    row = page.text[page.text.index("Salvage & wreck removal poisson") :][:160]
    assert row.count("does not exist") == 3
    assert "does not exist: the mean is infinite" in page.text
    assert "no limit" in page.text


def test_cover_without_a_limit_cannot_be_exhausted() -> None:
    """No probability is printed where there is nothing to exhaust, and none seen is not zero."""
    assessment = sample_assessment()
    assessment["covers"][0]["exhaustion_probability"] = None
    assessment["covers"][1]["exhaustion_probability"] = 0.0
    text = Page(render_report(assessment)).text
    assert "97.1% cannot be exhausted" in text
    assert "10.5% none in 1,000,000 years" in text


def test_not_computed_is_told_apart_from_zero(page: Page) -> None:
    assert "not computed" in page.text
    assert "panjer: dependent lines are outside its domain" in page.text


def test_withheld_prints_no_capital_but_the_diagnosis() -> None:
    assessment = without_figures(withheld_assessment())
    page = Page(render_report(assessment))
    assert "capital" not in page.data
    assert "Withheld" in page.text
    assert "net, value at risk at 99.5%: simulation is 8.4% above fourier" in page.text
    assert "ENGINES DISAGREE" in page.text
    assert "The exceedance curve is withheld" in page.text
    printed = sample_assessment()["headline"]["value"]
    assert page.text.count(f"{printed:,.0f}") == 0


def test_withheld_moments_do_not_read_as_infinite() -> None:
    """An absent mean of a withheld assessment is withheld; it does not "not exist"."""
    assessment = without_figures(withheld_assessment())
    assessment["gross"] |= {"mean": None, "sd": None}
    assessment["covers"][0] |= {"attachment_probability": None, "exhaustion_probability": None}
    page = Page(render_report(assessment))
    moments = page.text[page.text.index("Expected annual loss, EUR Annual loss") :][:200]
    assert "withheld withheld fourier" in moments
    assert "does not exist" not in moments


@pytest.mark.parametrize(
    "hostile", ["<script>alert(1)</script>", '"><img src=x onerror=alert(1)>', "{{ 7*7 }}"]
)
def test_names_cannot_inject(hostile: str) -> None:
    assessment = without_figures(sample_assessment())
    assessment["portfolio"] |= {"name": hostile, "description": hostile, "currency": hostile}
    for line in assessment["lines"]:
        line["name"] = hostile
    assessment["covers"][0]["name"] = hostile
    assessment["findings"][0] |= {"value": hostile, "message": hostile, "file": hostile}
    assessment["cautions"][0] |= {"code": hostile, "message": hostile}
    assessment["run"]["inputs"][0]["path"] = hostile
    page = Page(render_report(assessment))
    assert "script" not in page.names
    assert "img" not in page.names
    assert hostile in page.text
    assert page.open == []


def test_dollar_signs_in_names_are_not_formulas() -> None:
    assessment = sample_assessment()
    assessment["portfolio"]["currency"] = "US$ at $1"
    assessment["lines"][0]["name"] = r"$\frac{1}{"
    assert "US$ at $1" in render_report(assessment)


def test_cautions_cannot_be_switched_off() -> None:
    assessment = without_figures(sample_assessment())
    assessment["cautions"] = []
    text = Page(render_report(assessment)).text
    for code in ("model-error", "parameter-error", "extrapolation", "horizon", "not-an-opinion"):
        assert code in text
    assert "licensed practice prevail" in text


def test_caution_of_the_assessment_takes_the_place_of_the_standing_one() -> None:
    """One text per caution: never the general and the particular one side by side."""
    assessment = without_figures(sample_assessment())
    assessment["cautions"] = [
        {"code": "extrapolation", "message": "first line"},
        {"code": "extrapolation", "message": "second line"},
    ]
    text = Page(render_report(assessment)).text
    cautions = text[text.index("7. Cautions") :]
    assert cautions.count("extrapolation") == 1
    assert "first line second line" in cautions
    assert "reaches beyond the data; the figure there" not in cautions


@pytest.mark.parametrize(
    "assessment", [without_figures(sample_assessment()), without_figures(withheld_assessment())]
)
def test_output_is_called_nothing_it_is_not(assessment) -> None:
    text = Page(render_report(assessment)).text.lower()
    assert re.findall(r"\bcertified|\bcompliant|\bcomplies", text) == []
    for match in re.finditer(r"opinion", text):
        assert re.search(r"(is not an actuarial |not[- ]an[- ])$", text[: match.start()])


def test_records_that_do_not_reconcile_are_loud() -> None:
    assessment = without_figures(sample_assessment())
    assessment["lines"][0]["records"]["amount_used"] += 0.02
    text = Page(render_report(assessment)).text
    assert "RECORDS DO NOT RECONCILE" in text


def test_portfolio_of_given_laws_without_covers() -> None:
    """No records, no covers, a headline that does not exist: the page still stands and says so."""
    assessment = without_figures(sample_assessment())
    assessment["lines"] = assessment["lines"][2:]
    assessment["covers"] = []
    assessment["headline"] |= {
        "measure": "tail_value_at_risk",
        "value": None,
        "low": None,
        "high": None,
        "mean": None,
        "less_mean": None,
        "reason": "does not exist: the mean is infinite",
    }
    page = Page(render_report(assessment))
    assert "capital" not in page.data
    assert "net equals gross" in page.text
    assert "no line has losses of its own" in page.text
    assert page.open == []


def test_moments_show_no_more_digits_than_their_bracket() -> None:
    """The mean of gross is known to within 850 in the crosscheck, so it ends at the hundreds."""
    text = Page(render_report(without_figures(sample_assessment()))).text
    moments = text[text.index("Expected annual loss, EUR Annual loss") :][:400]
    assert "Gross 4,182,300 4,181,400 to 4,183,200" in moments


def test_capital_figure_of_one_engine_is_not_called_crosschecked() -> None:
    """Engines that agree on everything else say nothing of a figure that only one can compute."""
    assessment = without_figures(sample_assessment())
    for row in assessment["crosscheck"]["comparisons"]:
        if row["subject"] == "net":
            row["values"]["fourier"] = None
            row["bracket"]["fourier"] = None
    text = Page(render_report(assessment)).text
    assert "CAPITAL FIGURE NOT CROSSCHECKED: only the engine simulation can compute it." in text
    assert "Engines agree." not in text


def test_simulated_figure_without_an_interval_keeps_two_digits_and_says_why() -> None:
    """With an infinite variance a simulated mean has no standard error; five digits would be invented."""
    assessment = without_figures(sample_assessment())
    assessment["net"]["levels"][4]["tvar"] |= {
        "low": None,
        "high": None,
        "reason": "the variance is infinite",
    }
    text = Page(render_report(assessment)).text
    assert "13,000,000 no interval" in text
    assert "no interval: the variance is infinite" in text


def test_means_that_may_not_exist_are_marked_beside_the_figure() -> None:
    """Expected annual loss and tail value at risk carry the mark, value at risk does not; the foot of every
    such table and the first page say why."""
    from lossagg.report import tables
    from lossagg.report.cells import show

    assessment = sample_assessment()
    line = assessment["lines"][0]["name"]
    assessment["alarms"] = [
        {"subject": "gross", "lines": [line]},
        {"subject": f"line {line}", "lines": [line]},
    ]
    text = f"† The losses of {line} do not rule out an infinite mean"
    levels = tables.totals.levels(assessment)
    for row in levels.rows:
        shown = [show(cell, "money").text for cell in row[2:]]
        assert [word.endswith(" †") for word in shown] == [False, True, False, False]
    assert any(note.startswith(text) for note in levels.notes)
    moments = tables.totals.moments(assessment)
    assert show(moments.rows[0][1], "money").text.endswith(" †")
    assert not show(moments.rows[1][1], "money").text.endswith(" †")
    overview = tables.lines.overview(assessment)
    assert [show(row[4], "money").text.endswith(" †") for row in overview.rows] == [True, False, False]
    page = render_report(assessment)
    assert "Means in doubt" in page
    assert page.count(text) >= 4
    assert "†" not in render_report(sample_assessment())
