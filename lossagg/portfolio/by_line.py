"""What the simulation adds to an assessment: the parts of single lines and the largest event of a year."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.engines.book import Subject
from lossagg.engines.result import BookResult
from lossagg.portfolio.assessment import Data, subject_of

NOTE = (
    "simulated; a cover's payment for a year belongs to its lines in proportion to what its event terms "
    "pay of their losses"
)


def by_line_of(result: BookResult, levels: Sequence[float], *, withheld: str) -> Data:
    """Per line what is ceded, what is retained and the largest loss of a year, each with levels and the
    exceedance curve; "largest" alone is the largest loss of a year of all lines.

    Args:
        result: what the simulation made of the book.
        levels: levels of the figures.
        withheld: why figures are withheld; empty where they are not.
    """
    lines: dict[str, Data] = {}
    data: Data = {"note": NOTE, "lines": lines}
    for subject, loss in result.details.items():
        figures = subject_of(loss, levels, exact=False, withheld=withheld, note=None)
        if subject == Subject("largest"):
            data["largest"] = figures
        else:
            lines.setdefault(subject.name, {})[subject.kind] = figures
    return data
