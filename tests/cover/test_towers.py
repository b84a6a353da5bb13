"""Towers: layers end to end, gaps, overlaps, and layers placed in part."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.cover import Cover, Tower
from lossagg.errors import InputError


@given(
    st.lists(st.floats(1.0, 1e6), min_size=1, max_size=5),
    st.lists(st.floats(0.0, 3e6), min_size=1, max_size=8),
)
@settings(derandomize=True, deadline=None, max_examples=200)
def test_layers_end_to_end_pay_every_event_once(widths: list[float], losses: list[float]) -> None:
    ends = np.cumsum([0.0, *widths])
    layers = [Cover(deductible=low, limit=high - low) for low, high in pairwise(ends)]
    tower = Tower((*layers, Cover(deductible=float(ends[-1]))))
    assert tower.gaps() == ()
    x = np.array(losses)
    total = sum(layer.event_schedule()(x) for layer in tower.layers)
    np.testing.assert_allclose(total, x, rtol=1e-10, atol=1e-9)


def test_gaps_and_parts() -> None:
    tower = Tower(
        (
            Cover(deductible=10, limit=10),
            Cover(deductible=30, limit=20, share=0.6),
            Cover(deductible=30, limit=20, share=0.3),
        )
    )
    assert tower.gaps() == ((20, 30),)
    assert [(low, high, round(share, 12)) for low, high, share in tower.partly_placed()] == [(30, 50, 0.9)]
    assert Tower((Cover(limit=0.1), Cover(deductible=0.1, limit=0.2), Cover(deductible=0.3))).gaps() == ()
    inclusive = Cover(deductible=10, limit=20, limit_includes_deductible=True)
    assert Tower((inclusive, Cover(deductible=20, limit=5))).gaps() == ()


@pytest.mark.parametrize(
    ("layers", "message"),
    [
        ((), "a tower needs layers"),
        ((Cover(limit=10), Cover(deductible=5, limit=10)), "layers overlap: 200% of an event from 5 to 10"),
        ((Cover(limit=10, share=0.6), Cover(limit=10, share=0.5)), "layers overlap: 110%"),
        ((Cover(), Cover(deductible=5, limit=10)), "layers overlap"),
        ((Cover(deductible=5, limit=10), Cover(limit=5)), "from the lowest to the highest"),
        ((Cover(deductible=5, franchise=True),), "a layer of a tower has a deductible and a limit"),
    ],
)
def test_towers_that_cannot_be_meant_are_refused(layers: tuple[Cover, ...], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Tower(layers)
