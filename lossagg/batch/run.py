"""Assessing every portfolio of a folder, each in its own process.

A process that crashes, is killed or runs out of memory takes its own portfolio down and no other.
`batch.json` and `index.html` are brought up to date after every portfolio.
"""

from __future__ import annotations

import json
import os
import shutil
import sys
import tempfile
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from lossagg.batch.names import result_names
from lossagg.batch.processes import Job, ending, run_jobs
from lossagg.batch.record import BatchRecord, Entry, check_batch_folder, entries_of, write_record
from lossagg.batch.single import Progress, silent
from lossagg.batch.twins import refuse_twins
from lossagg.errors import InputError
from lossagg.report.folder import check_destination, disk_errors

PORTFOLIO_FILE = "portfolio.toml"
WORKER = (sys.executable, "-m", "lossagg.batch.worker")


@dataclass(frozen=True)
class BatchOutcome:
    """A batch that has run.

    Attributes:
        record: what became of each portfolio.
        out: the folder written.
    """

    record: BatchRecord
    out: Path

    @property
    def exit_code(self) -> int:
        """0 when all are done, 1 when any failed or has its headline withheld."""
        return 0 if all(entry.status == "done" for entry in self.record.entries) else 1


def find_portfolios(folder: Path) -> tuple[str, ...]:
    """Names of the folders in `folder` that hold a portfolio file, in order.

    Raises:
        InputError: there is none, or `folder` is not a folder.
        EnvironmentFault: it cannot be read.
    """
    if not folder.is_dir():
        raise InputError(
            "there is no such folder of portfolios",
            where=f"folder {folder}",
            remedy="Name a folder that holds one folder per portfolio.",
        )
    with disk_errors(folder):
        names = sorted(entry.name for entry in folder.iterdir() if (entry / PORTFOLIO_FILE).is_file())
    if names:
        return tuple(names)
    itself = (folder / PORTFOLIO_FILE).is_file()
    remedy = "Use `lossagg assess` for a single portfolio." if itself else "Nothing was run."
    raise InputError(f"no folder in it holds a {PORTFOLIO_FILE}", where=f"folder {folder}", remedy=remedy)


def run_batch(
    folder: str | Path,
    out: str | Path,
    *,
    years: int | None = None,
    seed: int = 1,
    workers: int | None = None,
    progress: Progress = silent,
    worker: tuple[str, ...] = WORKER,
) -> BatchOutcome:
    """Assess every portfolio of a folder; one that fails does not stop the rest.

    Args:
        folder: holds one folder per portfolio, each with its portfolio.toml.
        out: gets a folder per portfolio, `index.html` and `batch.json`; absent, empty, or that of an
            earlier batch.
        years: simulated years; the default when `None`.
        seed: seed of every simulation.
        workers: most portfolios at work at the same time; the number of processors when `None`. The
            figures do not depend on it.
        progress: called with what is done and the fraction, 0 to 1.
        worker: command of the process that does one portfolio; a JSON request is added to it.

    Raises:
        InputError: nothing to run, two portfolios of one name, or `out` holds files of someone else.
        EnvironmentFault: `out` cannot be written.
    """
    source, target = Path(folder), Path(out)
    names = find_portfolios(source)
    refuse_twins(source, names, PORTFOLIO_FILE)
    check_batch_folder(target)
    record = BatchRecord(entries_of(names, result_names(names)), seed, years)
    write_record(target, record)
    at_once = min(workers or os.cpu_count() or 1, len(names))
    shared = max(1, (workers or os.cpu_count() or 1) // len(names))
    with tempfile.TemporaryDirectory(prefix="lossagg-") as room:
        run = _Run(source, target, Path(room), record, progress)
        jobs = [run.job(entry, worker, shared) for entry in record.entries]
        try:
            run_jobs(jobs, at_once, run.ended)
        except KeyboardInterrupt:
            run.interrupt()
            raise
    return BatchOutcome(run.record, target)


class _Run:
    """A batch under way: the record changes as portfolios end."""

    def __init__(
        self, source: Path, target: Path, room: Path, record: BatchRecord, progress: Progress
    ) -> None:
        self.source, self.target, self.room = source, target, room
        self.record, self.progress = record, progress

    def job(self, entry: Entry, worker: tuple[str, ...], workers: int) -> Job:
        """The process of one portfolio."""
        request = {
            "portfolio": str(self.source / entry.folder),
            "out": str(self.target / entry.slug),
            "years": self.record.years,
            "seed": self.record.seed,
            "workers": workers,
            "command": ["lossagg", "batch", str(self.source), "--out", str(self.target)],
            "answer": str(self._answer(entry)),
        }
        return Job(entry.folder, (*worker, json.dumps(request)))

    def _answer(self, entry: Entry) -> Path:
        return self.room / f"{entry.slug}.json"

    def ended(self, folder: str, code: int) -> None:
        """Take the answer of a process that has ended, or note that it gave none."""
        entry = next(entry for entry in self.record.entries if entry.folder == folder)
        self._change(self._with_answer(entry, code))
        entries = self.record.entries
        done = sum(entry.status != "waiting" for entry in entries)
        self.progress(f"{done} of {len(entries)} portfolios", done / len(entries))

    def _with_answer(self, entry: Entry, code: int) -> Entry:
        answer = self._answer(entry)
        reply: dict[str, Any] = {"status": "failed", "message": ending(code)}
        if answer.is_file():
            reply = json.loads(answer.read_text(encoding="utf-8"))
        if reply["status"] == "failed":
            self._remove_earlier(entry)
            message = str(reply["message"]).replace(f"{self.source}{os.sep}", "")
            return replace(entry, status="failed", message=message)
        written = self.target / entry.slug / "assessment.json"
        document = json.loads(written.read_text(encoding="utf-8"))
        return replace(entry, status=reply["status"], assessment=document)

    def _remove_earlier(self, entry: Entry) -> None:
        """Remove an earlier result of a portfolio that failed now, lest it be taken for today's."""
        earlier = self.target / entry.slug
        try:
            owned = check_destination(earlier)
        except InputError:
            return  # Files of someone else: they made this portfolio fail, and stay.
        if owned.exists():
            with disk_errors(earlier):
                shutil.rmtree(owned)

    def _change(self, changed: Entry) -> None:
        entries = tuple(changed if entry.folder == changed.folder else entry for entry in self.record.entries)
        self.record = replace(self.record, entries=entries)
        write_record(self.target, self.record)

    def interrupt(self) -> None:
        """Mark what has not ended as interrupted."""
        entries = tuple(
            replace(entry, status="interrupted") if entry.status == "waiting" else entry
            for entry in self.record.entries
        )
        self.record = replace(self.record, entries=entries)
        write_record(self.target, self.record)
