"""Boxes and tables of bias points: how sides are spaced, what follows, and which points are tried."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.span import points
from symamp.span.points import BLOCK, Box, Rows

DEVICES = """\
title = "two devices and a load"

[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }

[bjt]
Q2 = { base = "x", collector = "out", emitter = "gnd" }

[resistor]
RL = ["out", "gnd"]
RX = ["x", "gnd"]

[vcvs]
A3 = { out = ["y", "gnd"], control = ["out", "gnd"] }

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "y" }

[bias]
M1 = { gm = "4 mS", gds = "0.2 mS" }
Q2 = { gm = "40 mS", gpi = "0.4 mS", go = "0.1 mS" }
RL = "5 kohm"
RX = "1 kohm"
A3 = 2

[span]
"""


def stage_with(span: str, folder: Path = Path()) -> Stage:
    return parse_stage((DEVICES + span).encode(), file="my.stage.toml", folder=folder)


def box_with(span: str) -> Box:
    return Box.of(stage_with(span))


def line(*u: float) -> np.ndarray:
    """Points along the one side of a box."""
    return np.array([u])


def test_a_side_with_positive_ends_is_spaced_geometrically() -> None:
    values = box_with('gm1 = ["1 mS", "16 mS"]').values(line(0, 0.25, 0.5, 1))
    assert values["gm1"] == pytest.approx([1e-3, 2e-3, 4e-3, 16e-3])


@pytest.mark.parametrize("ends", ["[-4, 4]", "[0, 8]", "[-8, -2]"])
def test_a_side_with_an_end_that_is_not_positive_is_spaced_evenly(ends: str) -> None:
    low, high = (float(x) for x in ends.strip("[]").split(","))
    values = box_with(f"A3 = {ends}").values(line(0, 0.25, 0.5, 1))
    assert values["A3"] == pytest.approx([low, low + (high - low) / 4, (low + high) / 2, high])


def test_the_ends_are_the_ends_to_the_last_digit() -> None:
    values = box_with('gm1 = ["1.7 mS", "8.3 mS"]').values(line(0, 1))
    assert values["gm1"].tolist() == [1.7e-3, 8.3e-3]


def test_percent_is_about_the_bias_value() -> None:
    values = box_with('gds1 = "30 %"').values(line(0, 1))
    assert values["gds1"] == pytest.approx([0.14e-3, 0.26e-3])


def test_what_is_not_in_the_span_keeps_its_bias() -> None:
    values = box_with('gds1 = "30 %"').values(line(0, 1))
    assert values["gm1"] == 4e-3
    assert values["RL"] == 5e3


def test_a_side_on_an_alias_sets_its_symbol() -> None:
    box = box_with('ro1 = ["2 kohm", "8 kohm"]')
    assert box.varied == ("gds1",)
    assert box.values(line(0, 0.5, 1))["gds1"] == pytest.approx([1 / 2e3, 1 / 4e3, 1 / 8e3])


def test_a_side_on_beta_moves_with_gm() -> None:
    box = box_with('beta2 = [50, 200]\ngm2 = ["10 mS", "40 mS"]')
    values = box.values(np.array([[0.0, 0.5, 1.0], [1.0, 0.5, 0.0]]))
    assert values["gm2"] == pytest.approx([40e-3, 20e-3, 10e-3])
    assert values["gpi2"] == pytest.approx([40e-3 / 50, 20e-3 / 100, 10e-3 / 200])


def test_beta_over_a_gm_that_follows() -> None:
    box = box_with('beta2 = [50, 200]\ngm2 = { follows = "gm1" }\ngm1 = ["2 mS", "8 mS"]')
    values = box.values(np.array([[1.0], [0.0]]))
    assert values["gm2"] == pytest.approx([20e-3])
    assert values["gpi2"] == pytest.approx([20e-3 / 200])


def test_followers_keep_their_bias_ratio_through_a_chain() -> None:
    box = box_with('gds1 = ["0.1 mS", "0.4 mS"]\ngo2 = { follows = "gds1" }\ngpi2 = { follows = "go2" }')
    values = box.values(line(0, 1))
    assert values["go2"] == pytest.approx([0.05e-3, 0.2e-3])
    assert values["gpi2"] == pytest.approx([0.2e-3, 0.8e-3])
    assert box.varied == ("gds1", "gpi2", "go2")  # in the order of the stage


def test_a_follower_of_what_keeps_its_bias_keeps_its_own() -> None:
    box = box_with('gds1 = ["0.1 mS", "0.4 mS"]\ngo2 = { follows = "gm1" }')
    assert box.values(line(0.3))["go2"] == pytest.approx(0.1e-3)


def test_the_bias_point_may_lie_outside_the_box() -> None:
    box = box_with('gm1 = ["8 mS", "16 mS"]\nRL = ["1 kohm", "5 kohm"]\nbeta2 = [25, 400]')
    assert box.bias_point[:, 0] == pytest.approx([-1.0, 1.0, 0.5])


def test_the_bias_point_is_the_first_point_tried() -> None:
    box = box_with('gm1 = ["2 mS", "8 mS"]\nA3 = [1, 5]\nbeta2 = [50, 200]')
    first = next(box.blocks(16, seed=3))[:, :1]
    values = box.values(first)
    for name in box.varied:
        assert values[name] == pytest.approx(float(box.stage.bias[name]))


def test_all_corners_are_tried_each_once() -> None:
    box = box_with('gm1 = ["2 mS", "8 mS"]\nA3 = [1, 5]\nRL = "10 %"')
    corners = {tuple(c) for c in box.corners(1).T}
    assert corners == {(a, b, c) for a in (0.0, 1.0) for b in (0.0, 1.0) for c in (0.0, 1.0)}
    assert box.corners(1).shape == (3, 8)
    assert box.all_corners


def test_of_too_many_corners_a_seeded_draw_is_tried(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(points, "CORNER_LIMIT", 4)
    box = box_with('gm1 = ["2 mS", "8 mS"]\nA3 = [1, 5]\nRL = "10 %"')
    assert not box.all_corners
    drawn = box.corners(5)
    assert drawn.shape == (3, 4)
    assert set(np.unique(drawn)) <= {0.0, 1.0}
    assert np.array_equal(drawn, box.corners(5))
    assert sum(u.shape[1] for u in box.blocks(7, 1)) == box.count(7) == 12


@pytest.mark.parametrize("count", [0, 1, 3, 100, BLOCK + 5])
def test_blocks_give_as_many_points_as_they_say(count: int) -> None:
    box = box_with('gm1 = ["2 mS", "8 mS"]\nRL = "10 %"')
    blocks = list(box.blocks(count, seed=1))
    assert sum(u.shape[1] for u in blocks) == box.count(count) == 5 + count
    assert all(u.shape[1] <= BLOCK for u in blocks)


def test_points_are_the_same_for_the_same_seed_and_differ_for_another() -> None:
    box = box_with('gm1 = ["2 mS", "8 mS"]\nRL = "10 %"')
    one, again, other = (np.concatenate(list(box.blocks(64, seed)), axis=1) for seed in (1, 1, 2))
    assert np.array_equal(one, again)
    assert not np.array_equal(one, other)


def test_sobol_points_fill_the_box_evenly() -> None:
    box = box_with('gm1 = ["2 mS", "8 mS"]\nRL = "10 %"')
    drawn = np.concatenate(list(box.blocks(256, 9))[1:], axis=1)
    assert drawn.shape == (2, 256)
    assert np.all((drawn >= 0) & (drawn <= 1))
    # Of a scrambled Sobol net every one of 16 equal strips holds just 256/16 points, along either side.
    for component in drawn:
        assert np.bincount((component * 16).astype(int), minlength=16).tolist() == [16] * 16


def test_a_table_gives_its_rows(tmp_path: Path) -> None:
    (tmp_path / "corners.csv").write_text("gm1 [mS],RL [kohm]\n1,2\n3,4\n5,6\n")
    rows = Rows(stage_with('table = "corners.csv"', tmp_path))
    assert rows.varied == ("gm1", "RL")
    ((count, values),) = rows.blocks()
    assert count == 3
    assert values["gm1"] == pytest.approx([1e-3, 3e-3, 5e-3])
    assert values["RL"] == pytest.approx([2e3, 4e3, 6e3])
    assert values["gds1"] == 0.2e-3  # absent from the table: keeps its bias


def test_a_long_table_comes_in_blocks_that_lose_no_row(tmp_path: Path) -> None:
    n = BLOCK + 3
    (tmp_path / "long.csv").write_text("gm1 [mS]\n" + "".join(f"{k}\n" for k in range(1, n + 1)))
    found = list(Rows(stage_with('table = "long.csv"', tmp_path)).blocks())
    assert [count for count, _ in found] == [BLOCK, 3]
    assert np.concatenate([values["gm1"] for _, values in found]) == pytest.approx(np.arange(1, n + 1) / 1e3)
