"""A portfolio checked without being modelled: everything is read, nothing is fitted.

An assessment stops at the first file that cannot be used. A check goes on: lines that share no file are
read apart from each other, so that one round of repairs is enough.
"""

from __future__ import annotations

import re
from ast import literal_eval
from collections.abc import Callable, Collection, Iterator
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, TypeVar

from lossagg.errors import InputError, place
from lossagg.fitting.empirical import EMPIRICAL
from lossagg.fitting.frequency import FAMILIES as COUNT_FAMILIES
from lossagg.fitting.severity import FAMILIES as SIZE_FAMILIES
from lossagg.fitting.spliced import BODIES
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.dependences import assumed
from lossagg.portfolio.files import PORTFOLIO_FILE, LineRecords, portfolio_file, read_records
from lossagg.portfolio.history import (
    development_data,
    follow,
    history_data,
    prepare_line,
    reconciliation_data,
)
from lossagg.portfolio.laws import given_frequency, given_severity
from lossagg.portfolio.places import placed_covers
from lossagg.portfolio.reconciling import reconcile_portfolio
from lossagg.portfolio.schema import LineSection, PortfolioFile, read_portfolio_file
from lossagg.records import CheckedLosses, Finding, PreparedLosses, RecordsError, largest_losses, row_trail
from lossagg.records.findings import SEVERITY
from lossagg.version import __version__

if TYPE_CHECKING:
    import pandas as pd

FORMAT = "lossagg.check/1"
LARGEST = 3
USABLE, WITHHELD, STOPPED = "usable", "withheld", "stopped"
_ORDER = {severity: place for place, severity in enumerate(SEVERITY.values())}
_LONGEST_VALUE = 60
_QUOTED = r"""('(?:[^'\\]|\\.)*'|"(?:[^"\\]|\\.)*")"""
_PLACE = re.compile(
    rf"(.*?)(?:, sheet {_QUOTED})?(?:, row (\d+))?(?:, column {_QUOTED})?",
    re.DOTALL,
)
"""A place in words, as `lossagg.errors.place` makes it: file, sheet, row and column; the rest is file."""

Made = TypeVar("Made")


def check_portfolio(
    path: str | Path,
    *,
    further: Callable[[PortfolioFile], None] | None = None,
    trail: list[pd.DataFrame] | None = None,
) -> Data:
    """Read and check a portfolio, and say what stands in the way of an assessment.

    Args:
        path: the folder, or its portfolio file.
        further: checks what rooms above this one know of the portfolio file; stops like the rest.
        trail: receives the trail of every line that has records, see `lossagg.records.row_trail`.

    Returns:
        Plain data of format "lossagg.check/1", without clock and machine: `status` is "usable", "withheld"
        (control totals are not met, so an assessment would print no figure) or "stopped"; beside it the
        findings by severity, and per line reconciliation, years, window and development.

    Raises:
        InputError: there is no such folder or file.
        EnvironmentFault: a file cannot be opened.
    """
    folder, path = portfolio_file(Path(path))
    check = _Check(folder, path, further)
    data = check.data()
    if trail is not None:
        trail += check.trail()
    return data


def stopped_check(path: Path, what: str, where: str | None, remedy: str | None) -> Data:
    """The check of a portfolio that cannot even be looked at.

    Args:
        path: its folder.
        what, where, remedy: why.
    """
    check = _Check(path, path / PORTFOLIO_FILE)
    check.findings.append(_stop(InputError(what, where=where, remedy=remedy), "failure", None))
    return check.result(None, [])


class _Check:
    """A check under way: what stops one part is kept as a finding, and the next part is looked at."""

    def __init__(
        self, folder: Path, path: Path, further: Callable[[PortfolioFile], None] | None = None
    ) -> None:
        self.folder, self.path, self.further = folder, path, further
        self.findings: list[Finding] = []
        self.inputs: dict[str, Data] = {}
        self.controls: list[Data] = []
        self.bare: set[str] = set()
        self.read_lines: list[tuple[CheckedLosses, PreparedLosses | None]] = []

    def data(self) -> Data:
        """Everything, from the portfolio file to the control totals."""
        file = self.kept(lambda: read_portfolio_file(self.path), "portfolio-file")
        return self.result(file, [] if file is None else self.lines(file))

    def result(self, file: PortfolioFile | None, lines: list[Data]) -> Data:
        """What was found, as plain data."""
        findings = [finding.to_dict() for finding in dict.fromkeys(self.findings)]
        findings.sort(key=lambda finding: _ORDER[str(finding["severity"])])
        broken = any(not total["agrees"] for total in self.controls)
        stopped = any(finding["severity"] == "stop" for finding in findings)
        return {
            "format": FORMAT,
            "status": STOPPED if stopped else WITHHELD if broken else USABLE,
            "counts": {
                severity: sum(found["severity"] == severity for found in findings) for severity in _ORDER
            },
            "portfolio": _portfolio(file, self.folder),
            "run": {"version": __version__, "inputs": list(self.inputs.values())},
            "lines": lines,
            "reconciliation": {
                "verdict": "break" if broken else "agree" if self.controls else "none stated",
                "totals": self.controls,
            },
            "findings": findings,
        }

    def trail(self) -> Iterator[pd.DataFrame]:
        """The trail of every line, and of the rows of shared files that belong to none."""
        shared: dict[str, CheckedLosses] = {}
        for losses, prepared in self.read_lines:
            yield row_trail(losses, prepared)
            if losses.terms.lines is not None:
                shared.setdefault(losses.table.sha256, losses.for_line(None))
        yield from (row_trail(losses, None) for losses in shared.values() if losses.member.any())

    def lines(self, file: PortfolioFile) -> list[Data]:
        """The entries of the lines; beforehand the rest of the portfolio file."""
        self.kept(lambda: placed_covers(file), "portfolio-file")
        self.kept(lambda: assumed(file.dependence, [line.name for line in file.line]), "portfolio-file")
        self.kept(lambda: _require_own_names(file.line), "portfolio-file")
        if self.further is not None:
            self.kept(partial(self.further, file), "portfolio-file")
        records = self.records(file)
        return [
            self.line(file, line, records.get(line.name), f"line[{k}]")
            for k, line in enumerate(file.line, start=1)
        ]

    def records(self, file: PortfolioFile) -> dict[str, LineRecords]:
        """What can be read of the lines: all at once, or where that stops, those that share no file apart."""
        try:
            return self.read(file)
        except InputError:
            groups = _apart(file.line, ("records", "exposure", "trend_index", "counts"))
            parts = [self.group(file.model_copy(update={"line": group})) for group in groups]
            return {name: own for part in parts for name, own in part.items()}

    def read(self, file: PortfolioFile) -> dict[str, LineRecords]:
        """The records of every line; the files read are noted."""
        read, inputs = read_records(self.folder, file)
        self.inputs |= {entry["path"]: entry for entry in inputs}
        return read

    def group(self, file: PortfolioFile) -> dict[str, LineRecords]:
        """What can be read of lines that share files, at the least each file of records by itself."""
        try:
            return self.read(file)
        except InputError as error:
            alone = {"exposure": None, "trend_index": None, "counts": None}
            bare = tuple(line.model_copy(update=alone) for line in file.line)
            found: dict[str, LineRecords] = {}
            for lines in _apart(bare, ("records",)):
                part = file.model_copy(update={"line": lines})
                found |= self.kept(partial(self.read, part), "file") or {}
            self.bare |= set(found)
            if len(found) == sum(line.observed for line in bare):
                self.keep(error, "file")  # Every file of records is fine: it lies in what stands beside them.
            return found

    def line(self, file: PortfolioFile, line: LineSection, records: LineRecords | None, key: str) -> Data:
        """The entry of one line: laws that are given or named, records, control totals."""
        self.kept(lambda: _check_laws(line, key), "portfolio-file", line.name)
        prepared, history, followed = None, history_data(None), None
        if records is not None:
            followed = self.kept(lambda: follow(line, records), "previous", line.name)
            if line.name not in self.bare:
                prepared = self.kept(lambda: prepare_line(file, line, records), "preparing", line.name)
            self.read_lines.append((replace(records.losses, line=line.name), prepared))
            # What the checks found and reconciled stands also where preparing stops.
            self.findings += records.losses.findings if prepared is None else prepared.findings
            history = history_data(prepared) | reconciliation_data(
                (records.losses if prepared is None else prepared).reconciliation
            )
            controls = self.kept(
                lambda: reconcile_portfolio(file, {line.name: records}), "control-total", line.name
            )
            if controls is not None:
                self.controls += controls.data["totals"]
                self.findings += controls.findings
        return {
            "name": line.name,
            "source": "records" if line.observed else "given",
            "status": "given" if not line.observed else USABLE if prepared is not None else STOPPED,
            **history,
            "development": development_data(prepared),
            "exposure": None if prepared is None else prepared.base,
            "window": None if prepared is None else _window(file, prepared),
            "largest_losses": largest_losses(records.losses, prepared, LARGEST)
            if records is not None and prepared is not None
            else [],
            "previous": None if followed is None else followed.to_dict(),
        }

    def kept(self, make: Callable[[], Made], code: str, line: str | None = None) -> Made | None:
        """What `make` returns; None where it stops, with the reason kept as a finding."""
        try:
            return make()
        except InputError as error:
            self.keep(error, code, line)
            return None

    def keep(self, error: InputError, code: str, line: str | None = None) -> None:
        """Keep what an error says as findings."""
        own = error.findings if isinstance(error, RecordsError) else (_stop(error, code, line),)
        self.findings += own


def _stop(error: InputError, code: str, line: str | None) -> Finding:
    """The finding that an error amounts to, on one line."""
    value = None if error.value is None else " ".join(str(error.value).split())[:_LONGEST_VALUE]
    found = _PLACE.fullmatch((error.where or PORTFOLIO_FILE).removeprefix("file "))
    assert found is not None
    file, sheet, row, column = found.groups()
    return Finding(
        code,
        "stop",
        file,
        None if row is None else int(row),
        None if column is None else str(literal_eval(column)),
        value,
        error.what,
        " ".join((error.remedy or "").split()),
        sheet=None if sheet is None else str(literal_eval(sheet)),
        line=line,
        count=0,
    )


def _portfolio(file: PortfolioFile | None, folder: Path) -> Data:
    if file is None:
        return {"name": folder.resolve().name, "currency": None, "valuation_date": None, "forecast": None}
    section = file.portfolio
    start, end = section.forecast
    return {
        "name": section.name,
        "currency": section.currency,
        "valuation_date": section.valuation_date.isoformat(),
        "forecast": {"start": start.isoformat(), "end": end.isoformat()},
    }


def _check_laws(line: LineSection, key: str) -> None:
    """Stop at a given law that is none, and at a family to be fitted that does not exist."""
    if line.frequency.fit is None:
        given_frequency(line.frequency, f"{key}.frequency")
    else:
        _require_known(line.frequency.fit, COUNT_FAMILIES, f"{key}.frequency.fit")
    if line.severity.fit is None:
        given_severity(line.severity, f"{key}.severity")
    else:
        known = SIZE_FAMILIES if line.severity.tail_threshold is None else (*BODIES, EMPIRICAL)
        _require_known(line.severity.fit, known, f"{key}.severity.fit")


def _require_known(families: Collection[str], known: Collection[str], key: str) -> None:
    for family in families:
        if family not in known:
            raise InputError(
                "unknown family",
                where=place(file=PORTFOLIO_FILE, key=key),
                value=family,
                remedy=f"Name some of {', '.join(known)}.",
            )


def _require_own_names(lines: tuple[LineSection, ...]) -> None:
    names = [line.name for line in lines]
    for name in names:
        if names.count(name) > 1:
            raise InputError(
                "two lines have the same name",
                where=place(file=PORTFOLIO_FILE, key="line"),
                value=name,
                remedy="Give every line its own name.",
            )


def _window(file: PortfolioFile, prepared: PreparedLosses) -> Data:
    """The years observed and the level they support by themselves: 1 - 1 / years."""
    years = float(prepared.years.fraction.sum())
    return {
        "first_year": int(prepared.years.year[0]),
        "until": file.portfolio.valuation_date.isoformat(),
        "years": years,
        "events": len(prepared),
        "supported_level": max(0.0, 1.0 - 1.0 / years) if len(prepared) else 0.0,
        "complete_above": prepared.largest_threshold,
    }


def _apart(lines: tuple[LineSection, ...], kinds: tuple[str, ...]) -> Iterator[tuple[LineSection, ...]]:
    """The lines in groups that share no file of these kinds with each other, in the order given."""
    groups: list[tuple[set[tuple[str, str]], set[str]]] = []
    for line in lines:
        files = {(kind, getattr(line, kind)) for kind in kinds if getattr(line, kind) is not None}
        names = {line.name}
        for group in [group for group in groups if group[0] & files]:
            groups.remove(group)
            files, names = files | group[0], names | group[1]
        groups.append((files, names))
    for _, names in groups:
        yield tuple(line for line in lines if line.name in names)
