"""The complex exponential of many numbers: several times as fast as one by one, to a few roundings.

A Fourier engine spends most of its time in generating functions of whole transforms, and these are
exponentials. Short arrays take numpy's, which needs nothing compiled.
"""

from __future__ import annotations

from typing import Any

import numpy as np

MANY = 4096


def exponential(logarithm: Any) -> Any:
    """exp(z) of real or complex numbers, shape (n,)."""
    if np.iscomplexobj(logarithm) and len(logarithm) >= MANY:
        from lossagg.kernels.circle import MOST_ANGLE, cosines_and_sines

        angle = np.ascontiguousarray(logarithm.imag)
        if -MOST_ANGLE <= angle.min() and angle.max() <= MOST_ANGLE:
            parts = np.empty(2 * len(angle))
            cosines_and_sines(angle, np.exp(logarithm.real), parts)
            return parts.view(np.complex128)
    return np.exp(logarithm)
