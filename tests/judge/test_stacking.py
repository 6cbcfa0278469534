"""Figures worked out side by side are those that each response has alone."""

from __future__ import annotations

import numpy as np
import pytest

from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.figures import Figures
from symamp.judge.stacking import StackedFigures, stacked

QUANTITIES = ("dc", "p1", "p2.hz", "z1", "bandwidth", "unity_gain_frequency", "phase_margin", "at(1 kHz).db")


def some(seed: int, points: int, zeros: int = 1, unit: str = "") -> Figures:
    """A response with two poles and as many zeros as asked for, at random points."""
    draw = np.random.default_rng(seed)
    scale = np.array([[1.0], [1e-5], [1e-11]])
    num = 30 * draw.uniform(0.5, 2, (zeros + 1, points)) * scale[: zeros + 1] * 1e-2
    return Figures(num, draw.uniform(0.5, 2, (3, points)) * scale, unit)


@pytest.mark.parametrize("points", [1, 7, 5000])
def test_stacked_figures_are_each_ones_own(points: int) -> None:
    given = [some(seed, points, zeros=seed % 2) for seed in range(6)]
    alone = [some(seed, points, zeros=seed % 2) for seed in range(6)]
    for together, own in zip(stacked(given), alone, strict=True):
        for quantity in map(parse_quantity, QUANTITIES):
            np.testing.assert_allclose(together.value(quantity), own.value(quantity), rtol=1e-13)
        np.testing.assert_allclose(together.poles, own.poles, rtol=1e-13)
        np.testing.assert_allclose(together.zeros, own.zeros, rtol=1e-13)


def test_only_figures_of_one_shape_with_few_points_stand_together() -> None:
    few = [some(0, 4), some(1, 4), some(2, 4, zeros=0), some(3, 4, unit="ohm"), some(4, 5)]
    assert [isinstance(each, StackedFigures) for each in stacked(few)] == [True, True, False, False, False]
    many = [some(0, 9000), some(1, 9000)]
    assert stacked(many) == many


def test_roots_that_were_given_stay() -> None:
    given = [some(seed, 3) for seed in range(2)]
    for k, each in enumerate(given):
        each.set_roots(np.full((1, 3), -1.0 - k), np.array([[-2.0 - k] * 3, [-9.0 - k] * 3]))
    for k, together in enumerate(stacked([*given, some(2, 3)])[:2]):
        assert (together.poles[1] == -9.0 - k).all()
        assert (together.zeros == -1.0 - k).all()
        assert (together.value(parse_quantity("p1")) == -2.0 - k).all()
