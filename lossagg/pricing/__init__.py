"""Pricing options: what each choice of deductible, limit and annual terms keeps, costs and risks."""
