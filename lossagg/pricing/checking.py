"""The options of a portfolio file checked without a model: lines, base, and terms that contradict."""

from __future__ import annotations

from lossagg.engines.book import Line
from lossagg.families import Exponential, Poisson
from lossagg.portfolio.schema import PortfolioFile
from lossagg.pricing.choices import base_of, lines_of, options_of


def check_options(file: PortfolioFile) -> None:
    """Stop at whatever `price_options` would stop at before it computes anything.

    Args:
        file: the portfolio file; one without options has nothing to check but the lines named.

    Raises:
        InputError: lines or a base that do not exist, options of one name, terms that contradict each other.
    """
    # Terms are checked against the expense and the sum insured of a line, whatever its laws are.
    stand_ins = tuple(
        Line(
            name=section.name,
            frequency=Poisson(mean=1.0),
            severity=Exponential(mean=1.0),
            expense=section.expense,
            sum_insured=section.sum_insured,
        )
        for section in file.line
    )
    chosen = tuple(stand_ins[k] for k in lines_of(stand_ins, file.pricing.lines))
    if file.option or file.option_grid is not None:
        base_of(options_of(file, chosen), file.pricing.base)
