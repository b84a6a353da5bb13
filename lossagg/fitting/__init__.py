"""Fits of counts and sizes to records, with their uncertainty, their evidence and their refusals."""

from lossagg.fitting.compare import Candidates, compare_frequencies, compare_severities
from lossagg.fitting.diagnostics import (
    CountPoints,
    QuantilePoints,
    SurvivalPoints,
    count_points,
    quantile_points,
    survival_points,
)
from lossagg.fitting.frequency import fit_frequency
from lossagg.fitting.goodness import Goodness, goodness
from lossagg.fitting.goodness_test import GoodnessTest, goodness_test
from lossagg.fitting.notes import Note
from lossagg.fitting.overdispersion import Overdispersion, overdispersion
from lossagg.fitting.results import Fit, FrequencyFit, SeverityFit
from lossagg.fitting.severity import fit_severity
from lossagg.fitting.spliced import fit_spliced
from lossagg.fitting.tail import TailPoint, TailQuantile, tail_points, tail_quantile
from lossagg.fitting.threshold import ThresholdChoice, threshold_choices

__all__ = [
    "Candidates",
    "CountPoints",
    "Fit",
    "FrequencyFit",
    "Goodness",
    "GoodnessTest",
    "Note",
    "Overdispersion",
    "QuantilePoints",
    "SeverityFit",
    "SurvivalPoints",
    "TailPoint",
    "TailQuantile",
    "ThresholdChoice",
    "compare_frequencies",
    "compare_severities",
    "count_points",
    "fit_frequency",
    "fit_severity",
    "fit_spliced",
    "goodness",
    "goodness_test",
    "overdispersion",
    "quantile_points",
    "survival_points",
    "tail_points",
    "tail_quantile",
    "threshold_choices",
]
