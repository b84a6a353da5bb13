"""Portfolios: a folder with a portfolio file and records in, an assessment out.

The public names are loaded when first used: checking a portfolio needs none of the engines behind them.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from lossagg.portfolio.assessment import Assessment
    from lossagg.portfolio.portfolio import Portfolio, read_portfolio

__all__ = ["Assessment", "Portfolio", "read_portfolio"]

_HOME = {"Assessment": "assessment", "Portfolio": "portfolio", "read_portfolio": "portfolio"}


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(importlib.import_module(f"lossagg.portfolio.{_HOME[name]}"), name)
    raise AttributeError(f"module 'lossagg.portfolio' has no attribute {name!r}")
