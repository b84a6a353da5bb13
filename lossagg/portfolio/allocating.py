"""Which lines the capital is for: the gross tail value at risk at the capital level, divided among them."""

from __future__ import annotations

from collections.abc import Mapping

from lossagg.engines.allocation import Allocation, exact_allocation, simulated_allocation
from lossagg.engines.book import GROSS, Book, Subject
from lossagg.engines.result import AnnualLoss, BracketedAnnualLoss
from lossagg.errors import DoesNotExistError, EngineError
from lossagg.portfolio.assessment import Data, figure


def allocation_data(
    book: Book,
    best: Mapping[Subject, AnnualLoss],
    simulated: Mapping[Subject, AnnualLoss],
    level: float,
    *,
    withheld: str,
) -> Data | None:
    """`allocation` of the assessment: what each line is charged, its share, and what it would need alone.

    Args:
        book: the lines and what they share.
        best: the annual loss reported of gross and of every line.
        simulated: the same as simulated, for lines that no exact engine follows.
        level: the capital level.
        withheld: why figures are withheld, "" where they are not.

    Returns:
        None for a portfolio of one line.
    """
    if len(book.lines) < 2:
        return None
    total = figure(best[GROSS], "tail_value_at_risk", level, withheld=withheld)
    data: Data = {"subject": "gross", "measure": "tail_value_at_risk", "level": level, "total": total}
    found = None if withheld else _allocation(book, best, simulated, level)
    if not isinstance(found, Allocation):
        return {**data, "engine": None, "lines": [], "diversification": None, "reason": withheld or found}
    return {
        **data,
        "engine": found.engine,
        "lines": [
            {
                "name": line.line,
                "value": line.value,
                "low": line.low,
                "high": line.high,
                "share": line.share,
                "alone": line.alone,
            }
            for line in found.lines
        ],
        "diversification": found.diversification,
        "reason": None,
    }


def _allocation(
    book: Book, best: Mapping[Subject, AnnualLoss], simulated: Mapping[Subject, AnnualLoss], level: float
) -> Allocation | str:
    """The allocation, or why there is none."""
    try:
        if isinstance(best[GROSS], BracketedAnnualLoss):
            return exact_allocation(book, best, level)
        return simulated_allocation(book, simulated, level)
    except DoesNotExistError as error:
        return error.what
    except EngineError as error:
        return str(error)
