"""The tail of one line by threshold: shape with its interval, Hill's estimate, mean excess."""

from __future__ import annotations

from lossagg.report.cells import clean
from lossagg.report.figures.drawing import INK, MAIN, PALE, SECOND, canvas, log_amounts, to_svg
from lossagg.report.figures.fit import SIZE
from lossagg.report.reading import Entry

_WIDEST = 3.0  # shapes beyond say only that nothing is known


def shape_figure(line: Entry, name: str, currency: str) -> str | None:
    """Shape of the tail with its interval, and Hill's estimate, over the threshold; `None` without data."""
    points = _points(line)
    if len(points) < 2:
        return None
    thresholds = [point["threshold"] for point in points]
    with canvas(*SIZE, name, 0.72) as (figure, axis):
        log_amounts(axis, which="x")
        low = [_held(point["low"], -_WIDEST) for point in points]
        high = [_held(point["high"], _WIDEST) for point in points]
        axis.fill_between(thresholds, low, high, color=PALE, alpha=0.7, linewidth=0)
        axis.plot(thresholds, [point["shape"] for point in points], "-", color=MAIN, marker="o", markersize=3)
        axis.plot(thresholds, [point["hill"] for point in points], "--", color=SECOND, linewidth=1.3)
        axis.axhline(1.0, color=INK, linewidth=0.8, linestyle=":")
        bottom, top = min(0.0, *low), max(1.2, *high)
        axis.set_ylim(max(bottom, -1.0) - 0.1, min(top, 2.0) + 0.1)
        axis.set_xlabel(f"threshold, {currency}")
        axis.set_ylabel("shape (solid), Hill (dashed)")
        return to_svg(figure, name, f"Tail shape by threshold, {clean(line['name'])}; the mean ends at 1")


def mean_excess_figure(line: Entry, name: str, currency: str) -> str | None:
    """Mean excess over the threshold: rising for heavy tails, level for exponential ones."""
    points = _points(line)
    if len(points) < 2:
        return None
    with canvas(*SIZE, name, 0.72) as (figure, axis):
        log_amounts(axis, which="both")
        thresholds = [point["threshold"] for point in points]
        axis.plot(
            thresholds, [point["mean_excess"] for point in points], "-", color=MAIN, marker="o", markersize=3
        )
        axis.set_xlabel(f"threshold, {currency}")
        axis.set_ylabel(f"mean excess, {currency}")
        return to_svg(figure, name, f"Mean excess by threshold, {clean(line['name'])}")


def _points(line: Entry) -> list[Entry]:
    found = (line.get("tail") or {}).get("points", ())
    return [point for point in found if point["threshold"] > 0 and point["mean_excess"] > 0]


def _held(value: float | None, end: float) -> float:
    return end if value is None else min(max(value, -_WIDEST), _WIDEST)
