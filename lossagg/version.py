"""The version of lossagg, as printed in every report."""

__version__ = "0.2.0"
