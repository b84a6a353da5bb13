"""Portfolios: a folder with a portfolio file and records in, an assessment out."""

from lossagg.portfolio.assessment import Assessment
from lossagg.portfolio.portfolio import Portfolio, read_portfolio

__all__ = ["Assessment", "Portfolio", "read_portfolio"]
