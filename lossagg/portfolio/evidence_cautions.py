"""What the tests of a line's fits call into question, as cautions: trend, dependence, spread, fit, prior."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from lossagg.portfolio.assessment import Data
from lossagg.portfolio.cautions import Caution

QUESTIONABLE = 0.05  # a p-value from here down is told; common practice, no source
SENSITIVE = 0.1  # change of the value at risk that is told (our choice, no source)
_DISTANCES = {
    "kolmogorov_smirnov": "Kolmogorov-Smirnov",
    "anderson_darling": "Anderson-Darling",
    "upper_tail": "upper tail",
}


def evidence_cautions(lines: Sequence[Data]) -> list[Caution]:
    """Cautions from the entries of `line_evidence`.

    Args:
        lines: the entries, in the order of the portfolio file.
    """
    return [
        {"code": code, "message": f"Line {line['name']!r}: {message}"}
        for line in lines
        for code, message in _of_line(line)
    ]


def tail_cautions(lines: Sequence[Data]) -> list[Caution]:
    """Cautions from the sensitivity of the value at risk to where the tail begins, as `lossagg fit` finds it.

    Args:
        lines: the entries of a fit report.
    """
    found = []
    for line in lines:
        moved = [row for row in line["sensitivity"] if row["relative"] is not None]
        widest = max(moved, key=lambda row: abs(row["relative"]), default=None)
        if widest is not None and abs(widest["relative"]) >= SENSITIVE:
            found.append(
                {
                    "code": "tail-sensitive",
                    "message": f"Line {line['name']!r}: its value at risk at {line['level']:g} changes by "
                    f"{100 * widest['relative']:+.0f} % where the tail is a generalized Pareto law from "
                    f"{widest['threshold']:,.6g} on: the choice of the tail is part of the figure.",
                }
            )
    return found


def _of_line(line: Data) -> Iterator[tuple[str, str]]:
    tests = line["frequency"]["tests"]
    if line["frequency"]["credibility"] is not None:
        yield from _of_prior(line["frequency"]["credibility"])
    if tests is not None:
        yield from _of_counts(line["frequency"]["family"], tests)
    for tried in line["severity"]["candidates"]:
        if tried["chosen"] and tried["goodness"] is not None:
            yield from _of_fit(tried["family"], tried["goodness"])


def _of_prior(credibility: Data) -> Iterator[tuple[str, str]]:
    weight = credibility["weight"]
    yield (
        "prior-rate",
        f"the rate of events is weighted {weight:.1%} to the line's own {credibility['losses']} losses "
        f"({credibility['own_rate']:.4g} per unit of exposure) and {1 - weight:.1%} to a stated prior "
        f"({credibility['prior_rate']:.4g}): {credibility['method']}. Source of the prior: "
        f"{credibility['source'].rstrip('.')}.",
    )
    low, high = credibility["own_low"], credibility["own_high"]
    if not low <= credibility["prior_rate"] <= high:
        yield (
            "prior-contradicted",
            f"the stated prior rate {credibility['prior_rate']:.4g} lies outside the 95 % interval of the "
            f"own experience, {low:.4g} to {high:.4g}: one of the two is not about this line as it will be.",
        )


def _of_counts(family: str, tests: Data) -> Iterator[tuple[str, str]]:
    trend, together, spread = tests["trend"], tests["size_and_number"], tests["overdispersion"]
    if trend["reason"] is None and trend["p_value"] <= QUESTIONABLE:
        ends = [trend[end] for end in ("low", "high")]
        span = " to ".join("unknown" if end is None else f"{100 * end:+.1f} %" for end in ends)
        yield (
            "frequency-trend",
            f"the rate of events per unit of exposure changes by {100 * trend['growth']:+.1f} % a year "
            f"beyond any trend stated (95 % interval {span}; p = {trend['p_value']:.2g}), and the forecast "
            "takes it as steady. State frequency-trend, shorten the window with first-year, or give grounds "
            "why it will not go on.",
        )
    if together["reason"] is None and together["p_value"] <= QUESTIONABLE:
        larger, effect = (
            ("larger", "understates") if together["correlation"] > 0 else ("smaller", "overstates")
        )
        yield (
            "size-and-number",
            f"years with more events have {larger} ones (rank correlation {together['correlation']:+.2f} "
            f"over {together['years']} years, p = {together['p_value']:.2g}). Number and size are computed "
            f"as independent, which {effect} bad years if this is no chance.",
        )
    if family == "poisson" and spread["reason"] is None:
        p_value = min(spread["p_value"], spread["likelihood_ratio_p_value"])
        if p_value <= QUESTIONABLE:
            yield (
                "overdispersion",
                f"the yearly counts vary more than a Poisson law allows (index of dispersion "
                f"{spread['index']:.3g} on {spread['degrees']} degrees of freedom, p = {p_value:.2g}): bad "
                'years are understated. Fit "negative-binomial" beside it.',
            )


def _of_fit(family: str, goodness: Data) -> Iterator[tuple[str, str]]:
    far = [
        words
        for name, words in _DISTANCES.items()
        if goodness[name]["p_value"] is not None and goodness[name]["p_value"] <= QUESTIONABLE
    ]
    if far:
        yield (
            "poor-fit",
            f"the losses are further from the fitted {family} law than {1 - QUESTIONABLE:.0%} of samples "
            f"drawn from it ({', '.join(far)}; {goodness['draws']} draws): the law is in doubt, "
            "see its figures.",
        )
