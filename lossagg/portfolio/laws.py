"""From the keys of the portfolio file to laws and covers."""

from __future__ import annotations

from typing import Any

import numpy as np

from lossagg.cover import Corridor, Cover, Reinstatements, Surplus
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
        stated=_stated(section),
    )


def given_terms(section: Terms, key: str) -> Cover:
    """The terms of a `[[cover]]` or `[[option]]` table.

    Raises:
        InputError: terms that contradict each other, with the key of the table.
    """
    try:
        return _terms(section)
    except InputError as error:
        raise _at(error, key) from error


def _terms(section: Terms) -> Cover:
    def unlimited(value: float | None) -> float:
        return np.inf if value is None else value

    corridor, surplus, stop = section.corridor, section.surplus, section.stop_loss
    retention, most = section.annual_retention, unlimited(section.annual_limit)
    if stop is not None:
        stated = Cover.stop_loss(
            premium=stop.premium, retention_ratio=stop.retention, limit_ratio=unlimited(stop.limit)
        )
        retention, most = stated.annual_retention, stated.annual_limit
    terms = Cover(
        deductible=section.deductible,
        limit=unlimited(section.limit),
        franchise=section.franchise,
        share=section.share,
        annual_retention=retention,
        annual_limit=most,
        retained_cap=unlimited(section.retained_cap),
        disappears_at=unlimited(section.disappears_at),
        limit_includes_deductible=section.limit_includes_deductible,
        self_insured=section.self_insured,
        surplus=None if surplus is None else Surplus(kept_line=surplus.kept_line, lines=surplus.lines),
        corridor=None
        if corridor is None
        else Corridor(low=corridor.low, high=unlimited(corridor.high), share=corridor.share),
        reinstatements=_reinstatements(section),
        expense_basis=section.expense_basis,
        order=section.order,
    )
    return terms if section.scale == 1.0 else terms.scaled(section.scale)


def _reinstatements(section: Terms) -> Reinstatements | None:
    if section.reinstatements is None:
        return None
    rates = section.reinstatement_rate
    return Reinstatements(number=section.reinstatements, rates=rates[0] if len(rates) == 1 else rates)


def _stated(section: Terms) -> str:
    """What the file states in other words than the terms: loss ratios, a scale."""
    parts = []
    if section.stop_loss is not None:
        stop = section.stop_loss
        limit = "" if stop.limit is None else f"{100 * stop.limit:.4g} % "
        parts.append(f"{limit}in excess of {100 * stop.retention:.4g} % of a premium of {stop.premium:,.0f}")
    if section.scale != 1.0:
        parts.append(f"amounts of the file times {section.scale:.10g}")
    return "; ".join(parts)


def _at(error: Exception, key: str) -> InputError:
    """The same error with its place in the portfolio file."""
    where = place(file="portfolio.toml", key=key)
    if isinstance(error, LossaggError):
        return InputError(error.what, where=where, value=error.value, remedy=error.remedy)
    return InputError(str(error), where=where, remedy="See the README for the parameters of each family.")
