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
    """The result folder of each name; names that reduce to the same get a piece of their hash."""
    slugs = {name: slug(name) for name in names}
    seen = Counter(slugs.values())
    return {
        name: short if seen[short] == 1 else f"{short}-{hashlib.sha256(name.encode()).hexdigest()[:8]}"
        for name, short in slugs.items()
    }
