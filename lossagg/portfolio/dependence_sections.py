"""`[[dependence]]` of the portfolio file: how lines depend on each other, and the evidence for it."""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from lossagg.engines.correlation import checked_correlation, nearest_correlation, square
from lossagg.engines.dependence import CommonShock, Copula, Dependence, SharedFactor
from lossagg.errors import InputError, place
from lossagg.portfolio.sections import Name, Positive, Section

Kind = Literal["shared-frequency", "shared-inflation", "common-shock", "gaussian-copula", "t-copula"]
Row = Annotated[tuple[float, ...], Field(strict=False)]
KEYS = {
    "shared-frequency": {"variance", "law"},
    "shared-inflation": {"variance", "law"},
    "common-shock": {"rate"},
    "gaussian-copula": {"correlation", "nearest"},
    "t-copula": {"correlation", "nearest", "degrees_of_freedom"},
}
NEEDED = {
    "shared-frequency": "variance",
    "shared-inflation": "variance",
    "common-shock": "rate",
    "gaussian-copula": "correlation",
    "t-copula": "correlation",
}


class DependenceSection(Section):
    """`[[dependence]]`: what several lines have in common.

    `kind` is "shared-frequency" or "shared-inflation" (one random factor a year with mean 1, `variance` and
    `law` "gamma" or "lognormal", on the expected number or the size of the losses), "common-shock" (`rate`
    events a year that cost each line one of its losses), "gaussian-copula" or "t-copula" (ranks of annual
    totals tied by `correlation`, one number or a matrix in the order of `lines`, and
    `degrees-of-freedom`). `nearest = true` replaces a matrix that is no correlation matrix by the nearest
    that is, and prints the change. `evidence` says what the choice rests on, `evidence-years` how many
    years of data; both are printed, the latter as an interval of each correlation.
    """

    name: Name
    kind: Kind
    lines: Annotated[tuple[str, ...], Field(min_length=2, strict=False)]
    variance: Positive | None = None
    law: Literal["gamma", "lognormal"] = "gamma"
    rate: Positive | None = None
    correlation: float | Annotated[tuple[Row, ...], Field(strict=False)] | None = None
    degrees_of_freedom: Positive | None = None
    nearest: bool = False
    evidence: str | None = None
    evidence_years: Annotated[int, Field(ge=1)] | None = None

    @model_validator(mode="after")
    def _keys_of_its_kind(self) -> DependenceSection:
        given = self.model_fields_set - {"name", "kind", "lines", "evidence", "evidence_years"}
        for name in sorted(given - KEYS[self.kind]):
            allowed = ", ".join(sorted(key.replace("_", "-") for key in KEYS[self.kind]))
            raise ValueError(f"a {self.kind} has no key {name.replace('_', '-')!r} | Its keys: {allowed}.")
        for name in (NEEDED[self.kind], *(["degrees_of_freedom"] if self.kind == "t-copula" else [])):
            if getattr(self, name) is None:
                key = name.replace("_", "-")
                raise ValueError(f"a {self.kind} needs {key} | Add {key} = ...")
        return self


def given_dependence(section: DependenceSection, key: str) -> tuple[Dependence, str]:
    """The dependence of a `[[dependence]]` table, and what had to be changed to make it one, or "".

    Raises:
        InputError: a correlation matrix that is none, with the key of the table.
    """
    try:
        return _given(section)
    except InputError as error:
        where = place(file="portfolio.toml", key=key)
        raise InputError(error.what, where=where, value=error.value, remedy=error.remedy) from error


def _given(section: DependenceSection) -> tuple[Dependence, str]:
    name, lines = section.name, section.lines
    if section.kind == "common-shock":
        return CommonShock(name=name, lines=lines, rate=section.rate or 0.0), ""
    if section.kind in ("shared-frequency", "shared-inflation"):
        factor = SharedFactor(
            name=name,
            lines=lines,
            on=section.kind.removeprefix("shared-"),
            variance=section.variance or 0.0,
            law=section.law,
        )
        return factor, ""
    given, change = section.correlation, ""
    assert given is not None
    if section.nearest and not isinstance(given, float):
        given, change = _nearest(given, name)
    copula = Copula(name=name, lines=lines, correlation=given, degrees_of_freedom=section.degrees_of_freedom)
    return copula, change


def _nearest(matrix: tuple[Row, ...], name: str) -> tuple[tuple[Row, ...], str]:
    """The nearest correlation matrix, and the change in words; the matrix itself where it is one."""
    asked = square(matrix, len(matrix), f"dependence {name!r}")
    try:
        checked_correlation(matrix, len(matrix), f"dependence {name!r}")
    except InputError:
        nearest = nearest_correlation(asked)
    else:
        return matrix, ""
    i, j = np.unravel_index(np.argmax(np.abs(nearest - asked)), asked.shape)
    change = (
        "the correlation matrix given has a negative eigenvalue and was replaced by the nearest without; "
        f"the largest change is in row {i + 1}, column {j + 1}, from {asked[i, j]:.6g} to {nearest[i, j]:.6g}"
    )
    return tuple(tuple(float(value) for value in row) for row in nearest), change
