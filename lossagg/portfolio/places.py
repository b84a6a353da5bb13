"""Covers and towers of a portfolio file, placed in the order in which they pay."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from lossagg.cover import Tower
from lossagg.engines.book import PlacedCover
from lossagg.errors import InputError, place
from lossagg.portfolio.laws import given_terms, placed_cover
from lossagg.portfolio.schema import CoverSection, PortfolioFile
from lossagg.portfolio.tower_sections import TowerSection

Caution = dict[str, str]

GAP = "no layer pays the part of an event from {low:,.0f} to {high:,.0f}."
PARTLY = "the layers pay {share:.4g} of the part of an event from {low:,.0f} to {high:,.0f}, not the whole."


def placed_covers(file: PortfolioFile) -> tuple[PlacedCover, ...]:
    """Every cover and every layer of the towers, in the order in which they pay.

    Covers keep the order of the file. A tower stands before the first cover that comes after it, else at the
    end; a cover that comes after a tower comes after each of its layers.

    Raises:
        InputError: terms that contradict each other or layers that overlap, with their key; a tower that has
            the name of another tower or of a cover.
    """
    towers = {tower.name: (tower, f"tower[{k}]") for k, tower in enumerate(file.tower, start=1)}
    _require_own_names(file)
    placed: list[PlacedCover] = []
    for k, cover in enumerate(file.cover, start=1):
        for name in cover.after:
            if name in towers:
                placed += _layers(*towers.pop(name))
        placed.append(_after_layers(placed_cover(cover, f"cover[{k}]"), file.tower))
    for tower, key in towers.values():
        placed += _layers(tower, key)
    return tuple(placed)


def tower_cautions(towers: Sequence[TowerSection]) -> list[Caution]:
    """What a reader must know of the towers: gaps, and parts that are not wholly placed."""
    return [
        {"code": code, "message": f"Tower {tower.name!r}: {message}"}
        for k, tower in enumerate(towers, start=1)
        for code, message in _gaps(_checked(tower, f"tower[{k}]"))
    ]


def _gaps(tower: Tower) -> Iterator[tuple[str, str]]:
    for low, high in tower.gaps():
        yield "tower-gap", GAP.format(low=low, high=high)
    for low, high, share in tower.partly_placed():
        yield "tower-partly-placed", PARTLY.format(low=low, high=high, share=share)


def _layers(section: TowerSection, key: str) -> list[PlacedCover]:
    layers = _checked(section, key).layers
    names = zip(section.layer_names, layers, strict=True)
    return [
        PlacedCover(name=name, terms=terms, lines=section.lines or (), after=section.after)
        for name, terms in names
    ]


def _checked(section: TowerSection, key: str) -> Tower:
    layers = tuple(given_terms(layer, f"{key}.layer[{k}]") for k, layer in enumerate(section.layer, start=1))
    try:
        return Tower(layers)
    except InputError as error:
        where = ", ".join(part for part in (place(file="portfolio.toml", key=key), error.where) if part)
        raise InputError(error.what, where=where, value=error.value, remedy=error.remedy) from error


def _after_layers(cover: PlacedCover, towers: Sequence[TowerSection]) -> PlacedCover:
    layers = {tower.name: tower.layer_names for tower in towers}
    names = [name for before in cover.after for name in layers.get(before, [before])]
    return PlacedCover(
        name=cover.name, terms=cover.terms, lines=cover.lines, after=tuple(names), stated=cover.stated
    )


def _require_own_names(file: PortfolioFile) -> None:
    sections: Sequence[CoverSection | TowerSection] = (*file.cover, *file.tower)
    names = [section.name for section in sections]
    for tower in file.tower:
        if names.count(tower.name) > 1:
            raise InputError(
                "a tower has the name of another tower or of a cover",
                where=place(file="portfolio.toml", key="tower"),
                value=tower.name,
                remedy="Give every tower and cover its own name.",
            )
