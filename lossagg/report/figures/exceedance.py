"""The exceedance curve: how likely the annual loss is to exceed an amount, gross and net."""

from __future__ import annotations

from typing import TYPE_CHECKING

from lossagg.report.digits import chance, significant
from lossagg.report.figures.drawing import INK, MAIN, PALE, SECOND, amount_label, canvas, log_amounts, to_svg
from lossagg.report.reading import Assessment, Entry, years_observed

if TYPE_CHECKING:
    from matplotlib.axes import Axes

TITLE = "Exceedance curve of the annual loss"
CHANCES = (0.9, 0.5, 0.2, 0.1, 0.05, 0.02, 0.01, 0.005, 0.002, 0.001, 0.0005)
# Beyond this ratio of the largest amount to the median, a linear axis would hide the curve.
WIDE = 60.0


def exceedance_figure(assessment: Assessment) -> str | None:
    """The exceedance curves with their ranges as SVG; `None` when they are withheld."""
    curves = {subject: _drawable(assessment[subject]["curve"]) for subject in ("gross", "net")}
    if not any(curves.values()):
        return None
    with canvas(7.6, 4.1, "exceedance", 1.7) as (figure, axis):
        axis.set_yscale("log")
        if _wide(curves):
            log_amounts(axis, which="x")
        _curve(axis, curves["gross"], "gross", MAIN, "-")
        _curve(axis, curves["net"], "net", SECOND, "--")
        _supported(axis, years_observed(assessment))
        _axes(axis, assessment["portfolio"]["currency"])
        return to_svg(figure, "exceedance", TITLE)


def _drawable(curve: list[Entry]) -> list[Entry]:
    return [point for point in curve if point["value"] is not None]


def _wide(curves: dict[str, list[Entry]]) -> bool:
    values = sorted(point["value"] for curve in curves.values() for point in curve if point["value"] > 0)
    return bool(values) and values[-1] > WIDE * values[len(values) // 4]


def _curve(axis: Axes, points: list[Entry], label: str, colour: str, style: str) -> None:
    chances = [point["exceedance"] for point in points]
    known = [point for point in points if point["low"] is not None and point["high"] is not None]
    axis.fill_betweenx(
        [point["exceedance"] for point in known],
        [point["low"] for point in known],
        [point["high"] for point in known],
        color=colour,
        alpha=0.25,
        linewidth=0,
    )
    axis.plot([point["value"] for point in points], chances, style, color=colour, linewidth=1.7, label=label)


def _supported(axis: Axes, years: float | None) -> None:
    """Mark the region in which the records themselves hold years as bad as that."""
    if not years or years <= 1:
        return
    axis.axhspan(1 / years, 1, color=PALE, alpha=0.45, linewidth=0, zorder=0)
    axis.axhline(1 / years, color=INK, linewidth=0.8, linestyle=":")
    for text, shift, side in (
        (f"within the {significant(years, 4)} years of the shortest record", 3, "bottom"),
        ("beyond the data", -4, "top"),
    ):
        axis.annotate(
            text,
            (1, 1 / years),
            xycoords=("axes fraction", "data"),
            xytext=(-2, shift),
            textcoords="offset points",
            ha="right",
            va=side,
            fontsize=8,
        )


def _axes(axis: Axes, currency: str) -> None:
    from matplotlib.ticker import FixedFormatter, FixedLocator, FuncFormatter, NullLocator

    axis.set_ylim(0.0004, 1.0)
    labels = [f"{chance(level)}  (1 in {significant(1 / level, 3)})" for level in CHANCES]
    axis.yaxis.set_major_locator(FixedLocator(CHANCES))
    axis.yaxis.set_major_formatter(FixedFormatter(labels))
    axis.yaxis.set_minor_locator(NullLocator())
    if axis.get_xscale() == "linear":
        axis.set_xlim(left=0)
        axis.xaxis.set_major_formatter(FuncFormatter(amount_label))
    axis.set_xlabel(f"annual loss, {currency}")
    axis.set_ylabel("probability of a larger annual loss")
    axis.legend(loc="upper right", handlelength=3.2)
