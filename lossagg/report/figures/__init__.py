"""The figures of the report, drawn as inline SVG: same numbers, same bytes."""

from __future__ import annotations

from lossagg.report.figures.exceedance import exceedance_figure
from lossagg.report.figures.fit import counts_figure, quantile_figure, survival_figure
from lossagg.report.figures.tail import mean_excess_figure, shape_figure

__all__ = [
    "counts_figure",
    "exceedance_figure",
    "mean_excess_figure",
    "quantile_figure",
    "shape_figure",
    "survival_figure",
]
