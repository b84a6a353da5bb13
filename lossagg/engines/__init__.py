"""The engines: annual loss from counts, sizes and covers, by independent methods that must agree.

The public names are loaded when first used; the compiled kernels with them.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from lossagg.engines.allocation import allocate
    from lossagg.engines.annual import annual_loss
    from lossagg.engines.far_tail import FarTail
    from lossagg.engines.fourier import Fourier
    from lossagg.engines.panjer import Panjer
    from lossagg.engines.simulation import Simulation

__all__ = ["FarTail", "Fourier", "Panjer", "Simulation", "allocate", "annual_loss"]

_HOME = {
    "FarTail": "far_tail",
    "Fourier": "fourier",
    "Panjer": "panjer",
    "Simulation": "simulation",
    "allocate": "allocation",
    "annual_loss": "annual",
}


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(importlib.import_module(f"lossagg.engines.{_HOME[name]}"), name)
    raise AttributeError(f"module 'lossagg.engines' has no attribute {name!r}")
