"""From the keys of the portfolio file to laws and covers."""

from __future__ import annotations

from typing import Any

import numpy as np

from lossagg.cover import Cover
from lossagg.engines.book import PlacedCover
from lossagg.errors import InputError, LossaggError, place
from lossagg.families import make_count_law, make_size_law
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.portfolio.schema import CoverSection, Law
from lossagg.portfolio.sections import Terms


def given_frequency(law: Law, key: str) -> CountLaw:
    """The count law whose parameters stand in the portfolio file.

    Raises:
        InputError: an unknown family or parameter, or a value out of range, with its key.
    """
    try:
        return make_count_law(law.family or "", **law.given)
    except (LossaggError, TypeError) as error:
        raise _at(error, key) from error


def given_severity(law: Law, key: str) -> SizeLaw:
    """The size law whose parameters stand in the portfolio file; parts of splices and mixtures are
    tables with a family of their own.

    Raises:
        InputError: an unknown family or parameter, or a value out of range, with its key.
    """
    return _size_law(law.family or "", law.given, key)


def _size_law(family: str, parameters: dict[str, Any], key: str) -> SizeLaw:
    parts = {name: _part(value, f"{key}.{name.replace('_', '-')}") for name, value in parameters.items()}
    try:
        return make_size_law(family, **parts)
    except (LossaggError, TypeError) as error:
        raise _at(error, key) from error


def _part(value: Any, key: str) -> Any:
    if isinstance(value, list):
        return [_part(item, f"{key}[{k + 1}]") for k, item in enumerate(value)]
    if not isinstance(value, dict):
        return value
    names = {name.replace("-", "_"): item for name, item in value.items()}
    if "family" not in names:
        raise InputError(
            "a part of a law needs its family",
            where=place(file="portfolio.toml", key=key),
            value=", ".join(value),
            remedy='Write { family = "...", ... }.',
        )
    return _size_law(str(names.pop("family")), names, key)


def placed_cover(section: CoverSection, key: str) -> PlacedCover:
    """The cover of a `[[cover]]` table.

    Raises:
        InputError: terms that contradict each other, with the key of the table.
    """
    return PlacedCover(
        name=section.name,
        terms=given_terms(section, key),
        lines=section.lines or (),
        after=section.after,
    )


def given_terms(section: Terms, key: str) -> Cover:
    """The terms of a `[[cover]]` or `[[option]]` table.

    Raises:
        InputError: terms that contradict each other, with the key of the table.
    """
    try:
        return Cover(
            deductible=section.deductible,
            limit=np.inf if section.limit is None else section.limit,
            franchise=section.franchise,
            share=section.share,
            annual_retention=section.annual_retention,
            annual_limit=np.inf if section.annual_limit is None else section.annual_limit,
            retained_cap=np.inf if section.retained_cap is None else section.retained_cap,
        )
    except InputError as error:
        raise _at(error, key) from error


def _at(error: Exception, key: str) -> InputError:
    """The same error with its place in the portfolio file."""
    where = place(file="portfolio.toml", key=key)
    if isinstance(error, LossaggError):
        return InputError(error.what, where=where, value=error.value, remedy=error.remedy)
    return InputError(str(error), where=where, remedy="See the README for the parameters of each family.")
