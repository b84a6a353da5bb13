"""Exact money: integers with decimal places against fractions of the standard library, on any digits."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.records.money import Money, exact_sum

AMOUNTS = st.one_of(
    st.decimals(min_value=-(10**9), max_value=10**9, places=2),
    st.decimals(allow_nan=False, allow_infinity=False, min_value=Decimal("-1e30"), max_value=Decimal("1e30")),
    st.sampled_from(
        [*map(Decimal, ("1e308", "-1e-400", "0", "-0.00", "1E+5", "4611686018427387904", "0.1", "1e-100"))]
    ),
)


@settings(derandomize=True, deadline=None, max_examples=300)
@given(amounts=st.lists(AMOUNTS, max_size=30), data=st.data())
def test_money_is_what_was_put_in_and_sums_like_fractions(amounts: list[Decimal], data) -> None:
    column = Money.of(amounts)
    assert column.tolist() == amounts
    assert column.to_floats().tolist() == [float(amount) for amount in amounts]
    total = sum(map(Fraction, amounts), Fraction(0))
    assert Fraction(column.total()) == Fraction(exact_sum(amounts)) == total
    assert Fraction(column.absolute().total()) == sum(map(abs, map(Fraction, amounts)), Fraction(0))
    groups = data.draw(st.lists(st.integers(0, 3), min_size=len(amounts), max_size=len(amounts)))
    sums = column.by_group(np.array(groups, dtype=np.int64), 4)
    for group in range(4):
        mine = [Fraction(amount) for amount, of in zip(amounts, groups, strict=True) if of == group]
        assert Fraction(sums[group]) == sum(mine, Fraction(0))
    chosen = np.array([group > 1 for group in groups], dtype=np.bool_)
    assert column[chosen].tolist() == [a for a, of in zip(amounts, groups, strict=True) if of > 1]


def test_a_column_of_the_largest_integers_does_not_overflow() -> None:
    """2,000 times 2**62 - 1 is beyond 64 bits; NumPy's own sum wraps round."""
    largest = 2**62 - 1
    column = Money(np.full(2000, largest), np.zeros(2000, dtype=np.int8))
    assert column.total() == Decimal(2000 * largest)
    assert column.by_group(np.zeros(2000, dtype=np.int64), 1)[0] == Decimal(2000 * largest)
    assert int(column.units.sum()) != 2000 * largest


def test_changing_a_copy_leaves_the_column() -> None:
    column = Money.of([Decimal("1.10"), Decimal("1e300")])
    other = column.copy()
    other[0], other[1] = Decimal("1e300"), Decimal("2.2")
    assert column.tolist() == [Decimal("1.10"), Decimal("1e300")]
    assert other.tolist() == [Decimal("1e300"), Decimal("2.2")]
    assert other.odd.keys() == {0}


def test_groups_of_one_are_moved_not_summed() -> None:
    """Each amount its own group, in another order, those of many digits too."""
    written = ["1.25", "123456789012345678901234.5", "-7", "0.001"]
    place = np.array([2, 0, 3, 1])
    found = Money.of([Decimal(text) for text in written]).by_group(place, 4)
    assert [str(amount) for amount in found] == [written[k] for k in np.argsort(place)]
