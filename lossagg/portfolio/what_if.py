"""What if the tail is wrong, and what do single losses do? One line's value at risk, computed again exactly.

Sensitivity: the chosen law keeps its body, and above a threshold its tail gives way to the generalized Pareto
law fitted to the losses above; the share above is that of the chosen law at the largest reporting threshold,
times the share of the losses recorded there that exceed the threshold. It begins where each rule would have
it begin, and at two neighbouring thresholds on either side of the first, which shows how much hangs on it.

Influence: severity and frequency of the line are fitted again, the same families, without each of the largest
losses in turn, with one more of median size, and with one more as large as is exceeded once in twice as many
losses (the quantile at 1 - 1 / (2 n) of the fitted law above the threshold), and the line
is computed again. No approximation is taken, so leaving one out here is leaving it out.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.engines import Fourier
from lossagg.engines.resources import OutOfReachError
from lossagg.errors import EngineError, FitError
from lossagg.families import SizeTable, Spliced
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.fitting import FrequencyFit, SeverityFit, fit_frequency, fit_severity, fit_spliced
from lossagg.fitting.empirical import EMPIRICAL
from lossagg.fitting.solution import TiedSolution
from lossagg.fitting.tail import Large, tail_fit
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.line import LineModel, survival_by_year
from lossagg.portfolio.prior import weighted_rate
from lossagg.records import PreparedLosses

STEPS = 2
_ENGINE = Fourier(accuracy=0.01)
LARGEST = 5


def value_at_risk(frequency: CountLaw, severity: SizeLaw, level: float) -> float:
    """Value at risk of a line without covers, by the Fourier engine on a coarse lattice.

    A tenth of the points make the guaranteed bracket ten times as wide, and the value no worse than one part
    in a million: it is interpolated far more finely than it is bounded.

    Raises:
        EngineError: a line beyond its reach.
    """
    try:
        loss = _ENGINE.annual_loss(frequency, severity)
    except OutOfReachError:
        loss = Fourier().annual_loss(frequency, severity)
    return float(loss.value_at_risk(level))


def sensitivity(model: LineModel, tail: Data, level: float) -> list[Data]:
    """The line's value at risk as fitted and with its tail begun at neighbouring thresholds.

    Args:
        model: the line, its severity fitted.
        tail: its entry of `tail_evidence`.
        level: of the value at risk.
    """
    prepared = model.prepared
    assert prepared is not None
    base = value_at_risk(model.frequency, model.severity, level)
    rows = [_row({"basis": "as fitted", "threshold": None, "shape": None}, base, base)]
    thresholds = [point["threshold"] for point in tail["points"]]
    start = _start(model, tail, thresholds)
    if start is None:
        return rows
    large = Large.of(prepared.amount, prepared.threshold, prepared.censored)
    for rule in tail["rules"]:
        if rule["threshold"] is not None and rule["threshold"] != thresholds[start]:
            rows.append(_at(model, large, rule["threshold"], rule["rule"], level, base))
    for step in range(-STEPS, STEPS + 1):
        place = start + step
        if 0 <= place < len(thresholds):
            basis = "from here" if step == 0 else f"{step:+d} step{'s' if abs(step) > 1 else ''}"
            rows.append(_at(model, large, thresholds[place], basis, level, base))
    return rows


def _start(model: LineModel, tail: Data, thresholds: list[float]) -> int | None:
    """Place of the threshold the steps are counted from: that of the splice, else that of the first rule
    that chose one."""
    wanted = [rule["threshold"] for rule in tail["rules"] if rule["threshold"] is not None]
    if isinstance(model.severity, Spliced):
        wanted.insert(0, model.severity.threshold)
    if not wanted or not thresholds:
        return None
    return int(np.argmin(np.abs(np.log(np.asarray(thresholds) / wanted[0]))))


def _at(model: LineModel, large: Large, threshold: float, basis: str, level: float, base: float) -> Data:
    entry: Data = {"basis": basis, "threshold": threshold, "shape": None}
    amounts, marks = large.above(threshold)
    try:
        tail = tail_fit(amounts, marks, threshold)
        share = float(model.severity.sf(np.nextafter(large.floor, 0.0))) * len(amounts) / len(large.amounts)
        law = Spliced(body=model.severity, tail=tail.model, threshold=threshold, tail_probability=share)
        return _row(
            {**entry, "shape": tail.parameters["shape"]}, value_at_risk(model.frequency, law, level), base
        )
    except (FitError, EngineError) as refusal:
        return _row(entry, None, base, refusal.what)


def influence(model: LineModel, level: float, largest: int = LARGEST) -> list[Data]:
    """The line's value at risk without each of its largest losses, and with one more.

    Args:
        model: the line, both laws fitted.
        level: of the value at risk.
        largest: how many losses are left out in turn.
    """
    prepared, tried = model.prepared, model.severities
    assert prepared is not None
    assert tried is not None
    base = value_at_risk(model.frequency, model.severity, level)
    rows = [_row({"change": "as recorded", "amount": None}, base, base)]
    order = np.argsort(-prepared.amount, kind="stable")[:largest]
    for rank, place in enumerate(order, start=1):
        kept = np.ones(len(prepared), dtype=np.bool_)
        kept[place] = False
        year = int(prepared.year[place] - prepared.years.year[0])
        change = {"change": f"without the {_ordinal(rank)}", "amount": float(prepared.amount[place])}
        rows.append(_again(model, change, _Losses.of(prepared, kept), (year, -1), level, base))
    every = _Losses.of(prepared, np.ones(len(prepared), dtype=np.bool_))
    large = float(model.severity.isf(_seen(model, prepared) / (2 * len(prepared))))
    sizes = {"of median size": float(np.median(prepared.amount)), "of a size yet to come": large}
    for words, more in sizes.items():
        change = {"change": f"with one more {words}", "amount": more}
        added = every.with_one_more(more)
        rows.append(_again(model, change, added, (len(prepared.years) - 1, 1), level, base))
    return rows


def _seen(model: LineModel, prepared: PreparedLosses) -> float:
    """Share of all losses that exceed the smallest reporting threshold."""
    return float(model.severity.sf(np.nextafter(prepared.threshold.min(), 0.0)))


class _Losses:
    """Amounts, thresholds and marks of a line, one loss more or less."""

    def __init__(self, amounts: FloatArray, thresholds: FloatArray, censored: BoolArray) -> None:
        self.amounts, self.thresholds, self.censored = amounts, thresholds, censored

    @classmethod
    def of(cls, prepared: PreparedLosses, kept: BoolArray) -> _Losses:
        return cls(prepared.amount[kept], prepared.threshold[kept], prepared.censored[kept])

    def with_one_more(self, amount: float) -> _Losses:
        return _Losses(
            np.append(self.amounts, amount),
            np.append(self.thresholds, self.thresholds[-1]),
            np.append(self.censored, False),
        )


def _again(
    model: LineModel, change: Data, losses: _Losses, counted: tuple[int, int], level: float, base: float
) -> Data:
    try:
        severity = refitted_severity(model, losses.amounts, losses.thresholds, losses.censored)
        frequency = refitted_frequency(model, severity.model, counted)
        return _row(change, value_at_risk(frequency, severity.model, level), base)
    except (FitError, EngineError) as refusal:
        return _row(change, None, base, refusal.what)


def refitted_severity(
    model: LineModel, amounts: FloatArray, thresholds: FloatArray, censored: BoolArray
) -> SeverityFit:
    """The family of the chosen severity, fitted to other losses from the start.

    Raises:
        FitError: these losses support no law of the family.
    """
    assert model.severities is not None
    chosen = model.severities.chosen
    if isinstance(chosen.model, Spliced):
        tail, body = chosen.model.tail.family, chosen.model.body.family
        body = EMPIRICAL if body == SizeTable.family else body
        tied = isinstance(chosen.solution, TiedSolution)
        threshold = chosen.model.threshold
        return fit_spliced(amounts, body, threshold, thresholds, censored, tail, continuous=tied)
    held = {name: chosen.parameters[name] for name in chosen.fixed}
    return fit_severity(amounts, chosen.family, thresholds, censored, fixed=held)


def refitted_frequency(model: LineModel, severity: SizeLaw, counted: tuple[int, int]) -> CountLaw:
    """The frequency of the forecast period with one year's count changed, for another severity.

    The Poisson law is the edge of the other families: counts that no longer vary more end there.

    Args:
        model: the line.
        severity: the severity beside which the counts are seen.
        counted: place of the year, and by how much its count changes.

    Raises:
        FitError: these counts support no law.
    """
    if model.frequencies is None or model.prepared is None:
        return model.frequency
    years, (place, change) = model.prepared.years, counted
    counts = np.array(years.losses, dtype=np.float64)
    counts[place] += change
    seen = years.forecast_exposure * survival_by_year(model.prepared, severity)
    try:
        fit: FrequencyFit = fit_frequency(counts, model.frequencies.chosen.family, seen)
    except FitError:
        fit = fit_frequency(counts, "poisson", seen)
    if model.rate is not None:
        return weighted_rate(model.rate.prior, fit, model.name).law(fit, model.forecast_exposure)
    return fit.model_for(model.forecast_exposure)


def _row(entry: Data, value: float | None, base: float, reason: str | None = None) -> Data:
    relative = None if value is None or base <= 0 or value is base else value / base - 1
    return {**entry, "value_at_risk": value, "relative": relative, "reason": reason}


def _ordinal(rank: int) -> str:
    return ("largest", "second largest", "third largest", "fourth largest", "fifth largest")[rank - 1]
