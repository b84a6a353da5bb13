"""The register of published values: every figure that a source prints and that the laws and fits give back.

One row is one printed figure: where it is printed, what it is, the figure with the digits of the source, and
the call that computes it. A row holds when the computed figure, rounded to the digits printed, is the printed
one. The figures are quoted from memory, none was looked up again; the data sets are those of the sources.
Numbers of our own on a published formula are not listed: they are in the tests named after their sources.
"""

from __future__ import annotations

import importlib.util
import sys
from collections import Counter
from collections.abc import Callable
from decimal import ROUND_HALF_UP, Decimal
from functools import cache
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest

from lossagg import Binomial, Exponential, Lomax, Mixture, ZeroModified
from lossagg.fitting import (
    cross_reference,
    fit_frequency,
    fit_grouped,
    fit_severity,
    full_credibility,
    goodness,
)

LEAST = 60  # rows: the register may grow, and must not shrink unseen
B = np.array(
    [27, 82, 115, 126, 155, 161, 243, 294, 340, 384, 457, 680, 855, 877, 974, 1193, 1340, 1884, 2558, 15743]
)
B_CUT = np.where(B == 15743, 3476, B)
C = ([0, 7500, 17500, 32500, 67500, 125000, 300000, np.inf], [99, 42, 29, 28, 17, 9, 3])
HORSE_KICKS = np.repeat(np.arange(5), [109, 65, 22, 3, 1])
THYRION = np.repeat(np.arange(8), [7840, 1317, 239, 42, 14, 4, 4, 1])
SWISS = np.repeat(np.arange(7), [103704, 14075, 1766, 255, 45, 6, 2])
LOMAX = Lomax(alpha=3, scale=2000)
HIGHER = LOMAX.scaled(1.1)


class Row(NamedTuple):
    """One printed figure."""

    source: str
    what: str
    printed: str
    computed: Callable[[], float]


@cache
def size(family, kind="all"):
    """A fit of Data Set B: complete, above 50, up to 250 or up to 1000."""
    if kind == "250":
        return fit_severity(np.minimum(B, 250), family, censored=B > 250)
    if kind == "1000":
        return fit_severity(np.minimum(B_CUT, 1000), family, censored=B_CUT > 1000)
    if kind == "50":
        return fit_severity(B_CUT[B_CUT >= 50], family, truncation=50)
    return fit_severity(B, family, fixed={"shape": 2.0} if kind == "shape 2" else None)


@cache
def distance(family, kind):
    if kind == "50":
        return goodness(B_CUT[B_CUT >= 50], size(family, kind).model, truncation=50)
    return goodness(np.minimum(B_CUT, 1000), size(family, kind).model, censored=B_CUT > 1000)


@cache
def reciprocal(shape=None):
    """The inverse gamma fit of Data Set B, as the gamma fit of the reciprocals."""
    fit = fit_severity(1 / B, "gamma", fixed=None if shape is None else {"shape": shape})
    return fit.parameters["shape"], 1 / fit.parameters["scale"], fit.log_likelihood - 2 * np.sum(np.log(B))


@cache
def count(data, family):
    return fit_frequency({"thyrion": THYRION, "swiss": SWISS, "kicks": HORSE_KICKS}[data], family)


@cache
def danish():
    script = Path(__file__).parents[2] / "validation" / "danish.py"
    spec = importlib.util.spec_from_file_location("danish_for_the_register", script)
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module.danish_losses()


@cache
def danish_tail(threshold):
    return fit_severity(danish()[danish() > threshold], "generalized-pareto", threshold)


def deductible(law, at):
    """Mean payment per loss, the deductible at `at`."""
    return law.expected_excess(at)


def franchise(law, at):
    return law.expected_excess(at) + at * law.sf(at)


def layer_sd():
    return np.sqrt(LOMAX.layer_second_moment(500, 3000) - LOMAX.layer_mean(500, 3000) ** 2)


def rise(figure, *where):
    return 100 * (figure(HIGHER, *where) / figure(LOMAX, *where) - 1)


def soa(losses, threshold, stopped=None):
    return fit_severity(losses, "exponential", threshold, stopped).parameters["mean"]


def elimination():
    before = Exponential(mean=1).loss_elimination_ratio(0.25)
    return 100 * (Exponential(mean=1.2).loss_elimination_ratio(0.5) / before - 1)


NOTE = "Klugman, Estimation, Evaluation, and Selection of Actuarial Models (SOA/CAS study note), Data Set B"
BOOK = "Klugman, Panjer & Willmot, Loss Models"
SOA = "Society of Actuaries, Exam C / STAM sample questions"
MIXED = Mixture(weights=[0.8, 0.2], parts=[Exponential(mean=50), Exponential(mean=1000)])

REGISTER = (
    Row(NOTE, "exponential, mean", "1424.4", lambda: size("exponential").parameters["mean"]),
    Row(NOTE, "exponential, log-likelihood", "-165.23", lambda: size("exponential").log_likelihood),
    Row(NOTE, "gamma, shape", "0.55616", lambda: size("gamma").parameters["shape"]),
    Row(NOTE, "gamma, scale", "2561.1", lambda: size("gamma").parameters["scale"]),
    Row(NOTE, "gamma, log-likelihood", "-162.29", lambda: size("gamma").log_likelihood),
    Row(NOTE, "gamma of shape 2, scale", "712.2", lambda: size("gamma", "shape 2").parameters["scale"]),
    Row(NOTE, "gamma of shape 2, log-likelihood", "-179.98", lambda: size("gamma", "shape 2").log_likelihood),
    Row(NOTE, "inverse exponential, scale", "197.72", lambda: reciprocal(1.0)[1]),
    Row(NOTE, "inverse exponential, log-likelihood", "-159.78", lambda: reciprocal(1.0)[2]),
    Row(NOTE, "inverse gamma of shape 2, scale", "395.44", lambda: reciprocal(2.0)[1]),
    Row(NOTE, "inverse gamma of shape 2, log-likelihood", "-169.07", lambda: reciprocal(2.0)[2]),
    Row(NOTE, "inverse gamma, shape", "0.70888", lambda: reciprocal()[0]),
    Row(NOTE, "inverse gamma, scale", "140.16", lambda: reciprocal()[1]),
    Row(NOTE, "inverse gamma, log-likelihood", "-158.88", lambda: reciprocal()[2]),
    Row(NOTE, "above 50, exponential, mean", "802.32", lambda: size("exponential", "50").parameters["mean"]),
    Row(
        NOTE,
        "above 50, exponential, Kolmogorov-Smirnov",
        "0.1340",
        lambda: distance("exponential", "50").kolmogorov_smirnov,
    ),
    Row(
        NOTE,
        "above 50, Weibull, Kolmogorov-Smirnov",
        "0.0887",
        lambda: distance("weibull", "50").kolmogorov_smirnov,
    ),
    Row(NOTE, "up to 1000, exponential, mean", "718", lambda: size("exponential", "1000").parameters["mean"]),
    Row(NOTE, "up to 1000, exponential, F(27)", "0.0369", lambda: size("exponential", "1000").model.cdf(27)),
    Row(
        NOTE, "up to 1000, exponential, F(974)", "0.7425", lambda: size("exponential", "1000").model.cdf(974)
    ),
    Row(
        NOTE,
        "up to 1000, exponential, Kolmogorov-Smirnov",
        "0.0991",
        lambda: distance("exponential", "1000").kolmogorov_smirnov,
    ),
    Row(
        NOTE,
        "up to 1000, exponential, Anderson-Darling",
        "0.1713",
        lambda: distance("exponential", "1000").anderson_darling,
    ),
    Row(
        NOTE,
        "up to 1000, Weibull, Kolmogorov-Smirnov",
        "0.0991",
        lambda: distance("weibull", "1000").kolmogorov_smirnov,
    ),
    Row(
        NOTE,
        "five losses against Pareto(2, 1), Kolmogorov-Smirnov",
        "0.189",
        lambda: goodness([0.1, 0.2, 0.5, 1, 1.3], Lomax(alpha=2, scale=1)).kolmogorov_smirnov,
    ),
    Row(BOOK, "Data Set B, lognormal, mu", "6.1379", lambda: size("lognormal").parameters["mu"]),
    Row(BOOK, "Data Set B, lognormal, sigma", "1.3894", lambda: size("lognormal").parameters["sigma"]),
    Row(BOOK, "Data Set B, lognormal, variance of mu", "0.0965", lambda: size("lognormal").covariance[0, 0]),
    Row(
        BOOK, "Data Set B, lognormal, variance of sigma", "0.0483", lambda: size("lognormal").covariance[1, 1]
    ),
    Row(
        BOOK,
        "Data Set B up to 250, exponential, mean",
        "594.14",
        lambda: size("exponential", "250").parameters["mean"],
    ),
    Row(
        BOOK,
        "Data Set B up to 250, exponential, log-likelihood",
        "-51.71",
        lambda: size("exponential", "250").log_likelihood,
    ),
    Row(
        BOOK,
        "Data Set B, gamma by moments, shape",
        "0.18100",
        lambda: cross_reference(B, size("gamma")).moments["shape"],
    ),
    Row(
        BOOK,
        "Data Set B, Pareto by moments, alpha",
        "2.442",
        lambda: cross_reference(B, size("lomax")).moments["alpha"],
    ),
    Row(
        BOOK,
        "Data Set B, Pareto by moments, scale",
        "2053.985",
        lambda: cross_reference(B, size("lomax")).moments["scale"],
    ),
    Row(
        BOOK,
        "Data Set C, exponential, mean",
        "29721",
        lambda: fit_grouped(*C, "exponential").parameters["mean"],
    ),
    Row(
        BOOK,
        "Data Set C, exponential, log-likelihood",
        "-406.03",
        lambda: fit_grouped(*C, "exponential").log_likelihood,
    ),
    Row(BOOK, "ch. 8, Pareto(3, 2000): cost above 500", "640", lambda: deductible(LOMAX, 500)),
    Row(BOOK, "ch. 8, per payment", "1250", lambda: LOMAX.mean_excess(500)),
    Row(BOOK, "ch. 8, franchise of 500, per loss", "896", lambda: franchise(LOMAX, 500)),
    Row(BOOK, "ch. 8, franchise of 500, per payment", "1750", lambda: franchise(LOMAX, 500) / LOMAX.sf(500)),
    Row(BOOK, "ch. 8, loss elimination ratio", "0.36", lambda: LOMAX.loss_elimination_ratio(500)),
    Row(BOOK, "ch. 8, cost above 500 after 10 % inflation", "730.32", lambda: deductible(HIGHER, 500)),
    Row(BOOK, "ch. 8, per payment after inflation", "1350", lambda: HIGHER.mean_excess(500)),
    Row(BOOK, "ch. 8, rise of the cost, %", "14.1", lambda: rise(deductible, 500)),
    Row(BOOK, "ch. 8, cost up to 3000", "840", lambda: LOMAX.limited_mean(3000)),
    Row(BOOK, "ch. 8, cost up to 3000 after inflation", "903.11", lambda: HIGHER.limited_mean(3000)),
    Row(BOOK, "ch. 8, its rise, %", "7.5", lambda: rise(lambda law, at: law.limited_mean(at), 3000)),
    Row(BOOK, "ch. 8, layer 500 to 3000, mean", "480", lambda: LOMAX.layer_mean(500, 3000)),
    Row(BOOK, "ch. 8, layer 500 to 3000, standard deviation", "754.72", layer_sd),
    Row(BOOK, "full credibility at 90 % and 5 %, losses", "1082", lambda: full_credibility(0.9, 0.05)),
    Row(
        SOA,
        "exponential, deductible 50, two of five at the limit",
        "366.67",
        lambda: soa(np.array([100, 200, 250, 400, 400]), 50, [False, False, False, True, True]),
    ),
    Row(SOA, "exponential above 100", "73", lambda: soa([125, 150, 165, 175, 250], 100)),
    Row(SOA, "exponential above 500", "233.33", lambda: soa([600, 700, 900], 500)),
    Row(
        SOA,
        "grouped exponential",
        "1996.90",
        lambda: fit_grouped([0, 1000, 2000, np.inf], [7, 6, 7], "exponential").parameters["mean"],
    ),
    Row(SOA, "limited mean of a mixture of exponentials", "166.4", lambda: MIXED.limited_mean(1000)),
    Row(SOA, "rise of the elimination ratio, %", "54", elimination),
    Row(
        SOA,
        "zero-modified binomial, mean",
        "3.64",
        lambda: ZeroModified(base=Binomial(trials=20, probability=0.2), zero_probability=0.1).mean(),
    ),
    *(
        Row(
            "Bortkiewicz 1898, Das Gesetz der kleinen Zahlen",
            f"corps-years with {k} deaths expected",
            printed,
            lambda k=k: 200 * count("kicks", "poisson").model.pmf(k),
        )
        for k, printed in enumerate(["108.67", "66.29", "20.22", "4.11", "0.63"])
    ),
    Row(
        "Thyrion 1960, ASTIN Bulletin 1",
        "Poisson, mean",
        "0.21435",
        lambda: count("thyrion", "poisson").model.mean(),
    ),
    Row(
        "Thyrion 1960, ASTIN Bulletin 1",
        "negative binomial, r",
        "0.7015",
        lambda: 1 / count("thyrion", "negative-binomial").parameters["dispersion"],
    ),
    Row(
        "Buhlmann 1970, Mathematical Methods in Risk Theory",
        "Swiss motor portfolio, mean",
        "0.1551",
        lambda: count("swiss", "negative-binomial").model.mean(),
    ),
    Row(
        "Buhlmann 1970, Mathematical Methods in Risk Theory",
        "Swiss motor portfolio, r",
        "1.0327",
        lambda: 1 / count("swiss", "negative-binomial").parameters["dispersion"],
    ),
    *(
        Row(
            "McNeil 1997, ASTIN Bulletin 27",
            f"Danish fire losses over {over}, shape",
            printed,
            lambda over=over: danish_tail(over).parameters["shape"],
        )
        for over, printed in ((3, "0.67"), (4, "0.72"), (5, "0.63"), (10, "0.50"))
    ),
    Row(
        "McNeil 1997, ASTIN Bulletin 27",
        "Danish fire losses over 10, error of the shape",
        "0.14",
        lambda: danish_tail(10).standard_errors["shape"],
    ),
    Row(
        "McNeil 1997, ASTIN Bulletin 27",
        "Danish fire losses over 10, how many",
        "109",
        lambda: danish_tail(10).observations,
    ),
)


@pytest.mark.parametrize("row", REGISTER, ids=lambda row: f"{row.source.split(',')[0]}: {row.what}")
def test_the_figure_of_the_source_to_its_digits(row):
    printed = Decimal(row.printed)
    computed = Decimal(repr(float(row.computed())))
    assert computed.quantize(printed, rounding=ROUND_HALF_UP) == printed


def test_the_register_does_not_shrink_or_repeat_itself():
    assert len(REGISTER) >= LEAST
    assert max(Counter((row.source, row.what) for row in REGISTER).values()) == 1
    assert len({row.source for row in REGISTER}) >= 7
