"""Cosine and sine of many angles at once, free of branches so that the compiler can vectorise the loop.

Angles are reduced to a quarter turn with pi / 2 in two parts (Cody and Waite 1980, Software Manual for the
Elementary Functions, ch. 8), then the polynomials of the freely distributable libm (Sun Microsystems 1993,
k_cos.c and k_sin.c). The head of pi / 2 has 33 bits, so its multiples are exact up to 2**20 quarter turns:
beyond `MOST_ANGLE` the caller must take another way.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.kernels.compile import compiled

MOST_ANGLE = 1e5


@compiled
def cosines_and_sines(angles: FloatArray, scale: FloatArray, pairs: FloatArray) -> None:
    """Fill scale * cos(angle) and scale * sin(angle), in turns.

    Args:
        angles: shape (n,), within `MOST_ANGLE` of zero.
        scale: shape (n,).
        pairs: filled, shape (2 n,).
    """
    for k in range(angles.shape[0]):
        turn = np.floor(angles[k] * 0.6366197723675814 + 0.5)
        x = (angles[k] - turn * 1.57079632673412561417) - turn * 6.07710050650619224932e-11
        z = x * x
        s = 2.75573137070700676789e-06 + z * (-2.50507602534068634195e-08 + z * 1.58969099521155010221e-10)
        s = 8.33333333332248946124e-03 + z * (-1.98412698298579493134e-04 + z * s)
        s = x + x * z * (-1.66666666666666324348e-01 + z * s)
        c = -2.75573143513906633035e-07 + z * (2.08757232129817482790e-09 - z * 1.13596475577881948265e-11)
        c = -1.38888888888741095749e-03 + z * (2.48015872894767294178e-05 + z * c)
        c = 1.0 - 0.5 * z + z * z * (4.16666666666666019037e-02 + z * c)
        quarter = turn - 4.0 * np.floor(0.25 * turn)
        odd = quarter == 1.0 or quarter == 3.0
        pairs[2 * k] = scale[k] * (s if odd else c) * (-1.0 if quarter == 1.0 or quarter == 2.0 else 1.0)
        pairs[2 * k + 1] = scale[k] * (c if odd else s) * (-1.0 if quarter >= 2.0 else 1.0)
