"""Laws by family name: what portfolio files and fits use."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from difflib import get_close_matches
from inspect import Parameter, signature
from types import MappingProxyType
from typing import Any, TypeVar

from lossagg.errors import InputError
from lossagg.families.base import CountLaw, Law, SizeLaw
from lossagg.families.binomial import Binomial
from lossagg.families.burr import Burr
from lossagg.families.count_table import CountTable
from lossagg.families.exponential import Exponential
from lossagg.families.gamma import Gamma
from lossagg.families.generalized_pareto import GeneralizedPareto
from lossagg.families.inverse_gaussian import InverseGaussian
from lossagg.families.log_gamma import LogGamma
from lossagg.families.log_logistic import LogLogistic
from lossagg.families.lognormal import Lognormal
from lossagg.families.lomax import Lomax
from lossagg.families.mixture import Mixture
from lossagg.families.negative_binomial import NegativeBinomial
from lossagg.families.pareto import Pareto
from lossagg.families.poisson import Poisson
from lossagg.families.size_table import SizeTable
from lossagg.families.spliced import Spliced
from lossagg.families.weibull import Weibull
from lossagg.families.zero_modified import ZeroInflated, ZeroModified

L = TypeVar("L", bound=Law)
_COUNTS: tuple[type[CountLaw], ...] = (
    Poisson,
    NegativeBinomial,
    Binomial,
    ZeroModified,
    ZeroInflated,
    CountTable,
)
_SIZES: tuple[type[SizeLaw], ...] = (
    Exponential,
    Lognormal,
    Pareto,
    Lomax,
    GeneralizedPareto,
    Gamma,
    Weibull,
    InverseGaussian,
    Burr,
    LogLogistic,
    LogGamma,
    SizeTable,
    Spliced,
    Mixture,
)

COUNT_FAMILIES: Mapping[str, type[CountLaw]] = MappingProxyType({law.family: law for law in _COUNTS})
"""Count laws by family name."""

SIZE_FAMILIES: Mapping[str, type[SizeLaw]] = MappingProxyType({law.family: law for law in _SIZES})
"""Size laws by family name."""


def make_count_law(family: str, **parameters: Any) -> CountLaw:
    """A count law from its family name and parameters, as a portfolio file gives them.

    Args:
        family: a name in `COUNT_FAMILIES`.
        **parameters: those of the law's constructor; hyphens count as underscores. The `base` of a law made
            of another may be a law, or a mapping with a `family` key.

    Raises:
        InputError: an unknown family or parameter (naming the nearest), a missing or bad parameter.
    """
    return _made(_found(family, COUNT_FAMILIES, "count"), {k: _base(v) for k, v in parameters.items()})


def make_size_law(family: str, **parameters: Any) -> SizeLaw:
    """A size law from its family name and parameters, as a portfolio file gives them.

    Args:
        family: a name in `SIZE_FAMILIES`.
        **parameters: those of the law's constructor; hyphens count as underscores. The `body`, the
            `tail` and the `parts` of a law made of laws may be laws, or mappings with a `family` key.

    Raises:
        InputError: an unknown family or parameter (naming the nearest), a missing or bad parameter.
    """
    return _made(_found(family, SIZE_FAMILIES, "size"), {k: _inner(v) for k, v in parameters.items()})


def with_parameters(law: Mapping[str, Any], values: Mapping[str, float]) -> dict[str, Any]:
    """A law as plain data with some of its parameters replaced.

    Args:
        law: what `to_dict` gives.
        values: parameters by the names of the law's `parameters`; a dotted name reaches into the laws it is
            made of. Weights of a mixture that are not named share what is left in proportion.
    """
    changed = dict(law)
    inside: dict[str, dict[str, float]] = {}
    for name, value in values.items():
        part, _, rest = name.partition(".")
        if rest:
            inside.setdefault(part, {})[rest] = value
        else:
            changed[part] = value
    for part, own in inside.items():
        if part == "weight":
            changed["weights"] = _reweighted(changed["weights"], own)
        elif part == "part":
            changed["parts"] = [
                with_parameters(
                    old,
                    {n.partition(".")[2]: v for n, v in own.items() if n.partition(".")[0] == str(place)},
                )
                for place, old in enumerate(changed["parts"], start=1)
            ]
        else:
            changed[part] = with_parameters(changed[part], own)
    return changed


def _reweighted(weights: Sequence[float], named: Mapping[str, float]) -> list[float]:
    new = {int(place) - 1: value for place, value in named.items()}
    others = sum(weight for place, weight in enumerate(weights) if place not in new)
    ratio = (1.0 - sum(new.values())) / others if others else 1.0
    return [new.get(place, weight * ratio) for place, weight in enumerate(weights)]


def _base(value: Any) -> Any:
    if not isinstance(value, Mapping):
        return value
    if "family" not in value:
        raise InputError(
            "a law needs its family",
            value=dict(value),
            remedy=f"Add family, one of: {', '.join(COUNT_FAMILIES)}.",
        )
    return make_count_law(**{str(name).replace("-", "_"): part for name, part in value.items()})


def _inner(value: Any) -> Any:
    if isinstance(value, Mapping):
        if "family" not in value:
            raise InputError(
                "a law needs its family",
                value=dict(value),
                remedy=f"Add family, one of: {', '.join(SIZE_FAMILIES)}.",
            )
        return make_size_law(**{str(name).replace("-", "_"): part for name, part in value.items()})
    if isinstance(value, Sequence) and value and all(isinstance(part, Mapping) for part in value):
        return tuple(_inner(part) for part in value)
    return value


def _found(family: str, known: Mapping[str, type[L]], kind: str) -> type[L]:
    if family in known:
        return known[family]
    raise InputError(
        f"unknown {kind} family",
        value=family,
        remedy=_nearest(str(family).lower().replace("_", "-").replace(" ", "-"), list(known)),
    )


def _made(law: type[L], given: Mapping[str, Any]) -> L:
    known = signature(law).parameters
    named = {name.replace("-", "_"): value for name, value in given.items()}
    for name in named:
        if name not in known:
            raise InputError(
                f"the {law.family} family has no parameter {name!r}", remedy=_nearest(name, list(known))
            )
    missing = [name for name, p in known.items() if p.default is Parameter.empty and name not in named]
    if missing:
        raise InputError(
            f"the {law.family} family needs {' and '.join(missing)}",
            value=tuple(named),
            remedy=f"Its parameters: {', '.join(known)}.",
        )
    return law(**named)


def _nearest(name: str, known: list[str]) -> str:
    close = get_close_matches(name, known, n=1, cutoff=0.5)
    return (
        f"Did you mean {close[0]!r}? Known: {', '.join(known)}." if close else f"Known: {', '.join(known)}."
    )
