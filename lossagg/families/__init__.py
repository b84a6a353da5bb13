"""The laws: counts per year and sizes of one loss. One file per law."""
