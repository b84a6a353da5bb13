"""Amounts in thousands among amounts in units: two heaps of logarithms, and none in any law with one mode."""

import datetime as dt

import numpy as np
import pytest

from lossagg.records import check_losses, prepare_losses
from lossagg.records.mixups import two_heaps

UNIMODAL = {
    "lognormal, narrow": lambda rng, n: rng.lognormal(9, 0.4, n),
    "lognormal, wide": lambda rng, n: rng.lognormal(9, 3.5, n),
    "Pareto without a mean": lambda rng, n: 1000 * (1 + rng.pareto(0.5, n)),
    "Weibull": lambda rng, n: 1e4 * rng.weibull(0.3, n) + 1e-9,
    "exponential": lambda rng, n: rng.exponential(1e4, n),
    "in hundreds": lambda rng, n: np.round(rng.lognormal(9, 2, n), -2) + 100,
}


@pytest.mark.parametrize("law", UNIMODAL)
@pytest.mark.parametrize("size", [10, 100, 3000])
def test_laws_with_one_mode_show_no_heaps(law: str, size: int) -> None:
    """The bound on the chance of a false alarm is a millionth for each place of the windows."""
    rng = np.random.default_rng(69)
    assert not any(two_heaps(UNIMODAL[law](rng, size)) for _ in range(60))


@pytest.mark.parametrize("share", [0.1, 0.5, 0.9])
def test_rows_in_thousands_are_found_where_sizes_are_not_too_wide(share: float) -> None:
    """600 amounts of 0.3 decades either way (a standard deviation of 0.8 in natural logarithms)."""
    rng = np.random.default_rng(29)
    for _ in range(50):
        amount = rng.lognormal(9, 0.8, 600)
        amount[rng.random(600) < share] /= 1000
        (low, fewer), between, (high, more) = two_heaps(amount)
        assert high / low == pytest.approx(1000)
        assert min(fewer, more) > 3 * between


def test_29_a_file_that_mixes_units_row_by_row_warns_with_both_heaps(read) -> None:
    """Neither a year nor a currency tells the rows apart, so only the heaps do."""
    rows = [
        f"{(2000 + 61 * k) / (1000 if k % 3 == 0 else 1):.3f},{2021 + (k // 3) % 4}-03-05" for k in range(120)
    ]
    checked = check_losses(
        read("amount,date\n" + "\n".join(rows) + "\n"), valuation_date=dt.date(2024, 12, 31), currency="EUR"
    )
    prepared = prepare_losses(checked, forecast_midpoint=dt.date(2025, 7, 2))
    (found,) = (finding for finding in prepared.findings if finding.code == "two-heaps")
    assert str(found) == (
        "the amounts lie in two heaps a thousand apart: 40 from 1 to 10, 80 from 1,000 to 10,000, and 0 in "
        "the decade halfway, in file losses.csv, column 'amount'. Are some rows in thousands and "
        "others in units?"
    )


def test_nothing_is_said_of_few_amounts_or_none() -> None:
    assert two_heaps(np.zeros(0)) is None
    assert two_heaps(np.array([1.0, 1000.0] * 5)) is None
