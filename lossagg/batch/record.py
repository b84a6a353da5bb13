"""What a batch keeps of itself: `batch.json` and `index.html`, current after every portfolio."""

from __future__ import annotations

import json
import os
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from lossagg.errors import InputError
from lossagg.report.folder import disk_errors, write_flushed
from lossagg.version import __version__

FORMAT = "lossagg.batch/1"
RECORD = "batch.json"
INDEX = "index.html"
STATUSES = ("done", "withheld", "failed", "interrupted", "waiting")


@dataclass(frozen=True)
class Entry:
    """One portfolio of a batch.

    Attributes:
        folder: name of its folder.
        slug: name of its result folder.
        status: "waiting", "done", "withheld", "failed" or "interrupted".
        message: why it failed.
        assessment: what was written, for those done or withheld.
    """

    folder: str
    slug: str
    status: str = "waiting"
    message: str | None = None
    assessment: dict[str, Any] | None = None


@dataclass(frozen=True)
class BatchRecord:
    """A batch as it stands.

    Attributes:
        entries: its portfolios, by name of their folder.
        seed: seed of every simulation.
        years: simulated years, `None` for the default.
    """

    entries: tuple[Entry, ...]
    seed: int
    years: int | None

    def to_dict(self) -> dict[str, Any]:
        """The record as it stands in `batch.json`: no clock, no machine."""
        return {
            "format": FORMAT,
            "version": __version__,
            "seed": self.seed,
            "years": self.years,
            "counts": self.counts(),
            "portfolios": [_entry_record(entry) for entry in self.entries],
        }

    def counts(self) -> dict[str, int]:
        """How many portfolios there are in each status."""
        seen = Counter(entry.status for entry in self.entries)
        return {status: seen[status] for status in STATUSES}

    def summary(self) -> str:
        """The counts in words."""
        counted = [f"{count} {status}" for status, count in self.counts().items() if count]
        noun = "portfolio" if len(self.entries) == 1 else "portfolios"
        return f"{len(self.entries)} {noun}: {', '.join(counted)}"


def _entry_record(entry: Entry) -> dict[str, Any]:
    found = entry.assessment
    facts: dict[str, Any] = {
        "folder": entry.folder,
        "status": entry.status,
        "message": entry.message,
        "results": entry.slug if found else None,
    }
    if found:
        facts |= {
            "name": found["portfolio"]["name"],
            "currency": found["portfolio"]["currency"],
            "headline": found["headline"],
            "verdict": found["crosscheck"]["verdict"],
            "cautions": [caution["code"] for caution in found["cautions"]],
        }
    return facts


def check_batch_folder(out: Path) -> None:
    """Check that a batch may write into a folder: absent, empty, or that of an earlier batch.

    Raises:
        InputError: it holds files of someone else, or is a file.
        EnvironmentFault: it cannot be read.
    """
    with disk_errors(out):
        if not out.exists():
            return
        if not out.is_dir():
            raise InputError("the output folder is a file", where=f"file {out}", remedy="Name a new folder.")
        names = sorted(entry.name for entry in out.iterdir())
        if names and not _is_batch(out):
            raise InputError(
                "the output folder holds files that no batch of lossagg wrote",
                where=f"folder {out}",
                value=names[0],
                remedy="Name an empty or a new folder.",
            )


def _is_batch(out: Path) -> bool:
    try:
        record = json.loads((out / RECORD).read_text(encoding="utf-8"))
    except (FileNotFoundError, UnicodeDecodeError, json.JSONDecodeError):
        return False
    return isinstance(record, dict) and record.get("format") == FORMAT


def write_record(out: Path, record: BatchRecord) -> None:
    """Write `batch.json` and `index.html`, each in one step.

    Raises:
        EnvironmentFault: no space or no permission.
    """
    from lossagg.batch.index import index_page
    from lossagg.report.canonical import canonical_json

    with disk_errors(out):
        out.mkdir(parents=True, exist_ok=True)
        _replace(out / RECORD, canonical_json(record.to_dict()).encode())
        _replace(out / INDEX, index_page(record).encode())


def _replace(path: Path, content: bytes) -> None:
    partial = path.with_name(f".{path.name}.part")
    write_flushed(partial, content)
    os.replace(partial, path)


def entries_of(names: Sequence[str], slugs: dict[str, str]) -> tuple[Entry, ...]:
    """The entries of a batch before anything has run."""
    return tuple(Entry(name, slugs[name]) for name in names)
