"""The rule for digits: no more than the accuracy supports, and ranges that still hold what they held."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.report import digits
from lossagg.report.cells import Absent, Estimated, Ranged, clean, show

AMOUNTS = st.floats(min_value=1e-3, max_value=1e15)


@pytest.mark.parametrize(
    ("value", "low", "high", "text", "limits"),
    [
        (1_234_567.9, 1_234_228.0, 1_234_899.0, "1,234,570", "1,234,220 to 1,234,900"),
        (12_345_678.9, 12_345_239.0, 12_346_110.0, "12,345,700", "12,345,200 to 12,346,200"),
        (52_287_545.0, 45_702_706.0, 68_596_450.0, "52,000,000", "45,000,000 to 69,000,000"),
        (12_345_678.9, 12_345_678.8, 12_345_679.1, "12,345,700", "12,345,600 to 12,345,700"),
        (1_500.0, 500.0, 4_000.0, "1,500", "500 to 4,000"),
        (1_500.0, 500.0, 6_000.0, "2,000", "0 to 6,000"),
        (0.0123456, 0.01231, 0.01239, "0.01235", "0.01231 to 0.01239"),
        (250.0, 250.0, 250.0, "250", "250 to 250"),
        (0.0, 0.0, 0.0, "0", "0 to 0"),
        (0.0, 0.0, 1200.0, "0", "0 to 1,200"),
    ],
)
def test_last_digit_shown_is_the_first_in_doubt(value, low, high, text, limits) -> None:
    view = show(Ranged(value, low, high), "money")
    assert (view.text, view.range) == (text, limits)
    assert float(view.full) == value


def as_number(text: str) -> float:
    return float(text.replace(",", "").replace("−", "-"))


@settings(derandomize=True, deadline=None, max_examples=200)
@given(AMOUNTS, st.floats(0, 0.9), st.floats(0, 3))
def test_range_on_paper_holds_the_range_computed(value: float, below: float, above: float) -> None:
    low, high = value * (1 - below), value * (1 + above)
    view = show(Ranged(value, low, high), "money")
    shown_low, shown_high = (as_number(part) for part in view.range.split(" to "))
    assert shown_low <= low * (1 + 1e-12)
    assert shown_high >= high * (1 - 1e-12)
    assert shown_low <= as_number(view.text) <= shown_high


@settings(derandomize=True, deadline=None, max_examples=100)
@given(AMOUNTS)
def test_without_a_range_five_digits_are_kept_but_no_parts_of_a_unit(value: float) -> None:
    whole = 0.5 if value >= 100 else 0.0
    assert abs(as_number(show(value, "money").text) - value) <= max(0.51e-4 * value, whole)


def test_estimates_end_at_the_second_digit_of_their_error() -> None:
    assert digits.estimated(1.34567, 0.0297) == "1.346"
    assert digits.estimated(1.34567, 0.000297) == "1.34567"
    assert digits.estimated(41_233.7, 1_278.0) == "41,200"
    assert digits.estimated(3.0, None) == "3"
    assert digits.with_error(1.34567, 0.0297) == "1.346 ± 0.030"
    assert digits.with_error(0.4, None) == "0.4"
    assert digits.with_error(1.34567, 0.0571) == "1.35 ± 0.06"


def test_probabilities_show_what_the_simulation_saw() -> None:
    million, thousand = 1e-3, 3.2e-2
    assert show(Estimated(0.1047, million), "probability").text == "10.5%"
    assert show(Estimated(0.1047, thousand), "probability").text == "10%"
    assert show(Estimated(0.99996, None), "probability").text == "99.996%"
    assert show(0.0, "probability").text == "0%"


def test_levels_and_return_periods() -> None:
    assert digits.percent(0.995) == "99.5%"
    assert digits.percent(0.9) == "90%"
    assert digits.percent(0.9995) == "99.95%"
    assert digits.return_period(1 / (1 - 0.995)) == "1 in 200 years"
    assert digits.return_period(1000.0000000001) == "1 in 1,000 years"


def test_absent_is_never_a_number() -> None:
    """Nothing that is missing may read as zero, or carry a number for machines."""
    view = show(Absent("does not exist", "the mean is infinite"), "money")
    assert (view.text, view.full, view.numeric) == ("does not exist", "", False)


def test_text_cannot_steer_a_terminal_or_reverse_a_name() -> None:
    assert clean("a\x1b[31mb\u202ec\nd\ud800") == "a�[31mb�c\nd�"
