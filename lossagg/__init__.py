"""lossagg: from loss records to capital, layer costs and a report you can defend.

The names below are the public surface; each is loaded from its room when first used, so that
`import lossagg` and `lossagg --help` stay instant.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING

from lossagg.version import __version__

if TYPE_CHECKING:
    from pathlib import Path

    from lossagg.cover import Cover
    from lossagg.engines import FarTail, Fourier, Panjer, Simulation, allocate, annual_loss
    from lossagg.families import (
        Binomial,
        Burr,
        CountTable,
        Exponential,
        Gamma,
        GeneralizedPareto,
        InverseGaussian,
        LogGamma,
        LogLogistic,
        Lognormal,
        Lomax,
        Mixture,
        NegativeBinomial,
        Pareto,
        Poisson,
        SizeTable,
        Spliced,
        Weibull,
        ZeroInflated,
        ZeroModified,
    )
    from lossagg.fitting import fit_frequency, fit_severity
    from lossagg.portfolio import Portfolio

_ROOMS = {
    "families": (
        "Binomial Burr CountTable Exponential Gamma GeneralizedPareto InverseGaussian LogGamma LogLogistic "
        "Lognormal Lomax Mixture NegativeBinomial Pareto Poisson SizeTable Spliced Weibull ZeroInflated "
        "ZeroModified"
    ),
    "cover": "Cover",
    "fitting": "fit_severity fit_frequency",
    "engines": "allocate annual_loss FarTail Fourier Panjer Simulation",
}
_HOME = {name: room for room, names in _ROOMS.items() for name in names.split()}

__all__ = [
    "Binomial",
    "Burr",
    "CountTable",
    "Cover",
    "Exponential",
    "FarTail",
    "Fourier",
    "Gamma",
    "GeneralizedPareto",
    "InverseGaussian",
    "LogGamma",
    "LogLogistic",
    "Lognormal",
    "Lomax",
    "Mixture",
    "NegativeBinomial",
    "Panjer",
    "Pareto",
    "Poisson",
    "Simulation",
    "SizeTable",
    "Spliced",
    "Weibull",
    "ZeroInflated",
    "ZeroModified",
    "__version__",
    "allocate",
    "annual_loss",
    "fit_frequency",
    "fit_severity",
    "read_portfolio",
]


def read_portfolio(path: str | Path) -> Portfolio:
    """Read and check a portfolio folder, ready to be assessed.

    Args:
        path: the folder that holds `portfolio.toml`, or that file.

    Returns:
        The portfolio; `portfolio.assess(years=..., seed=...)` computes it and
        `assessment.write(folder)` writes the report.

    Raises:
        InputError: a file, key or value that cannot be used, with its place and the remedy.
    """
    from lossagg.portfolio import read_portfolio as read
    from lossagg.pricing import options_of_assessment
    from lossagg.report import write_assessment

    return read(path, writer=write_assessment, pricer=options_of_assessment)


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(importlib.import_module(f"lossagg.{_HOME[name]}"), name)
    raise AttributeError(f"module 'lossagg' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
