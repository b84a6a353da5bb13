"""What count laws and size laws share: named parameters, a family name, and the ends of the scale."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import fields
from typing import Any, ClassVar

import numpy as np

from lossagg.arrays import FloatArray


class Law(ABC):
    """A law with named parameters and a family name."""

    family: ClassVar[str]

    @property
    def parameters(self) -> dict[str, float]:
        """Parameter values by name, as given to the constructor.

        Scalars only: the entries of a table are not parameters. Laws made of laws give dotted names,
        `body.mu` or `part.2.mean`.
        """
        return {name: float(value) for name, value in self._given() if isinstance(value, int | float)}

    def to_dict(self) -> dict[str, Any]:
        """The family and every argument of the constructor, laws within laws included, as plain data.

        `make_count_law(**data)` and `make_size_law(**data)` make the same law again, to the last bit.
        """
        return {"family": self.family, **{name: _plain(value) for name, value in self._given()}}

    def _given(self) -> list[tuple[str, Any]]:
        # A parameter called as a method is (`mean`) is kept in a field with an underscore before it.
        return [(f.name.removeprefix("_"), getattr(self, f.name)) for f in fields(self)]  # type: ignore[arg-type]

    def _settle(self, **values: object) -> None:
        # The one way to write a field of a frozen law: once, while it is made.
        for name, value in values.items():
            object.__setattr__(self, name, value)

    def __repr__(self) -> str:
        shown = ", ".join(f"{name}={_shown(value)}" for name, value in self._given())
        return f"{type(self).__name__}({shown})"

    @abstractmethod
    def mean(self) -> float:
        """The mean; `inf` where it does not exist."""

    @abstractmethod
    def variance(self) -> float:
        """The variance; `inf` where it does not exist."""

    def sd(self) -> float:
        """The standard deviation; `inf` where it does not exist."""
        return float(np.sqrt(self.variance()))


def within(
    function: Callable[[FloatArray], FloatArray], x: FloatArray, *, below: float, above: float
) -> FloatArray:
    """Apply a function to the amounts in [0, inf), and set the values below 0 and at infinity."""
    inside = (x >= 0) & (x < np.inf)
    if inside.all():
        return function(x.ravel()).reshape(x.shape)
    result = np.where(x < 0, below, above)
    result[inside] = function(x[inside])
    return result


def _plain(value: Any) -> Any:
    if isinstance(value, Law):
        return value.to_dict()
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return value


def _shown(value: object) -> str:
    if isinstance(value, tuple) and len(value) > 6:
        return f"({', '.join(repr(entry) for entry in value[:3])}, ... {len(value) - 3} more)"
    return repr(value)
