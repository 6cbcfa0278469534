"""The Sobol sequence against scipy's, which is another's code for the same method."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import qmc

from symamp.span.sobol import DIMENSIONS, Sobol


@pytest.mark.parametrize("dimensions", [1, 2, 5, 17, DIMENSIONS, DIMENSIONS + 3])
@pytest.mark.parametrize("seed", [0, 1, 7])
def test_points_are_those_of_scipy(dimensions: int, seed: int) -> None:
    theirs = qmc.Sobol(dimensions, scramble=True, rng=np.random.default_rng(seed)).random(512).T
    ours = Sobol(dimensions, seed)
    assert np.array_equal(np.hstack([ours.points(0, 256), ours.points(256, 256)]), theirs)


def test_any_stretch_can_be_had_alone() -> None:
    whole = Sobol(4, 1).points(0, 1000)
    assert np.array_equal(Sobol(4, 1).points(300, 450), whole[:, 300:750])


def test_beyond_the_table_a_first_draw_of_any_length_is_the_start_of_the_sequence() -> None:
    dimensions = DIMENSIONS + 1
    assert np.array_equal(Sobol(dimensions, 3).points(0, 100), Sobol(dimensions, 3).points(0, 128)[:, :100])


def test_a_power_of_two_points_puts_one_into_each_slice() -> None:
    points = Sobol(DIMENSIONS, 5).points(0, 256)
    assert (np.sort((points * 256).astype(int), axis=1) == np.arange(256)).all()
