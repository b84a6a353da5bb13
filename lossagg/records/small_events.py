"""Setting aside the events below their reporting threshold, so that what is left is complete above it.

An event recorded below its threshold contradicts it and is a fault of the file. One that falls below only
as it is modelled (net of recoveries, as one part of a longer event, developed downwards) is none: every
modelled loss at or above the threshold was recorded, so leaving the others out keeps the truncation exact.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.check import CheckedLosses
from lossagg.records.events import Events
from lossagg.records.faults import Fault, list_fault
from lossagg.records.findings import Finding
from lossagg.records.rules import threshold_fault
from lossagg.records.tolerance import check_tolerance


@dataclass(frozen=True)
class Kept:
    """The events that reach the model, and what was found in leaving the others out.

    Args:
        events: the events kept.
        used: True for the rows of them; shape (rows,).
        findings: those of the check, and those of this step.
        faults: the rows set aside.
    """

    events: Events
    used: BoolArray
    findings: tuple[Finding, ...]
    faults: tuple[Fault, ...] = ()

    @property
    def changed(self) -> bool:
        """True when any event was set aside."""
        return bool(self.faults)


def set_aside_small(
    checked: CheckedLosses, events: Events, default: float, modelled: bool, hours_window: int | None
) -> Kept:
    """Set aside the events below their threshold, and measure again what is set aside in all.

    Args:
        checked: the records of the line.
        events: all events of its used rows.
        default: threshold of the events that carry none.
        modelled: True when amounts are not those recorded.
        hours_window: longest duration of one event, None without end.

    Raises:
        RecordsError: too much is set aside for faults.
    """
    threshold = np.where(np.isnan(events.threshold), default, events.threshold)
    small = events.amount < threshold
    if modelled:
        small |= events.amount <= 0
    if not small.any():
        return Kept(events, checked.used, checked.findings)
    excused = (events.recorded >= threshold) | _parted(events, hours_window)
    faults = [
        threshold_fault(_rows(checked, events, small & ~excused)),
        Fault(
            "below-threshold-as-modelled",
            "set aside",
            "amount",
            _rows(checked, events, small & excused),
            "the loss as it is modelled (net of recoveries, one part of a longer event, or developed) is "
            "below its reporting threshold, or nil",
            "None needed: what is modelled is complete above the threshold.",
            tolerated=True,
        ),
    ]
    used = checked.used & ~faults[0].mask & ~faults[1].mask
    places = checked.table.places()
    listed = [replace(found, line=checked.line) for fault in faults for found in list_fault(fault, places)]
    findings = (*checked.findings, *listed)
    aside = [fault for fault in checked.faults if fault.action == "set aside"]
    check_tolerance(checked.table, [*aside, *faults], used, checked.terms.tolerance, findings, checked.line)
    return Kept(_select(events, ~small), used, findings, tuple(faults))


def _parted(events: Events, hours_window: int | None) -> BoolArray:
    """True for events that are one of several parts of an event as the file names it."""
    if hours_window is None:
        return np.zeros(len(events), dtype=np.bool_)
    codes = events.identifier.codes
    several: BoolArray = (np.bincount(codes)[codes] > 1) & (events.identifier != "")
    return several


def _rows(checked: CheckedLosses, events: Events, chosen: BoolArray) -> BoolArray:
    mask = np.zeros(len(checked.table), dtype=np.bool_)
    mask[checked.used] = chosen[events.index]
    return mask


def _select(events: Events, kept: BoolArray) -> Events:
    """Some of the events, numbered again."""
    number = np.cumsum(kept) - 1
    columns = {
        field.name: getattr(events, field.name)[kept] for field in fields(events) if field.name != "index"
    }
    return Events(index=number[events.index[kept[events.index]]], **columns)
