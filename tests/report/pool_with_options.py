"""A portfolio with every load, cost and kind of option: what the tests of written option tables price."""

from __future__ import annotations

from pathlib import Path

TEXT = """
[portfolio]
name = "Pool"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
records = "losses.csv"
frequency = { fit = ["poisson"] }
severity = { fit = ["exponential"] }

[[cover]]
name = "Layer"
deductible = 20000

CONTROL

[pricing]
base = "full cover"
event-cap = 60000
loss-adjustment = 0.06
fixed-expense = 2000
variable-expense = 0.12
profit = 0.03
risk-load = { method = "cost-of-capital", factor = 0.08, level = 0.99 }
premium-tax = 0.05
collateral = { rate = 0.02, level = 0.9 }
claims-handling = { per-event = 100, share = 0.03 }
capital = { rate = 0.06, level = 0.99 }
basic-limit = 10000
basic-limit-expense = 50
appetite = { worst-year = 90000, level = 0.95 }
parameter-draws = 20

[[option]]
name = "full cover"

[[option]]
name = "5k, limit 20k"
deductible = 5000
limit = 20000

[[option]]
name = "5k, cap 40k"
deductible = 5000
retained-cap = 40000

[[option]]
name = "reinstated"
deductible = 5000
limit = 20000
reinstatements = 1
reinstatement-rate = 1.0

[[option]]
name = "quoted"
deductible = 8000
premium = 150000

[[option]]
name = "nothing bought"
uninsured = true
"""


def folder_with(folder: Path, control: str = "") -> Path:
    rows = ["id,date,amount", *(f"{k},{2020 + k % 5}-05-05,{700 + 331 * k}" for k in range(60))]
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (folder / "portfolio.toml").write_text(TEXT.replace("CONTROL", control), encoding="utf-8")
    return folder
