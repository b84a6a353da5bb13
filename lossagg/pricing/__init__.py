"""Pricing options: what each choice of deductible, limit and annual terms keeps, costs and risks."""

from lossagg.pricing.price import price_options

__all__ = ["price_options"]
