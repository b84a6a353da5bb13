"""Terms of cover beyond deductible and limit, and the order in which they act."""

import itertools
import pickle
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.cover import Corridor, Cover, Reinstatements, Schedule, Surplus
from lossagg.errors import InputError

LOSSES = np.array([0.0, 1.0, 5.0, 9.99, 10.0, 10.01, 14.0, 19.99, 20.0, 25.0, 59.0, 60.0, 61.0, 1e5])


def paid(cover: Cover, loss: float) -> float:
    """What a cover pays of a single event in a year."""
    return float(cover.annual_payment(cover.event_schedule()(np.array([loss])))[0])


@pytest.mark.parametrize(
    ("order", "expected"),
    [
        (["deductible", "share", "limit"], 60_000),
        (["limit", "deductible", "share"], 40_000),
        (["deductible", "limit", "share"], 48_000),
        (["share", "deductible", "limit"], 60_000),
        ([], 48_000),
    ],
)
def test_order_of_operations_by_hand(order: list[str], expected: float) -> None:
    """By hand, no published source: loss 100,000, deductible 10,000, share 80 %, limit 60,000."""
    assert paid(Cover(deductible=1e4, limit=6e4, share=0.8, order=order), 1e5) == pytest.approx(expected)


OPERATIONS = {
    "deductible": lambda x: max(x - 10.0, 0.0),
    "limit": lambda x: min(x, 30.0),
    "share": lambda x: 0.6 * x,
}


@pytest.mark.parametrize("order", list(itertools.permutations(OPERATIONS)))
def test_every_order_against_the_operations_one_by_one(order: tuple[str, ...]) -> None:
    cover = Cover(deductible=10, limit=30, share=0.6, order=order)
    for loss in LOSSES:
        expected = loss
        for name in order:
            expected = OPERATIONS[name](expected)
        assert paid(cover, loss) == pytest.approx(expected, rel=1e-12, abs=1e-12)


YEARLY = ("annual-retention", "corridor", "retained-cap", "annual-limit", "share")


@given(
    st.permutations(YEARLY),
    st.lists(st.floats(0.0, 300.0), min_size=1, max_size=6),
)
@settings(derandomize=True, deadline=None, max_examples=200)
def test_every_order_of_the_year_against_the_operations_one_by_one(
    order: list[str], losses: list[float]
) -> None:
    cover = Cover(
        deductible=20,
        limit=100,
        share=0.5,
        annual_retention=30,
        corridor=Corridor(low=40, high=90, share=0.7),
        retained_cap=50,
        annual_limit=80,
        order=("deductible", "limit", *order),
    )
    total, kept = 0.0, 0.0
    first = order[0] == "share"
    for loss in losses:
        payment = min(max(loss - 20, 0.0), 100.0)
        total += 0.5 * payment if first else payment
        kept += min(loss, 20.0)
    for name in order:
        if name == "annual-retention":
            total = max(total - 30, 0.0)
        elif name == "corridor":
            total -= 0.7 * (min(total, 90.0) - min(total, 40.0))
        elif name == "retained-cap":
            total += max(kept - 50, 0.0)
        elif name == "annual-limit":
            total = min(total, 80.0)
        elif not first:
            total *= 0.5
    x = np.array(losses)
    z, r = cover.event_schedule()(x).sum(keepdims=True), cover.retained_schedule()(x).sum(keepdims=True)
    assert cover.annual_payment(z, r)[0] == pytest.approx(total, rel=1e-9, abs=1e-9)
    terms = cover.year_terms
    assert terms.kept is not None
    both = terms.payments(z) + terms.kept(r)
    assert terms.beyond(both)[0] == pytest.approx(total, rel=1e-9, abs=1e-9)


def test_the_order_is_printed() -> None:
    cover = Cover(deductible=10, limit=30, share=0.6, order=["deductible", "share", "limit"])
    assert cover.order_of_operations == "per event: deductible, then share, then limit"
    assert "order deductible, share, limit" in cover.describe()
    assert Cover(deductible=10).order_of_operations == (
        "per event: deductible, then limit; per year: annual retention, then corridor, then excess over "
        "the retained cap, then annual limit; then share"
    )
    surplus = Cover(surplus=Surplus(kept_line=1.0, lines=3.0))
    assert surplus.order_of_operations.startswith("per event: surplus share, then deductible")


def test_disappearing_deductible() -> None:
    """Nothing to 10, a straight line to the whole loss at 20, all beyond (common practice, no source)."""
    cover = Cover(deductible=10, disappears_at=20, limit=60)
    expected = [0 if x <= 10 else min(2 * (x - 10) if x < 20 else x, 60) for x in LOSSES]
    np.testing.assert_allclose(cover.event_schedule()(LOSSES), expected, atol=1e-12)
    kept = [min(x, 10) if x <= 10 else max(20 - x, 0) if x < 20 else 0 for x in LOSSES]
    np.testing.assert_allclose(cover.retained_schedule()(LOSSES), kept, atol=1e-12)
    assert cover.describe() == "60 per event above a deductible of 10 that disappears at 20"


def test_a_cover_after_a_disappearing_deductible() -> None:
    """What a disappearing deductible leaves rises, falls and ends; the second cover follows it."""
    first, second = Cover(deductible=10, disappears_at=20), Cover(deductible=2, limit=4)
    left = Schedule.identity() - first.event_schedule()
    x = np.array([1.0, 5.0, 7.0, 10.0, 11.0, 14.0, 15.0, 17.5, 19.0, 20.0, 50.0])
    expected = [min(max(v - float(first.event_schedule()(np.array([v]))[0]) - 2, 0), 4) for v in x]
    np.testing.assert_allclose(second.event_schedule().after(left)(x), expected, atol=1e-12)


def test_limit_including_the_deductible() -> None:
    """Common practice, no source: inclusive, min(x, l) - min(x, d); on top, min((x - d)+, l)."""
    inclusive = Cover(deductible=10, limit=60, limit_includes_deductible=True)
    on_top = Cover(deductible=10, limit=60)
    np.testing.assert_allclose(
        inclusive.event_schedule()(LOSSES), np.minimum(LOSSES, 60) - np.minimum(LOSSES, 10)
    )
    np.testing.assert_allclose(on_top.event_schedule()(LOSSES), np.clip(LOSSES - 10, 0, 60))
    assert (inclusive.event_most, on_top.event_most) == (50, 60)
    assert inclusive.order_of_operations.startswith("per event: limit, then deductible")
    assert inclusive.describe() == "60 per event including a deductible of 10"


def test_self_insured_retention() -> None:
    """The same payment as a deductible on top; but under a deductible the insurer pays first and bills."""
    deductible, retention = Cover(deductible=10, limit=60), Cover(deductible=10, limit=60, self_insured=True)
    assert deductible.event_schedule() == retention.event_schedule()
    np.testing.assert_allclose(deductible.billed_back()(LOSSES), np.minimum(LOSSES, 10))
    np.testing.assert_allclose(retention.billed_back()(LOSSES), 0.0)
    assert retention.describe() == "60 per event in excess of a self-insured retention of 10"


@pytest.mark.parametrize(
    ("terms", "payment"),
    [
        ({"expense_basis": "inside"}, min(max(1.1 * 100 - 20, 0), 85)),
        ({"expense_basis": "pro-rata"}, 1.1 * min(100 - 20, 85)),
        ({"expense_basis": "outside"}, 80 + 10),
        ({"expense_basis": "outside", "self_insured": True}, 80 + 10),
        ({"expense_basis": "outside", "share": 0.5}, 0.5 * (80 + 10)),
    ],
)
def test_expense_by_basis(terms: dict, payment: float) -> None:
    """A loss of 100 with an expense of 10 %, 85 in excess of 20: three bases, by hand."""
    cover = Cover(deductible=20, limit=85, **terms)
    schedule = cover.event_schedule(expense=0.1)
    assert cover.annual_payment(schedule(np.array([100.0])))[0] == pytest.approx(payment)


def test_expense_outside_within_the_deductible() -> None:
    """Under a deductible the insurer handles every claim; within a retention the insured does."""
    x = np.array([15.0])
    outside = Cover(deductible=20, expense_basis="outside")
    assert outside.event_schedule(expense=0.1)(x)[0] == pytest.approx(1.5)
    assert replace(outside, self_insured=True).event_schedule(expense=0.1)(x)[0] == 0.0


def test_what_the_deductible_keeps_with_expense() -> None:
    x = np.array([15.0, 100.0])
    for basis, kept in (("inside", [16.5, 20]), ("pro-rata", [16.5, 22]), ("outside", [15, 20])):
        cover = Cover(deductible=20, expense_basis=basis)
        np.testing.assert_allclose(cover.retained_schedule(expense=0.1)(x), kept)


@pytest.mark.parametrize(
    ("sum_insured", "share"), [(0.5e6, 0.0), (1e6, 0.0), (2.5e6, 0.6), (4e6, 0.75), (10e6, 0.3)]
)
def test_surplus(sum_insured: float, share: float) -> None:
    """Kept line 1m, three lines: by hand; 10m insured cedes 3m of it and keeps the rest."""
    cover = Cover(surplus=Surplus(kept_line=1e6, lines=3))
    schedule = cover.event_schedule(sum_insured=sum_insured)
    np.testing.assert_allclose(schedule(LOSSES), share * LOSSES)


def test_stop_loss_in_loss_ratios() -> None:
    """Computed here, two routes: 80 % in excess of 110 % on a premium of 1m at 90, 130 and 250 %."""
    cover = Cover.stop_loss(premium=1e6, retention_ratio=1.1, limit_ratio=0.8)
    np.testing.assert_allclose(
        cover.annual_payment(np.array([0.9e6, 1.3e6, 2.5e6])), [0, 200_000, 800_000], atol=1e-6
    )


def test_reinstatement_premium_loss_by_loss() -> None:
    """Computed by hand, no published source: 4m in excess of 1m, one reinstatement at 100 %, premium 0.6m."""
    cover = Cover(deductible=1e6, limit=4e6, reinstatements=Reinstatements(number=1, rates=1.0))
    running = np.cumsum(cover.event_schedule()(np.array([3e6, 5e6, 2e6, 6e6])))
    used = cover.annual_payment(running)
    np.testing.assert_allclose(np.diff(used, prepend=0.0), [2e6, 4e6, 1e6, 1e6])
    np.testing.assert_allclose(cover.reinstatement_premium(used, 0.6e6), [0.3e6, 0.6e6, 0.6e6, 0.6e6])
    assert cover.year_limit == cover.most_per_year == 8e6
    half = replace(cover, share=0.5)
    np.testing.assert_allclose(half.reinstatement_premium(0.5 * used, 0.6e6), [0.3e6, 0.6e6, 0.6e6, 0.6e6])


def test_rates_by_reinstatement() -> None:
    """The first free, the second at 100 %, the third at 150 %, each pro rata to the amount used."""
    cover = Cover(limit=10, reinstatements=Reinstatements(number=3, rates=[0, 1, 1.5]))
    np.testing.assert_allclose(
        cover.reinstatement_premium(np.array([5.0, 10, 15, 20, 25, 30, 40]), 100.0),
        [0, 0, 50, 100, 175, 250, 250],
    )
    assert cover.describe() == (
        "10 per event in excess of 0, 3 reinstatements at 0 %, 100 %, 150 %, annual limit 40"
    )
    assert Cover(limit=10, reinstatements=Reinstatements(number=0)).year_limit == 10


@given(
    st.sampled_from(
        [
            Cover(deductible=10, disappears_at=30, limit=80, annual_limit=100),
            Cover(deductible=10, limit=60, limit_includes_deductible=True, retained_cap=15),
            Cover(limit=50, reinstatements=Reinstatements(number=1, rates=1.0), annual_retention=20),
            Cover(deductible=10, corridor=Corridor(low=30, high=70, share=0.5), share=0.4),
            Cover(deductible=10, limit=30, share=0.5, order=["share", "deductible", "limit"]),
        ]
    ),
    st.lists(st.floats(0.0, 200.0), min_size=1, max_size=5),
    st.sampled_from([0.01, 1.0, 1.35, 1e4]),
)
@settings(derandomize=True, deadline=None, max_examples=200)
def test_scaling_the_money_scales_the_payment(cover: Cover, losses: list[float], factor: float) -> None:
    """A cover in another currency pays the same in that currency."""
    x, scaled = np.array(losses), cover.scaled(factor)

    def year(terms: Cover, amounts: np.ndarray) -> float:
        paid, kept = terms.event_schedule()(amounts).sum(), terms.retained_schedule()(amounts).sum()
        return float(terms.annual_payment(np.array([paid]), np.array([kept]))[0])

    assert year(scaled, factor * x) == pytest.approx(factor * year(cover, x), rel=1e-9, abs=1e-9 * factor)


def test_surplus_and_corridor_scale_with_the_money() -> None:
    cover = Cover(surplus=Surplus(kept_line=2, lines=3), corridor=Corridor(low=1, high=2)).scaled(10)
    assert cover.surplus == Surplus(kept_line=20, lines=3)
    assert cover.corridor == Corridor(low=10, high=20)


def test_a_cover_without_terms_changes_nothing() -> None:
    cover = Cover()
    assert cover.event_schedule().is_identity
    assert cover.annual_schedule().is_identity
    assert not cover.has_annual_terms
    assert not cover.has_event_terms
    np.testing.assert_array_equal(cover.annual_payment(LOSSES), LOSSES)


def test_covers_are_values() -> None:
    """Equal terms are equal covers, hashable, and survive a process boundary."""
    cover = Cover(
        limit=10, reinstatements=Reinstatements(number=2, rates=[0, 1]), order=["limit", "annual-limit"]
    )
    assert pickle.loads(pickle.dumps(cover)) == cover
    assert hash(cover) == hash(replace(cover))
    assert replace(cover, limit=20).year_limit == 60


@pytest.mark.parametrize(
    ("terms", "message"),
    [
        ({"annual_aggregate_deductible": 5}, "has two opposite meanings.*annual_retention.*retained_cap"),
        ({"aad": 5}, "has two opposite meanings"),
        ({"share": 1.2}, r"probability in \(0, 1\]"),
        ({"share": 80}, "Write 0.8 for 80 %"),
        (
            {"deductible": 10, "limit": 10, "limit_includes_deductible": True},
            "never pays.*Raise limit above 10",
        ),
        ({"deductible": 10, "limit": 5, "order": ["limit", "deductible"]}, "never pays"),
        ({"deductible": 10, "limit_includes_deductible": True}, "needs both a limit and a deductible"),
        ({"deductible": 10, "disappears_at": 10}, "must exceed the deductible"),
        ({"disappears_at": 10}, "there must be one"),
        ({"deductible": 5, "disappears_at": 10, "franchise": True}, "either a franchise or disappearing"),
        ({"deductible": 5, "disappears_at": 10, "limit": 5}, "counts from the first unit"),
        ({"self_insured": True}, "needs its amount"),
        ({"self_insured": 5, "deductible": 5}, "self_insured must be true or false"),
        ({"self_insured": True, "deductible": 5, "franchise": True}, "never erodes the limit"),
        ({"expense_basis": "included"}, "Use one of: inside, outside, pro-rata"),
        ({"reinstatements": Reinstatements(number=1)}, "need a limit per event to reinstate"),
        (
            {"limit": 10, "annual_limit": 30, "reinstatements": Reinstatements(number=1)},
            "1 reinstatements of 10 make an annual limit of 20, and another is given",
        ),
        (
            {"limit": 10, "expense_basis": "outside", "reinstatements": Reinstatements(number=1)},
            "count what is used of the limit",
        ),
        ({"order": "deductible"}, "order must be a list of terms"),
        ({"order": ["deductable"]}, "unknown term; seen: 'deductable'"),
        ({"order": ["limit", "limit"]}, "names a term twice"),
        ({"deductible": 5, "limit": 9, "order": ["deductible"]}, "must name every term.*Add: limit"),
        (
            {"annual_limit": 5, "limit": 9, "order": ["annual-limit", "limit"]},
            "List limit before annual-limit",
        ),
        (
            {
                "deductible": 5,
                "limit": 9,
                "limit_includes_deductible": True,
                "order": ["deductible", "limit"],
            },
            "the limit includes the deductible, so it acts before it",
        ),
    ],
)
def test_terms_that_contradict_each_other_are_refused(terms: dict, message: str) -> None:
    with pytest.raises(InputError, match=message):
        Cover(**terms)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Corridor(low=5, high=5), "must end above where it starts"),
        (lambda: Corridor(low=5, high=9, share=50), "Write 0.5 for 50 %"),
        (lambda: Surplus(kept_line=0, lines=3), "kept_line must be above 0"),
        (lambda: Surplus(kept_line=1, lines=-1), "lines must be above 0"),
        (lambda: Reinstatements(number=1.5), "must be a whole number"),
        (lambda: Reinstatements(number=-1), "must be a whole number"),
        (lambda: Reinstatements(number=2, rates=[1.0]), "2 reinstatements need 2 rates"),
        (lambda: Reinstatements(number=1, rates=100), "Write 1 for 100 %"),
        (lambda: Reinstatements(number=1, rates=-1), "reinstatement rate must be at least 0"),
        (lambda: Cover.stop_loss(premium=1e6, retention_ratio=110), "Write 1.1 for 110 %"),
        (lambda: Cover.stop_loss(premium=0, retention_ratio=1.1), "premium must be above 0"),
        (lambda: Cover().scaled(0), "factor must be above 0"),
        (lambda: Cover().reinstatement_premium(np.ones(1), 1.0), "no reinstatements"),
        (lambda: Cover(deductible=5).event_schedule(expense=0.1), 'State expense-basis: "inside"'),
        (
            lambda: Cover(surplus=Surplus(kept_line=1, lines=3)).event_schedule(),
            "one line of each band of sums",
        ),
    ],
)
def test_clauses_that_cannot_be_meant_are_refused(make, message: str) -> None:
    with pytest.raises(InputError, match=message):
        make()
