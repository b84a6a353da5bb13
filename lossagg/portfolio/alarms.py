"""Figures that hang on a mean which the losses do not show to exist.

Where the 95 % interval of a line's tail index reaches 1, the losses do not rule out that its mean is
infinite (Neslehova, Embrechts & Chavez-Demoulin 2006, Journal of Operational Risk 1). The mean and the tail
value at risk as fitted exist and are printed, but of every subject in which the line's loss is not capped
they carry an alarm.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from lossagg.engines.book import GROSS, NET, Book, PlacedCover, Subject
from lossagg.errors import EngineError
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.line import LineModel

POSSIBLE = "infinite-mean-possible"


def alarms_data(book: Book, models: Sequence[LineModel]) -> list[Data]:
    """`alarms` of the assessment: subjects whose mean may not exist, with the lines to blame.

    Args:
        book: lines and covers.
        models: the lines with their fits.
    """
    doubtful = [model.name for model in models if any(note.code == POSSIBLE for note in model.fit_notes)]
    found = []
    for subject in book.subjects:
        lines = [name for name in _uncapped(book, subject) if name in doubtful]
        if lines:
            where = subject.kind if subject in (GROSS, NET) else f"{subject.kind} {subject.name}"
            found.append({"subject": where, "lines": lines})
    return found


def _uncapped(book: Book, subject: Subject) -> Iterator[str]:
    """The lines of which a subject has no largest loss."""
    names = [line.name for line in book.lines]
    if subject.kind == "line":
        yield subject.name
    elif subject == GROSS:
        yield from names
    elif subject == NET:
        if not _capped_year(book):
            yield from (name for name in names if book.event_net(name).most == float("inf"))
    else:
        cover = book.cover(subject.name)
        yield from (name for name in names if _endless(book, cover, name))


def _capped_year(book: Book) -> bool:
    """Whether annual terms cap the net of a year; False where it is no function of one annual sum."""
    try:
        return book.plan(NET).annual.most < float("inf")
    except EngineError:
        return False


def _endless(book: Book, cover: PlacedCover, name: str) -> bool:
    paid = book.event_payment(cover, name)
    most = float("inf")
    return paid is not None and paid.most == most and cover.terms.annual_schedule().most == most
