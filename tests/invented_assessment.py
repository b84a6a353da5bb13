"""An invented assessment as plain dictionaries: a port authority's insurance pool with three lines."""

from __future__ import annotations

import math
import random
from copy import deepcopy
from statistics import NormalDist
from typing import Any

NORMAL = NormalDist()
YEARS = list(range(2016, 2026))
LEVELS = [0.9, 0.95, 0.99, 0.995, 0.999]


def quantile(mean: float, sd: float, level: float) -> float:
    """Quantile of a lognormal annual loss with this mean and standard deviation."""
    variance = math.log1p((sd / mean) ** 2)
    return math.exp(math.log(mean) - variance / 2 + math.sqrt(variance) * NORMAL.inv_cdf(level))


def figure(value: float, width: float, engine: str = "fourier") -> dict[str, Any]:
    return {"value": value, "low": value * (1 - width), "high": value * (1 + width), "engine": engine}


def level_rows(mean: float, sd: float, width: float, engine: str = "fourier") -> list[dict[str, Any]]:
    return [
        {
            "level": level,
            "return_period": 1 / (1 - level),
            "var": figure(quantile(mean, sd, level), width, engine),
            "tvar": figure(quantile(mean, sd, 1 - (1 - level) / 2.7), 2 * width, engine) | {"reason": None},
        }
        for level in LEVELS
    ]


def total(mean: float, sd: float, width: float, *, exact: bool, note: str | None) -> dict[str, Any]:
    engine = "fourier" if exact else "simulation"
    chances = [0.9 * (0.0005 / 0.9) ** (step / 59) for step in range(60)]
    return {
        "mean": mean,
        "sd": sd,
        "engine": engine,
        "exact": exact,
        "note": note,
        "levels": level_rows(mean, sd, width, engine),
        "curve": [
            {"exceedance": chance}
            | {k: v for k, v in figure(quantile(mean, sd, 1 - chance), width).items() if k != "engine"}
            for chance in chances
        ],
    }


def candidate(family: str, parameters: dict[str, float], likelihood: float, **marks: Any) -> dict[str, Any]:
    free = len(parameters)
    return {
        "family": family,
        "parameters": parameters,
        "standard_errors": {name: abs(value) * 0.031 for name, value in parameters.items()},
        "log_likelihood": likelihood,
        "aic": 2 * free - 2 * likelihood,
        "bic": free * math.log(640) - 2 * likelihood,
        "chosen": False,
    } | marks


def fitted_line(
    name: str, rate: float, mu: float, sigma: float, threshold: float, seed: int
) -> dict[str, Any]:
    stream = random.Random(seed)
    by_year, sizes = [], []
    for index, year in enumerate(YEARS):
        count = max(0, round(stream.gauss(rate, math.sqrt(rate) * 1.3)))
        amounts = [stream.lognormvariate(mu, sigma) + threshold for _ in range(count)]
        sizes += amounts
        trend = 1.03 ** (2026 - year)
        by_year.append(
            {
                "year": year,
                "exposure": 180.0 + 4.5 * index,
                "fraction": 1.0,
                "losses": count,
                "amount": round(sum(amounts) / trend, 2),
                "trended_amount": round(sum(amounts), 2),
                "largest": max(amounts, default=0.0),
                "threshold": threshold * trend,
            }
        )
    sizes.sort()
    used, amount = len(sizes), round(sum(row["amount"] for row in by_year), 2)
    survival, quantiles = [], []
    for rank, size in enumerate(sizes):
        empirical = 1 - (rank + 0.5) / used
        fitted = NORMAL.cdf(-(math.log(size - threshold + 1) - mu) / sigma)
        spread = 1.96 * math.sqrt(empirical * (1 - empirical) / used)
        survival.append(
            {
                "amount": size,
                "empirical": empirical,
                "fitted": fitted,
                "low": max(empirical - spread, 1e-4),
                "high": min(empirical + spread, 1.0),
            }
        )
        quantiles.append(
            {
                "observed": size,
                "fitted": threshold + math.exp(mu + sigma * NORMAL.inv_cdf((rank + 0.5) / used)),
            }
        )
    mean = rate * (threshold + math.exp(mu + sigma**2 / 2))
    sd = mean * 0.55
    return {
        "name": name,
        "source": "records",
        "records": {
            "read": used + 7,
            "used": used,
            "excluded": 7,
            "amount_read": round(amount + 15230.55, 2),
            "amount_used": amount,
            "amount_excluded": 15230.55,
        },
        "by_year": by_year,
        "steps": [
            step("read the records", used + 7, used + 7, amount + 15230.55, amount + 15230.55, "losses.csv"),
            step(
                "set aside closed without payment",
                used + 7,
                used,
                amount + 15230.55,
                amount,
                "7 nil claims and duplicates",
            ),
            step(
                "trend to the forecast period",
                used,
                used,
                amount,
                amount * 1.15,
                "3% a year, amounts and thresholds",
            ),
        ],
        "exposure": {"forecast": 228.5, "base": "berths", "per_year": rate / 228.5},
        "frequency": {
            "family": "negative-binomial",
            "parameters": {"mean": rate * 1.18, "dispersion": 0.0312},
            "standard_errors": {"mean": rate * 0.07, "dispersion": 0.0144},
            "source": "fitted",
            "mean": rate * 1.18,
            "variance": rate * 1.18 + 0.0312 * (rate * 1.18) ** 2,
            "candidates": [
                candidate("poisson", {"mean": rate * 1.18}, -44.8123),
                candidate(
                    "negative-binomial", {"mean": rate * 1.18, "dispersion": 0.0312}, -41.1066, chosen=True
                ),
            ],
        },
        "severity": {
            "family": "lognormal",
            "parameters": {"mu": mu, "sigma": sigma},
            "standard_errors": {"mu": 0.0412, "sigma": 0.0297},
            "source": "fitted",
            "mean": math.exp(mu + sigma**2 / 2),
            "sd": math.exp(mu + sigma**2 / 2) * math.sqrt(math.expm1(sigma**2)),
            "tail_index": None,
            "threshold": threshold,
            "observations": used,
            "censored": 11,
            "candidates": [
                candidate("lognormal", {"mu": mu, "sigma": sigma}, -7012.33, chosen=True, refused=None),
                candidate("lomax", {"alpha": 2.417, "scale": 41233.7}, -7019.06, refused=None),
                candidate(
                    "pareto",
                    {"alpha": 0.964, "minimum": threshold},
                    -7101.9,
                    refused="the mean does not exist",
                ),
            ],
        },
        "fit": {
            "survival": survival,
            "quantiles": quantiles,
            "counts": [
                {
                    "year": row["year"],
                    "observed": row["losses"],
                    "fitted": rate,
                    "low": max(0.0, rate - 2.6 * math.sqrt(rate)),
                    "high": rate + 2.6 * math.sqrt(rate),
                }
                for row in by_year
            ],
        },
        "mean": mean,
        "sd": sd,
        "levels": level_rows(mean, sd, 2e-4),
    }


def step(name: str, count: int, after: int, amount: float, amount_after: float, note: str) -> dict[str, Any]:
    return {
        "step": name,
        "count_before": count,
        "count_after": after,
        "amount_before": round(amount, 2),
        "amount_after": round(amount_after, 2),
        "note": note,
    }


def given_line() -> dict[str, Any]:
    """A line whose laws are given and whose size of loss has no finite mean."""
    levels = level_rows(250_000.0, 900_000.0, 4e-3)
    for row in levels:
        row["tvar"] = {
            "value": None,
            "low": None,
            "high": None,
            "engine": "fourier",
            "reason": "does not exist: the mean is infinite",
        }
    return {
        "name": "Salvage & wreck removal",
        "source": "given",
        "records": None,
        "by_year": [],
        "steps": [],
        "exposure": None,
        "frequency": {
            "family": "poisson",
            "parameters": {"mean": 0.4},
            "standard_errors": None,
            "source": "given",
            "mean": 0.4,
            "variance": 0.4,
            "candidates": [],
        },
        "severity": {
            "family": "pareto",
            "parameters": {"alpha": 0.95, "minimum": 200000.0},
            "standard_errors": None,
            "source": "given",
            "mean": None,
            "sd": None,
            "tail_index": 0.95,
            "threshold": None,
            "observations": 0,
            "censored": 0,
            "candidates": [],
        },
        "fit": None,
        "mean": None,
        "sd": None,
        "levels": levels,
    }


def cover_row(name: str, **terms: Any) -> dict[str, Any]:
    full = {
        "deductible": 0.0,
        "limit": None,
        "franchise": False,
        "share": 1.0,
        "annual_retention": 0.0,
        "annual_limit": None,
        "retained_cap": None,
    } | terms
    mean = 610_250.4 if full["limit"] else 188_013.9
    return {
        "name": name,
        "terms": full,
        "description": f"{name}: in words",
        "lines": ["Cargo handling", "Berths and structures"],
        "after": [] if full["limit"] else ["Working layer"],
        "order": "per event: deductible, then limit; per year: retention, then limit; then share",
        "expected": mean,
        "sd": mean * 0.81,
        "attachment_probability": 0.9713 if full["limit"] else 0.1047,
        "exhaustion_probability": 0.0123 if full["annual_limit"] else None,
        "engine": "simulation",
        "levels": level_rows(mean, mean * 0.81, 3e-3, "simulation"),
    }


def comparison(
    subject: str, measure: str, level: float | None, value: float, panjer: bool = True
) -> dict[str, Any]:
    return {
        "subject": subject,
        "measure": measure,
        "level": level,
        "values": {
            "fourier": value,
            "panjer": value * (1 + 3e-6) if panjer else None,
            "simulation": value * 1.0007,
        },
        "tolerance": "inside each other's bracket; simulation within 4 standard errors",
        "bracket": {
            "fourier": [value * 0.9998, value * 1.0002],
            "panjer": [value * 0.9997, value * 1.0003] if panjer else None,
        },
        "standard_error": value * 0.0011,
        "agrees": True,
        "note": None if panjer else "panjer: dependent lines are outside its domain",
    }


def sample_assessment() -> dict[str, Any]:
    """The whole assessment; a fresh copy at every call."""
    gross = total(
        4_182_330.7, 1_912_204.1, 2e-4, exact=True, note="mean of the lines with a mean; one line has none"
    )
    net = total(3_384_066.4, 1_511_887.0, 2.1e-3, exact=False, note="covers share lines: simulation only")
    top = net["levels"][3]["var"]
    document = {
        "format": "lossagg.assessment/1",
        "portfolio": {
            "name": "Kestrel Haven port pool",
            "currency": "EUR",
            "valuation_date": "2026-09-30",
            "description": "Mutual pool of seven small harbours; invented for the tests.",
            "levels": LEVELS,
            "capital_level": 0.995,
            "forecast": {"start": "2027-01-01", "end": "2027-12-31"},
        },
        "run": {
            "version": "0.1.0",
            "seed": 1,
            "years": 1_000_000,
            "inputs": [
                {"path": "portfolio.toml", "sha256": "ab" * 32, "rows": None},
                {"path": "losses.csv", "sha256": "0f" * 32, "rows": 1204},
            ],
        },
        "headline": {
            "subject": "net",
            "measure": "value_at_risk",
            "level": 0.995,
            "value": top["value"],
            "low": top["low"],
            "high": top["high"],
            "engine": "simulation",
            "mean": net["mean"],
            "less_mean": top["value"] - net["mean"],
            "withheld": False,
            "reason": None,
        },
        "lines": [
            fitted_line("Cargo handling", 64.0, 9.6, 1.35, 5000.0, 11),
            fitted_line("Berths and structures", 9.0, 11.2, 1.7, 25000.0, 12),
            given_line(),
        ],
        "gross": gross,
        "net": net,
        "covers": [
            cover_row("Working layer", deductible=100000.0, limit=900000.0, annual_limit=5000000.0),
            cover_row("Stop loss", annual_retention=6000000.0, annual_limit=4000000.0, share=0.9),
        ],
        "crosscheck": {
            "verdict": "agree",
            "summary": "Three engines agree on all 9 comparisons within their tolerances.",
            "comparisons": [
                comparison("gross", "mean", None, gross["mean"]),
                comparison("gross", "sd", None, gross["sd"]),
                *(
                    comparison("gross", "value_at_risk", row["level"], row["var"]["value"])
                    for row in gross["levels"]
                ),
                comparison("net", "value_at_risk", 0.995, top["value"], panjer=False),
                comparison(
                    "net", "tail_value_at_risk", 0.995, net["levels"][3]["tvar"]["value"], panjer=False
                ),
            ],
        },
        "findings": [
            {
                "severity": "set aside",
                "code": "duplicate-row",
                "file": "losses.csv",
                "row": 812,
                "column": None,
                "value": None,
                "message": "The row repeats row 811 in every column.",
                "remedy": "Delete one of them, or add a claim number that tells them apart.",
            },
            {
                "severity": "normalised",
                "code": "byte-order-mark",
                "file": "losses.csv",
                "row": None,
                "column": None,
                "value": None,
                "message": "The file starts with a byte order mark; it was skipped.",
                "remedy": "",
            },
        ],
        "cautions": [
            {
                "code": "mean-does-not-exist",
                "message": "Salvage & wreck removal: the fitted tail has no mean; no mean, TVaR or "
                "uncapped premium is printed. A policy limit would bound it.",
            },
            {
                "code": "beyond-the-data",
                "message": "99.9% is once in 1,000 years; the records cover 10 years.",
            },
        ],
    }
    return deepcopy(document)


def small_assessment() -> dict[str, Any]:
    """One line of given laws and no cover: quick to write."""
    document = sample_assessment()
    document["lines"], document["covers"] = document["lines"][2:], []
    for subject in ("gross", "net"):
        document[subject]["curve"] = document[subject]["curve"][::12]
    return document


def withheld_assessment() -> dict[str, Any]:
    """The same assessment after two engines disagreed on the net value at risk."""
    document = sample_assessment()
    reason = "withheld: fourier and simulation disagree on the net value at risk at 99.5%"
    document["headline"] |= {
        "value": None,
        "low": None,
        "high": None,
        "less_mean": None,
        "withheld": True,
        "reason": reason,
    }
    holders = [document["gross"], document["net"], *document["covers"], *document["lines"]]
    for holder in holders:
        for row in holder["levels"]:
            for measure in ("var", "tvar"):
                row[measure] |= {"value": None, "low": None, "high": None, "reason": "withheld"}
        for point in holder.get("curve", []):
            point |= {"value": None, "low": None, "high": None}
    disagreeing = document["crosscheck"]["comparisons"][7]
    disagreeing["values"]["simulation"] = disagreeing["values"]["fourier"] * 1.084
    disagreeing |= {
        "agrees": False,
        "note": "simulation lies 76 standard errors above the bracket of fourier",
    }
    document["crosscheck"] |= {
        "verdict": "disagree",
        "summary": "The engines disagree on 1 of 9 comparisons.",
    }
    return document
