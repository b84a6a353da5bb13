"""Figures by formula beside those of the engines: whether they are of the right order, never an answer."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from lossagg.engines.approximations import single_loss, translated_gamma
from lossagg.engines.book import GROSS, Book, Subject
from lossagg.engines.compound import CompoundSum
from lossagg.engines.result import AnnualLoss
from lossagg.engines.tied import annual_sum
from lossagg.errors import EngineError
from lossagg.portfolio.assessment import Data, number


def sanity_data(
    book: Book, best: Mapping[Subject, AnnualLoss], levels: Sequence[float], *, withheld: str
) -> list[Data]:
    """`sanity` of the assessment: VaR of gross and of every line beside two approximations of it.

    Args:
        book: the lines.
        best: the annual loss reported of gross and of every line.
        levels: levels of the figures.
        withheld: why figures are withheld, "" where they are not; nothing is then compared.
    """
    if withheld:
        return []
    rows = []
    for subject in (GROSS, *(Subject("line", line.name) for line in book.lines)):
        if subject != GROSS and len(book.lines) == 1:
            continue
        events = book.plan(subject).events
        own = CompoundSum.of(tuple(line for line in book.lines if line.name in events), events)
        try:
            whole = annual_sum(book, events)
        except EngineError:
            whole = None
        for level in levels:
            gamma = np.nan if whole is None else translated_gamma(whole, level)
            rows.append(
                {
                    "subject": str(subject),
                    "level": level,
                    "var": number(best[subject].value_at_risk(level)),
                    "single_loss": number(single_loss(own, level)),
                    "translated_gamma": number(gamma),
                }
            )
    return rows
