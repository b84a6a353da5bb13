"""From one document to a folder: its format checked, its files built, the manifest added, all published."""

from __future__ import annotations

from collections.abc import Callable, Collection
from datetime import UTC, datetime
from pathlib import Path

from lossagg.errors import InputError
from lossagg.report.canonical import canonical_json
from lossagg.report.folder import check_destination, publish
from lossagg.report.manifest import RunFacts, build_manifest
from lossagg.report.reading import Entry


def require_format(document: Entry, what: str, *formats: str) -> None:
    """Refuse what is not a document of a format that its report reads.

    Args:
        document: the document.
        what: what it should be, in words: "an assessment".
        formats: the formats read; the message names the first.

    Raises:
        InputError: another format, or none.
    """
    seen = document.get("format")
    if seen not in formats:
        raise InputError(
            f"this is not {what} that the report can read",
            where="key 'format'",
            value=seen,
            remedy=f"Give the dictionary of format {formats[0]!r}.",
        )


def publish_document(
    document: Entry,
    out: str | Path,
    names: Collection[str],
    build: Callable[[], dict[str, bytes]],
    facts: RunFacts | None,
    *,
    described: Entry | None = None,
) -> Path:
    """Write a document and what is made of it into a folder, in one step: all files or none.

    Args:
        document: what is written as JSON, under the first of the names.
        out: the folder; absent, empty, or holding an earlier result of the same kind, which is replaced.
        names: every file of the result, the JSON first, the manifest last.
        build: makes the other files, once the folder is known to be free; the same document gives the same
            bytes.
        facts: when and how the run was started, for the manifest.
        described: what the manifest tells of the run, where that is not the document itself.

    Returns:
        The folder written, as an absolute path.

    Raises:
        InputError: a number JSON lacks, or a folder with files of someone else.
        EnvironmentFault: no space or no permission; nothing is left half-written.
    """
    json_name, *_, manifest_name = names
    target = check_destination(Path(out), names)
    files = {json_name: canonical_json(document).encode(), **build()}
    manifest = build_manifest(described or document, facts or RunFacts(), files, datetime.now(UTC))
    publish(target, {**files, manifest_name: canonical_json(manifest).encode()})
    return target
