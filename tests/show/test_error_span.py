"""The error over a span: what is drawn is what was given."""

from __future__ import annotations

import numpy as np
import pytest

from symamp.show.error_span import Errors, error_span, profile
from tests.show.drawn import assert_same_bytes, assert_whole, legend_words, lines_of, words_on

SAMPLED = np.random.default_rng(1).normal(-0.03, 0.02, 4096)


def test_the_profile_is_the_sorted_error() -> None:
    share, error = profile(np.array([3.0, np.nan, 1.0, 2.0, np.inf]))
    assert share.tolist() == [0, 50, 100]
    assert error.tolist() == [1, 2, 3]
    share, error = profile(SAMPLED)
    assert error[0] == SAMPLED.min()
    assert error[-1] == SAMPLED.max()
    assert len(error) <= 2000
    for k in (10, 500, 1500):  # by definition: so many do not exceed it
        assert np.mean(error[k] >= SAMPLED) == pytest.approx(share[k] / 100, abs=2e-3)
    assert profile(np.array([]))[0].size == 0


def test_a_sampled_span() -> None:
    picture = error_span(Errors(SAMPLED, bias=-0.05, within=0.06, what="gain.dc"))
    assert_whole(picture)
    assert_same_bytes(picture)
    figure = picture.figure()
    axes = figure.axes[0]
    lines = lines_of(axes)
    curve = lines["error, in rising order"].get_xydata()
    assert (np.diff(curve, axis=0) >= 0).all()
    assert curve[0, 1] == pytest.approx(100 * SAMPLED.min())
    assert curve[-1].tolist() == pytest.approx([100, 100 * SAMPLED.max()])
    assert set(lines["at the bias point, −5.00 %"].get_ydata()) == {-5.0}
    ends = [line for label, line in lines.items() if label.startswith(("least", "greatest"))]
    assert sorted(float(line.get_ydata()[0]) for line in ends) == pytest.approx(
        [100 * SAMPLED.min(), 100 * SAMPLED.max()]
    )
    assert "allowed, ±6 %" in legend_words(figure)
    assert axes.get_ylabel() == "error in %"
    assert f"{(np.abs(SAMPLED) > 0.06).sum()} of 4096 beyond 6 %" in picture.alt


def test_a_table_has_a_mark_for_each_row() -> None:
    values = np.array([0.01, -0.04, np.nan, 0.02])
    picture = error_span(Errors(values, np.array([1, 2, 3, 4]), 0.01, 0.03))
    assert_whole(picture)
    figure = picture.figure()
    marks = lines_of(figure.axes[0])["error of a row"].get_xydata()
    assert marks.tolist() == [[1, 1], [2, -4], [4, 2]]
    assert "1 of 4 rows have no value." in words_on(figure)
    assert [t.get_text() for t in figure.axes[0].get_xticklabels()] == ["1", "2", "3", "4"]
    assert figure.axes[0].get_xlabel() == "row of the table"


def test_a_modulus_is_allowed_on_one_side() -> None:
    figure = error_span(Errors(np.abs(SAMPLED), bias=0.05, within=0.06, modulus=True)).figure()
    assert "allowed, 6 %" in legend_words(figure)
    assert figure.axes[0].get_ylim()[0] == 0
    assert figure.axes[0].get_ylabel() == "size of the error in %"


def test_far_values_do_not_hide_the_others() -> None:
    picture = error_span(Errors(np.concatenate([SAMPLED, [40.0, -3.0]]), bias=-0.05, within=0.05))
    assert_whole(picture)
    axes = picture.figure().axes[0]
    assert axes.get_yscale() == "symlog"
    labels = [t.get_text() for t in axes.get_yticklabels()]
    assert "0" in labels
    assert "1000 %" in labels
    assert error_span(Errors(SAMPLED, within=0.05)).figure().axes[0].get_yscale() == "linear"


@pytest.mark.parametrize("unit", ["", "dB", "deg"])
@pytest.mark.parametrize(
    "values",
    [
        [0.0],
        [np.nan],
        [np.inf, -np.inf],
        [0.0, 0.0, 0.0],
        [1e-12, 1e12],
        [-1e30, 1e-30, 5.0],
        [0.3, 0.3],
        list(range(500)),
    ],
)
def test_hostile_errors_are_drawn(values: list[float], unit: str) -> None:
    given = np.array(values, dtype=float)
    rows = np.arange(2, 2 + given.size)
    assert_whole(error_span(Errors(given, None, 0.1, 0.05, unit)))
    error_span(Errors(given, rows, 0.0, 0.0, unit)).svg()
    error_span(Errors(given, None, float("nan"), None, unit)).svg()


def test_shapes_that_do_not_fit_are_refused() -> None:
    with pytest.raises(ValueError, match="one at least"):
        Errors(np.array([]))
    with pytest.raises(ValueError, match="3 row numbers do not go with 2 errors"):
        Errors(np.zeros(2), np.arange(3))
