"""Names of result folders: safe on every file system, unique, and the same in any order."""

from __future__ import annotations

import hashlib
import re
import unicodedata
from collections import Counter
from collections.abc import Iterable

LONGEST = 60
# Names that an operating system or the batch itself keeps for its own use.
RESERVED = frozenset(
    {"con", "prn", "aux", "nul", "index", "batch"}
    | {f"com{digit}" for digit in range(10)}
    | {f"lpt{digit}" for digit in range(10)}
)


def slug(name: str) -> str:
    """A folder name of lower-case letters, digits and hyphens made from any name."""
    plain = unicodedata.normalize("NFKD", name).encode("ascii", "ignore").decode()
    reduced = re.sub(r"[^a-z0-9]+", "-", plain.lower()).strip("-")[:LONGEST].strip("-")
    if not reduced or reduced in RESERVED:
        return f"portfolio-{reduced}".strip("-")
    return reduced


def result_names(names: Iterable[str]) -> dict[str, str]:
    """The result folder of each name; names that reduce to the same get a piece of their hash, and all of it
    where another name looks like that."""
    found = {name: slug(name) for name in names}
    for digits in (8, 64):
        seen = Counter(found.values())
        found = {
            name: result if seen[result] == 1 else f"{slug(name)}-{_digest(name)[:digits]}"
            for name, result in found.items()
        }
    return found


def _digest(name: str) -> str:
    return hashlib.sha256(name.encode()).hexdigest()
