"""The value at risk with the uncertainty of the parameters counted as risk: the predictive figure.

The figure as fitted takes estimates for the truth; with few losses a year exceeds it more often than its
level says (Gerrard & Tsanakas 2011, Failure probability under parameter uncertainty, Risk Analysis 31). The
predictive figure is the quantile of the annual loss mixed over the parameters the records allow: every set
drawn gives a distribution of the year, and the average of their exceedance probabilities is inverted. The
draws are those that `parameter_draws` makes, spread evenly.

Lattices of a few thousand points do for this, because only the ratio of the mixed quantile to that of the
fitted laws on the same lattice is taken, and applied to the figure of the engines. Annual terms of a cover
are functions of the sum that do not decrease, so they are applied to its quantile.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.engines.book import GROSS, NET, Book, Subject
from lossagg.engines.compound import CompoundSum
from lossagg.engines.fourier import survival
from lossagg.engines.pair import pair_plan
from lossagg.engines.result import AnnualLoss, TransformedAnnualLoss
from lossagg.engines.tied import annual_sum
from lossagg.errors import DoesNotExistError, EngineError
from lossagg.portfolio.assessment import Data, number
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.parameter_draws import drawn_lines, uncertain

DRAWS = 64
_POINTS, _REACH, _LONGER, _TRIES = 2**11, 6.0, 6.0, 3
_WIDTH = float(special.ndtri(0.975))
GIVEN = "no parameter was estimated from losses, so nothing tells how uncertain they are"


def predictive_data(
    book: Book,
    models: Sequence[LineModel],
    losses: Mapping[Subject, AnnualLoss],
    levels: Sequence[float],
    *,
    simulated: Mapping[Subject, AnnualLoss] | None = None,
    seed: int,
    withheld: str = "",
) -> Data:
    """`predictive` of the assessment: the value at risk as fitted and over the parameter draws, by level.

    Args:
        book: lines and covers as fitted.
        models: the lines with their fits.
        losses: gross and net as reported; net is taken, and gross where net cannot be followed.
        levels: ascending.
        simulated: gross and net as simulated, whose intervals stand beside those of the parameters.
        seed: of the draws.
        withheld: why every figure is; empty where none is.
    """
    entry: Data = {"subject": "net" if book.covers else "gross", "draws": 0, "levels": [], "reason": None}
    if withheld or not uncertain(models):
        return {**entry, "reason": withheld or GIVEN}
    books = [book, *_drawn(book, models, seed)]
    for subject in (NET, GROSS) if book.covers else (GROSS,):
        loss = losses[subject]
        try:
            sums = [_annual_sum(one, subject) for one in books]
            step, tails = _tails(sums, _base(loss).value_at_risk(max(levels)), 1.0 - max(levels))
        except EngineError as refusal:
            entry["reason"] = entry["reason"] or f"{subject.kind}: {refusal.what}"
            continue
        beside = (simulated or {}).get(subject)
        rows = [_row(tails, step, level, loss) | _by_simulation(beside, level) for level in levels]
        return {**entry, "subject": subject.kind, "draws": DRAWS, "levels": rows}
    return entry


def _drawn(book: Book, models: Sequence[LineModel], seed: int) -> Iterator[Book]:
    for lines in drawn_lines(models, DRAWS, seed, stratified=True):
        yield replace(book, lines=lines)


def _annual_sum(book: Book, subject: Subject) -> CompoundSum:
    pair = pair_plan(book, subject)
    if pair is not None and pair.single is None:
        raise EngineError(
            "the covers take two annual sums, which are not followed under drawn parameters",
            remedy="Use the range of the parameters that `lossagg fit` gives for each line.",
        )
    plan = book.plan(subject) if pair is None or pair.single is None else pair.single
    return annual_sum(book, plan.events)


def _tails(sums: Sequence[CompoundSum], start: float, least: float) -> tuple[float, FloatArray]:
    """Lattice step and P(S > kh) of every sum, shape (sums, points), until the mixed one is below `least`.

    Raises:
        EngineError: no lattice tried is long enough.
    """
    length = _REACH * max(start, 1.0)
    for _ in range(_TRIES):
        step = length / _POINTS
        tails = np.array([np.clip(survival(one, step, _POINTS), 0.0, 1.0) for one in sums])
        tails = np.minimum.accumulate(tails, axis=1)
        if np.mean(tails[1:, -1]) < 0.5 * least:
            return step, tails
        length *= _LONGER
    raise EngineError(
        "under drawn parameters the annual loss has no end that a lattice reaches",
        value=f"{length / _LONGER:.6g}",
        remedy="The records hardly determine the tail: apply a limit, or choose a law with fewer parameters.",
    )


def _row(tails: FloatArray, step: float, level: float, loss: AnnualLoss) -> Data:
    """One level: the figure as fitted, the range of the drawn laws' own figures, the predictive one with its
    interval, and how often a year exceeds the first when the parameters are uncertain."""
    fitted, drawn = tails[0], tails[1:]
    mixed = drawn.mean(axis=0)
    allowed = 1.0 - level
    own, at = _quantile(fitted, allowed), _quantile(mixed, allowed)
    base = _base(loss).value_at_risk(level)

    def figure(place: float) -> float:
        amount = base * place / own if own > 0 else step * place
        if not isinstance(loss, TransformedAnnualLoss):
            return amount
        return float(loss.payment(np.array([amount]))[0]) if np.isfinite(amount) else loss.payment.most

    error = _WIDTH * float(np.std(_between(drawn, at), ddof=1)) / np.sqrt(len(drawn))
    ends = [_quantile(mixed, allowed + error), _quantile(mixed, max(allowed - error, mixed[-1]))]
    places = np.array([_quantile(one, allowed) for one in drawn])
    # An order statistic at either end: between two of them one may be infinite.
    span = (
        float(np.quantile(places, 0.025, method="lower")),
        float(np.quantile(places, 0.975, method="higher")),
    )
    return {
        "level": level,
        "fitted": number(loss.value_at_risk(level)),
        "predictive": number(figure(at)),
        "low": number(figure(ends[0])),
        "high": number(figure(ends[1])),
        "parameters": [number(figure(end)) for end in span],
        "exceedance_of_fitted": float(_between(drawn, own).mean()),
    }


def _by_simulation(loss: AnnualLoss | None, level: float) -> Data:
    """The 95 % interval of the simulation, which more simulated years narrow; None where there is none."""
    if loss is None:
        return {"simulation": None}
    try:
        low, high = loss.accuracy("value_at_risk", level)
    except DoesNotExistError:
        return {"simulation": None}
    return {"simulation": [number(low), number(high)]}


def _base(loss: AnnualLoss) -> AnnualLoss:
    return loss.base if isinstance(loss, TransformedAnnualLoss) else loss


def _quantile(tail: FloatArray, allowed: float) -> float:
    """Where a tail falls to `allowed`, in steps, straight in its logarithm between lattice points; infinite
    where it does not on the lattice."""
    if tail[-1] > allowed:
        return np.inf
    place = int(np.argmax(tail <= allowed))
    if place == 0:
        return 0.0
    above, below = np.log(np.maximum(tail[[place - 1, place]], 1e-300))
    return place - 1 + float((above - np.log(allowed)) / (above - below)) if above > below else float(place)


def _between(tails: FloatArray, place: float) -> FloatArray:
    """Every tail at a place between two lattice points."""
    low = min(int(place), tails.shape[1] - 2)
    part = place - low
    logs = np.log(np.maximum(tails[:, low : low + 2], 1e-300))
    return np.asarray(np.exp((1.0 - part) * logs[:, 0] + part * logs[:, 1]))
