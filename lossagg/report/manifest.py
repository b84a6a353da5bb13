"""The manifest: when, where and from what an assessment was made. The only file with clock and host."""

from __future__ import annotations

import hashlib
import os
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib import metadata
from typing import Any

from lossagg.report.reading import Assessment

FORMAT = "lossagg.manifest/1"
LIBRARIES = ("numpy", "scipy", "pandas", "numba", "matplotlib", "pydantic", "jinja2", "openpyxl", "pyarrow")


@dataclass(frozen=True)
class RunFacts:
    """What only the caller knows of a run, for its manifest.

    Attributes:
        started: when the run began, with its time zone.
        command: the command line or call that made it, as a list of words.
        warnings: texts of the warnings given on the way.
        workers: how many workers were asked for, `None` for all.
    """

    started: datetime = field(default_factory=lambda: datetime.now(UTC))
    command: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()
    workers: int | None = None


def build_manifest(
    assessment: Assessment, facts: RunFacts, outputs: Mapping[str, bytes], ended: datetime
) -> dict[str, Any]:
    """The manifest of one run.

    Args:
        assessment: the assessment written.
        facts: what the caller knows of the run.
        outputs: file name and content of every other file written.
        ended: when the files were ready, with its time zone.
    """
    run = assessment["run"]
    withheld = bool(assessment["headline"]["withheld"])
    return {
        "format": FORMAT,
        "status": "withheld" if withheld else "done",
        "portfolio": assessment["portfolio"]["name"],
        "started": _utc(facts.started),
        "ended": _utc(ended),
        "command": list(facts.command),
        "workers": facts.workers,
        "version": run["version"],
        "seed": run["seed"],
        "years": run["years"],
        "python": platform.python_version(),
        "libraries": _versions(LIBRARIES),
        "system": {"name": platform.system(), "release": platform.release(), "machine": platform.machine()},
        "processors": os.cpu_count(),
        "inputs": [dict(entry) for entry in run["inputs"]],
        "outputs": [
            {"path": name, "bytes": len(content), "sha256": hashlib.sha256(content).hexdigest()}
            for name, content in outputs.items()
        ],
        "cautions": [entry["code"] for entry in assessment["cautions"]],
        "warnings": list(facts.warnings),
    }


def _utc(moment: datetime) -> str:
    return moment.astimezone(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")


def _versions(names: Sequence[str]) -> dict[str, str | None]:
    found: dict[str, str | None] = {}
    for name in names:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = None
    return found
