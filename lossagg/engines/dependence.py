"""How the lines of a book depend on each other: what is shared, between which lines, and how strongly.

Three kinds. A shared factor multiplies, year by year, the expected number of losses of several lines or
the size of every loss: what goes wrong with one then goes wrong with all (Wang 1998, "Aggregation of
correlated risk portfolios", Proceedings of the Casualty Actuarial Society 85). A common shock is an event
that costs several lines a loss each, one event to the covers (Lindskog and McNeil 2003, "Common Poisson
shock models", ASTIN Bulletin 33). A copula ties the annual totals by their ranks (Embrechts, McNeil and
Straumann 2002, "Correlation and dependence in risk management"). Shocks and copulas leave each line by
itself as it is; a factor keeps the mean of each line and adds to its spread.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.engines.correlation import checked_correlation, equal_correlation
from lossagg.engines.placed import Line
from lossagg.errors import InputError
from lossagg.families import Gamma, Lognormal, NegativeBinomial, Poisson
from lossagg.families.base import CountLaw, SizeLaw

FACTOR_LAWS = ("gamma", "lognormal")
TARGETS = ("frequency", "inflation")


@dataclass(frozen=True, kw_only=True)
class SharedFactor:
    """A random factor with mean 1 that several lines have in common, one value for each year.

    Args:
        name: its name in reports; the stream of its random numbers derives from it.
        lines: names of the lines it acts on.
        on: "frequency" (it multiplies the expected number of losses) or "inflation" (it multiplies the size
            of every loss).
        variance: its variance, above 0: 0.04 for a coefficient of variation of 20 %.
        law: "gamma" or "lognormal"; the lognormal has the longer tail.

    Raises:
        InputError: a variance at or below 0, another law or target.
    """

    name: str
    lines: tuple[str, ...]
    on: str
    variance: float
    law: str = "gamma"

    def __post_init__(self) -> None:
        _require_lines(self, least=1)
        require_positive(self.variance, "variance")
        for key, value, known in (("law", self.law, FACTOR_LAWS), ("on", self.on, TARGETS)):
            if value not in known:
                raise InputError(
                    f"{key} must be one of {' and '.join(known)}",
                    where=f"dependence {self.name!r}",
                    value=value,
                    remedy=f"Give {key} as one of them.",
                )

    @property
    def target(self) -> str:
        """What of a line it acts on: "count" or "size"."""
        return "count" if self.on == "frequency" else "size"

    @property
    def factor(self) -> SizeLaw:
        """The law of the factor, with mean 1."""
        if self.law == "gamma":
            return Gamma(shape=1.0 / self.variance, scale=self.variance)
        spread = float(np.log1p(self.variance))
        return Lognormal(mu=-spread / 2.0, sigma=spread**0.5)

    def describe(self) -> str:
        """What it does, in one line."""
        what = "expected number of losses" if self.on == "frequency" else "size of every loss"
        return (
            f"the {what} of {', '.join(self.lines)} is multiplied by one {self.law} factor with mean 1 and "
            f"variance {self.variance:.6g}"
        )


@dataclass(frozen=True, kw_only=True)
class CommonShock:
    """Events that cost each of several lines one loss.

    They are part of what the frequency of each line says, which therefore stays as it is. A cover of several
    of these lines sees one event: its deductible and limit act on the sum of what the event costs them.

    Args:
        name: its name in reports; the stream of its random numbers derives from it.
        lines: names of the lines hit, at least two, each with a Poisson frequency.
        rate: expected number of shocks a year, above 0 and not above the frequency of any of the lines.

    Raises:
        InputError: a rate at or below 0, fewer than two lines.
    """

    name: str
    lines: tuple[str, ...]
    rate: float

    def __post_init__(self) -> None:
        _require_lines(self, least=2)
        require_positive(self.rate, "rate")

    @property
    def target(self) -> str:
        """What of a line it acts on."""
        return "count"

    def describe(self) -> str:
        """What it does, in one line."""
        return f"{self.rate:.6g} events a year cost {', '.join(self.lines)} one loss each"


@dataclass(frozen=True, kw_only=True)
class Copula:
    """The ranks of annual totals tied by a Gaussian or t copula.

    Args:
        name: its name in reports; the stream of its random numbers derives from it.
        lines: names of the lines tied, at least two.
        correlation: matrix in the order of `lines`, or one number for every pair.
        degrees_of_freedom: of the t copula, above 0; None for the Gaussian copula, whose extremes become
            independent however high the correlation below 1.

    Raises:
        InputError: fewer than two lines, a matrix that is no correlation matrix of these lines.
    """

    name: str
    lines: tuple[str, ...]
    correlation: Sequence[Sequence[float]] | float
    degrees_of_freedom: float | None = None

    def __post_init__(self) -> None:
        _require_lines(self, least=2)
        if self.degrees_of_freedom is not None:
            require_positive(self.degrees_of_freedom, "degrees_of_freedom")
        where = f"dependence {self.name!r}"
        given = self.correlation
        if isinstance(given, int | float):
            matrix = equal_correlation(float(given), len(self.lines), where)
        else:
            matrix = checked_correlation(given, len(self.lines), where)
        object.__setattr__(self, "correlation", tuple(tuple(row) for row in matrix.tolist()))

    @property
    def target(self) -> str:
        """What of a line it acts on."""
        return "total"

    @property
    def matrix(self) -> FloatArray:
        """The correlation matrix, shape (lines, lines)."""
        return np.array(self.correlation)

    def describe(self) -> str:
        """What it does, in one line."""
        kind = "Gaussian"
        if self.degrees_of_freedom is not None:
            kind = f"t with {self.degrees_of_freedom:.6g} degrees of freedom"
        pairs = self.matrix[np.triu_indices(len(self.lines), 1)]
        size = f"{pairs.min():.6g}" + (f" to {pairs.max():.6g}" if pairs.max() > pairs.min() else "")
        return (
            f"the annual totals of {', '.join(self.lines)} are tied by a copula: {kind}, correlation {size}"
        )


Dependence = SharedFactor | CommonShock | Copula


def check_dependences(lines: Sequence[Line], dependences: Sequence[Dependence]) -> None:
    """Refuse dependences that name no line, contradict each other or the laws of the lines.

    Raises:
        InputError: an unknown line, a repeated name, two dependences that act on the same part of a line, a
            factor or shock on a frequency that has no rate to act on, more shocks than losses.
    """
    known = {line.name: line for line in lines}
    acting: dict[tuple[str, str], str] = {}
    names = [dependence.name for dependence in dependences]
    for dependence in dependences:
        where = f"dependence {dependence.name!r}"
        if names.count(dependence.name) > 1:
            raise InputError("two dependences have the same name", where=where, remedy="Rename one of them.")
        for name in dependence.lines:
            if name not in known:
                raise InputError(
                    "the dependence names a line that does not exist",
                    where=where,
                    value=name,
                    remedy=f"Lines: {', '.join(sorted(known))}.",
                )
            _require_law(dependence, known[name], where)
            for target in ("count", "size", "total"):
                other = acting.get((name, target))
                if other is not None and (
                    target == dependence.target or "total" in (target, dependence.target)
                ):
                    raise InputError(
                        f"it acts on a line on which {other!r} acts already, and both cannot hold",
                        where=where,
                        value=name,
                        remedy="Let one dependence name all lines it ties; one factor on frequency and one "
                        "on inflation may act on the same line.",
                    )
            acting[name, dependence.target] = dependence.name


def independent(dependences: Sequence[Dependence]) -> tuple[Dependence, ...]:
    """The same lines by themselves: each with a factor of its own, no shock, no copula in common."""
    return tuple(
        SharedFactor(
            name=f"{factor.name}, {line}",
            lines=(line,),
            on=factor.on,
            variance=factor.variance,
            law=factor.law,
        )
        for factor in dependences
        if isinstance(factor, SharedFactor)
        for line in factor.lines
    )


def marginal_frequency(line: Line, dependences: Sequence[Dependence]) -> CountLaw | None:
    """The law of a line's count by itself, factor included; None where it has none in closed form.

    A Poisson count with a gamma factor is negative binomial (Greenwood and Yule 1920).
    """
    law = line.frequency
    for dependence in dependences:
        if line.name not in dependence.lines or not isinstance(dependence, SharedFactor):
            continue
        if dependence.on == "inflation" or dependence.law != "gamma" or not isinstance(law, Poisson):
            return None
        law = NegativeBinomial(mean=law.mean(), dispersion=dependence.variance)
    return law


def tied(dependences: Sequence[Dependence], lines: Sequence[str]) -> Dependence | None:
    """The first dependence between at least two of these lines; None where they are independent."""
    for dependence in dependences:
        if len(set(dependence.lines) & set(lines)) > 1:
            return dependence
    return None


def _require_lines(dependence: Any, *, least: int) -> None:
    where = f"dependence {dependence.name!r}"
    object.__setattr__(dependence, "lines", tuple(dependence.lines))
    for name in dependence.lines:
        if dependence.lines.count(name) > 1:
            raise InputError("a line is named twice", where=where, value=name, remedy="Name it once.")
    if len(dependence.lines) < least:
        raise InputError(
            f"a dependence is between {'two lines or more' if least > 1 else 'lines'}",
            where=where,
            value=dependence.lines,
            remedy="Name the lines it ties.",
        )


def _require_law(dependence: Dependence, line: Line, where: str) -> None:
    if dependence.target != "count":
        return
    allowed = (Poisson,) if isinstance(dependence, CommonShock) else (Poisson, NegativeBinomial)
    if not isinstance(line.frequency, allowed):
        raise InputError(
            f"the frequency of line {line.name!r} is {line.frequency.family}, which has no rate of events "
            "that could be shared",
            where=where,
            value=line.frequency.family,
            remedy=f"Give the line a frequency of {' or '.join(law.family for law in allowed)}, or tie it by "
            "a factor on inflation or a copula.",
        )
    if isinstance(dependence, CommonShock) and dependence.rate > line.frequency.mean():
        raise InputError(
            f"line {line.name!r} has fewer losses a year than there are shocks, which are part of them",
            where=where,
            value=dependence.rate,
            remedy=f"Give a rate of at most {line.frequency.mean():.6g}.",
        )
