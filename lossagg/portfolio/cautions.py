"""What a reader must know before relying on the figures: always the standing cautions, then what this
portfolio triggers."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from lossagg.portfolio.line import LineModel
from lossagg.records import PreparedLosses

Caution = dict[str, str]

STANDING = {
    "not-an-opinion": "These are estimates from a model. They are not an actuarial opinion, a "
    "certification or a regulatory filing, and not legal, tax or accounting advice;"
    " a qualified person must take responsibility for their use. Local rules and "
    "licensed practice prevail.",
    "model-error": "The laws of frequency and severity are choices. Other laws that fit the same "
    "records can give very different figures beyond the largest losses seen.",
    "parameter-error": "The figures take the fitted parameters as known. Brackets and intervals bound"
    " the error of the calculation only, not that of the parameters: the predictive value at risk "
    "counts that, and each fit states its standard errors.",
    "changed-world": "Past terms, reporting practice, inflation and exposure differ from those to "
    "come; only the trend and exposure stated for each line are adjusted for.",
}
INDEPENDENCE = (
    "The lines are taken as independent of each other. Years in which several go wrong together are "
    "more likely than that; compare the total with the sum of the lines' own figures."
)
INFINITE_MEAN = (
    "the severity has tail index {index:.3g}, at or below 1, so its mean does not exist. No mean, no "
    "TVaR and no uncapped premium is printed where it enters. Limit the loss by a policy limit or a "
    "cover, bound it by a scenario, or review the tail."
)
INFINITE_VARIANCE = (
    "the severity has tail index {index:.3g}, at or below 2, so its variance does not exist: no "
    "standard deviation is printed, and sample means are unreliable."
)
GIVEN = "frequency and severity are given, not fitted: the figures rest on that judgement."


NET = (
    "losses are modelled net of recoveries, as asked for. That recoveries will be as good in a bad year is "
    "an assumption, and a cover that acts on gross losses is misjudged; good practice fits gross losses "
    "(Delegated Regulation (EU) 2018/959, article 29(b))."
)
OPEN = {
    "as-recorded": "taken at their recorded amounts",
    "develop": "taken at their recorded amounts times a factor by age, all of one age alike",
    "censor": "taken as at least their recorded amounts, as if staying open had nothing to do with size",
}
AMOUNTS_UNDEVELOPED = (
    "the amounts of the years develop further, as the history by year shows, but the size of a loss is "
    "fitted to amounts as recorded: have open claims developed or censored."
)


def cautions(
    lines: Sequence[LineModel], levels: Sequence[float], *, independent: bool = True
) -> list[Caution]:
    """The standing cautions, then those the lines trigger.

    Args:
        lines: the lines of the portfolio, modelled.
        levels: every level at which a figure is printed.
        independent: whether no dependence is stated between lines.
    """
    found = [_caution(code, message) for code, message in STANDING.items()]
    if len(lines) > 1 and independent:
        found.append(_caution("independence", INDEPENDENCE))
    for line in lines:
        found += [
            _caution(code, f"Line {line.name!r}: {message}") for code, message in _of_line(line, levels)
        ]
    return found


def _caution(code: str, message: str) -> Caution:
    return {"code": code, "message": message}


def _of_line(line: LineModel, levels: Sequence[float]) -> Iterator[tuple[str, str]]:
    for note in line.fit_notes:
        yield note.code, note
    if line.prepared is not None and not line.own_data:
        yield "no-own-data", _without_own_data(line, line.prepared)
    if line.severities is None:
        index = line.severity.tail_index
        if line.severity.mean() == float("inf"):
            yield "infinite-mean", INFINITE_MEAN.format(index=index)
        elif line.severity.variance() == float("inf"):
            yield "infinite-variance", INFINITE_VARIANCE.format(index=index)
    if line.prepared is None:
        yield "given-parameters", GIVEN
    else:
        yield from _of_records(line.prepared, levels)


def _without_own_data(line: LineModel, prepared: PreparedLosses) -> str:
    """What the figures of a line rest on that had no loss."""
    years, stated = float(prepared.years.fraction.sum()), line.sources
    if line.bound is not None:
        rate = f"its rate of events is {line.bound.method}, not an estimate"
    elif line.rate is not None:
        rate = f"its rate of events, {line.rate.rate:.5g} per unit of exposure, rests on the stated prior"
    elif line.frequencies is not None:
        fit = line.frequencies.chosen
        rate = (
            f"its rate of events is {fit.model.mean():.5g} per unit of exposure, the mean of its posterior "
            f"law under Jeffreys' prior; the one-sided 95 % upper bound is {fit.upper_rate():.5g}"
        )
    else:
        rate = f"its frequency is given (source: {stated['frequency'].rstrip('.')})"
    return (
        f"no own data. There was no loss in {years:.4g} years; {rate}. Its severity is given (source: "
        f"{stated['severity'].rstrip('.')}). Nothing observed supports the size of its figures."
    )


def _of_records(prepared: PreparedLosses, levels: Sequence[float]) -> Iterator[tuple[str, str]]:
    years = float(prepared.years.fraction.sum())
    top = max(levels)
    if len(prepared) and 1.0 / (1.0 - top) > years * (1.0 + 1e-9):
        yield (
            "extrapolation",
            f"{years:.4g} years of records support levels up to {max(1 - 1 / years, 0):.3g}; the "
            f"figures at {top:.6g} extrapolate {1.0 / (1.0 - top) / years:.0f} times beyond the data.",
        )
    yield from _of_preparing(prepared)


def _of_preparing(prepared: PreparedLosses) -> Iterator[tuple[str, str]]:
    """What was done to the records on request, and what was left undone."""
    if prepared.net:
        yield "net-of-recoveries", NET
    still_open = int(prepared.years.open.sum())
    if still_open:
        undeveloped = "; neither counts nor amounts are developed to ultimate"
        after = "" if prepared.developed else undeveloped
        yield "open-claims", f"{still_open} claims are open and are {OPEN[prepared.open_claims]}{after}."
    if prepared.developed is None:
        return
    factors, years = prepared.developed.factors, prepared.years
    if (factors.count != 1.0).any():
        yield (
            "development",
            f"{years.losses.sum()} events are reported and {years.ultimate_losses.sum():,.1f} expected at "
            f"ultimate, by factors {factors.source}; the error of those factors is in no interval printed.",
        )
    if (factors.amount != 1.0).any() and prepared.open_claims == "as-recorded":
        yield "amounts-undeveloped", AMOUNTS_UNDEVELOPED
