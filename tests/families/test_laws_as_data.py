"""A law written as plain data and read back is the same law, to the last bit."""

import json

import pytest

from lossagg.families import (
    COUNT_FAMILIES,
    SIZE_FAMILIES,
    Binomial,
    Burr,
    CountTable,
    Exponential,
    Gamma,
    GeneralizedPareto,
    InverseGaussian,
    LogGamma,
    LogLogistic,
    Lognormal,
    Lomax,
    Mixture,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    Spliced,
    Weibull,
    ZeroInflated,
    ZeroModified,
    make_count_law,
    make_size_law,
)

COUNTS = [
    Poisson(mean=1 / 3),
    NegativeBinomial(mean=4, dispersion=0.1 + 0.2),
    Binomial(trials=12, probability=1 / 7),
    CountTable(probabilities=[0.1, 0.2, 0.7]),
    ZeroModified(base=NegativeBinomial(mean=4, dispersion=0.3), zero_probability=1 / 3),
    ZeroInflated(base=Poisson(mean=1 / 3), extra_zeros=0.1),
]
SPLICED = Spliced(
    body=Lognormal(mu=9.1, sigma=1 / 3),
    tail=GeneralizedPareto(shape=0.3, scale=3e4, threshold=4e4),
    threshold=4e4,
    tail_probability=0.1,
)
SIZES = [
    LogLogistic(gamma=7 / 3, scale=1e4 / 3),
    LogGamma(shape=1 / 3, rate=2.2, minimum=1e3 / 7),
    Exponential(mean=1000 / 3),
    Lognormal(mu=9.1, sigma=1 / 3),
    Pareto(alpha=2.1, minimum=100.0),
    Lomax(alpha=2.2, scale=100.0),
    GeneralizedPareto(shape=0.3, scale=100.0),
    Gamma(shape=0.3, scale=10.0),
    Weibull(shape=0.7, scale=10.0),
    InverseGaussian(mean=10.0, shape=3.0),
    Burr(alpha=2.0, gamma=1.5, scale=100.0),
    SizeTable(sizes=[0, 10, 100 / 3], probabilities=[0.2, 0.3, 0.5]),
    SPLICED,
    Mixture(weights=[0.25, 0.75], parts=[SPLICED, Pareto(alpha=1.5, minimum=10.0)]),
]


@pytest.mark.parametrize("law", COUNTS + SIZES, ids=lambda law: law.family)
def test_through_json_and_back(law):
    data = json.loads(json.dumps(law.to_dict()))
    again = make_count_law(**data) if law in COUNTS else make_size_law(**data)
    assert again == law
    assert repr(again) == repr(law)
    assert again.to_dict() == law.to_dict()


def test_every_family_is_tried():
    assert {law.family for law in COUNTS} == set(COUNT_FAMILIES)
    assert {law.family for law in SIZES} == set(SIZE_FAMILIES)
