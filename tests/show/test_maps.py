"""Error maps: the frontier where the error is what is allowed, the bias point, and windows without either."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest

from symamp.show.maps import Map, Side, draw_map, frontier, level_words
from tests.show.drawn import assert_same_bytes, assert_whole, legend_words, words_on

GM = np.geomspace(1e-3, 1e-2, 81)
GDS = np.geomspace(3e-5, 3e-3, 81)
Error = Callable[[np.ndarray, np.ndarray], np.ndarray]


def given(error: Error, within: float = 0.05, unit: str = "", modulus: bool = False, **sides: Side) -> Map:
    x = sides.get("x", Side("gm2", "S", GM, 3.9e-3))
    y = sides.get("y", Side("gds2", "S", GDS, 0.24e-3))
    found = error(*np.meshgrid(x.values, y.values))
    return Map(x, y, np.asarray(found, dtype=float), within, unit, modulus, "gain.dc")


def usual(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    """What leaving gds2 out beside gm2 does, by hand: −gds2/(gm2 + gds2)."""
    return -y / (x + y)


def test_the_frontier_is_where_the_error_is_allowed() -> None:
    """Known in closed form: gm2/gds2 = 19 for 5 %."""
    lines = frontier(given(usual))
    assert [level for level, _ in lines] == [-0.05]
    points = lines[0][1]
    assert len(points) > 50
    assert np.allclose(usual(points[:, 0], points[:, 1]), -0.05, rtol=2e-4)
    assert np.allclose(points[:, 0] / points[:, 1], 19, rtol=2e-4)


def test_both_signs_have_a_frontier_and_a_modulus_has_one_level() -> None:
    def error(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return np.log(x / y / 16) / 10

    lines = frontier(given(error))
    assert sorted(level for level, _ in lines) == [-0.05, 0.05]
    for level, points in lines:
        assert np.allclose(error(points[:, 0], points[:, 1]), level, atol=1e-4)
    lines = frontier(given(lambda x, y: np.abs(error(x, y)), modulus=True))
    assert {level for level, _ in lines} == {0.05}
    assert len(lines) == 2


def test_linear_sides_and_degrees() -> None:
    x = Side("A1", "", np.linspace(-2, 3, 61), 1.0)
    y = Side("gds2", "S", np.linspace(0, 1e-3, 61), 1e-4)
    assert not x.log
    assert not y.log
    assert Side("gm2", "S", GM, 1.0).log
    found = given(lambda a, b: a + b * 1e3, 2.0, "deg", x=x, y=y)
    for level, points in frontier(found):
        assert np.allclose(points[:, 0] + points[:, 1] * 1e3, level, atol=0.01)
    picture = draw_map(found)
    assert_whole(picture)
    assert "+2°" in words_on(picture.figure())
    assert "size of the error in degrees" in words_on(picture.figure())


def test_no_frontier_where_the_error_goes_through_infinity() -> None:
    """1/(x − x0) changes its sign at x0, and is nowhere small there."""

    def error(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return 1e-3 / (x - 4.1e-3 - y)

    lines = frontier(given(error, 0.5))
    for level, points in lines:
        assert np.allclose(error(points[:, 0], points[:, 1]), level, rtol=0.05)
    assert {level for level, _ in lines} == {0.5, -0.5}


def test_a_steep_zero_has_its_frontier() -> None:
    """From many times too much to as much too little within one line of the grid, by way of 0."""

    def error(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return 300 * np.log(x / 4e-3) + 0 * y

    assert {level for level, _ in frontier(given(error))} == {0.05, -0.05}


def test_what_is_drawn() -> None:
    picture = draw_map(given(usual))
    assert_whole(picture)
    assert_same_bytes(picture)
    figure = picture.figure()
    axes = figure.axes[0]
    drawn = [line for line in axes.get_lines() if line.get_gid() == "frontier"]
    assert len(drawn) == 1
    assert np.array_equal(drawn[0].get_xydata(), frontier(given(usual))[0][1])
    bias = next(line for line in axes.get_lines() if line.get_label() == "bias point")
    assert bias.get_xydata().tolist() == [[3.9e-3, 0.24e-3]]
    words = words_on(figure)
    assert "−5 %" in words
    assert axes.get_xlabel() == "$g_{m2}$"
    assert axes.get_ylabel() == "$g_{ds2}$"
    assert [t.get_text() for t in axes.get_xticklabels() if t.get_text()] == ["1 mS", "2 mS", "5 mS", "10 mS"]
    assert legend_words(figure) == ["frontier, error −5 %", "bias point"]
    for band in ("0.5 %", "1 %", "2.5 %", "5 %", "10 %", "25 %", "50 %"):
        assert band in words
    assert "gm2" in picture.alt
    assert picture.alt.isprintable()


def test_shades_grow_with_the_error_in_grey_too() -> None:
    from matplotlib.colors import to_rgb

    from symamp.show.maps import _SHADES

    weights = np.array([0.2126, 0.7152, 0.0722])  # ITU-R BT.709, luma of linear parts; from memory
    light = [float(weights @ np.array(to_rgb(shade))) for shade in _SHADES]
    assert all(a - b > 0.06 for a, b in pairwise(light))


def test_no_value_is_hatched() -> None:
    found = given(lambda x, y: np.where(x > 8e-3, np.nan, usual(x, y)))
    picture = draw_map(found)
    assert_whole(picture)
    assert "no value" in legend_words(picture.figure())
    assert "no value" not in legend_words(draw_map(given(usual)).figure())


@pytest.mark.parametrize(
    ("error", "within", "words"),
    [
        (0.003, 0.05, "No frontier in this window: the error stays within 5 %, at most 0.3 %."),
        (-0.3, 0.05, "No frontier in this window: the error is beyond 5 % everywhere, at least 30 %."),
        (0.0, 0.05, "The error is 0 everywhere in this window."),
        (0.0, 0.0, "The error is 0 everywhere in this window."),
        (math.nan, 0.05, "There is no value in this window."),
        (math.inf, 0.05, "There is no value in this window."),
        (1e300, 1e-300, "beyond 10⁻²⁹⁸ % everywhere"),
    ],
)
def test_windows_without_a_frontier_say_so(error: float, within: float, words: str) -> None:
    picture = draw_map(given(lambda x, y: error + 0 * x, within))
    assert_whole(picture)
    assert not frontier(given(lambda x, y: error + 0 * x, within))
    shown = " ".join(" ".join(words_on(picture.figure())).split())
    assert words in shown
    assert words in picture.alt


def test_a_bias_point_outside_is_said_and_not_drawn() -> None:
    picture = draw_map(given(usual, x=Side("gm2", "S", GM, 1.0)))
    assert_whole(picture)
    assert "The bias point lies outside this window." in words_on(picture.figure())
    assert "bias point" not in legend_words(picture.figure())


def test_huge_ranges_and_small_grids_are_drawn() -> None:
    tiny = Side("cgd_out_of_the_second_stage", "F", np.array([1e-18, 1e-9]), 1e-15)
    other = Side("ro1", "ohm", np.array([1e2, 1e9]), 1e5)
    assert_whole(draw_map(given(lambda x, y: x * y * 1e6, x=tiny, y=other)))
    assert_whole(draw_map(given(lambda x, y: np.exp(1e5 * y) - 1)))
    assert_whole(draw_map(given(lambda x, y: np.sin(x * 1e4) * y / x, 0.0)))
    assert_whole(draw_map(given(lambda x, y: np.random.default_rng(1).normal(size=x.shape))))


def test_shapes_that_do_not_fit_are_refused() -> None:
    with pytest.raises(ValueError, match="gm2 needs two ascending values"):
        Map(Side("gm2", "S", GM, 1.0), Side("gds2", "S", GDS, 1.0), np.zeros((81, 3)), 0.05)
    with pytest.raises(ValueError, match="gds2 needs two ascending values"):
        Map(Side("gm2", "S", GM, 1.0), Side("gds2", "S", GDS[::-1], 1.0), np.zeros((81, 81)), 0.05)
    with pytest.raises(ValueError, match="within="):
        given(usual, math.nan)


def test_levels_in_words() -> None:
    assert level_words(0.05, "") == "5 %"
    assert level_words(-0.005, "") == "−0.5 %"
    assert level_words(0.5, "dB") == "0.5 dB"
    assert level_words(2, "deg") == "2°"
    assert level_words(0, "") == "0 %"
    assert level_words(1.23456e4, "") == "1.23·10⁶ %"
