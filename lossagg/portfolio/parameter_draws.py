"""What the records leave open: laws drawn from the uncertainty of the fits.

Severity first: the estimates are taken as jointly normal with the fit's covariance, on the scale of each
parameter's range (its logarithm where positive, its log-odds for a probability), which is large-sample
theory (Klugman, Panjer & Willmot, Loss Models, ch. on variance of maximum likelihood). Then frequency: its
own draw, moved by what the drawn severity says of the part of losses above the reporting threshold, since
only their number was seen. The trap: drawn independently, a light severity would keep the many small
losses that only a heavy one needs, and the range would be far too wide.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from lossagg.engines.book import Line
from lossagg.engines.streams import line_key
from lossagg.errors import LossaggError
from lossagg.families import make_count_law, make_size_law, with_parameters
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.fitting import Fit
from lossagg.fitting.draws import Normals, Stratified, moved
from lossagg.portfolio.line import LineModel

_STREAM = 0x70726963


def drawn_lines(
    models: Sequence[LineModel], draws: int, seed: int, *, stratified: bool = False
) -> Iterator[tuple[Line, ...]]:
    """The lines under other parameters that the records allow, one tuple per draw.

    Lines whose laws are given stay as they are. A draw that is no law (a probability of 1, say) is
    drawn again, up to a hundred times.

    Args:
        models: the lines with their fits.
        draws: how many.
        seed: seed; every line has its own stream, so other lines change nothing.
        stratified: spread the draws evenly, for averages over all of them.
    """
    streams: list[np.random.Generator] = [
        np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(_STREAM, *line_key(model.name))))
        for model in models
    ]
    if not stratified:
        for _ in range(draws):
            yield tuple(_drawn(model, random) for model, random in zip(models, streams, strict=True))
        return
    spread = [
        Stratified(random, draws, sum(len(fit.parameters) - len(fit.fixed) for fit in _fits(model)))
        for model, random in zip(models, streams, strict=True)
    ]
    for _ in range(draws):
        for own in spread:
            own.next_draw()
        yield tuple(_drawn(model, own) for model, own in zip(models, spread, strict=True))


def uncertain(models: Sequence[LineModel]) -> bool:
    """Whether any law was fitted, so that its parameters are uncertain."""
    return any(model.severities is not None or model.count_estimated for model in models)


def _fits(model: LineModel) -> list[Fit]:
    return [tried.chosen for tried in (model.severities, model.frequencies) if tried is not None]


def _drawn(model: LineModel, random: Normals) -> Line:
    line = model.line
    severity = _severity(model, random)
    frequency = _frequency(model, severity, random)
    return Line(
        name=line.name,
        frequency=frequency,
        severity=severity,
        expense=line.expense,
        sum_insured=line.sum_insured,
    )


def _severity(model: LineModel, random: Normals) -> SizeLaw:
    if model.severities is None:
        return model.severity
    fit = model.severities.chosen
    for _ in range(100):
        try:
            return make_size_law(**with_parameters(fit.model.to_dict(), moved(fit, random)))
        except LossaggError:
            continue
    return model.severity


def _frequency(model: LineModel, severity: SizeLaw, random: Normals) -> CountLaw:
    if model.frequencies is None or model.prepared is None or model.seen is None or model.bound is not None:
        return model.frequency
    fit, years = model.frequencies.chosen, model.prepared.years
    survival = np.asarray(model.severity.sf(years.threshold))
    ratio = np.asarray(severity.sf(years.threshold)) / np.where(survival > 0, survival, 1.0)
    seen = float(np.sum(model.seen * ratio))
    if not seen > 0:
        return model.frequency
    for _ in range(100):
        try:
            law = make_count_law(**with_parameters(fit.model.to_dict(), moved(fit, random)))
            if model.rate is not None:
                own = law.with_exposure(float(np.sum(model.seen)) / seen)
                return model.rate.redrawn(own, model.forecast_exposure)
            return law.with_exposure(model.forecast_exposure * float(np.sum(model.seen)) / seen)
        except LossaggError:
            continue
    return model.frequency
