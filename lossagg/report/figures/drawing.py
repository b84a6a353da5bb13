"""Drawing for paper: one style, readable in greyscale, exported as SVG without dates or chance.

matplotlib names the parts of an SVG by a salted hash and writes the date into it; both are fixed
here, and the names get a prefix so that several drawings fit into one page. Text stays text, so it
can be searched and read aloud; formulas in names (`$`) are not interpreted.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from html import escape
from io import StringIO
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

INK = "#1d2731"
MAIN = "#14507a"
SECOND = "#c0661b"
PALE = "#c9d4dc"
GRID = "#e3e7ea"
MOST_MARKS = 400
SHORT_AXIS = 60.0  # ends of a logarithmic axis this close get ticks between the powers of ten

_STYLE: dict[Any, Any] = {
    "svg.fonttype": "none",
    "text.parse_math": False,
    "font.family": "sans-serif",
    "font.size": 9.0,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "grid.color": GRID,
    "grid.linewidth": 0.7,
    "axes.axisbelow": True,
    "legend.frameon": False,
    "path.simplify": True,
    "axes.formatter.useoffset": False,
}


@contextmanager
def canvas(width: float, height: float, salt: str, left: float) -> Iterator[tuple[Figure, Axes]]:
    """A figure of `width` by `height` inches with one pair of axes, in the style of the report.

    `left` is the room for the labels of the vertical axis, in inches.
    """
    import matplotlib
    from matplotlib.figure import Figure

    with matplotlib.rc_context({**_STYLE, "svg.hashsalt": salt}):
        figure = Figure(figsize=(width, height))
        figure.subplots_adjust(left / width, 0.5 / height, 1 - 0.12 / width, 1 - 0.1 / height)
        yield figure, figure.add_subplot()


def to_svg(figure: Figure, name: str, title: str) -> str:
    """The figure as an SVG element for a page.

    Args:
        figure: the drawing, inside its `canvas`.
        name: prefix of every identifier in it, unique in the page.
        title: what the drawing shows, read aloud in its place.
    """
    from matplotlib.backends.backend_svg import FigureCanvasSVG

    FigureCanvasSVG(figure)
    stream = StringIO()
    figure.savefig(stream, format="svg", metadata={"Date": None, "Creator": None})
    text = stream.getvalue()
    text = text[text.index("<svg") :]
    text = re.sub(r"<metadata>.*?</metadata>\s*", "", text, flags=re.DOTALL)
    text = re.sub(r'(?<= id=")', f"{name}-", text)
    text = re.sub(r'(?<=xlink:href="#)|(?<=url\(#)', f"{name}-", text)
    opening = f'<svg role="img" aria-label="{escape(title)}" '
    return opening + text.removeprefix("<svg ").rstrip() + "\n"


def amount_label(value: float, _position: object = None) -> str:
    """An amount on an axis: 250,000 as 250 k, 4,200,000 as 4.2 m."""
    for size, letter in ((1e12, " tn"), (1e9, " bn"), (1e6, " m"), (1e3, " k")):
        if abs(value) >= size:
            return f"{value / size:g}{letter}"
    return f"{value:g}"


def thinned(count: int) -> list[int]:
    """Which of `count` points in rising order are drawn: the largest ones all, the others evenly."""
    if count <= MOST_MARKS:
        return list(range(count))
    largest = MOST_MARKS // 2
    rest = count - largest
    step = rest / (MOST_MARKS - largest)
    drawn = sorted({int(index * step) for index in range(MOST_MARKS - largest)})
    return drawn + list(range(rest, count))


def log_amounts(axis: Axes, *, which: str) -> None:
    """Make an axis logarithmic with amounts as labels."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullLocator

    class Amounts(LogLocator):
        """Powers of ten, and 2 and 5 times them where the axis spans few."""

        def tick_values(self, vmin: float, vmax: float) -> Any:
            self.set_params(subs=(1.0, 2.0, 5.0) if vmax < SHORT_AXIS * vmin else (1.0,))
            return super().tick_values(vmin, vmax)

    if which in ("x", "both"):
        axis.set_xscale("log")
        axis.xaxis.set_major_locator(Amounts(numticks=8))
        axis.xaxis.set_major_formatter(FuncFormatter(amount_label))
        axis.xaxis.set_minor_locator(NullLocator())
    if which in ("y", "both"):
        axis.set_yscale("log")
        axis.yaxis.set_major_locator(Amounts(numticks=8))
        axis.yaxis.set_major_formatter(FuncFormatter(amount_label))
        axis.yaxis.set_minor_locator(NullLocator())
