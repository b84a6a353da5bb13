"""The model of a run as plain data, and back: what a replay rebuilds the book from.

Every object is a dictionary of the arguments that differ from their defaults, so the numbers are those of
the run to the last bit. Infinite amounts, for which JSON has no form, are the text "inf".
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import MISSING, fields, is_dataclass
from typing import Any, get_args, get_type_hints

import numpy as np

from lossagg.engines.book import Book, Line, PlacedCover
from lossagg.engines.dependence import CommonShock, Copula, Dependence, SharedFactor
from lossagg.errors import InputError, LossaggError
from lossagg.families import make_count_law, make_size_law
from lossagg.families.base import Law

Data = dict[str, Any]
KINDS: Mapping[str, type[Dependence]] = {
    "shared-factor": SharedFactor,
    "common-shock": CommonShock,
    "copula": Copula,
}


def book_data(book: Book) -> Data:
    """A book as text, numbers, lists and dictionaries."""
    kinds = {kind: name for name, kind in KINDS.items()}
    return {
        "lines": [_data(line) for line in book.lines],
        "covers": [_data(cover) for cover in book.covers],
        "dependences": [{"kind": kinds[type(own)], **_data(own)} for own in book.dependences],
    }


def book_of(data: Mapping[str, Any]) -> Book:
    """The book again.

    Raises:
        InputError: data that is no model of this version, with what is missing or unknown.
    """
    try:
        return Book(
            lines=tuple(_line(line) for line in data["lines"]),
            covers=tuple(_made(PlacedCover, cover) for cover in data["covers"]),
            dependences=tuple(_dependence(own) for own in data["dependences"]),
        )
    except LossaggError:
        raise
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise InputError(
            f"the model of the assessment cannot be read: {error}",
            where="key 'model'",
            remedy="Give the assessment.json as it was written, to the version of lossagg that wrote it.",
        ) from error


def _data(value: Any) -> Any:
    if isinstance(value, Law):
        return value.to_dict()
    if is_dataclass(value):
        given = ((field, getattr(value, field.name)) for field in fields(value))
        return {field.name: _data(item) for field, item in given if not _is_default(field, item)}
    if isinstance(value, list | tuple):
        return [_data(item) for item in value]
    return "inf" if isinstance(value, float) and value == np.inf else value


def _is_default(field: Any, value: Any) -> bool:
    return field.default is not MISSING and bool(value == field.default)


def _line(data: Mapping[str, Any]) -> Line:
    laws = {"frequency": make_count_law(**data["frequency"]), "severity": make_size_law(**data["severity"])}
    return Line(**{**data, **laws})


def _dependence(data: Mapping[str, Any]) -> Dependence:
    arguments = dict(data)
    made: Dependence = _made(KINDS[str(arguments.pop("kind"))], arguments)
    return made


def _made(kind: type[Any], data: Mapping[str, Any]) -> Any:
    """A dataclass from its data; arguments that are dataclasses themselves by their declared type."""
    hints = get_type_hints(kind)
    arguments: Data = {}
    for name, value in data.items():
        if isinstance(value, Mapping):
            declared = [part for part in (hints[name], *get_args(hints[name])) if is_dataclass(part)]
            arguments[name] = _made(declared[0], value)  # type: ignore[arg-type]
        elif isinstance(value, list):
            arguments[name] = tuple(tuple(item) if isinstance(item, list) else item for item in value)
        else:
            arguments[name] = np.inf if value == "inf" else value
    return kind(**arguments)
