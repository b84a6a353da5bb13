"""The options to be priced: a list, a grid, or a grid from the command line in their place."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from itertools import product

import numpy as np

from lossagg.cover import Cover
from lossagg.engines.book import Line
from lossagg.errors import InputError, place
from lossagg.portfolio.files import PORTFOLIO_FILE
from lossagg.portfolio.laws import given_terms
from lossagg.portfolio.pricing_sections import OptionGrid, OptionSection
from lossagg.portfolio.schema import PortfolioFile
from lossagg.pricing.option import Option

MOST_OPTIONS = 5000


def options_of(
    file: PortfolioFile, lines: Sequence[Line], grid: OptionGrid | None = None
) -> tuple[Option, ...]:
    """The options of a portfolio file, or of a grid in their place.

    Args:
        file: the portfolio file.
        lines: the lines priced.
        grid: from the command line; options and grid of the file are then left aside.

    Raises:
        InputError: no option, too many, two of the same name, or terms that contradict each other.
    """
    cap = np.inf if file.pricing.event_cap is None else file.pricing.event_cap
    found: list[Option] = []
    if grid is None:
        found += [
            _listed(section, tuple(lines), cap, f"option[{k}]")
            for k, section in enumerate(file.option, start=1)
        ]
        grid = file.option_grid
    if grid is not None:
        found += _combined(grid, tuple(lines), cap)
    if not found:
        raise InputError(
            "there is no option to price",
            where=place(file=PORTFOLIO_FILE),
            remedy="Add [[option]] tables or an [option-grid], or give --deductibles.",
        )
    if len(found) > MOST_OPTIONS:
        raise InputError(
            f"at most {MOST_OPTIONS:,} options are priced at once",
            value=len(found),
            remedy="Shorten the lists.",
        )
    for name, count in Counter(option.name for option in found).items():
        if count > 1:
            raise InputError(
                "two options have the same name", value=name, remedy="Give every option its own name."
            )
    return tuple(found)


def base_of(options: Sequence[Option], name: str | None) -> int:
    """The index of the base option, which the others are compared with: as named, else the first.

    Raises:
        InputError: a name that no option has.
    """
    if name is None:
        return 0
    for index, option in enumerate(options):
        if option.name == name:
            return index
    raise InputError(
        "the base is no option of the table",
        where=place(file=PORTFOLIO_FILE, key="pricing.base"),
        value=name,
        remedy=f"Name one of: {'; '.join(option.name for option in options[:8])}.",
    )


def lines_of(lines: Sequence[Line], names: Sequence[str] | None) -> tuple[int, ...]:
    """Indices of the lines priced together: as named, else all.

    Raises:
        InputError: a name that no line has, or one named twice.
    """
    if names is None:
        return tuple(range(len(lines)))
    known = [line.name for line in lines]
    for name in names:
        if name not in known or list(names).count(name) > 1:
            raise InputError(
                "options are for lines of the portfolio, each named once",
                where=place(file=PORTFOLIO_FILE, key="pricing.lines"),
                value=name,
                remedy=f"Lines: {', '.join(known)}.",
            )
    return tuple(known.index(name) for name in names)


def _listed(section: OptionSection, lines: tuple[Line, ...], cap: float, key: str) -> Option:
    terms = None if section.uninsured else _checked(given_terms(section, key), lines, cap, key)
    return Option(section.name, terms, lines, section.premium, cap)


def _checked(terms: Cover, lines: tuple[Line, ...], cap: float, key: str) -> Cover:
    where = place(file=PORTFOLIO_FILE, key=key)
    try:
        Option("check", terms, lines, None, cap).kept  # noqa: B018
    except InputError as error:
        raise InputError(error.what, where=where, value=error.value, remedy=error.remedy) from error
    return terms


def _combined(grid: OptionGrid, lines: tuple[Line, ...], cap: float) -> list[Option]:
    """Every combination of the amounts. A retained cap needs a deductible, so without one it is left out."""
    names = ("deductible", "limit", "annual_retention", "annual_limit", "retained_cap")
    amounts = (grid.deductibles, grid.limits, grid.annual_retentions, grid.annual_limits, grid.retained_caps)
    varied = [name for name, values in zip(names, amounts, strict=True) if len(values) > 1]
    found: dict[str, Option] = {}
    for number, values in enumerate(product(*amounts), start=1):
        given = dict(zip(names, values, strict=True))
        if given["deductible"] == 0:
            given["retained_cap"] = np.inf
        terms = Cover(
            deductible=given["deductible"],
            limit=given["limit"],
            annual_retention=given["annual_retention"],
            annual_limit=given["annual_limit"],
            retained_cap=given["retained_cap"],
            share=grid.share,
        )
        _checked(terms, lines, cap, f"option-grid ({number})")
        name = _name(given, varied or ["deductible"])
        found.setdefault(name, Option(name, terms, lines, None, cap))
    return list(found.values())


def _name(given: dict[str, float], varied: Sequence[str]) -> str:
    words = {
        "deductible": "deductible",
        "limit": "limit",
        "annual_retention": "annual retention",
        "annual_limit": "annual limit",
        "retained_cap": "cap",
    }
    return ", ".join(f"{words[name]} {_amount(given[name])}" for name in varied)


def _amount(value: float) -> str:
    if value == np.inf:
        return "none"
    return f"{value:,.0f}" if value == int(value) else f"{value:,.2f}"
