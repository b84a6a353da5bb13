"""Names of result folders: no way out of the output folder, no collision, no order."""

from __future__ import annotations

import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.batch.names import RESERVED, result_names, slug


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("Harbour pool 2026", "harbour-pool-2026"),
        ("../../etc/passwd", "etc-passwd"),
        ("Straße & Söhne", "strae-sohne"),
        ("CON", "portfolio-con"),
        ("index", "portfolio-index"),
        ("港", "portfolio"),
        ("...", "portfolio"),
        ("x" * 300, "x" * 60),
    ],
)
def test_slugs(name: str, expected: str) -> None:
    assert slug(name) == expected


@settings(derandomize=True, deadline=None, max_examples=200)
@given(st.sets(st.text(max_size=20), max_size=12))
def test_result_names_are_safe_unique_and_free_of_order(names: set[str]) -> None:
    found = result_names(sorted(names))
    assert found == result_names(sorted(names, reverse=True))
    assert len(set(found.values())) == len(names)
    for result in found.values():
        assert re.fullmatch(r"[a-z0-9]+(-[a-z0-9]+)*", result)
        assert result not in RESERVED


def test_a_name_made_like_a_result_folder_of_others_gets_its_own() -> None:
    taken = result_names(["Pool", "pool"])["pool"]
    found = result_names(["Pool", "pool", taken])
    assert len(set(found.values())) == 3
    assert found["Pool"].startswith("pool-")


def test_names_that_differ_in_case_only_are_kept_apart() -> None:
    found = result_names(["Pool", "pool", "POOL"])
    assert len({name.lower() for name in found.values()}) == 3
