"""JSON with one way to write a document: same content, same bytes, no number that JSON lacks."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from typing import Any

from lossagg.errors import InputError


def canonical_json(document: Mapping[str, Any]) -> str:
    """The document as JSON text with two spaces of indent, in the order of its keys, and a last newline.

    Numbers are written with the fewest digits that give them back exactly.

    Raises:
        InputError: a number that is infinite or not a number, or a value that JSON has no form for.
    """
    return json.dumps(_plain(document, ""), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _plain(value: Any, where: str) -> Any:
    if value is None or isinstance(value, (str, bool)):
        return value
    if isinstance(value, int):
        return int(value)
    if isinstance(value, float):
        if math.isfinite(value):
            return float(value)
        raise InputError(
            "a number that does not exist must be null with its reason beside it",
            where=f"entry {where}",
            value=float(value),
            remedy="Write null and the reason.",
        )
    if isinstance(value, Mapping):
        return {str(key): _plain(item, f"{where}.{key}".lstrip(".")) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item, f"{where}[{index}]") for index, item in enumerate(value)]
    raise InputError(
        f"a value of type {type(value).__name__} has no form in JSON",
        where=f"entry {where}",
        value=value,
        remedy="Convert it to a plain number, text, list or dictionary.",
    )
