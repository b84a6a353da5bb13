"""Pricing options: what each choice of deductible, limit and annual terms keeps, costs and risks."""

from lossagg.pricing.price import options_of_assessment, price_options

__all__ = ["options_of_assessment", "price_options"]
