"""The records of a line beside those of the previous quarter: handed in again, gone, or rewritten.

Claims grow, close and are joined by new ones; they do not vanish, and what was settled seldom changes. Each
claim of the earlier file is looked up in the new one by its identifier. A little of this is ordinary and
is listed; beyond a tolerance the file is not the continuation of the one before it, and nothing is computed
(common practice, no source; consistency over time is asked for by Directive 2009/138/EC, Article 121(3)).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from math import fsum

import numpy as np

from lossagg.arrays import BoolArray, IntArray
from lossagg.records.check import CheckedLosses
from lossagg.records.claims import NEVER, Claims
from lossagg.records.faults import LISTED, show
from lossagg.records.findings import Finding, RecordsError, counted, rows_in_words
from lossagg.records.resubmitted import not_followed, same_records

CENT = 0.005
_KEYS = ("claim", "event")


@dataclass(frozen=True, kw_only=True)
class Followed:
    """What became of the claims of the previous quarter, counted by identifier.

    Args:
        file: name of the earlier file.
        earlier: claims in it.
        claims: claims now.
        earlier_amount, amount: what both amount to.
        findings: the list of the differences.
        new: claims that were not in the earlier file; None, as all below, where none can be followed.
        vanished: earlier claims that are gone.
        reopened: closed then and open now.
        fallen: amounts that fell by the largest fall or more.
        rewritten: closed then and now, at another amount.
        moved: claims with another loss date.
    """

    file: str
    earlier: int
    claims: int
    earlier_amount: float
    amount: float
    findings: tuple[Finding, ...]
    new: int | None = None
    vanished: int | None = None
    reopened: int | None = None
    fallen: int | None = None
    rewritten: int | None = None
    moved: int | None = None

    def to_dict(self) -> dict[str, object]:
        """The counts as plain values, without the findings."""
        return {name: value for name, value in vars(self).items() if name != "findings"}


def follow_claims(
    checked: CheckedLosses,
    earlier: CheckedLosses,
    *,
    unchanged: bool = False,
    tolerance: float = 0.05,
    largest_fall: float = 0.9,
) -> Followed:
    """Compare the records of a line with those of the previous quarter.

    Claims are told apart by the column `claim`, or by `event` where there is none. Those that were gone,
    reopened, moved, rewritten after they were closed, or have fallen are listed.

    Args:
        checked: the records of the line.
        earlier: the records of the same line in the earlier file, checked against the same terms.
        unchanged: True where it is confirmed that nothing happened and the file is the same.
        tolerance: largest share of the earlier claims, and of their money, that may differ so.
        largest_fall: part of its amount that a claim may lose without being listed, above 0 and at most 1.

    Returns:
        The comparison.

    Raises:
        RecordsError: the same records without a confirmation, or a confirmation of records that differ; or
            more has changed than is tolerated, with the list of differences.
    """
    notes = same_records(checked.table, earlier.table, unchanged)
    key = next((name for name in _KEYS if _has(checked, name) and _has(earlier, name)), None)
    before, now = Claims(earlier, key), Claims(checked, key)
    if key is None:
        return Followed(
            file=earlier.table.file,
            earlier=len(before),
            claims=len(now),
            earlier_amount=fsum(before.amount.tolist()),
            amount=fsum(now.amount.tolist()),
            findings=(*notes, not_followed(checked, earlier)),
        )
    return _compare(before, now, tolerance, largest_fall, notes)


def _has(checked: CheckedLosses, key: str) -> bool:
    words = checked.table.words
    return key in words and bool((words[key][checked.member] != "").any())


def _listed(
    side: Claims, code: str, column: str, at: IntArray, words: list[str], remedy: str
) -> list[Finding]:
    """Findings of one kind of difference: the first claims one by one, the others together."""
    table = side.table
    listed = [
        Finding(
            code,
            "warn",
            table.file,
            int(table.row[side.row[k]]),
            table.headings.get(column),
            show(str(side.names[k].as_py())),
            text,
            remedy,
            sheet=table.sheet,
            line=side.line,
            amount=float(side.amount[k]),
        )
        for k, text in zip(at[:LISTED].tolist(), words, strict=True)
    ]
    rest = at[LISTED:]
    if rest.size:
        rows = rows_in_words(table.row[side.row[rest[:LISTED]]].tolist(), len(rest))
        text = f"{counted(len(rest), 'further claim')} with the same difference ({rows})"
        amount = float(np.sum(side.amount[rest]))
        listed.append(replace(listed[0], row=None, value=None, message=text, count=len(rest), amount=amount))
    return listed


def _compare(
    before: Claims, now: Claims, tolerance: float, largest_fall: float, notes: list[Finding]
) -> Followed:
    import pyarrow.compute as pc

    found = pc.index_in(before.names, value_set=now.names).fill_null(-1).to_numpy(zero_copy_only=False)
    kept, gone = np.flatnonzero(found >= 0), np.flatnonzero(found < 0)
    at = found[kept].astype(np.int64)
    old, new = before.amount[kept], now.amount[at]
    was, day = before.day[kept], now.day[at]
    fallen = (old > CENT) & (new <= (1.0 - largest_fall + 1e-9) * old)
    kinds: dict[str, tuple[BoolArray, str, Callable[[int], str], str]] = {
        "reopened": (
            before.closed[kept] & now.open[at],
            "status",
            lambda k: f"the claim was closed in {before.table.file} and is open now",
            "Expect it to grow; have the reason on file.",
        ),
        "fallen": (
            fallen,
            "amount",
            lambda k: f"the claim fell to {new[k]:,.2f} from {old[k]:,.2f} in {before.table.file}",
            "Have it confirmed; a recovery belongs in its own column.",
        ),
        "rewritten": (
            before.closed[kept] & now.closed[at] & (np.abs(new - old) > CENT) & ~fallen,
            "amount",
            lambda k: (
                f"the claim was closed at {old[k]:,.2f} in {before.table.file} and is closed at "
                f"{new[k]:,.2f} now"
            ),
            "Have it confirmed: what was settled has changed.",
        ),
        "moved": (
            (was != NEVER) & (day != NEVER) & (was != day),
            "date",
            lambda k: f"the loss is dated {_day(day[k])}, in {before.table.file} {_day(was[k])}",
            "Have it confirmed: it may have moved to another year.",
        ),
    }
    words = [f"the claim stood in {before.table.file} and is gone"] * min(len(gone), LISTED)
    notes += _listed(
        before, "vanished-claim", "amount", gone, words, "Restore it, or have its end confirmed."
    )
    for name, (mask, column, text, remedy) in kinds.items():
        rows = np.flatnonzero(mask)
        words = [text(k) for k in rows[:LISTED].tolist()]
        notes += _listed(now, f"{name}-claim", column, at[rows], words, remedy)
    differs = np.logical_or.reduce([mask for mask, *_ in kinds.values()])
    followed = Followed(
        file=before.table.file,
        earlier=len(before),
        claims=len(now),
        earlier_amount=fsum(before.amount.tolist()),
        amount=fsum(now.amount.tolist()),
        new=len(now) - len(kept),
        vanished=len(gone),
        **{name: int(np.count_nonzero(mask)) for name, (mask, *_) in kinds.items()},
        findings=tuple(notes),
    )
    changed = fsum(np.abs(new - old)[differs].tolist()) + fsum(np.abs(before.amount[gone]).tolist())
    shares = {
        "the claims": (int(np.count_nonzero(differs)) + len(gone)) / max(1, len(before)),
        "the money": changed / (fsum(np.abs(before.amount).tolist()) or 1.0),
    }
    _require_continuation(now, followed, shares, tolerance)
    return followed


def _day(day: int) -> str:
    return str(np.datetime64(int(day), "D"))


def _require_continuation(
    now: Claims, followed: Followed, shares: dict[str, float], tolerance: float
) -> None:
    worst = max(shares, key=lambda name: shares[name])
    if shares[worst] <= tolerance:
        return
    counts = {
        name: getattr(followed, name) for name in ("vanished", "reopened", "fallen", "rewritten", "moved")
    }
    reasons = ", ".join(f"{count} {name}" for name, count in counts.items() if count)
    stop = Finding(
        "history-rewritten",
        "stop",
        now.table.file,
        None,
        None,
        None,
        f"{shares[worst]:.1%} of {worst} of {followed.file} vanished or were rewritten ({reasons}), more "
        f"than the tolerance of {tolerance:.1%}",
        "Ask for the complete extract; or have the differences listed confirmed and raise the tolerance of "
        "previous.",
        sheet=now.table.sheet,
        line=now.line,
        count=sum(counts.values()),
    )
    raise RecordsError([stop, *followed.findings])
