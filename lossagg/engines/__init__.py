"""The engines: annual loss from counts, sizes and covers, by independent methods that must agree."""
