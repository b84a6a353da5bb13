"""Laws by family name, as portfolio files and fits ask for them."""

from __future__ import annotations

import pytest
from law_cases import COUNTS, SIMPLE

import lossagg
from lossagg.errors import InputError
from lossagg.families import (
    COUNT_FAMILIES,
    SIZE_FAMILIES,
    Exponential,
    GeneralizedPareto,
    Lognormal,
    Mixture,
    NegativeBinomial,
    Pareto,
    SizeTable,
    Spliced,
    ZeroModified,
    make_count_law,
    make_size_law,
)


def test_the_family_names_are_those_of_the_portfolio_file():
    assert list(COUNT_FAMILIES) == [
        "poisson",
        "negative-binomial",
        "binomial",
        "zero-modified",
        "zero-inflated",
        "count-table",
    ]
    assert list(SIZE_FAMILIES) == [
        "exponential",
        "lognormal",
        "pareto",
        "lomax",
        "generalized-pareto",
        "gamma",
        "weibull",
        "inverse-gaussian",
        "burr",
        "log-logistic",
        "log-gamma",
        "size-table",
        "spliced",
        "mixture",
    ]
    for family, law in [*COUNT_FAMILIES.items(), *SIZE_FAMILIES.items()]:
        assert law.family == family


def test_the_public_surface_names_every_law():
    laws = {law.__name__: law for law in (*COUNT_FAMILIES.values(), *SIZE_FAMILIES.values())}
    assert set(laws) <= set(lossagg.__all__)
    for name, law in laws.items():
        assert getattr(lossagg, name) is law


def test_laws_from_their_parameters():
    assert make_count_law("negative-binomial", mean=4, dispersion=0.5) == NegativeBinomial(
        mean=4, dispersion=0.5
    )
    assert make_size_law("generalized-pareto", shape=0.4, scale=10) == GeneralizedPareto(shape=0.4, scale=10)
    assert make_size_law("size-table", sizes=[0, 1], probabilities=[0.5, 0.5]) == SizeTable(
        sizes=[0, 1], probabilities=[0.5, 0.5]
    )


def test_laws_made_of_laws_from_nested_keys():
    body = {"family": "lognormal", "mu": 6, "sigma": 1}
    tail = {"family": "pareto", "alpha": 2, "minimum": 1000}
    spliced = make_size_law("spliced", body=body, tail=tail, threshold=1000, **{"tail-probability": 0.3})
    assert spliced == Spliced(
        body=Lognormal(mu=6, sigma=1),
        tail=Pareto(alpha=2, minimum=1000),
        threshold=1000,
        tail_probability=0.3,
    )
    mixture = make_size_law("mixture", weights=[0.5, 0.5], parts=[body, {"family": "exponential", "mean": 5}])
    assert mixture == Mixture(weights=[0.5, 0.5], parts=[Lognormal(mu=6, sigma=1), Exponential(mean=5)])
    assert make_size_law("mixture", weights=[1], parts=[spliced]).parts == (spliced,)
    base = {"family": "negative-binomial", "mean": 4, "dispersion": 0.5}
    assert make_count_law("zero-modified", base=base, **{"zero-probability": 0.3}) == ZeroModified(
        base=NegativeBinomial(mean=4, dispersion=0.5), zero_probability=0.3
    )
    with pytest.raises(InputError, match="a law needs its family"):
        make_count_law("zero-inflated", base={"mean": 4}, extra_zeros=0.3)


def test_the_parameters_of_every_simple_law_make_it_again():
    for law in SIMPLE:
        assert make_size_law(law.family, **law.parameters) == law
    for law in COUNTS:
        if not {"probabilities", "base"} & vars(law).keys():
            assert make_count_law(law.family, **law.parameters) == law


def test_the_parameters_of_laws_made_of_laws_have_dotted_names():
    spliced = Spliced(
        body=Lognormal(mu=6, sigma=1),
        tail=GeneralizedPareto(shape=0.4, scale=50, threshold=100),
        threshold=100,
        tail_probability=0.05,
    )
    assert spliced.parameters == {
        "body.mu": 6.0,
        "body.sigma": 1.0,
        "tail.shape": 0.4,
        "tail.scale": 50.0,
        "tail.threshold": 100.0,
        "threshold": 100.0,
        "tail_probability": 0.05,
    }
    mixture = Mixture(weights=[0.75, 0.25], parts=[Exponential(mean=5), Lognormal(mu=1, sigma=2)])
    assert mixture.parameters == {
        "weight.1": 0.75,
        "weight.2": 0.25,
        "part.1.mean": 5.0,
        "part.2.mu": 1.0,
        "part.2.sigma": 2.0,
    }


KNOWN = (
    "exponential, lognormal, pareto, lomax, generalized-pareto, gamma, weibull, inverse-gaussian, burr, "
    "log-logistic, log-gamma, size-table, spliced, mixture"
)


@pytest.mark.parametrize(
    ("make", "text"),
    [
        (
            lambda: make_size_law("log-normal", mu=1, sigma=2),
            f"unknown size family; seen: 'log-normal'. Did you mean 'lognormal'? Known: {KNOWN}.",
        ),
        (
            lambda: make_size_law("Inverse_Gaussian", mean=1, shape=2),
            "unknown size family; seen: 'Inverse_Gaussian'. "
            f"Did you mean 'inverse-gaussian'? Known: {KNOWN}.",
        ),
        (
            lambda: make_size_law("zzz"),
            f"unknown size family; seen: 'zzz'. Known: {KNOWN}.",
        ),
        (
            lambda: make_count_law("poison", mean=1),
            "unknown count family; seen: 'poison'. Did you mean 'poisson'? "
            "Known: poisson, negative-binomial, binomial, zero-modified, zero-inflated, count-table.",
        ),
        (
            lambda: make_size_law("lomax", alhpa=1, scale=2),
            "the lomax family has no parameter 'alhpa'. Did you mean 'alpha'? Known: alpha, scale.",
        ),
        (
            lambda: make_size_law("burr", alpha=1),
            "the burr family needs gamma and scale; seen: ('alpha',). Its parameters: alpha, gamma, scale.",
        ),
        (
            lambda: make_size_law("mixture", weights=[1], parts=[{"mean": 3}]),
            f"a law needs its family; seen: {{'mean': 3}}. Add family, one of: {KNOWN}.",
        ),
    ],
)
def test_slips_are_met_with_the_nearest_name(make, text):
    with pytest.raises(InputError) as caught:
        make()
    assert str(caught.value) == text


def test_an_underscore_for_a_hyphen_is_a_slip_too():
    with pytest.raises(InputError, match="Did you mean 'negative-binomial'"):
        make_count_law("negative_binomial", mean=1, dispersion=1)
