"""What a page shows of the options: the page of a table of options, and that of an assessment."""

from __future__ import annotations

from typing import Any

from lossagg.report.figures.options import curves_figure, frontier_figure
from lossagg.report.reading import Entry
from lossagg.report.tables import option_details as details
from lossagg.report.tables import options as tables


def option_parts(options: Entry) -> dict[str, Any]:
    """What the page shows of the options: tables and figures."""
    if options["withheld"]:
        return {"data": options}
    shown = tables.shown_options(options)
    past = options["history"]
    return {
        "data": options,
        "tables": (
            tables.retained(options, shown),
            tables.ceded(options, shown),
            tables.total(options, shown),
            tables.bad_years(options, shown),
        ),
        "ranges": details.ranges({**options, "options": shown}),
        "terms": tables.terms(options, shown),
        "past": None if past is None else details.past_costs(options, shown),
        "frontier": frontier_figure(options),
        "curves": curves_figure(options),
        "curve_tables": details.curves(options),
        "basis": details.basis(options),
        "parts": details.parts({**options, "options": shown}),
    }
