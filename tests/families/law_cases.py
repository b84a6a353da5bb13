"""The laws every contract test runs over: usual parameters, and the ones at which formulas break."""

from __future__ import annotations

from lossagg.families import (
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
)

SIMPLE = (
    Exponential(mean=1000),
    Lognormal(mu=7, sigma=1.5),
    Lognormal(mu=10, sigma=0.01),
    Lognormal(mu=0, sigma=1e-4),
    Lognormal(mu=9, sigma=5),
    Lognormal(mu=0, sigma=20),
    Pareto(alpha=1.8, minimum=1000),
    Pareto(alpha=0.8, minimum=10),
    Pareto(alpha=1, minimum=10),
    Pareto(alpha=2, minimum=10),
    Pareto(alpha=3.5, minimum=10),
    Lomax(alpha=3, scale=2000),
    Lomax(alpha=0.9, scale=2000),
    Lomax(alpha=1, scale=2000),
    Lomax(alpha=2, scale=2000),
    Lomax(alpha=1e6, scale=2000),
    Lomax(alpha=0.05, scale=1),
    GeneralizedPareto(shape=0.4, scale=1000, threshold=500),
    GeneralizedPareto(shape=0, scale=1000),
    GeneralizedPareto(shape=1e-9, scale=1000),
    GeneralizedPareto(shape=-1e-9, scale=1000, threshold=5),
    GeneralizedPareto(shape=-0.3, scale=1000, threshold=10),
    GeneralizedPareto(shape=-1, scale=10),
    GeneralizedPareto(shape=-3, scale=10),
    GeneralizedPareto(shape=0.5, scale=10),
    GeneralizedPareto(shape=1, scale=10),
    GeneralizedPareto(shape=1.2, scale=10),
    Gamma(shape=0.6, scale=3000),
    Gamma(shape=0.01, scale=3),
    Gamma(shape=2.5, scale=1),
    Gamma(shape=50, scale=3),
    Gamma(shape=300, scale=1),
    Gamma(shape=1e4, scale=1),
    Weibull(shape=0.7, scale=1000),
    Weibull(shape=0.1, scale=10),
    Weibull(shape=3, scale=10),
    Weibull(shape=100, scale=10),
    InverseGaussian(mean=1000, shape=500),
    InverseGaussian(mean=10, shape=1000),
    InverseGaussian(mean=10, shape=0.01),
    InverseGaussian(mean=10, shape=1e7),
    Burr(alpha=2, gamma=1.5, scale=1000),
    Burr(alpha=0.55, gamma=1.5, scale=10),
    Burr(alpha=0.1, gamma=5.1, scale=10),
    Burr(alpha=20, gamma=0.3, scale=10),
    Burr(alpha=3.1, gamma=0.3, scale=10),
    Burr(alpha=1.5, gamma=4, scale=10),
    LogLogistic(gamma=2.5, scale=1000),
    LogLogistic(gamma=1.3, scale=10),
    LogLogistic(gamma=0.7, scale=10),
    LogGamma(shape=2.5, rate=3.2, minimum=1000),
    LogGamma(shape=0.4, rate=1.6, minimum=10),
    LogGamma(shape=5, rate=0.8, minimum=1),
    LogGamma(shape=1, rate=2, minimum=10),
    LogGamma(shape=30, rate=25, minimum=100),
)

# Two Burr laws at which the beta function of the textbook has a pole: checked by quadrature only.
POLES = (Burr(alpha=1, gamma=1, scale=10), Burr(alpha=0.5, gamma=2, scale=10))

SPLICES = (
    Spliced(
        body=Lognormal(mu=6, sigma=1),
        tail=Pareto(alpha=2.5, minimum=1000),
        threshold=1000,
        tail_probability=0.3,
    ),
    Spliced(
        body=Gamma(shape=0.6, scale=300),
        tail=GeneralizedPareto(shape=0.8, scale=400, threshold=1000),
        threshold=1000,
        tail_probability=0.02,
    ),
    # A tail law that hardly reaches above the threshold: its conditional moments must not cancel.
    Spliced(
        body=Weibull(shape=0.7, scale=1000),
        tail=Lognormal(mu=0, sigma=1),
        threshold=2000,
        tail_probability=0.1,
    ),
    Spliced(
        body=SizeTable(sizes=[0, 100, 5000], probabilities=[0.5, 0.3, 0.2]),
        tail=GeneralizedPareto(shape=-0.2, scale=500, threshold=1500),
        threshold=1000,
        tail_probability=0.05,
    ),
)

MIXTURES = (
    Mixture(weights=[0.8, 0.2], parts=[Exponential(mean=50), Exponential(mean=1000)]),
    Mixture(
        weights=[0.3, 0.5, 0.2],
        parts=[
            SizeTable(sizes=[0, 100], probabilities=[0.5, 0.5]),
            Pareto(alpha=2.2, minimum=500),
            Lognormal(mu=5, sigma=1),
        ],
    ),
    Mixture(
        weights=[0.6, 0.4],
        parts=[GeneralizedPareto(shape=-1, scale=10), Pareto(alpha=0.9, minimum=100)],
    ),
)

TABLES = (
    SizeTable(sizes=[0, 10, 20, 50, 100, 500], probabilities=[0.8, 0.08, 0.05, 0.04, 0.02, 0.01]),
    SizeTable(sizes=[3, 1, 2], probabilities=[0.2, 0.5, 0.3]),
    SizeTable(sizes=[7], probabilities=[1]),
)

CONTINUOUS = (*SIMPLE, *POLES, *SPLICES[:3], MIXTURES[0], MIXTURES[2])
SIZES = (*SIMPLE, *POLES, *SPLICES, *MIXTURES, *TABLES)

COUNTS = (
    Poisson(mean=0),
    Poisson(mean=1e-8),
    Poisson(mean=4.2),
    Poisson(mean=2000),
    Poisson(mean=1e6),
    NegativeBinomial(mean=0, dispersion=1),
    NegativeBinomial(mean=4.2, dispersion=0),
    NegativeBinomial(mean=4.2, dispersion=1e-12),
    NegativeBinomial(mean=4.2, dispersion=0.5),
    NegativeBinomial(mean=0.01, dispersion=100),
    NegativeBinomial(mean=30, dispersion=0.3),
    NegativeBinomial(mean=1e6, dispersion=1e-8),
    Binomial(trials=0, probability=0.5),
    Binomial(trials=20, probability=0.1),
    Binomial(trials=5, probability=0),
    Binomial(trials=5, probability=1),
    Binomial(trials=100_000, probability=0.3),
    CountTable(probabilities=[0.05, 0.1, 0.15, 0.2, 0.25, 0.15, 0.06, 0.03, 0.01]),
    CountTable(probabilities=[1]),
    ZeroModified(base=Poisson(mean=4.2), zero_probability=0.1),
    ZeroModified(base=Poisson(mean=0.3), zero_probability=0),
    ZeroModified(base=NegativeBinomial(mean=4.2, dispersion=0.5), zero_probability=0.6),
    ZeroModified(base=Binomial(trials=20, probability=0.1), zero_probability=0.05),
    ZeroInflated(base=NegativeBinomial(mean=30, dispersion=0.3), extra_zeros=0.25),
    ZeroInflated(base=Poisson(mean=0.02), extra_zeros=0.9),
    ZeroInflated(base=CountTable(probabilities=[0.2, 0.5, 0.3]), extra_zeros=0),
)


def name(law: object) -> str:
    """A test id: the law as it shows itself, shortened."""
    return repr(law)[:70]
