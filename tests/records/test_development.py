"""Development to ultimate: the chain ladder, Bornhuetter-Ferguson, and factors of open claims."""

from fractions import Fraction

import numpy as np
import pytest

from lossagg.errors import InputError
from lossagg.records import Development
from lossagg.records.development import (
    bornhuetter_ferguson,
    by_age,
    chain_ladder,
    link_factors,
    open_claim_factors,
    to_ultimate,
)

# Cumulative paid claims of Taylor and Ashe (1983), Second moments of estimates of outstanding claims, Journal
# of Econometrics 23, as used by Mack (1993), ASTIN Bulletin 23(2), table 1. Value from memory; the factors
# and reserves below, which Mack prints, are recomputed from it and agree to every digit.
TAYLOR_ASHE = [
    [357848, 1124788, 1735330, 2218270, 2745596, 3319994, 3466336, 3606286, 3833515, 3901463],
    [352118, 1236139, 2170033, 3353322, 3799067, 4120063, 4647867, 4914039, 5339085],
    [290507, 1292306, 2218525, 3235179, 3985995, 4132918, 4628910, 4909315],
    [310608, 1418858, 2195047, 3757447, 4029929, 4381982, 4588268],
    [443160, 1136350, 2128333, 2897821, 3402672, 3873311],
    [396132, 1333217, 2180715, 2985752, 3691712],
    [440832, 1288463, 2419861, 3483130],
    [359480, 1421128, 2864498],
    [376686, 1363294],
    [344014],
]


def triangle(rows: list[list[int]]) -> np.ndarray:
    table = np.full((len(rows), len(rows)), np.nan)
    for k, row in enumerate(rows):
        table[k, : len(row)] = row
    return table


def test_taylor_and_ashe_by_mack_1993() -> None:
    """Mack (1993), ASTIN Bulletin 23(2), section 6: factors and reserves. Value from memory, recomputed."""
    known = triangle(TAYLOR_ASHE)
    links = link_factors(known)
    printed = [3.4906, 1.7473, 1.4574, 1.1739, 1.1038, 1.0863, 1.0539, 1.0766, 1.0177]
    assert links.round(4).tolist() == printed
    latest = np.array([row[-1] for row in TAYLOR_ASHE], dtype=float)
    reserves = chain_ladder(latest, to_ultimate(links, 1.0)[::-1]) - latest
    assert reserves.round().tolist() == [
        *(0, 94634, 469511, 709638, 984889, 1419459, 2177641, 3920301, 4278972, 4625811),
    ]  # fmt: skip
    assert round(float(reserves.sum())) == 18_680_856


def test_links_against_exact_fractions() -> None:
    """The same factors by fractions of whole numbers, from the definition."""
    links = link_factors(triangle(TAYLOR_ASHE))
    for age, link in enumerate(links):
        pairs = [(row[age], row[age + 1]) for row in TAYLOR_ASHE if len(row) > age + 1]
        assert link == pytest.approx(float(Fraction(sum(b for _, b in pairs), sum(a for a, _ in pairs))))


def test_chain_ladder_and_bornhuetter_ferguson() -> None:
    """Reported 100,000, factor 1.8, a-priori 150,000: 180,000 and 166,666.67."""
    reported, factor, prior = np.array([100_000.0]), np.array([1.8]), np.array([150_000.0])
    assert chain_ladder(reported, factor).tolist() == [180_000.0]
    assert bornhuetter_ferguson(reported, prior, factor).round(2).tolist() == [166_666.67]


def test_bornhuetter_ferguson_is_between_what_it_mixes() -> None:
    """Its ultimate is the a-priori for the unseen part, the chain ladder for the seen part."""
    factor = np.array([1.0, 1.25, 4.0])
    reported, prior = np.array([90.0, 80.0, 30.0]), np.array([100.0, 100.0, 100.0])
    seen = 1 / factor
    mixed = seen * chain_ladder(reported, factor) + (1 - seen) * prior
    assert bornhuetter_ferguson(reported, prior, factor) == pytest.approx(mixed)


def test_factors_by_age_begin_with_the_year_of_the_valuation() -> None:
    assert by_age((3.0, 1.5, 1.1), 5).tolist() == [1.0, 1.0, 1.1, 1.5, 3.0]
    assert by_age((3.0, 1.5, 1.1), 2).tolist() == [1.5, 3.0]


def test_to_ultimate_ends_with_the_tail() -> None:
    assert to_ultimate(np.array([2.0, 1.5]), 1.1) == pytest.approx([3.3, 1.65, 1.1])


def test_a_year_seen_in_part_takes_its_own_second_value() -> None:
    """The rest of the year is no development: 4 losses by September became 6 of the same, not 9."""
    table = triangle([[8, 10, 10], [4, 9], [5]])
    first = np.array([10.0, 6.0, np.nan])
    assert link_factors(table, first)[0] == pytest.approx(16 / 12)
    assert link_factors(table)[0] == pytest.approx(19 / 12)
    assert link_factors(table, first)[1] == 1.0


def test_open_claims_develop_by_what_became_of_them() -> None:
    """At age 1 100 was open: 40 closed at 50, 60 stayed open at 90 and grows by the factor of age 2, 1.2."""
    factors = open_claim_factors(np.array([100.0, 50.0]), np.array([50.0, 60.0]), np.array([90.0, 0.0]), 1.05)
    assert factors == pytest.approx([(50 + 90 * 1.2) / 100, 1.2, 1.05])
    unseen = open_claim_factors(np.array([0.0]), np.array([0.0]), np.array([0.0]), 1.05)
    assert unseen.tolist() == [1.05, 1.05]


def test_an_age_without_losses_has_no_factor() -> None:
    with pytest.raises(InputError) as error:
        link_factors(triangle([[0, 3, 3], [0, 2], [1]]))
    assert str(error.value) == (
        "the chain ladder has no factor from age 1 to 2: the years that show it go from 0 to 5; seen: 2. "
        "Give factors by age instead of a tail; the history is too thin for its own."
    )


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({}, "development has neither factors nor a tail"),
        ({"count_factors": (1.2,), "count_tail": 1.0}, "count factors are given and a tail for factors from"),
        (
            {"amount_factors": (0.0,)},
            r"a development factor \(amount\) must be above 0 and finite; seen: 0.0",
        ),
        ({"open_tail": float("inf")}, r"a development factor \(open\) must be above 0 and finite; seen: inf"),
        (
            {"count_factors": (1.2,), "method": "bornhuetter-ferguson"},
            "Bornhuetter-Ferguson needs an a-priori count; seen: 'nothing'. Give a-priori-count",
        ),
        ({"count_factors": (1.2,), "method": "mean"}, "unknown method of development; seen: 'mean'"),
        ({"count_tail": 1.0, "a_priori_count": -1.0}, "a-priori-count must be above 0 and finite; seen: -1"),
    ],
)
def test_developments_that_cannot_be_used(settings: dict, message: str) -> None:
    with pytest.raises(InputError, match=message):
        Development(**settings)
