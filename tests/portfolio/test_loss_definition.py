"""What good practice asks of the loss that is modelled, one check value each, from a file to a fit.

Collection threshold, trended threshold, policy limit, deductible in the source, occurrence, leverage of
inflation above a deductible, development. The numbers are closed forms, computed beside each; the formulas
are those of Klugman, Panjer and Willmot, Loss Models, on truncated and censored data.
"""

import math
from datetime import date, datetime
from pathlib import Path

import numpy as np
import pytest

import lossagg
from lossagg.fitting import fit_severity
from lossagg.portfolio import read_portfolio
from lossagg.records import Development, check_losses, prepare_losses, read_losses

VALUED = date(2025, 12, 31)
MIDPOINT = datetime(2026, 7, 2, 12)


def prepared(folder: Path, text: str, **options):
    path = folder / "losses.csv"
    path.write_text(text)
    checked = check_losses(read_losses(path), valuation_date=VALUED, currency="EUR", tolerance=0.5)
    return prepare_losses(checked, **{"forecast_midpoint": MIDPOINT, **options})


def fitted(losses, family: str):
    return fit_severity(losses.amount, family, losses.threshold, losses.censored).parameters


def test_collection_threshold(tmp_path: Path) -> None:
    """Losses 12, 15, 20, 40 thousand seen above 10 thousand: exponential mean 11,750 (ignoring the threshold
    21,750), Pareto alpha 1.49968."""
    losses = prepared(
        tmp_path, "amount,date,threshold\n" + "".join(f"{x}000,2024-01-01,10000\n" for x in (12, 15, 20, 40))
    )
    assert fitted(losses, "exponential")["mean"] == pytest.approx(11_750, rel=1e-12)
    assert fit_severity(losses.amount, "exponential").parameters["mean"] == pytest.approx(21_750, rel=1e-12)
    alpha = 4 / sum(math.log(x / 10) for x in (12, 15, 20, 40))
    assert fitted(losses, "pareto")["alpha"] == pytest.approx(alpha, rel=1e-9)
    assert round(alpha, 5) == 1.49968


def test_ground_up_rate_above_a_collection_threshold(tmp_path: Path) -> None:
    """12 losses in 4 years above a threshold that 30 % of losses exceed: 10 losses a year."""
    rows = "".join(f"{5000 + k},{2022 + k % 4}-05-0{1 + k % 9}\n" for k in range(12))
    (tmp_path / "losses.csv").write_text("amount,date\n" + rows)
    (tmp_path / "portfolio.toml").write_text(f"""
[portfolio]
name = "Rate"
currency = "EUR"
valuation-date = 2025-12-31
[[line]]
name = "A"
records = "losses.csv"
reporting-threshold = 5000
first-year = 2022
frequency = {{ fit = ["poisson"] }}
severity = {{ family = "exponential", mean = {5000 / -math.log(0.3)!r} }}
""")
    model = read_portfolio(tmp_path).models()[0]
    assert model.frequency.mean() == pytest.approx(10.0, rel=1e-12)


def test_threshold_in_the_money_of_the_loss(tmp_path: Path) -> None:
    """5 % for 5 years takes a loss of 20,000 to 25,525.63 and its threshold of 10,000 to 12,762.82."""
    losses = prepared(
        tmp_path, "amount,date\n20000,2020-07-01\n",
        forecast_midpoint=datetime(2025, 7, 1, 6), reporting_threshold=10000, trend=0.05,
    )  # fmt: skip
    assert [round(float(x), 2) for x in (losses.amount[0], losses.threshold[0])] == [25_525.63, 12_762.82]


def test_policy_limit(tmp_path: Path) -> None:
    """15 and 30 thousand, and one stopped at its limit of 100 thousand, above 10 thousand: Pareto alpha is
    2 / (log 1.5 + log 3 + log 10) = 0.52539; the limit taken for a loss would give 0.78809."""
    text = "amount,date,threshold,policy-limit\n15000,2024-01-01,10000,\n30000,2024-01-01,10000,200000\n"
    losses = prepared(tmp_path, text + "100000,2024-01-01,10000,100000\n")
    assert round(fitted(losses, "pareto")["alpha"], 5) == 0.52539
    blind = prepared(tmp_path, (text + "100000,2024-01-01,10000,\n"))
    assert round(fitted(blind, "pareto")["alpha"], 5) == 0.78809


def test_amounts_net_of_a_deductible_and_from_the_ground_up_give_one_fit(tmp_path: Path) -> None:
    """The same 40 invented claims above a deductible of 1,000, given both ways: every parameter to 1e-9."""
    head = """
[portfolio]
name = "B"
currency = "EUR"
valuation-date = 2025-12-31
[[line]]
name = "A"
records = "losses.csv"
first-year = 2021
trend = 0.03
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal"] }
"""
    found = []
    for name, shift, keys in (
        ("net", 1000.0, 'amount-basis = "excess"\ndeductible = 1000\n'),
        ("ground-up", 0.0, "reporting-threshold = 1000\n"),
    ):
        folder = tmp_path / name
        folder.mkdir()
        amounts = [1000 + 50.37 * (k * 7919 % 101 + 1) - shift for k in range(40)]
        rows = "".join(f"{x:.2f},{2021 + k % 5}-05-0{1 + k % 9}\n" for k, x in enumerate(amounts))
        (folder / "losses.csv").write_text("amount,date\n" + rows)
        (folder / "portfolio.toml").write_text(head + keys)
        model = read_portfolio(folder).models()[0]
        found.append([*model.severity.parameters.values(), model.frequency.mean()])
    assert found[0] == pytest.approx(found[1], rel=1e-9)


def test_claims_of_one_occurrence_meet_the_deductible_once(tmp_path: Path) -> None:
    """8, 9 and 10 thousand of one event under a deductible of 10 thousand: 10 thousand kept, not 27."""
    losses = prepared(
        tmp_path, "amount,date,event\n8000,2024-05-01,E\n9000,2024-05-02,E\n10000,2024-05-02,E\n"
    )
    cover = lossagg.Cover(deductible=10_000)
    event = losses.recorded
    assert event.tolist() == [27_000.0]
    assert np.minimum(event, cover.deductible).tolist() == [10_000.0]
    assert (losses.years.losses.sum(), losses.years.claims.sum()) == (1, 3)


def test_inflation_is_leveraged_above_a_deductible() -> None:
    """Lomax (3, 2000), deductible 500, +10 %: what exceeds costs 14.11 % more, what is kept 2.69 %, and
    payments are 5.66 % more frequent."""
    before, after = lossagg.Lomax(alpha=3, scale=2000), lossagg.Lomax(alpha=3, scale=2200)
    excess = [law.mean() - law.limited_mean(500) for law in (before, after)]
    kept = [law.limited_mean(500) for law in (before, after)]
    often = [law.sf(500) for law in (before, after)]
    assert [round(100 * (b / a - 1), 2) for a, b in (excess, kept, often)] == [14.11, 2.69, 5.66]


def test_development_to_ultimate(tmp_path: Path) -> None:
    """Reported 100,000 at a factor of 1.8, a-priori 150,000: 180,000 and 166,666.67."""
    losses = prepared(
        tmp_path, "amount,date,status\n100000,2025-05-01,closed\n",
        development=Development(amount_factors=(1.8,), a_priori_amount=150_000.0),
    )  # fmt: skip
    assert losses.developed.amount_chain_ladder.tolist() == [180_000.0]
    assert losses.developed.amount_bornhuetter_ferguson.round(2).tolist() == [166_666.67]
    assert losses.years.amount.tolist() == [100_000.0]
