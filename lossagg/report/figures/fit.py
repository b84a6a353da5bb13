"""The fit of one line: survival of the sizes, quantiles against quantiles, counts by year."""

from __future__ import annotations

from typing import TYPE_CHECKING

from lossagg.report.cells import clean
from lossagg.report.figures.drawing import (
    INK,
    MAIN,
    PALE,
    SECOND,
    amount_label,
    canvas,
    log_amounts,
    thinned,
    to_svg,
)
from lossagg.report.reading import Entry

if TYPE_CHECKING:
    from matplotlib.axes import Axes

SIZE = (3.75, 3.0)


def survival_figure(line: Entry, name: str, currency: str) -> str | None:
    """Observed and fitted exceedance of one loss on logarithmic axes; `None` without data."""
    points = [
        point for point in line["fit"]["survival"] if point["amount"] > 0 and (point["empirical"] or 0) > 0
    ]
    if len(points) < 2:
        return None
    amounts = [point["amount"] for point in points]
    with canvas(*SIZE, name, 0.72) as (figure, axis):
        log_amounts(axis, which="x")
        axis.set_yscale("log")
        banded = [point for point in points if point.get("low") and point.get("high")]
        axis.fill_between(
            [point["amount"] for point in banded],
            [point["low"] for point in banded],
            [point["high"] for point in banded],
            color=PALE,
            alpha=0.7,
            linewidth=0,
            step="post",
            label="95 % interval",
        )
        axis.step(
            amounts,
            [point["empirical"] for point in points],
            where="post",
            color=INK,
            linewidth=1.1,
            label="observed",
        )
        fitted = [point["fitted"] for point in points]
        axis.plot(amounts, fitted, "--", color=SECOND, linewidth=1.6, label="fitted")
        _chances(axis, min(point["empirical"] for point in points))
        axis.set_xlabel(f"loss, {currency}")
        axis.set_ylabel("probability of a larger loss")
        axis.legend(loc="lower left")
        return to_svg(figure, name, f"Size of loss, {clean(line['name'])}: observed and fitted exceedance")


def _chances(axis: Axes, smallest: float) -> None:
    from matplotlib.ticker import FuncFormatter, LogLocator, NullLocator

    axis.set_ylim(smallest / 3, 1.3)
    axis.yaxis.set_major_locator(LogLocator(numticks=6))
    axis.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{100 * value:g}%"))
    axis.yaxis.set_minor_locator(NullLocator())


def quantile_figure(line: Entry, name: str, currency: str) -> str | None:
    """Observed losses against fitted quantiles on logarithmic axes; `None` without data."""
    points = [
        point
        for point in line["fit"]["quantiles"]
        if point["observed"] > 0 and point["fitted"] is not None and point["fitted"] > 0
    ]
    if len(points) < 2:
        return None
    points.sort(key=lambda point: (point["fitted"], point["observed"]))
    drawn = [points[index] for index in thinned(len(points))]
    with canvas(*SIZE, name, 0.72) as (figure, axis):
        log_amounts(axis, which="both")
        fitted = [point["fitted"] for point in drawn]
        observed = [point["observed"] for point in drawn]
        ends = [min(fitted + observed), max(fitted + observed)]
        axis.plot(ends, ends, "--", color=SECOND, linewidth=1.2, label="perfect fit")
        axis.plot(
            fitted, observed, "o", color=MAIN, markersize=3, markerfacecolor="none", markeredgewidth=0.8
        )
        axis.set_xlabel(f"fitted quantile, {currency}")
        axis.set_ylabel(f"observed loss, {currency}")
        axis.legend(loc="upper left")
        return to_svg(figure, name, f"Size of loss, {clean(line['name'])}: observed against fitted quantiles")


def counts_figure(line: Entry, name: str) -> str | None:
    """Observed losses by year as bars, the fitted mean as a line with its band; `None` without data."""
    points = line["fit"]["counts"]
    if not points:
        return None
    from matplotlib.ticker import FuncFormatter, MaxNLocator

    years = [point["year"] for point in points]
    with canvas(*SIZE, name, 0.72) as (figure, axis):
        axis.bar(
            years,
            [point["observed"] for point in points],
            color=PALE,
            edgecolor=INK,
            linewidth=0.7,
            width=0.7,
        )
        edges = [years[0] - 0.5, *(year + 0.5 for year in years)]
        for key, style, label in (
            ("fitted", "-", "fitted mean"),
            ("low", ":", "band of one year"),
            ("high", ":", None),
        ):
            values = [point[key] for point in points]
            axis.stairs(
                values, edges, baseline=None, color=SECOND, linestyle=style, linewidth=1.5, label=label
            )
        axis.xaxis.set_major_locator(MaxNLocator(integer=True, nbins=6))
        axis.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.0f}"))
        axis.yaxis.set_major_locator(MaxNLocator(integer=True, nbins=6))
        axis.yaxis.set_major_formatter(FuncFormatter(amount_label))
        axis.set_ylim(0, 1.25 * max(max(point["observed"], point["high"]) for point in points) or 1)
        axis.set_xlim(years[0] - 0.8, years[-1] + 0.8)
        axis.set_xlabel("year")
        axis.set_ylabel("losses observed")
        axis.legend(loc="upper left", ncols=2, fontsize=8)
        return to_svg(figure, name, f"Losses by year, {clean(line['name'])}: observed and fitted")
