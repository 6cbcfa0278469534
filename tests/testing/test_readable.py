"""Values for counterexamples: they lie where they should, and the simplest comes first."""

from __future__ import annotations

import math
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.testing.readable import readable_values

positive = st.floats(1e-15, 1e12)


@given(positive, st.floats(1, 1e6), st.none() | st.floats(0, 1))
def test_values_lie_in_the_range_and_the_start_is_first(
    low: float, ratio: float, share: float | None
) -> None:
    high = low * ratio
    start = None if share is None else min(max(low * ratio**share, low), high)
    found = readable_values(low, high, start)
    assert all(low <= x <= high for x in found)
    assert len(set(found)) == len(found)
    assert {low, high} <= set(found)
    assert start is None or low == high or found[0] == start


@given(st.integers(1, 99), st.integers(-14, 6), st.floats(1.01, 1e6))
def test_there_are_enough_values_and_they_are_short(mantissa: int, power: int, ratio: float) -> None:
    low = float(f"{mantissa}e{power}")
    found = readable_values(low, low * ratio)
    assert len(found) >= 12
    between = [x for x in found if x not in (low, low * ratio)]
    # The floats are those of decimals of six digits at most, as `repr` shows.
    assert all(x == float(f"{x:.5e}") for x in between)


@pytest.mark.parametrize(
    ("low", "high", "start", "first"),
    [
        (2e-3, 8e-3, 4.1e-3, [4.1e-3, 5e-3, 8e-3, 2e-3, 4.7e-3]),
        (1e-6, 1e-2, None, [1e-4]),
        (-1.0, 2.0, 0.75, [0.75, 0.0, 2.0, -1.0, 1.0]),
        (-8.0, -2.0, -3.0, [-3.0, -2.0, -5.0, -8.0, -3.3]),
        (5.0, 5.0, None, [5.0]),
        (0.0, 0.0, 0.0, [0.0]),
        (1e-3, 2e-3, 5e-3, [2e-3, 1e-3, 1.5e-3]),  # the bias lies outside: begin at the nearest
    ],
)
def test_first_values(low: float, high: float, start: float | None, first: list[float]) -> None:
    assert list(readable_values(low, high, start))[: len(first)] == first


@given(st.floats(-1e6, 0), st.floats(1e-6, 1e6))
def test_a_range_through_zero_is_evenly_spaced(low: float, high: float) -> None:
    found = readable_values(low, high)
    assert len(found) >= 20
    assert 0.0 in found
    inner = sorted(set(found) - {low, high})
    steps = [b - a for a, b in pairwise(inner)]
    assert max(steps) <= min(steps) * 1.01 + 1e-12 or math.isclose(max(steps), min(steps), rel_tol=1e-6)
