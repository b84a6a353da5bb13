"""Fits of counts and sizes to records, with their uncertainty, their evidence and their refusals."""

from lossagg.fitting.compare import Candidates, compare_frequencies, compare_severities
from lossagg.fitting.count_tests import (
    CountGoodness,
    FrequencyTrend,
    SizeCountTest,
    count_goodness,
    frequency_trend,
    size_count_test,
)
from lossagg.fitting.credibility import (
    Credibility,
    PosteriorRate,
    buhlmann_straub,
    full_credibility,
    limited_fluctuation,
    posterior_rate,
)
from lossagg.fitting.cross_reference import CrossReference, cross_reference
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
from lossagg.fitting.grouped import GroupedFit, fit_grouped
from lossagg.fitting.notes import Note
from lossagg.fitting.overdispersion import Overdispersion, overdispersion
from lossagg.fitting.parameter_bootstrap import (
    ParameterBootstrap,
    bootstrap_frequency,
    bootstrap_severity,
)
from lossagg.fitting.predictive import PredictiveQuantile, predictive_quantile
from lossagg.fitting.regression import PoissonRegression, poisson_regression
from lossagg.fitting.results import Fit, FrequencyFit, SeverityFit
from lossagg.fitting.severity import fit_severity
from lossagg.fitting.spliced import fit_spliced
from lossagg.fitting.tail import TailPoint, TailQuantile, tail_points, tail_quantile
from lossagg.fitting.threshold import ThresholdChoice, threshold_choices

__all__ = [
    "Candidates",
    "CountGoodness",
    "CountPoints",
    "Credibility",
    "CrossReference",
    "Fit",
    "FrequencyFit",
    "FrequencyTrend",
    "Goodness",
    "GoodnessTest",
    "GroupedFit",
    "Note",
    "Overdispersion",
    "ParameterBootstrap",
    "PoissonRegression",
    "PosteriorRate",
    "PredictiveQuantile",
    "QuantilePoints",
    "SeverityFit",
    "SizeCountTest",
    "SurvivalPoints",
    "TailPoint",
    "TailQuantile",
    "ThresholdChoice",
    "bootstrap_frequency",
    "bootstrap_severity",
    "buhlmann_straub",
    "compare_frequencies",
    "compare_severities",
    "count_goodness",
    "count_points",
    "cross_reference",
    "fit_frequency",
    "fit_grouped",
    "fit_severity",
    "fit_spliced",
    "frequency_trend",
    "full_credibility",
    "goodness",
    "goodness_test",
    "limited_fluctuation",
    "overdispersion",
    "poisson_regression",
    "posterior_rate",
    "predictive_quantile",
    "quantile_points",
    "size_count_test",
    "survival_points",
    "tail_points",
    "tail_quantile",
    "threshold_choices",
]
