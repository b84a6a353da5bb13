"""Figures of the options: the efficient frontier, and the curves."""

from __future__ import annotations

from typing import TYPE_CHECKING

from lossagg.report import digits
from lossagg.report.cells import clean
from lossagg.report.figures.drawing import INK, MAIN, PALE, SECOND, amount_label, canvas, log_amounts, to_svg
from lossagg.report.reading import Entry

if TYPE_CHECKING:
    from matplotlib.axes import Axes

MOST_LABELS = 14


def frontier_figure(options: Entry) -> str | None:
    """Expected total cost against total cost in the worst year; `None` with fewer than two points."""
    level = options["frontier_level"]
    points = [
        (x, y, entry) for entry in options["options"] if (x := _worst(entry, level)) and (y := _mean(entry))
    ]
    if len(points) < 2:
        return None
    from matplotlib.ticker import FuncFormatter

    appetite = options["appetite"]
    within = set() if appetite is None else set(appetite["within"])
    with canvas(7.6, 4.4, "frontier", 0.95) as (figure, axis):
        efficient = sorted((x, y) for x, y, _ in _efficient(points))
        axis.plot(
            [x for x, _ in efficient],
            [y for _, y in efficient],
            "-",
            color=PALE,
            linewidth=2.5,
            zorder=1,
            label="efficient at this level",
        )
        outside = "option" if appetite is None else "outside the appetite"
        for inside, label in ((True, "within the appetite"), (False, outside)):
            own = [(x, y) for x, y, entry in points if (entry["name"] in within) == inside]
            if own:
                axis.plot(
                    [x for x, _ in own],
                    [y for _, y in own],
                    "s" if inside else "o",
                    color=SECOND if inside else MAIN,
                    markerfacecolor="none" if not inside and within else None,
                    markersize=5,
                    linestyle="none",
                    label=label,
                )
        _labels(axis, points)
        axis.xaxis.set_major_formatter(FuncFormatter(amount_label))
        axis.yaxis.set_major_formatter(FuncFormatter(amount_label))
        axis.margins(0.16, 0.12)
        currency = options["portfolio"]["currency"]
        axis.set_xlabel(f"total cost in the worst year at {digits.percent(level)}, {currency}")
        axis.set_ylabel(f"expected total cost, {currency}")
        axis.legend(loc="best", fontsize=8)
        return to_svg(figure, "frontier", "Expected total cost against total cost in the worst year")


def _worst(entry: Entry, level: float) -> float | None:
    found: float | None = next(
        row["total"]["value"] for row in entry["total"]["levels"] if row["level"] == level
    )
    return found


def _mean(entry: Entry) -> float | None:
    found: float | None = entry["total"]["expected"]["value"]
    return found


def _efficient(points: list[tuple[float, float, Entry]]) -> list[tuple[float, float, Entry]]:
    """Points that no other beats in both coordinates, as drawn: at the estimates and this level alone."""
    kept, least = [], float("inf")
    for point in sorted(points, key=lambda p: (p[0], p[1])):
        if point[1] < least:
            kept.append(point)
            least = point[1]
    return kept


def _labels(axis: Axes, points: list[tuple[float, float, Entry]]) -> None:
    named = points if len(points) <= MOST_LABELS else _efficient(points)[:MOST_LABELS]
    taken: list[tuple[float, float]] = []
    wide = max(x for x, _, _ in points) - min(x for x, _, _ in points) or 1.0
    high = max(y for _, y, _ in points) - min(y for _, y, _ in points) or 1.0
    for x, y, entry in sorted(named, key=lambda point: (point[0], -point[1])):
        place = (x / wide, y / high)
        crowd = sum(abs(place[0] - a) < 0.12 and abs(place[1] - b) < 0.05 for a, b in taken)
        taken.append(place)
        axis.annotate(
            clean(entry["name"]) + (" (base)" if entry["base"] else ""),
            (x, y),
            xytext=(6, 4 - 11 * crowd),
            textcoords="offset points",
            fontsize=7.5,
            color=INK,
        )


def curves_figure(options: Entry) -> str | None:
    """Loss elimination with the options' own deductibles, increased limits, exposure curve and the cost of
    layers, as many of them as there are; `None` without any."""
    curves, currency = options["curves"], options["portfolio"]["currency"]
    panels = [
        panel
        for rows, panel in (
            (curves["loss_elimination"], _elimination),
            (curves["increased_limits"], _limits),
            (curves["exposure"], _exposure),
            (curves["layers"], _layers),
        )
        if len(rows) > 1
    ]
    if not panels:
        return None
    rows = -(-len(panels) // 2)
    with canvas(7.6, 2.7 * rows, "curves", 0.66) as (figure, axis):
        axis.remove()
        figure.subplots_adjust(
            top=1 - 0.26 / (2.7 * rows), bottom=0.52 / (2.7 * rows), hspace=0.45, wspace=0.28
        )
        for number, panel in enumerate(panels, 1):
            own = figure.add_subplot(rows, min(len(panels), 2), number)
            panel(own, options)
            own.title.set_fontsize(9)
            own.title.set_fontweight("bold")
            if panel is not _exposure:
                own.set_xlabel(f"amount of one event, {currency}")
        return to_svg(figure, "curves", "Loss elimination, increased limits, exposure curve and layer costs")


def _elimination(axis: Axes, options: Entry) -> None:
    rows = options["curves"]["loss_elimination"]
    log_amounts(axis, which="x")
    axis.plot([row["amount"] for row in rows], [row["factor"] for row in rows], "-", color=MAIN)
    by_amount = {row["amount"]: row["factor"] for row in rows}
    deductibles = {entry["terms"]["deductible"] for entry in options["options"] if entry["terms"]}
    marked = [amount for amount in sorted(deductibles) if amount in by_amount]
    factors = [by_amount[amount] for amount in marked]
    axis.plot(marked, factors, "o", color=MAIN, markersize=4, linestyle="none", label="options")
    _percent(axis, "y")
    axis.set_title("Part of the expected loss below")
    if marked:
        axis.legend(loc="upper left", fontsize=8)


def _limits(axis: Axes, options: Entry) -> None:
    rows, basic = options["curves"]["increased_limits"], options["curves"]["basic_limit"]
    log_amounts(axis, which="x")
    axis.plot([row["amount"] for row in rows], [row["factor"] for row in rows], "-", color=MAIN)
    axis.plot([basic], [1.0], "o", color=SECOND, markersize=4, linestyle="none", label="basic limit")
    axis.set_ylim(bottom=0)
    axis.set_title("Increased limit factor")
    axis.legend(loc="upper left", fontsize=8)


def _exposure(axis: Axes, options: Entry) -> None:
    rows = options["curves"]["exposure"]
    axis.plot(
        [0.0, *(row["share"] for row in rows)], [0.0, *(row["factor"] for row in rows)], "-", color=MAIN
    )
    axis.plot([0, 1], [0, 1], ":", color=PALE)
    _percent(axis, "x")
    _percent(axis, "y")
    largest = amount_label(options["curves"]["largest_loss"])
    axis.set_title(f"Exposure curve, largest loss {largest}")
    axis.set_xlabel("part of the largest loss")


def _layers(axis: Axes, options: Entry) -> None:
    rows = options["curves"]["layers"]
    log_amounts(axis, which="both")
    edges = [row["from"] for row in rows if row["from"] > 0 and row["rate_on_line"] > 0]
    rates = [row["rate_on_line"] for row in rows if row["from"] > 0 and row["rate_on_line"] > 0]
    axis.step([*edges, rows[-1]["to"]], [*rates, rates[-1]], where="post", color=MAIN)
    axis.set_title("Expected cost of a layer a year / its width")


def _percent(axis: Axes, which: str) -> None:
    from matplotlib.ticker import FuncFormatter

    own = axis.xaxis if which == "x" else axis.yaxis
    own.set_major_formatter(FuncFormatter(lambda value, _: f"{100 * value:g}%"))
    (axis.set_xlim if which == "x" else axis.set_ylim)(0, 1.02)
