"""Terms against error: every formula, the line of what is allowed, and the shortest that is."""

from __future__ import annotations

import math

import pytest

from symamp.show.tradeoff import error_ends, tradeoff
from tests.show.drawn import assert_same_bytes, assert_whole, legend_words, lines_of

STEPS = [(40, 0.0), (22, 0.0004), (11, 0.003), (7, 0.02), (4, 0.045), (2, 0.2), (1, 0.9)]


def test_what_is_drawn() -> None:
    picture = tradeoff(STEPS, 0.05, title="gain.dc")
    assert_whole(picture)
    assert_same_bytes(picture)
    figure = picture.figure()
    axes = figure.axes[0]
    lines = lines_of(axes)
    drawn = lines["formula"].get_xydata()
    assert drawn[:, 0].tolist() == [1, 2, 4, 7, 11, 22]
    assert drawn[:, 1].tolist() == pytest.approx([90, 20, 4.5, 2, 0.3, 0.04])
    assert set(lines["allowed, 5 %"].get_ydata()) == {5.0}
    assert lines["shortest that is allowed, 4 terms"].get_xydata().tolist() == [[4, 4.5]]
    assert lines["exact formula, at the bottom edge"].get_xydata().tolist() == [[40, axes.get_ylim()[0]]]
    assert axes.get_yscale() == "log"
    assert axes.get_xlabel() == "number of terms"
    assert axes.get_ylabel() == "worst error in %"
    assert "The shortest within 5 % has 4 terms." in picture.alt
    assert "1 term 90 %" in picture.alt


def test_none_is_allowed() -> None:
    picture = tradeoff([(3, 1e6), (50, 0.2)], 0.05, unit="dB")
    assert_whole(picture)
    assert not any("shortest" in words for words in legend_words(picture.figure()))
    assert "None stays within 0.05 dB." in picture.alt


@pytest.mark.parametrize(
    ("steps", "within"),
    [
        ([(1, 0.0)], 0.05),
        ([(1, 0.0)], 0.0),
        ([(5, 0.3)], 0.3),
        ([(1, 1e-12), (10**19, 0.0)], 1e-3),
        ([(n, 1 / n) for n in range(1, 500)], 0.05),
        ([(2, math.nan), (3, math.inf), (4, 0.1)], 0.05),
        ([(4, 0.1), (4, 0.2)], 0.05),
        ([(1, 1e250), (2, 1e-250)], 0.05),
    ],
)
def test_hostile_steps_are_drawn(steps: list[tuple[int, float]], within: float) -> None:
    assert_whole(tradeoff(steps, within))


def test_what_cannot_be_drawn_is_refused() -> None:
    for steps in ([], [(2, math.nan)]):
        with pytest.raises(ValueError, match="no formula"):
            tradeoff(steps, 0.05)
    with pytest.raises(ValueError, match="one term at least"):
        tradeoff([(0, 0.1)], 0.05)


def test_the_ends_hold_all_errors() -> None:
    low, high = error_ends([0.1, 50.0], 5.0)
    assert low < 0.1
    assert high > 50
    assert error_ends([0.0], 0.0)[0] > 0
