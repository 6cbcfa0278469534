"""Least and greatest values while points stream by."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from symamp.span.extremes import Extremes

FIGURES = arrays(float, (3, 12), elements=st.floats(-1e6, 1e6).map(lambda x: round(x, 3)))


def taken(blocks: list[np.ndarray]) -> Extremes:
    """All blocks of figures, the place of a point being its number."""
    extremes, done = Extremes(blocks[0].shape[0]), 0
    for block in blocks:
        extremes.take(block, np.arange(done, done + block.shape[1], dtype=float).reshape(1, -1))
        done += block.shape[1]
    return extremes


@given(FIGURES, st.integers(1, 11))
def test_whatever_the_blocks_least_and_greatest_are_those_of_all_points(data: np.ndarray, cut: int) -> None:
    extremes = taken([data[:, :cut], data[:, cut:]])
    for row in range(3):
        found = extremes.result(row)
        assert found is not None
        assert not found.modulus
        assert (found.least, found.greatest) == pytest.approx((data[row].min(), data[row].max()), rel=1e-11)
        assert data[row, int(found.at_least[0])] == found.least
        assert data[row, int(found.at_greatest[0])] == found.greatest


@given(FIGURES)
def test_the_modulus_may_be_asked_for(data: np.ndarray) -> None:
    extremes = taken([data])
    for row in range(3):
        found = extremes.result(row, modulus=True)
        assert found is not None
        assert found.modulus
        size = np.abs(data[row])
        assert (found.least, found.greatest) == (size.min(), size.max())


def test_one_complex_point_makes_all_of_a_figure_moduli() -> None:
    real, mixed = np.array([[-5.0, 1.0, 0.5]]), np.array([[3 + 4j, 0.25, -2]])
    extremes = taken([real, mixed])
    found = extremes.result(0)
    assert found is not None
    assert found.modulus
    assert (found.least, found.greatest) == (0.25, 5.0)
    assert (found.at_least[0], found.at_greatest[0]) == (4.0, 0.0)
    assert extremes.any_complex


def test_complex_numbers_that_are_all_real_stay_signed() -> None:
    found = taken([np.array([[-5 + 0j, 1 + 0j]])]).result(0)
    assert found is not None
    assert (found.modulus, found.least, found.greatest) == (False, -5.0, 1.0)


def test_each_figure_is_judged_by_itself() -> None:
    extremes = taken([np.array([[-5 + 0j, 1], [1j, -2]])])
    signed, modulus = extremes.result(0), extremes.result(1)
    assert signed is not None
    assert modulus is not None
    assert (signed.modulus, modulus.modulus) == (False, True)


def test_missing_points_are_counted_and_passed_over() -> None:
    extremes = taken(
        [np.array([[np.nan, 2.0], [np.nan, np.nan]]), np.array([[np.nan, -1.0], [np.nan, np.nan]])]
    )
    found = extremes.result(0)
    assert found is not None
    assert (found.least, found.greatest) == (-1.0, 2.0)
    assert extremes.missing.tolist() == [2, 4]
    assert extremes.result(1) is None


def test_a_missing_complex_figure_is_no_sign_of_a_complex_one() -> None:
    extremes = taken([np.array([[complex(np.nan, np.nan), -2.0 + 0j]])])
    found = extremes.result(0)
    assert found is not None
    assert (found.modulus, found.least) == (False, -2.0)


def test_of_points_that_differ_by_rounding_the_first_stays() -> None:
    found = taken([np.array([[1.0, 1.0 + 1e-15]]), np.array([[1.0 + 2e-15]])]).result(0)
    assert found is not None
    assert found.at_greatest[0] in (0.0, 1.0)


def test_an_infinite_figure_is_no_extreme() -> None:
    found = taken([np.array([[1.0, 2.0]]), np.array([[np.inf, -np.inf]]), np.array([[3.0, 0.5]])]).result(0)
    assert found is not None
    assert (found.least, found.greatest) == (0.5, 3.0)
