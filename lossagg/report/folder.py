"""Publishing a folder of files in one step: all of them or none, and nothing of anyone else's lost.

The files are built in a hidden folder beside the destination, flushed to disk, and renamed into
place. An earlier result of lossagg is moved aside first and removed once the new one stands; if the
rename fails it is put back.
"""

from __future__ import annotations

import json
import os
import shutil
import uuid
from collections.abc import Collection, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from lossagg.errors import EnvironmentFault, InputError
from lossagg.report.manifest import FORMAT

FILES = ("assessment.json", "report.html", "tables.xlsx", "manifest.json")
OPTION_FILES = (
    "options.json",
    "options.html",
    "options.xlsx",
    "options.csv",
    "curves.csv",
    "draws.csv",
    "manifest.json",
)
FIT_FILES = ("fit.json", "fit.html", "fit.xlsx", "manifest.json")
CHECK_FILES = ("check.json", "check.html", "trail.csv", "manifest.json")
_NEW_FOLDER = "Name a folder that does not exist yet."


def check_destination(out: Path, files: Collection[str] = FILES) -> Path:
    """Check that results may go to a folder, before any work is spent.

    Args:
        out: the folder wanted. It may be absent, empty, or hold an earlier result and nothing else.
        files: names of the files of the result that is to go there.

    Returns:
        The folder as an absolute path.

    Raises:
        InputError: `out` is a file, the current folder or above it, or holds files of someone else.
        EnvironmentFault: the folder cannot be read.
    """
    with disk_errors(out):
        target = out.resolve()
        if not target.exists():
            _check_parents(target)
            return target
        if not target.is_dir():
            raise InputError("the output folder is a file", where=f"file {out}", remedy=_NEW_FOLDER)
        if Path.cwd().is_relative_to(target):
            raise InputError(
                "the output folder is the current folder or one above it, which cannot be replaced",
                where=f"folder {out}",
                remedy="Name a folder inside it.",
            )
        _check_contents(target, out, files)
    return target


def _check_parents(target: Path) -> None:
    for parent in target.parents:
        if parent.exists():
            if not parent.is_dir():
                raise InputError(
                    "the output folder would lie inside a file", where=f"file {parent}", remedy=_NEW_FOLDER
                )
            return


def _check_contents(target: Path, out: Path, files: Collection[str]) -> None:
    names = sorted(entry.name for entry in target.iterdir())
    foreign = [name for name in names if name not in files]
    known = {*FILES, *OPTION_FILES, *FIT_FILES, *CHECK_FILES}
    if foreign and _is_ours(target) and known.issuperset(names):
        raise InputError(
            "the output folder holds another kind of result, which would be lost",
            where=f"folder {out}",
            value=foreign[0],
            remedy="Name an empty or a new folder.",
        )
    if not names or (not foreign and _is_ours(target)):
        return
    raise InputError(
        "the output folder holds files that lossagg did not write",
        where=f"folder {out}",
        value=(foreign or names)[0],
        remedy="Name an empty or a new folder.",
    )


def _is_ours(folder: Path) -> bool:
    """True when the folder's manifest is one of lossagg."""
    try:
        manifest = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))
    except (FileNotFoundError, UnicodeDecodeError, json.JSONDecodeError):
        return False
    return isinstance(manifest, dict) and manifest.get("format") == FORMAT


def publish(out: Path, files: Mapping[str, bytes]) -> None:
    """Write files into a folder, all or none.

    Args:
        out: the folder; see `check_destination` for what it may hold.
        files: name and content of each.

    Raises:
        InputError: the folder may not be replaced.
        EnvironmentFault: no space, no permission, or the folder cannot be renamed.
    """
    target = check_destination(out, files)
    with disk_errors(out), _parents(target.parent):
        building = target.with_name(f".{target.name}.{uuid.uuid4().hex[:12]}.new")
        try:
            building.mkdir()
            for name, content in files.items():
                write_flushed(building / name, content)
            _swap(building, target)
        finally:
            shutil.rmtree(building, ignore_errors=True)


def write_flushed(path: Path, content: bytes) -> None:
    """Write a file and wait until the disk has it."""
    with path.open("wb") as stream:
        stream.write(content)
        stream.flush()
        os.fsync(stream.fileno())


def _swap(building: Path, target: Path) -> None:
    if not target.exists():
        building.rename(target)
        return
    aside = target.with_name(f"{building.name}.old")
    target.rename(aside)
    try:
        building.rename(target)
    except OSError:
        aside.rename(target)
        raise
    shutil.rmtree(aside, ignore_errors=True)


@contextmanager
def _parents(folder: Path) -> Iterator[None]:
    """Make the folders above the destination; on failure remove those that were made."""
    missing = [parent for parent in (folder, *folder.parents) if not parent.exists()]
    folder.mkdir(parents=True, exist_ok=True)
    try:
        yield
    except OSError:
        for made in missing:
            made.rmdir()
        raise


@contextmanager
def disk_errors(out: Path) -> Iterator[None]:
    """Turn an error of the file system into one that says what to do."""
    try:
        yield
    except OSError as error:
        raise EnvironmentFault(
            f"the results could not be written: {error.strerror or type(error).__name__}",
            where=f"folder {out}",
            remedy="Free space, or name a folder that can be written to and is not a mount point. "
            "Nothing was left half-written.",
        ) from error
