"""The figures: same bytes every time, and drawn whatever the data look like."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

import pytest
from invented_assessment import sample_assessment

from lossagg.report.figures import counts_figure, exceedance_figure, quantile_figure, survival_figure
from lossagg.report.figures.drawing import MOST_MARKS, amount_label, thinned


def test_figures_are_well_formed_and_carry_no_date() -> None:
    assessment = sample_assessment()
    line = assessment["lines"][0]
    for drawing in (
        exceedance_figure(assessment),
        survival_figure(line, "a", "EUR"),
        quantile_figure(line, "b", "EUR"),
        counts_figure(line, "c"),
    ):
        assert drawing is not None
        assert ElementTree.fromstring(drawing).tag.endswith("svg")
        assert "metadata" not in drawing
        assert "date" not in drawing.lower()


def test_same_numbers_same_bytes() -> None:
    assert exceedance_figure(sample_assessment()) == exceedance_figure(sample_assessment())


def test_supported_region_is_marked_only_where_there_are_records() -> None:
    assessment = sample_assessment()
    assert "10 years of the shortest record" in str(exceedance_figure(assessment))
    assessment["lines"] = assessment["lines"][2:]
    assert "shortest record" not in str(exceedance_figure(assessment))


@pytest.mark.parametrize("value", [0.0, 1.0, 1e12])
def test_flat_curves_are_drawn(value: float) -> None:
    """A cover can make every year the same, zero included."""
    assessment = sample_assessment()
    for subject in ("gross", "net"):
        for point in assessment[subject]["curve"]:
            point |= {"value": value, "low": value, "high": value}
    assert exceedance_figure(assessment) is not None


def test_points_without_a_place_on_the_axes_are_left_out() -> None:
    line = sample_assessment()["lines"][0]
    line["fit"]["survival"] = [{"amount": 0.0, "empirical": 1.0, "fitted": 1.0}]
    line["fit"]["quantiles"] = [{"observed": 5.0, "fitted": None}]
    line["fit"]["counts"] = []
    assert survival_figure(line, "a", "EUR") is None
    assert quantile_figure(line, "b", "EUR") is None
    assert counts_figure(line, "c") is None


def test_years_without_losses_are_drawn() -> None:
    line = sample_assessment()["lines"][0]
    for point in line["fit"]["counts"]:
        point |= {"observed": 0, "fitted": 0.0, "low": 0.0, "high": 0.0}
    assert counts_figure(line, "c") is not None


def test_thinning_keeps_every_large_loss() -> None:
    drawn = thinned(10_000)
    assert len(drawn) == MOST_MARKS
    assert drawn[-MOST_MARKS // 2 :] == list(range(10_000 - MOST_MARKS // 2, 10_000))
    assert thinned(3) == [0, 1, 2]


def test_amount_labels() -> None:
    labels = [amount_label(value) for value in (0, 950, 2_500, 4.2e6, 1e9, 3e12)]
    assert labels == ["0", "950", "2.5 k", "4.2 m", "1 bn", "3 tn"]
