"""The keys of a tower: layers on top of each other over events."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from lossagg.portfolio.sections import Name, Section, Terms


class LayerSection(Terms):
    """`[[tower.layer]]`: the terms of one layer."""

    name: Name | None = None


class TowerSection(Section):
    """`[[tower]]`: layers on top of each other over events; `[[tower.layer]]` tables from the lowest up."""

    name: Name
    lines: Annotated[tuple[str, ...], Field(min_length=1, strict=False)] | None = None
    after: Annotated[tuple[str, ...], Field(strict=False)] = ()
    layer: Annotated[tuple[LayerSection, ...], Field(min_length=1, strict=False)]

    @model_validator(mode="after")
    def _distinct(self) -> TowerSection:
        names = self.layer_names
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f"two layers are called {name!r} | Give every layer its own name.")
        return self

    @property
    def layer_names(self) -> list[str]:
        """Names of the layers in reports: the tower's and their own, or counted from the lowest."""
        return [f"{self.name}, {layer.name or f'layer {k}'}" for k, layer in enumerate(self.layer, start=1)]
