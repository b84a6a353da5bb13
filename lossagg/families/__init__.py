"""The laws: counts per year and sizes of one loss. One file per law."""

from lossagg.families.base import CountLaw, Law, SizeLaw
from lossagg.families.binomial import Binomial
from lossagg.families.burr import Burr
from lossagg.families.count_table import CountTable
from lossagg.families.exponential import Exponential
from lossagg.families.gamma import Gamma
from lossagg.families.generalized_pareto import GeneralizedPareto
from lossagg.families.inverse_gaussian import InverseGaussian
from lossagg.families.log_gamma import LogGamma
from lossagg.families.log_logistic import LogLogistic
from lossagg.families.lognormal import Lognormal
from lossagg.families.lomax import Lomax
from lossagg.families.mixture import Mixture
from lossagg.families.negative_binomial import NegativeBinomial
from lossagg.families.pareto import Pareto
from lossagg.families.poisson import Poisson
from lossagg.families.registry import (
    COUNT_FAMILIES,
    SIZE_FAMILIES,
    make_count_law,
    make_size_law,
    with_parameters,
)
from lossagg.families.size_table import SizeTable
from lossagg.families.spliced import Spliced
from lossagg.families.weibull import Weibull
from lossagg.families.zero_modified import ZeroInflated, ZeroModified

__all__ = [
    "COUNT_FAMILIES",
    "SIZE_FAMILIES",
    "Binomial",
    "Burr",
    "CountLaw",
    "CountTable",
    "Exponential",
    "Gamma",
    "GeneralizedPareto",
    "InverseGaussian",
    "Law",
    "LogGamma",
    "LogLogistic",
    "Lognormal",
    "Lomax",
    "Mixture",
    "NegativeBinomial",
    "Pareto",
    "Poisson",
    "SizeLaw",
    "SizeTable",
    "Spliced",
    "Weibull",
    "ZeroInflated",
    "ZeroModified",
    "make_count_law",
    "make_size_law",
    "with_parameters",
]
