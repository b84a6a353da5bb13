"""Small portfolio folders for tests."""

from pathlib import Path

GIVEN = """
[portfolio]
name = "Two lines"
currency = "EUR"
valuation-date = 2025-12-31
levels = [0.9, 0.99, 0.995]

[[line]]
name = "Fire"
frequency = { family = "poisson", mean = 4 }
severity = { family = "lognormal", mu = 9, sigma = 1.2 }

[[line]]
name = "Theft"
frequency = { family = "negative-binomial", mean = 6, dispersion = 0.3 }
severity = { family = "exponential", mean = 5000 }

[[cover]]
name = "Layer"
deductible = 10000
limit = 50000

[[cover]]
name = "Stop loss"
after = ["Layer"]
annual-retention = 80000
annual-limit = 40000
"""

RECORDS = """
[portfolio]
name = "From records"
currency = "EUR"
valuation-date = 2024-12-31
levels = [0.9, 0.99]
capital-level = 0.99

[[line]]
name = "Fire"
records = "losses.csv"
exposure = "exposure.csv"
reporting-threshold = 1000
trend = 0.03
frequency = { fit = ["poisson", "negative-binomial"] }
severity = { fit = ["lognormal", "exponential"] }
"""


def given_portfolio(folder: Path, text: str = GIVEN) -> Path:
    """A portfolio of given laws."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(text, encoding="utf-8")
    return folder


def recorded_portfolio(folder: Path, text: str = RECORDS) -> Path:
    """A portfolio of 60 invented losses over five years, one of them without an amount."""
    given_portfolio(folder, text)
    rows = ["id,date,amount"]
    for k in range(60):
        year, month = 2020 + k % 5, 1 + (7 * k) % 12
        amount = 1000 + 37 * ((k * 7919) % 101) + (9000 if k % 11 == 0 else 0)
        rows.append(f"{k},{year}-{month:02d}-15,{amount}")
    rows.append("60,2024-02-02,")
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    exposure = ["year,exposure", *(f"{year},{100 + 5 * (year - 2020)}" for year in range(2020, 2025))]
    (folder / "exposure.csv").write_text("\n".join(exposure) + "\n", encoding="utf-8")
    return folder
