"""Signed bars: their lengths, their hatching, and their words."""

from __future__ import annotations

import math
from typing import Any

import pytest
from matplotlib.patches import Rectangle

from symamp.show.bars import Bar, bars
from symamp.show.picture import Picture
from tests.show.drawn import assert_same_bytes, assert_whole, words_on

ROWS = (
    Bar("ideal current source as load", 0.12),
    Bar("no body effect", -0.0871),
    Bar("CL is the only capacitor", 0.0),
    Bar(
        "a rather long name of an assumption that somebody wrote down with $5 or $6 of care_and_patience",
        None,
    ),
)


def drawn(picture: Picture) -> list[Any]:
    return [p for p in picture.figure().axes[0].patches if isinstance(p, Rectangle)]


def test_lengths_and_hatches() -> None:
    picture = bars(ROWS, total=Bar("all together", -0.0329), title="gain.dc")
    assert_whole(picture)
    assert_same_bytes(picture)
    found = drawn(picture)
    assert [bar.get_width() for bar in found] == pytest.approx([12, -8.71, 0, 0, -3.29])
    assert [bool(bar.get_hatch()) for bar in found] == [False, True, False, False, True]
    assert len({bar.get_edgecolor() for bar in found[:4]}) == 1  # one colour
    tops = [bar.get_y() for bar in found]
    assert tops == sorted(tops)  # the first on top of an axis that points down
    low, high = picture.figure().axes[0].get_ylim()
    assert low > high


def test_words() -> None:
    picture = bars(ROWS)
    words = words_on(picture.figure())
    for value in ("+12.0 %", "−8.71 %", "0 %", "none"):
        assert value in words
    assert (
        "a rather long name of an\nassumption that somebody wrote\ndown with $5 or $6 of\ncare_and_patience"
        in words
    )
    assert "no body effect −8.71 %" in picture.alt


def test_units() -> None:
    assert "−0.250 dB" in words_on(bars([Bar("a", -0.25)], unit="dB").figure())
    figure = bars([Bar("a", -0.25)], unit="deg", axis="added error").figure()
    assert "−0.250°" in words_on(figure)
    assert figure.axes[0].get_xlabel() == "added error in degrees"


@pytest.mark.parametrize(
    "rows",
    [
        [Bar("x", 0.0)],
        [Bar("", None)],
        [Bar("x", math.nan), Bar("y", math.inf), Bar("z", -math.inf)],
        [Bar("x", 1e12), Bar("y", -1e-12)],
        [Bar("x" * 200, -1e-5), Bar("日本 \x01\n $a_b$ \\frac{", -0.3)],
        [Bar(f"assumption {k}", (-1) ** k / (k + 1)) for k in range(40)],
    ],
)
def test_hostile_rows_are_drawn(rows: list[Bar]) -> None:
    assert_whole(bars(rows))
    assert_whole(bars(rows, total=Bar("all", -1.0), unit="dB"))


def test_nothing_is_refused() -> None:
    with pytest.raises(ValueError, match="nothing to draw"):
        bars([])
