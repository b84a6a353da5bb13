"""What a reader must know before using a severity fit."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families.base import SizeLaw
from lossagg.fitting.sample import Sample

FEW = 30  # uncensored losses; common practice, no source
_LITTLE_SEEN = 0.1  # share of losses above the reporting threshold


def severity_notes(
    model: SizeLaw, sample: Sample, values: Mapping[str, float], covariance: FloatArray, borrowed: str
) -> tuple[str, ...]:
    """Notes on a fit of one law; `borrowed` names a parameter read off the smallest loss, or is empty."""
    shape = values.get("shape") if model.family == "generalized-pareto" else None
    notes = tail_notes(model, shape)
    if borrowed:
        notes.append(
            f"The {borrowed} {values[borrowed]:g} was read off the smallest loss; it counts as one "
            "parameter in AIC and BIC, and its error is not in the standard errors."
        )
    if sample.count < FEW:
        notes.append(
            f"Only {sample.count} uncensored losses: standard errors and intervals rest on "
            "large-sample theory."
        )
    if sample.floor > 0:
        above = float(model.sf(sample.floor * sample.scale))
        if above < _LITTLE_SEEN:
            notes.append(
                f"The fit puts {above:.2g} of all losses above the reporting threshold: the rest, and "
                "any ground-up count, is extrapolated below what was recorded."
            )
    return (*notes, *_loose(values, covariance))


def tail_notes(model: SizeLaw, tail_shape: float | None) -> list[str]:
    """Cautions about moments that do not exist and standard errors that are not regular."""
    notes = []
    if model.tail_index <= 1:
        notes.append(
            f"Tail index {model.tail_index:.3g} is at most 1: the fitted mean is infinite. Use no mean, "
            "uncapped premium or tail value at risk of this law; apply a limit."
        )
    elif model.tail_index <= 2:
        notes.append(f"Tail index {model.tail_index:.3g} is at most 2: the fitted variance is infinite.")
    if tail_shape is not None and tail_shape <= -0.5:
        notes.append(
            f"Shape {tail_shape:.3g} is at most -0.5: maximum likelihood is not regular there and the "
            "standard errors are not valid (Smith 1985, Biometrika 72)."
        )
    return notes


def _loose(values: Mapping[str, float], covariance: FloatArray) -> list[str]:
    errors = np.sqrt(np.diag(covariance))
    return [
        f"The standard error of {name} exceeds its estimate: the losses hardly determine it."
        for name, error in zip(values, errors, strict=True)
        if error > abs(values[name]) and name not in ("mu", "shape")
    ]
