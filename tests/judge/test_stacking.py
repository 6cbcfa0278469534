"""Figures worked out side by side are those that each response has alone."""

from __future__ import annotations

import numpy as np
import pytest

from symamp.circuit.builder import StageBuilder
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.figures import Figures
from symamp.judge.ledger import make_ledger
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


def test_variants_with_different_numbers_of_roots_stand_apart() -> None:
    """A single pole with all roots taken from neighbours has more roots than its coefficients have powers."""
    b = StageBuilder("three stages in a row")
    for k in (1, 2, 3):
        b.vccs(f"GM{k}", out=(f"n{k}", "gnd"), control=("in" if k == 1 else f"n{k - 1}", "gnd"), value="1 mS")
        b.resistor(f"R{k}", f"n{k}", "gnd", "10 kohm")
        b.capacitor(f"C{k}", f"n{k}", "gnd", f"{10**k} pF")
    b.capacitor("CC", "n1", "n3", "0.1 pF")
    b.voltage_source("VIN", "in", "gnd")
    b.response("gain", source="VIN", to="n3")
    b.span("R1", "5 kohm", "20 kohm")
    b.assume("one pole", dominant_pole=True)
    b.assume("far apart", poles_far_apart=True)
    b.assume("no C1", neglect=["C1"])
    account = make_ledger(b.stage(), quantities=["gain.p1"], points=64)["gain.p1"]
    assert account.span is not None
    assert account.span.least <= account.error <= account.span.greatest
