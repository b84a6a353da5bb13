"""The figures of the report, drawn as inline SVG: same numbers, same bytes."""

from __future__ import annotations

from lossagg.report.figures.exceedance import exceedance_figure
from lossagg.report.figures.fit import counts_figure, quantile_figure, survival_figure

__all__ = ["counts_figure", "exceedance_figure", "quantile_figure", "survival_figure"]
