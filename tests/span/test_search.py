"""The local search from the worst points found."""

from __future__ import annotations

from collections.abc import Callable
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.span.extremes import Extremes
from symamp.span.search import compass_search

Function = Callable[[np.ndarray], np.ndarray]


def searched(function: Function, starts: np.ndarray) -> tuple[Extremes, int]:
    """Extremes of a function of u (d, P) -> (rows, P) after a search from these points."""
    extremes = Extremes(function(starts).shape[0])

    def take(u: np.ndarray) -> None:
        assert np.all((u >= 0) & (u <= 1))
        extremes.take(function(u), u)

    extremes.take(function(starts), starts)
    return extremes, compass_search([extremes], take, starts.shape[0])


def peak_at(*place: float) -> Function:
    middle = np.array(place).reshape(-1, 1)
    return lambda u: (1 - ((u - middle) ** 2).sum(axis=0))[None, :]


CORNERS = np.array(list(product([0.0, 1.0], repeat=3))).T


@settings(max_examples=20, deadline=None)
@given(st.tuples(*[st.floats(0.05, 0.95)] * 3), st.tuples(*[st.floats(0, 1)] * 3))
def test_an_interior_maximum_is_found(place: tuple[float, ...], start: tuple[float, ...]) -> None:
    extremes, _ = searched(peak_at(*place), np.concatenate([CORNERS, np.array([start]).T], axis=1))
    found = extremes.result(0)
    assert found is not None
    assert found.greatest == pytest.approx(1.0, abs=1e-4)
    assert found.at_greatest == pytest.approx(np.array(place), abs=5e-3)


def test_a_corner_that_sampling_misses_is_found() -> None:
    # All of the rise is within a tenth of the far corner along each of five sides.
    def steep(u: np.ndarray) -> np.ndarray:
        return np.exp(-8 * (1 - u).sum(axis=0))[None, :]

    inside = 0.3 + 0.4 * np.random.default_rng(1).random((5, 40))
    extremes, _ = searched(steep, inside)
    found = extremes.result(0)
    assert found is not None
    assert steep(inside).max() < 0.01
    assert found.greatest == pytest.approx(1.0)
    assert found.at_greatest.tolist() == [1.0] * 5


def test_least_and_greatest_of_every_figure_are_searched() -> None:
    first, second = peak_at(0.2, 0.6), peak_at(0.9, 0.3)

    def both(u: np.ndarray) -> np.ndarray:
        return np.concatenate([first(u), -second(u)])

    extremes, _ = searched(both, np.array([[0.5], [0.5]]))
    one, two = extremes.result(0), extremes.result(1)
    assert one is not None
    assert two is not None
    assert one.greatest == pytest.approx(1.0, abs=1e-4)
    assert two.least == pytest.approx(-1.0, abs=1e-4)
    assert one.least == pytest.approx(1 - 0.8**2 - 0.6**2)  # the far corner


def test_figures_that_come_late_have_their_turn() -> None:
    """Of 60 figures, each with a peak of its own, none is left where it was for the sake of the first."""
    middles = np.random.default_rng(4).random((60, 2)) * 0.8 + 0.1
    peaks = [peak_at(*middle) for middle in middles]
    extremes, _ = searched(lambda u: np.concatenate([peak(u) for peak in peaks]), np.array([[0.5], [0.5]]))
    for row in range(60):
        found = extremes.result(row)
        assert found is not None
        assert found.greatest == pytest.approx(1.0, abs=1e-3)


def test_a_start_outside_the_box_leads_into_it() -> None:
    extremes, _ = searched(peak_at(0.5), np.array([[-1.5]]))
    found = extremes.result(0)
    assert found is not None
    assert found.greatest == pytest.approx(1.0, abs=1e-4)


def test_the_number_of_points_tried_is_said() -> None:
    calls: list[int] = []
    peak = peak_at(0.3, 0.3)

    def counted(u: np.ndarray) -> np.ndarray:
        calls.append(u.shape[1])
        return peak(u)

    start = np.array([[0.1], [0.1]])
    _, tried = searched(counted, start)
    assert tried == sum(calls[2:])  # the two before are of the start itself


def test_no_point_is_tried_twice() -> None:
    seen: list[tuple[float, ...]] = []
    peak = peak_at(0.3, 0.3)

    def remembered(u: np.ndarray) -> np.ndarray:
        seen.extend(tuple(np.round(column, 9)) for column in u.T)
        return peak(u)

    searched(remembered, np.array([[0.1], [0.1]]))
    tried = seen[2:]
    assert len(tried) == len(set(tried))


def test_a_box_without_sides_has_nothing_to_search() -> None:
    extremes = Extremes(1)
    extremes.take(np.array([[1.0]]), np.empty((0, 1)))
    assert compass_search([extremes], lambda u: None, 0) == 0
