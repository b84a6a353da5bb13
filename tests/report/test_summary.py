"""The console summary: the headline, its meaning and its cautions, in plain lines."""

from __future__ import annotations

from pathlib import Path

from invented_assessment import sample_assessment, withheld_assessment

from lossagg.report.summary import plain_table, summarise


def test_summary_says_what_the_figure_means() -> None:
    summary = summarise(sample_assessment(), Path("out"))
    assert summary.title == "Kestrel Haven port pool, valuation date 2026-09-30, amounts in EUR"
    assert summary.headline[0].startswith(
        "Capital figure, value at risk at 99.5% (1 in 200 years), net of all covers: EUR 9,271,000 (95% int"
    )
    assert "exceeds it once in 200 years on average, if the model holds" in summary.headline[1]
    assert [Path(name).name for name in summary.files] == [
        "assessment.json",
        "report.html",
        "tables.xlsx",
        "manifest.json",
    ]
    remarks = "\n".join(summary.remarks)
    assert "20 times beyond the data" in remarks
    assert "licensed practice prevail" in remarks


def test_withheld_summary_names_engines_and_distance() -> None:
    summary = summarise(withheld_assessment(), None)
    assert summary.withheld
    assert summary.headline[0].endswith("WITHHELD")
    assert any("simulation is 8.4% above fourier" in text for text in summary.headline)
    assert summary.files == ()


def test_plain_table_is_aligned_ascii_columns() -> None:
    lines = plain_table(summarise(sample_assessment(), None).tables[0])
    assert lines[0] == "Annual loss by level, EUR"
    assert lines[1].split()[:5] == ["Level", "Return", "period", "Gross", "VaR"]
    assert "11,684,000 [11,681,600 to 11,686,400]" in lines[5]
    assert len({len(line) for line in lines[1:]}) == 1


def test_names_cannot_steer_the_terminal() -> None:
    assessment = sample_assessment()
    assessment["portfolio"]["name"] = "\x1b]0;pwned\x07\x1b[2J"
    assessment["cautions"][0]["message"] = "\x1b[31mred"
    summary = summarise(assessment, None)
    assert "\x1b" not in summary.title + "".join(summary.remarks)
