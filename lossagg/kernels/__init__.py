"""Compiled loops: float64 arrays and integers in, arrays out. No pandas, no objects."""
