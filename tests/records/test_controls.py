"""Control totals: the difference is exact, what is compared are claims, and a break is said in words."""

from decimal import Decimal

import pytest

from lossagg.errors import InputError
from lossagg.records import ControlTotal, RecordsError, control_findings, reconcile_controls

TEXT = (
    "amount,date,event,paid,outstanding\n"
    "100.10,2023-05-01,A,100.10,0\n"
    "200.20,2024-05-01,B,200.20,0\n"
    "200.20,2024-05-01,B,200.20,0\n"
    "N/A,2024-06-01,C,,\n"
    "-1.30,2024-07-01,D,,\n"
    "499.20,,,,\n"
)


def totals(**stated: float) -> ControlTotal:
    keys = {key: stated.pop(key) for key in ("year", "tolerance") if key in stated}
    return ControlTotal(totals=stated, **keys)


def test_copies_blank_rows_and_totals_are_no_claims(check) -> None:
    """Six rows below the headings: a copy and a total of the others do not count, faulty claims do."""
    checked = check(TEXT)
    (count, amount) = reconcile_controls(checked, [totals(count=4, amount=299.0)])
    assert (count.used, count.set_aside, count.difference, count.agrees) == (2, 2, 0, True)
    assert (amount.used, amount.set_aside) == (Decimal("300.30"), Decimal("-1.30"))
    assert (amount.difference, amount.agrees) == (0, True)


def test_a_difference_of_one_against_a_tolerance_of_a_half_fails(check) -> None:
    """Control totals off by 1.00 with tolerance 0.50 is a break; by 0.50 it is none."""
    checked = check(TEXT)
    off = reconcile_controls(
        checked, [totals(amount=300.0, tolerance=0.5), totals(amount=299.5, tolerance=0.5)]
    )
    assert [(str(result.difference), result.agrees) for result in off] == [("-1.00", False), ("-0.50", True)]
    (finding,) = control_findings(checked, off)
    assert str(finding) == (
        "amount: the control total is 300.0, the records hold 300.30 used and -1.30 set aside, a difference "
        "of -1.00 where 0.5 is tolerated, in file losses.csv, column 'amount'. Find the missing or added "
        "records with whoever keeps the ledger; no headline until then."
    )


def test_totals_by_year_and_of_other_columns(check) -> None:
    results = reconcile_controls(
        check(TEXT),
        [totals(year=2024, count=3, amount=198.9), totals(paid=300.3), totals(year=2020, count=0)],
    )
    assert all(result.agrees for result in results)
    assert [result.measure for result in results] == ["count", "amount", "paid", "count"]


def test_a_count_must_agree_whatever_the_tolerance(check) -> None:
    (result,) = reconcile_controls(check(TEXT), [totals(count=5, tolerance=10.0)])
    assert (result.difference, result.agrees) == (-1, False)


@pytest.mark.parametrize("stated", [299_000.0, 0.299])
def test_thousands_against_units_stop(check, stated: float) -> None:
    with pytest.raises(RecordsError, match=r"a factor of 1,000.*One of them is in thousands"):
        reconcile_controls(check(TEXT), [totals(amount=stated)])


def test_what_cannot_be_compared_is_refused(check) -> None:
    with pytest.raises(
        InputError, match="a control total is given for 'recoveries', which the records do not"
    ):
        reconcile_controls(check(TEXT), [totals(recoveries=1.0)])
    with pytest.raises(InputError, match=r"states a count or an amount.*seen: \['incurred'\]"):
        totals(incurred=5.0)
    with pytest.raises(InputError, match="states a count or an amount; seen: 'nothing'"):
        totals()
    with pytest.raises(InputError, match="must be a whole number"):
        totals(count=1.5)


def test_many_cents_add_up_exactly(check) -> None:
    """A float64 sum of a million times 0.1 is off by 1e-6 or so; here ten thousand must not be off at all."""
    checked = check("amount,date\n" + "".join(f"0.1,2024-01-{k % 28 + 1:02d}\n" for k in range(10_000)))
    (result,) = reconcile_controls(checked, [totals(amount=1000.0, tolerance=0.0)])
    assert result.agrees
    assert result.difference == 0
