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
        for inside, label in ((True, "within the appetite"), (False, "option")):
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
            clean(entry["name"]),
            (x, y),
            xytext=(6, 4 - 11 * crowd),
            textcoords="offset points",
            fontsize=7.5,
            color=INK,
        )


def curves_figure(options: Entry) -> str | None:
    """Loss elimination ratio by amount, with the options' own deductibles marked; `None` without one."""
    rows = options["curves"]["loss_elimination"]
    if len(rows) < 2:
        return None
    from matplotlib.ticker import FuncFormatter

    with canvas(7.6, 3.4, "curves", 0.72) as (figure, axis):
        log_amounts(axis, which="x")
        amounts = [row["amount"] for row in rows]
        axis.plot(
            amounts, [row["factor"] for row in rows], "-", color=MAIN, linewidth=1.7, label="loss elimination"
        )
        exposure = options["curves"]["exposure"]
        if exposure and options["curves"]["largest_loss"] != options["subject"]["event_cap"]:
            axis.plot(
                [row["amount"] for row in exposure],
                [row["factor"] for row in exposure],
                "--",
                color=SECOND,
                linewidth=1.4,
                label="exposure curve",
            )
        deductibles = sorted(
            {entry["terms"]["deductible"] for entry in options["options"] if entry["terms"]} - {0.0}
        )
        by_amount = {row["amount"]: row["factor"] for row in rows}
        marked = [amount for amount in deductibles if amount in by_amount]
        axis.plot(
            marked,
            [by_amount[a] for a in marked],
            "o",
            color=MAIN,
            markersize=4,
            linestyle="none",
            label="options",
        )
        axis.set_ylim(0, 1.02)
        axis.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{100 * value:g}%"))
        axis.set_xlabel(f"amount of one event, {options['portfolio']['currency']}")
        axis.set_ylabel("part of the expected loss below it")
        axis.legend(loc="upper left", fontsize=8)
        return to_svg(figure, "curves", "Loss elimination ratio and exposure curve")
