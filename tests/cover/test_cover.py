"""What a cover pays: event by event and year by year, against naive twins and published tables."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.cover import Cover, Schedule
from lossagg.errors import InputError

LOSSES = np.array([0.0, 1.0, 9.99, 10.0, 10.01, 25.0, 30.0, 30.01, 1e6])
amounts = st.floats(0.0, 1e6)
covers = st.builds(
    Cover,
    deductible=st.sampled_from([0.0, 10.0, 250.0]),
    limit=st.sampled_from([5.0, 400.0, np.inf]),
    share=st.sampled_from([0.25, 1.0]),
    annual_retention=st.sampled_from([0.0, 30.0]),
    annual_limit=st.sampled_from([100.0, np.inf]),
)


def naive_event(cover: Cover, loss: float) -> float:
    """The wording of the terms, one loss at a time."""
    if cover.franchise:
        return min(loss, cover.limit) if loss > cover.deductible else 0.0
    return min(max(loss - cover.deductible, 0.0), cover.limit)


@pytest.mark.parametrize(
    "cover",
    [
        Cover(),
        Cover(deductible=10),
        Cover(limit=20),
        Cover(deductible=10, limit=20),
        Cover(deductible=10, franchise=True),
        Cover(deductible=10, limit=30, franchise=True),
        Cover(deductible=0, franchise=True),
    ],
)
def test_event_schedule_says_what_the_terms_say(cover: Cover) -> None:
    expected = [naive_event(cover, loss) for loss in LOSSES]
    np.testing.assert_array_equal(cover.event_schedule()(LOSSES), expected)


def test_a_loss_equal_to_the_franchise_is_not_paid() -> None:
    """A loss of exactly the franchise does not exceed it (common practice, no source)."""
    cover = Cover(deductible=10, franchise=True)
    np.testing.assert_array_equal(
        cover.event_schedule()(np.array([10.0, np.nextafter(10.0, 11.0)])) > 0, [False, True]
    )


@given(covers, st.lists(amounts, max_size=6))
@settings(derandomize=True, deadline=None, max_examples=200)
def test_retained_plus_ceded_is_gross_event_by_event(cover: Cover, losses: list[float]) -> None:
    x = np.array(losses, dtype=float)
    ceded = cover.event_schedule().scaled(cover.share)
    kept = Schedule.identity() - ceded
    np.testing.assert_allclose(ceded(x) + kept(x), x, rtol=1e-12, atol=1e-9)


@given(covers, covers, st.lists(amounts, max_size=6))
@settings(derandomize=True, deadline=None, max_examples=200)
def test_a_second_cover_sees_what_the_first_leaves(first: Cover, second: Cover, losses: list[float]) -> None:
    x = np.array(losses, dtype=float)
    left = Schedule.identity() - first.event_schedule().scaled(first.share)
    composed = second.event_schedule().after(left)
    expected = [naive_event(second, loss - first.share * naive_event(first, loss)) for loss in losses]
    np.testing.assert_allclose(composed(x), expected, rtol=1e-9, atol=1e-7)


def test_second_cover_after_a_franchise() -> None:
    """What a franchise leaves jumps down to zero; the second cover must follow it down."""
    first, second = Cover(deductible=10, limit=20, franchise=True), Cover(deductible=4, limit=5)
    left = Schedule.identity() - first.event_schedule()
    x = np.array([3.0, 6.0, 10.0, 10.5, 15.0, 22.0, 25.0, 100.0])
    expected = [naive_event(second, v - naive_event(first, v)) for v in x]
    np.testing.assert_allclose(second.event_schedule().after(left)(x), expected)


@given(
    st.lists(amounts, min_size=1, max_size=8), st.sampled_from([7.0, 40.0]), st.sampled_from([100.0, 3000.0])
)
@settings(derandomize=True, deadline=None, max_examples=100)
def test_layers_stacked_end_to_end_add_up(losses: list[float], first: float, second: float) -> None:
    x = np.array(losses)
    layers = [
        Cover(limit=first),
        Cover(deductible=first, limit=second),
        Cover(deductible=first + second),
    ]
    np.testing.assert_allclose(sum(layer.event_schedule()(x) for layer in layers), x, rtol=1e-12)


def test_annual_terms_in_their_order() -> None:
    cover = Cover(deductible=10, annual_retention=20, annual_limit=50, share=0.5)
    np.testing.assert_allclose(
        cover.annual_payment(np.array([0.0, 20.0, 30.0, 70.0, 500.0])), [0, 0, 5, 25, 25]
    )
    schedule = cover.annual_schedule()
    np.testing.assert_allclose(schedule(np.array([0.0, 20.0, 30.0, 70.0, 500.0])), [0, 0, 5, 25, 25])
    assert cover.most_per_year == 25


FIVE_YEARS = [[4, 12, 55], [8], [], [3, 27, 90, 15], [140, 6]]


@pytest.mark.parametrize(
    ("deductible", "cap", "kept"),
    [
        (10, np.inf, [24, 8, 0, 33, 16]),
        (25, np.inf, [41, 8, 0, 68, 31]),
        (25, 60, [41, 8, 0, 60, 31]),
        (50, np.inf, [66, 8, 0, 95, 56]),
    ],
)
def test_five_year_list_of_losses(deductible: float, cap: float, kept: list[float]) -> None:
    """Retained by year under four options; computed here by hand, no published source."""
    cover = Cover(deductible=deductible, retained_cap=cap)
    years = [np.array(year, dtype=float) for year in FIVE_YEARS]
    payments = np.array([cover.event_schedule()(year).sum() for year in years])
    retained = np.array([cover.retained_schedule()(year).sum() for year in years])
    gross = np.array([year.sum() for year in years])
    np.testing.assert_allclose(gross - cover.annual_payment(payments, retained), kept)


def test_five_year_list_under_a_franchise() -> None:
    cover = Cover(deductible=10, franchise=True)
    paid = [float(cover.event_schedule()(np.array(year, dtype=float)).sum()) for year in FIVE_YEARS]
    assert paid == [67, 0, 0, 132, 140]


@pytest.mark.parametrize(
    ("terms", "message"),
    [
        ({"share": 80}, "Write 0.8 for 80 %."),
        ({"share": 0}, r"share must be a probability in \(0, 1\]"),
        ({"deductible": -1}, "deductible must be at least 0 and finite"),
        ({"limit": 0}, "limit must be above 0"),
        ({"retained_cap": 5}, "there is no deductible"),
        ({"franchise": True, "deductible": 10, "limit": 10}, "must exceed the deductible"),
        ({"franchise": 10}, "franchise must be true or false"),
        ({"annual_limit": "5m"}, "seen: '5m'"),
    ],
)
def test_terms_that_cannot_be_meant_are_refused(terms: dict[str, object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Cover(**terms)  # type: ignore[arg-type]


def test_the_most_a_schedule_pays() -> None:
    assert Cover(deductible=10, limit=20).event_schedule().most == 20
    assert Cover(deductible=10).event_schedule().most == np.inf
    assert Cover(deductible=10, franchise=True).retained_schedule().most == 10


def test_terms_describe_themselves() -> None:
    text = Cover(deductible=100_000, limit=900_000, annual_limit=5_000_000, share=0.5).describe()
    assert text == "900,000 per event in excess of 100,000, annual limit 5,000,000, share 0.5"
    assert Cover().describe() == "everything is paid"
