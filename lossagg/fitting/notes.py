"""What a reader must know before using a fit: notes, each with a code that other rooms can rely on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Self

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.families import Mixture
from lossagg.families.base import SizeLaw
from lossagg.fitting.sample import Sample

FEW = 30  # uncensored losses; common practice, no source
_REPEATED, _FEWEST_REPEATED = 0.2, 5  # share and number of losses of one amount; no source
_LITTLE_SEEN = 0.1  # share of losses above the reporting threshold
_TWO_SIDED = float(special.ndtri(0.975))
_INDEX_OF = {
    "pareto": ("alpha",),
    "lomax": ("alpha",),
    "burr": ("alpha", "gamma"),
    "log-logistic": ("gamma",),
    "log-gamma": ("rate",),
}


class Note(str):
    """A sentence about a fit, with a code such as "infinite-mean" beside it."""

    __slots__ = ("code",)
    code: str

    def __new__(cls, code: str, text: str) -> Self:
        """Make the note."""
        note = super().__new__(cls, text)
        note.code = code
        return note


def severity_notes(
    model: SizeLaw,
    sample: Sample,
    values: Mapping[str, float],
    covariance: FloatArray,
    borrowed: str,
    index_interval: tuple[float, float],
) -> tuple[Note, ...]:
    """Notes on a fit of one law; `borrowed` names a parameter read off the smallest loss, or is empty."""
    notes = tail_notes(model, model.family, values, index_interval)
    if borrowed:
        text = (
            f"The {borrowed} {values[borrowed]:g} was read off the smallest loss; it counts as one "
            "parameter in AIC and BIC, and its error is not in the standard errors."
        )
        notes.append(Note("borrowed-parameter", text))
    if isinstance(model, Mixture):
        notes.append(_parts_note(model, sample))
    if sample.count < FEW:
        text = (
            f"Only {sample.count} uncensored losses: standard errors and intervals rest on "
            "large-sample theory."
        )
        notes.append(Note("few-losses", text))
    notes += _repeated(sample)
    if sample.floor > 0:
        above = float(model.sf(sample.floor * sample.scale))
        if above < _LITTLE_SEEN:
            text = (
                f"The fit puts {above:.2g} of all losses above the reporting threshold: the rest, and "
                "any ground-up count, is extrapolated below what was recorded."
            )
            notes.append(Note("little-seen", text))
    return (*notes, *_loose(values, covariance))


def _parts_note(model: Mixture, sample: Sample) -> Note:
    seen = np.array(
        [
            weight * float(part.sf(sample.floor * sample.scale))
            for weight, part in zip(model.weights, model.parts, strict=True)
        ]
    )
    losses = sample.observations * float(np.min(seen) / np.sum(seen))
    text = (
        f"The smaller part of the mixture stands for about {losses:.0f} of the {sample.observations:g} "
        "losses. A second part gains more likelihood by chance than AIC takes off for its parameters "
        "(McLachlan & Peel 2000, Finite Mixture Models, ch. 6): use a single law unless its figures show "
        "that it does not fit."
    )
    return Note("mixture-parts", text)


def _repeated(sample: Sample) -> list[Note]:
    amount, times = sample.commonest
    if times < _FEWEST_REPEATED or times < _REPEATED * sample.count:
        return []
    text = (
        f"{times:g} of {sample.count:g} uncensored losses are {amount * sample.scale:.10g}: a law of this "
        "family gives no probability to a single amount. Check for limits, deductibles and placeholders."
    )
    return [Note("repeated-amount", text)]


def tail_notes(
    model: SizeLaw, family: str, values: Mapping[str, float], index_interval: tuple[float, float]
) -> list[Note]:
    """Cautions about moments that do not exist and standard errors that are not regular.

    Args:
        model: the fitted law.
        family: family of its tail.
        values: estimates by name.
        index_interval: 95 % interval of the tail index.
    """
    notes = []
    index = model.tail_index
    low, high = index_interval
    span = f"95 % interval {low:.3g} to {high:.3g}"
    if index <= 1:
        text = (
            f"Tail index {index:.3g} ({span}) is at most 1: the fitted mean is infinite. Use no mean, "
            "uncapped premium or tail value at risk of this law; apply a limit."
        )
        notes.append(Note("infinite-mean", text))
    elif low <= 1:
        text = (
            f"Tail index {index:.3g}, but its {span} reaches 1: the losses do not rule out an infinite mean. "
            "Lean on no mean, uncapped premium or tail value at risk of this law without a limit."
        )
        notes.append(Note("infinite-mean-possible", text))
    if 1 < index <= 2:
        text = f"Tail index {index:.3g} ({span}) is at most 2: the fitted variance is infinite."
        notes.append(Note("infinite-variance", text))
    elif index > 2 >= low > 1:
        text = (
            f"Tail index {index:.3g}, but its {span} reaches 2: the losses do not rule out an infinite "
            "variance."
        )
        notes.append(Note("infinite-variance-possible", text))
    shape = values.get("shape") if family == "generalized-pareto" else None
    if shape is not None and shape <= -0.5:
        text = (
            f"Shape {shape:.3g} is at most -0.5: maximum likelihood is not regular there and the "
            "standard errors are not valid (Smith 1985, Biometrika 72)."
        )
        notes.append(Note("irregular-shape", text))
    return notes


def tail_index_interval(
    family: str, values: Mapping[str, float], covariance: FloatArray, prefix: str = ""
) -> tuple[float, float]:
    """95 % interval of the tail index from the standard errors; infinite for laws with all moments.

    Symmetric in the logarithm of the index for pareto, lomax and burr (alpha times gamma, by the delta
    method), in the shape for the generalized Pareto, whose index is 1 / shape.
    """
    names = list(values)
    if family == "generalized-pareto":
        at = names.index(prefix + "shape")
        width = _TWO_SIDED * float(np.sqrt(covariance[at, at]))
        steep, flat = values[prefix + "shape"] + width, values[prefix + "shape"] - width
        return (1 / steep if steep > 0 else np.inf), (1 / flat if flat > 0 else np.inf)
    if family not in _INDEX_OF:
        return np.inf, np.inf
    at_all = [names.index(prefix + name) for name in _INDEX_OF[family]]
    slopes = np.array([1.0 / values[names[at]] for at in at_all])
    index = float(np.prod([values[names[at]] for at in at_all]))
    variance = float(slopes @ covariance[np.ix_(at_all, at_all)] @ slopes)
    factor = float(np.exp(min(_TWO_SIDED * np.sqrt(max(variance, 0.0)), 700.0)))
    return index / factor, index * factor


def _loose(values: Mapping[str, float], covariance: FloatArray) -> Sequence[Note]:
    errors = np.sqrt(np.diag(covariance))
    return [
        Note(
            "loose-parameter",
            f"The standard error of {name} exceeds its estimate: the losses hardly determine it.",
        )
        for name, error in zip(values, errors, strict=True)
        if error > abs(values[name]) and name not in ("mu", "shape")
    ]
