"""Lines, and covers at their place among lines and other covers, checked against each other."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

from lossagg.arrays import require_positive
from lossagg.cover import Cover, Schedule
from lossagg.cover.event import require_basis, surplus_share
from lossagg.errors import InputError
from lossagg.families.base import CountLaw, SizeLaw


class Subject(NamedTuple):
    """Whose annual amount a result is: kind "line", "gross", "cover" or "net", and its name."""

    kind: str
    name: str = ""

    def __str__(self) -> str:
        return f"{self.kind} {self.name}".strip()


GROSS = Subject("gross")
NET = Subject("net")


@dataclass(frozen=True, kw_only=True)
class Line:
    """One class of business: the law of its counts per year and of the size of one loss.

    Args:
        name: its name in reports.
        frequency: law of the number of losses in a year.
        severity: law of the size of one loss, without adjustment expense.
        expense: adjustment expense that comes with every loss, as a ratio to it: 0.08 for 8 %. The line's
            annual amount, gross and net include it; each cover says on which basis it pays it.
        sum_insured: of every risk of the line, for a surplus; None where it is not known.

    Raises:
        InputError: an expense that is negative or above 1, a sum insured that is not above 0.
    """

    name: str
    frequency: CountLaw
    severity: SizeLaw
    expense: float = 0.0
    sum_insured: float | None = None

    def __post_init__(self) -> None:
        if require_positive(self.expense, "expense", zero=True) > 1:
            raise InputError(
                "expense is a ratio to the loss",
                where=f"line {self.name!r}",
                value=self.expense,
                remedy=f"Write {self.expense / 100:g} for {self.expense:g} %.",
            )
        if self.sum_insured is not None:
            require_positive(self.sum_insured, "sum_insured")

    @property
    def cost(self) -> Schedule:
        """What one event costs: the loss and its expense."""
        return Schedule.proportional(1.0 + self.expense)


@dataclass(frozen=True, kw_only=True)
class PlacedCover:
    """A cover, the lines it covers, and the covers it comes after.

    Args:
        name: its name in reports.
        terms: its terms.
        lines: names of the lines it covers; empty means every line.
        after: names of covers that pay first; this one sees what they leave.
        stated: how the terms were stated, where that is in other words: loss ratios, another currency.
    """

    name: str
    terms: Cover
    lines: tuple[str, ...] = ()
    after: tuple[str, ...] = ()
    stated: str = ""

    def describe(self) -> str:
        """The terms in one line, and how they were stated."""
        return self.terms.describe() + (f" ({self.stated})" if self.stated else "")


def check_lines(lines: Sequence[Line]) -> None:
    """Refuse a book without lines, or with two of the same name.

    Raises:
        InputError: with the name repeated.
    """
    if not lines:
        raise InputError("a book needs at least one line", remedy="Add a line.")
    _require_distinct("line", [line.name for line in lines])


def check_places(lines: Sequence[Line], covers: Sequence[PlacedCover]) -> None:
    """Refuse covers whose place among lines and other covers has no meaning.

    Raises:
        InputError: repeated names, an unknown line, an `after` that names no earlier cover, event terms
            after annual terms, an expense without a basis or a basis without an expense, a surplus on a
            line without a sum insured.
    """
    _require_distinct("cover", [cover.name for cover in covers])
    line_names = {line.name for line in lines}
    earlier: dict[str, PlacedCover] = {}
    for cover in covers:
        where = f"cover {cover.name!r}"
        for name in cover.lines:
            if name not in line_names:
                raise InputError(
                    "the cover names a line that does not exist",
                    where=where,
                    value=name,
                    remedy=f"Lines: {', '.join(sorted(line_names))}.",
                )
        for name in cover.after:
            if name not in earlier:
                raise InputError(
                    "the cover comes after a cover that is not listed before it",
                    where=where,
                    value=name,
                    remedy="List the covers in the order in which they pay.",
                )
            _check_pair(cover, earlier[name], lines)
        _check_ground(cover, [line for line in lines if not cover.lines or line.name in cover.lines])
        earlier[cover.name] = cover


def _check_pair(cover: PlacedCover, before: PlacedCover, lines: Sequence[Line]) -> None:
    if cover.terms.has_event_terms and before.terms.has_annual_terms:
        raise InputError(
            "event terms cannot follow a cover with annual terms: its payment belongs to the year",
            where=f"cover {cover.name!r}",
            value=before.name,
            remedy="Use annual terms only (retention, limit, share) in the later cover.",
        )
    terms = before.terms
    whole = terms.share == 1.0 and terms.surplus is None and not terms.self_insured
    if terms.expense_basis == "outside" and not whole and any(line.expense > 0 for line in lines):
        raise InputError(
            "the cover comes after one that pays a part of the expense in addition: what that leaves of "
            "loss and expense is in no fixed proportion",
            where=f"cover {cover.name!r}",
            value=before.name,
            remedy='Give the earlier cover the expense basis "inside" or "pro-rata".',
        )


def _check_ground(cover: PlacedCover, lines: Sequence[Line]) -> None:
    where = f"cover {cover.name!r}"
    for line in lines:
        try:
            require_basis(cover.terms, line.expense)
            surplus_share(cover.terms, line.sum_insured)
        except InputError as error:
            raise InputError(
                error.what, where=f"{where}, line {line.name!r}", value=error.value, remedy=error.remedy
            ) from error
    if cover.terms.expense_basis is not None and not any(line.expense > 0 for line in lines):
        raise InputError(
            "the cover says how it pays expense, but none of its lines carries any",
            where=where,
            value=cover.terms.expense_basis,
            remedy="Give the lines their expense, as a ratio to the loss, or leave expense_basis out.",
        )


def _require_distinct(kind: str, names: list[str]) -> None:
    for name in names:
        if names.count(name) > 1:
            raise InputError(
                f"two {kind}s have the same name", value=name, remedy=f"Give every {kind} its own name."
            )
