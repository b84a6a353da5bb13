"""The headings of a table, and which of them carry the columns lossagg understands."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches

from lossagg.errors import InputError, place
from lossagg.records.findings import Finding

MOST_COLUMNS = 10_000
INVISIBLE = re.compile("[\u200b\u200c\u200d\u2060\ufeff\u00ad]")
_LIKE_DATA = re.compile(r"^[+-]?\d[\d.,]*$|^\d{1,4}[-/.]\d{1,2}[-/.]\d{1,4}")

_NO_HEADINGS = (
    "No cell of the first row is like a heading known here: remove notes above the headings, or add headings."
)


@dataclass(frozen=True)
class Wanted:
    """The columns a table may have: what each holds ("number", "date" or "word"), and which it must have."""

    kinds: Mapping[str, str]
    required: tuple[str, ...]


def clean_text(text: str) -> str:
    """Bring text to one form: composed characters, no invisible ones, single spaces, none at the ends."""
    return " ".join(INVISIBLE.sub("", unicodedata.normalize("NFC", text)).split())


def heading_key(heading: str) -> str:
    """The form in which headings are compared: without case; space, underscore and hyphen are one."""
    return re.sub(r"[\s_-]+", "-", clean_text(heading).casefold())


def nearest(word: str, among: Sequence[str]) -> str:
    """Suggest the nearest of some names, as the start of a remedy; all of them when none is near."""
    by_key = {heading_key(name): name for name in among}
    close = get_close_matches(heading_key(word), list(by_key), n=1, cutoff=0.6)
    if close:
        return f"Did you mean {by_key[close[0]]!r}?"
    named = ", ".join(repr(name[:40]) for name in among[:20])
    return f"There are {named}{' and more' if len(among) > 20 else ''}." if among else "There are none."


def locate_columns(
    headings: Sequence[str], wanted: Wanted, mapping: Mapping[str, str], file: str, sheet: str | None
) -> dict[str, int]:
    """Find the position of each column that is wanted and there.

    Args:
        headings: the headings as they stand in the file.
        wanted: the columns understood, and those required.
        mapping: {canonical name: heading} where the file uses other headings.
        file: name of the file, for messages.
        sheet: name of the sheet, for messages.

    Returns:
        {canonical name: position from 0}.

    Raises:
        InputError: empty or repeated headings, a mapping to a heading that is not there or from a
            name that is not understood, a required column that is missing.
    """
    where = place(file=file, sheet=sheet, row=1)
    _check_headings(headings, where)
    positions: dict[str, int] = {}
    for name, heading in mapping.items():
        positions[name] = _mapped(name, heading, headings, wanted, where)
    taken = set(positions.values())
    if len(taken) < len(positions):
        raise InputError(
            "one heading is mapped to two columns",
            where=where,
            value=sorted(mapping.values()),
            remedy="Map each heading once.",
        )
    for position, heading in enumerate(headings):
        key = heading_key(heading)
        if key in wanted.kinds and key not in positions and position not in taken:
            positions[key] = position
    for name in wanted.required:
        if name not in positions:
            raise _missing(name, headings, wanted, where)
    return positions


def heading_findings(
    headings: Sequence[str], positions: Mapping[str, int], wanted: Wanted, file: str, sheet: str | None
) -> list[Finding]:
    """Report the columns that are not read, by heading only, and the likely slip in one of them."""
    unread = [h for position, h in enumerate(headings) if position not in positions.values()]
    if not unread:
        return []
    absent = [name for name in wanted.kinds if name not in positions]
    hints = []
    for heading in unread:
        close = get_close_matches(heading_key(heading), absent, n=1, cutoff=0.75)
        if close:
            hints.append(f"{heading[:40]!r} looks like {close[0]!r}: map it if it is.")
    named = ", ".join(repr(heading[:40]) for heading in unread[:10])
    more = f" and {len(unread) - 10} more" if len(unread) > 10 else ""
    return [
        Finding(
            "unread-columns",
            "warn",
            file,
            None,
            None,
            None,
            f"{len(unread)} column{'s are' if len(unread) > 1 else ' is'} not read: {named}{more}",
            " ".join(hints)
            or "Map those that lossagg should read; the others may hold personal data and are best left out.",
            sheet=sheet,
            count=0,
        )
    ]


def _check_headings(headings: Sequence[str], where: str) -> None:
    if len(headings) > MOST_COLUMNS:
        raise InputError(
            "too many columns",
            where=where,
            value=len(headings),
            remedy=f"Keep at most {MOST_COLUMNS}; is the delimiter the right one?",
        )
    first: dict[str, int] = {}
    for position, heading in enumerate(headings, start=1):
        key = heading_key(heading)
        if not key:
            raise InputError(
                f"the heading of column {position} of {len(headings)} is empty",
                where=where,
                remedy="The first row must hold one heading for each column.",
            )
        if key in first:
            raise InputError(
                f"columns {first[key]} and {position} have the same heading",
                where=where,
                value=heading[:40],
                remedy="Rename or delete one of them.",
            )
        first[key] = position


def _mapped(name: str, heading: str, headings: Sequence[str], wanted: Wanted, where: str) -> int:
    if name not in wanted.kinds:
        raise InputError(
            "the column mapping names a column that is not understood",
            where=where,
            value=name,
            remedy=nearest(name, list(wanted.kinds)),
        )
    cleaned = [clean_text(text) for text in headings]
    if clean_text(heading) in cleaned:
        return cleaned.index(clean_text(heading))
    keys = [heading_key(text) for text in headings]
    if heading_key(heading) in keys:
        return keys.index(heading_key(heading))
    raise InputError(
        f"the column mapping names a heading for {name!r} that is not in the file",
        where=where,
        value=heading,
        remedy=nearest(heading, headings) if _has_headings(headings, wanted) else _NO_HEADINGS,
    )


def _has_headings(headings: Sequence[str], wanted: Wanted) -> bool:
    """Whether some cell of the first row is like a name that is understood; else it is a note or a record,
    and what is personal in it must not be repeated."""
    return any(
        get_close_matches(heading_key(heading), wanted.kinds, n=1, cutoff=0.75) for heading in headings
    )


def _missing(name: str, headings: Sequence[str], wanted: Wanted, where: str) -> InputError:
    if any(_LIKE_DATA.match(heading) for heading in headings):
        remedy = "The first row looks like data: add a row of headings above it."
    elif not _has_headings(headings, wanted):
        remedy = f'{_NO_HEADINGS} If they are headings, map them: {name} = "...".'
    else:
        remedy = f'{nearest(name, headings)} Rename the heading or map it: {name} = "...".'
    return InputError(f"the required column {name!r} is missing", where=where, remedy=remedy)
