"""Fit several families to the same losses or counts and rank those that have a fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Generic, TypeVar

import numpy as np

from lossagg.arrays import Floats
from lossagg.errors import FitError, InputError
from lossagg.fitting.empirical import EMPIRICAL, refuse_empirical_tail
from lossagg.fitting.frequency import fit_frequency
from lossagg.fitting.results import Fit, FrequencyFit, SeverityFit
from lossagg.fitting.severity import fit_severity
from lossagg.fitting.spliced import fit_spliced

if TYPE_CHECKING:
    import pandas as pd

AnyFit = TypeVar("AnyFit", bound=Fit)


@dataclass(frozen=True)
class Candidates(Generic[AnyFit]):
    """The fits of several families to the same data, best first by AIC.

    AIC ranks; it does not say that the best is good. Look at the survival and quantile plots, above
    all in the tail, before using it.

    Attributes:
        fits: certified fits, lowest AIC first (Akaike 1974).
        families: the name under which each of them was asked for; that of the body in a splice.
        refused: family name to the reason why it has no fit.
        preferred: place of the chosen fit.
        reason: why another than the first was chosen; empty where the first was.
    """

    fits: tuple[AnyFit, ...]
    families: tuple[str, ...]
    refused: Mapping[str, str]
    preferred: int = 0
    reason: str = ""

    @property
    def chosen(self) -> AnyFit:
        """The fit of lowest AIC, or the one chosen for a reason."""
        return self.fits[self.preferred]

    def choosing(self, family: str, reason: str = "") -> Candidates[AnyFit]:
        """The same candidates with one of them chosen.

        Args:
            family: the name under which it was asked for.
            reason: why, where it is not the first.

        Raises:
            FitError: the family was not tried or has no fit, or another ranks first and no reason is given.
        """
        if family in self.refused:
            raise FitError(
                f"the chosen family has no fit: {self.refused[family]}",
                value=family,
                remedy="Choose another.",
            )
        if family not in self.families:
            raise FitError(
                "the chosen family is not among the candidates",
                value=family,
                remedy=f"Choose one of {', '.join(self.families)}.",
            )
        place = self.families.index(family)
        if place and not reason.strip():
            worse = self.fits[place].aic - self.fits[0].aic
            raise FitError(
                f"{family} is chosen, but {self.families[0]} ranks first: its AIC is lower by {worse:.4g}",
                value=family,
                remedy='Say why with reason = "...", which the report prints, or leave out choose.',
            )
        return replace(self, preferred=place, reason=reason.strip() if place else "")

    def to_frame(self) -> pd.DataFrame:
        """One row per family, refused ones last: log-likelihood, AIC, BIC, whether chosen, why refused."""
        import pandas as pd

        rows: list[dict[str, object]] = [
            {
                "family": fit.family,
                "estimated": fit.estimated,
                "log_likelihood": fit.log_likelihood,
                "aic": fit.aic,
                "bic": fit.bic,
                "chosen": fit is self.chosen,
                "refused": None,
            }
            for fit in self.fits
        ]
        rows += [{"family": name, "chosen": False, "refused": why} for name, why in self.refused.items()]
        return pd.DataFrame(rows).set_index("family")


def compare_severities(
    losses: Floats,
    families: Sequence[str],
    truncation: Floats | None = None,
    censored: object = None,
    *,
    tail_threshold: float | None = None,
    tail: str = "generalized-pareto",
    continuous: bool = False,
    least_seen: float = 0.0,
) -> Candidates[SeverityFit]:
    """Fit each severity family and rank the fits by AIC.

    Args:
        losses, truncation, censored: as for `fit_severity`.
        families: names of families, each once.
        tail_threshold: if given, each family is fitted as the body of a spliced law with this splice
            point; see `fit_spliced`.
        tail: family of the tail above `tail_threshold`.
        continuous: whether the density must not jump there.
        least_seen: refuse a fit that puts less than this share of all losses above the smallest
            reporting threshold; a ground-up count would be the observed one divided by that share.

    Raises:
        InputError: unusable data, no family, or an unknown one.
        FitError: no family has a fit; `tried` gives the reason of each.
    """

    def fit(family: str) -> SeverityFit:
        if family == EMPIRICAL and (tail_threshold is None or len(families) > 1):
            _refuse_empirical(losses, families, tail_threshold)
        if tail_threshold is None:
            made = fit_severity(losses, family, truncation, censored)
        else:
            made = fit_spliced(
                losses, family, tail_threshold, truncation, censored, tail, continuous=continuous
            )
        seen = 1.0 if made.truncation is None else float(made.model.sf(np.nextafter(made.truncation[0], 0.0)))
        if seen < least_seen:
            raise FitError(
                f"the fit puts only {seen:.2g} of all losses above the reporting threshold",
                value=family,
                remedy='Use a law that begins there ("pareto", "generalized-pareto"), or a lighter one.',
            )
        return made

    return _ranked(families, fit, "severity")


def _refuse_empirical(losses: Floats, families: Sequence[str], tail_threshold: float | None) -> None:
    if tail_threshold is None:
        raise refuse_empirical_tail(float(np.max(losses)))
    raise InputError(
        "an empirical body has no likelihood to be ranked by",
        value=list(families),
        remedy='Write fit = ["empirical"] alone.',
    )


def compare_frequencies(
    counts: Floats, families: Sequence[str], exposure: Floats | None = None
) -> Candidates[FrequencyFit]:
    """Fit each frequency family and rank the fits by AIC.

    Args:
        counts, exposure: as for `fit_frequency`.
        families: names of families, each once.

    Raises:
        InputError: unusable data, no family, or an unknown one.
        FitError: no family has a fit; `tried` gives the reason of each.
    """
    return _ranked(families, lambda family: fit_frequency(counts, family, exposure), "frequency")


def _ranked(families: Sequence[str], fit: Callable[[str], AnyFit], what: str) -> Candidates[AnyFit]:
    names = [families] if isinstance(families, str) else list(families)
    if not names or len(set(names)) != len(names):
        raise InputError(
            f"{what} families must be a list of different names",
            value=names,
            remedy="Name each family to compare once.",
        )
    fits: list[tuple[AnyFit, str]] = []
    refused: dict[str, str] = {}
    for name in names:
        try:
            fits.append((fit(name), name))
        except FitError as refusal:
            refused[name] = str(refusal)
    if not fits:
        raise FitError(
            f"none of the {what} families can be fitted",
            value=names,
            remedy="Read the reasons, name other families, or give the law.",
            tried=tuple(f"{name}: {why}" for name, why in refused.items()),
        )
    fits.sort(key=lambda candidate: candidate[0].aic)
    return Candidates(tuple(made for made, _ in fits), tuple(name for _, name in fits), refused)
