"""Portfolios of one folder that bear the same name: one may be a copy, and would count twice in any sum."""

from __future__ import annotations

import tomllib
import unicodedata
from collections.abc import Iterable
from pathlib import Path

from lossagg.errors import InputError, place


def twins_of(folder: Path, names: Iterable[str], file: str) -> dict[str, tuple[str, ...]]:
    """The portfolios whose name another one bears, each with the folders of the others.

    Names are alike but for case, form of accents and space around them. A file that cannot be read has no
    name here: it fails by itself.

    Args:
        folder: holds one folder per portfolio.
        names: of those folders.
        file: name of the portfolio file in each.
    """
    alike: dict[str, list[str]] = {}
    for name in names:
        stated = stated_name(folder / name / file)
        if stated is not None:
            alike.setdefault(unicodedata.normalize("NFC", stated).casefold().strip(), []).append(name)
    return {
        name: tuple(other for other in same if other != name)
        for same in alike.values()
        if len(same) > 1
        for name in same
    }


def refuse_twins(folder: Path, names: Iterable[str], file: str) -> None:
    """Stop before anything runs where two portfolios bear the same name.

    Args:
        folder, names, file: see `twins_of`.

    Raises:
        InputError: with every file whose name another one bears.
    """
    twins = twins_of(folder, names, file)
    if not twins:
        return
    first = next(iter(twins))
    concerned = [first, *twins[first]]
    others = sorted(set(twins) - set(concerned))
    also = f"\n  also: {', '.join(f'{name}/{file}' for name in others)}." if others else ""
    raise InputError(
        f"{len(concerned)} portfolios of the folder bear the same name, so nothing was run",
        where=place(file=" and ".join(f"{name}/{file}" for name in concerned)),
        value=stated_name(folder / first / file),
        remedy=f"Give each its own name; if one is a copy, take it out of the folder.{also}",
    )


def stated_name(path: Path) -> str | None:
    """The name in a portfolio file; None where it cannot be read or states none."""
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError):
        return None
    section = content.get("portfolio")
    name = section.get("name") if isinstance(section, dict) else None
    return name if isinstance(name, str) else None
