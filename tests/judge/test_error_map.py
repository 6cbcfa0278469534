"""Maps of a claim's error over two symbols: their axes, and their values by the closed form in floats."""

from __future__ import annotations

import numpy as np
import pytest
from judged import CASCODE, RESONATOR, stage_of

from symamp.errors import StageError
from symamp.judge.check import examine
from symamp.judge.claim_reading import claim_of
from symamp.judge.error_map import ErrorMap, error_map

WORKED = "gain.dc = -gm1*gm2*ro1*ro2"
BOX = '\n[span]\ngm2 = ["2 mS", "8 mS"]\ngds1 = "30 %"\ngds2 = { follows = "gds1" }\n'


def made(text: str, claim: str, x: str, y: str, steps: int = 21, within: str = "10 %") -> ErrorMap:
    stage = stage_of(text)
    (examined,) = examine(stage, [claim_of(stage, claim, within)])
    return error_map(examined, x, y, steps)


def worked(gm2: np.ndarray, gds2: np.ndarray, gmb2: np.ndarray | float = 0.62e-3) -> np.ndarray:
    return -(gmb2 + gds2) / (gm2 + gmb2 + gds2)


def test_a_decade_about_the_bias_point() -> None:
    found = made(CASCODE, WORKED, "gm2", "gds2")
    assert (found.x.name, found.y.name, found.x.unit) == ("gm2", "gds2", "S")
    assert (found.x.values[0], found.x.values[-1]) == (pytest.approx(0.39e-3), pytest.approx(39e-3))
    assert found.x.values[10] == pytest.approx(3.9e-3)
    assert found.y.bias == pytest.approx(0.24e-3)
    assert found.error.shape == (21, 21)
    by_hand = worked(found.x.values[None, :], found.y.values[:, None])
    assert np.allclose(found.error, by_hand, rtol=1e-9)
    assert found.error[10, 10] == pytest.approx(-0.86 / 4.76, rel=1e-9)
    assert not found.modulus


def test_rows_are_y_and_columns_x() -> None:
    found = made(CASCODE, WORKED, "gds2", "gm2", steps=5)
    assert np.allclose(found.error, worked(found.y.values[:, None], found.x.values[None, :]), rtol=1e-9)


def test_sides_of_the_span_and_followers() -> None:
    """gm2 over its side; gds1 over its 30 %, and gds2, its follower, with it."""
    found = made(CASCODE + BOX, WORKED, "gm2", "gds1")
    assert (found.x.values[0], found.x.values[-1]) == (pytest.approx(2e-3), pytest.approx(8e-3))
    assert (found.y.values[0], found.y.values[-1]) == (pytest.approx(0.147e-3), pytest.approx(0.273e-3))
    gds2 = found.y.values[:, None] * (0.24 / 0.21)
    assert np.allclose(found.error, worked(found.x.values[None, :], gds2), rtol=1e-9)


def test_an_alias() -> None:
    found = made(CASCODE, WORKED, "ro2", "gmb2")
    assert found.x.unit == "ohm"
    assert found.x.bias == pytest.approx(1 / 0.24e-3)
    assert (found.x.values[0], found.x.values[-1]) == (
        pytest.approx(416.7, abs=0.1),
        pytest.approx(41667, abs=1),
    )
    by_hand = worked(3.9e-3, 1 / found.x.values[None, :], found.y.values[:, None])
    assert np.allclose(found.error, by_hand, rtol=1e-9)


def test_an_alias_over_the_side_of_its_symbol_is_followed() -> None:
    """ro1 on an axis moves gds1, and gds2 with it."""
    found = made(CASCODE + BOX, WORKED, "ro1", "gm2")
    gds2 = 0.24 / 0.21 / found.x.values[None, :]
    assert np.allclose(found.error, worked(found.y.values[:, None], gds2), rtol=1e-9)


def test_decibels_and_modulus() -> None:
    found = made(CASCODE, "gain.dc.db = gm1*gm2*ro1*ro2", "gm2", "gds2", within="1 dB")
    by_hand = 20 * np.log10(1 + worked(found.x.values[None, :], found.y.values[:, None]))
    assert np.allclose(found.error, by_hand, rtol=1e-8)
    ringing = made(RESONATOR, "gain.p1 = -(R1 + R2)/(2*L1)", "R1", "L1")
    assert ringing.modulus
    assert (np.nan_to_num(ringing.error) >= 0).all()
    x, y = ringing.x.values[0], ringing.y.values[-1]
    b = (x + 30) / (2 * y)
    pole = complex(-b, np.sqrt(1 / (y * 1e-9) - b * b))
    assert ringing.error[-1, 0] == pytest.approx(abs(-b / pole - 1), rel=1e-9)


@pytest.mark.parametrize(
    ("x", "y", "words"),
    [
        ("gm9", "gds2", "no symbol"),
        ("gm2", "gdz2", "no symbol"),
        ("gm2", "gm2", "both axes are gm2"),
        ("ro2", "gds2", ""),
    ],
)
def test_axes_that_cannot_be(x: str, y: str, words: str) -> None:
    with pytest.raises(StageError) as caught:
        made(CASCODE, WORKED, x, y)
    assert words in caught.value.problem
    assert caught.value.key == "--map"
    assert caught.value.remedy


def test_a_symbol_that_is_zero_at_the_bias_point() -> None:
    zero = CASCODE.replace('gmb = "0.62 mS"', "gmb = 0")
    with pytest.raises(StageError, match="gmb2 is 0") as caught:
        made(zero, WORKED, "gm2", "gmb2")
    assert "[span] gmb2" in caught.value.remedy
    sided = zero + '\n[span]\ngmb2 = ["0 S", "1 mS"]\n'
    found = made(sided, WORKED, "gm2", "gmb2", steps=5)
    assert list(found.y.values) == pytest.approx([0, 0.25e-3, 0.5e-3, 0.75e-3, 1e-3])
    by_hand = worked(found.x.values[None, :], 0.24e-3, found.y.values[:, None])
    assert np.allclose(found.error, by_hand, rtol=1e-9)


def test_a_wrong_unit_has_no_map() -> None:
    with pytest.raises(StageError, match="the claim is wrong"):
        made(CASCODE, "gain.dc = -gm1*gm2*ro1", "gm2", "gds2")


@pytest.mark.parametrize(("x", "y"), [("gds1", "gds2"), ("gds2", "gds1"), ("ro2", "gds1")])
def test_a_follower_beside_its_leader(x: str, y: str) -> None:
    with pytest.raises(StageError, match="gds2 follows gds1") as caught:
        made(CASCODE + BOX, WORKED, x, y)
    assert caught.value.key == "--map"
