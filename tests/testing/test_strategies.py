"""Strategies: points lie in the span or are sensible, shrink to the bias, and stages have one solution."""

from __future__ import annotations

import pickle
import re
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from flint import fmpq_poly
from held_stages import (
    CASCODE,
    CASCODE_SPAN,
    COMMON_EMITTER,
    COMMON_SOURCE,
    common_source,
    solved_by_tableau,
    stage_of,
)
from hypothesis import HealthCheck, assume, find, given, settings
from hypothesis import strategies as st

import symamp
from symamp.circuit.kinds import KINDS
from symamp.circuit.stage import Span, Stage
from symamp.circuit.stagefile import parse_stage
from symamp.errors import ReadError, StageError
from symamp.exact.derive import derive
from symamp.span.points import Box
from symamp.testing import BiasPoint, bias_points, random_stages, stages_of
from symamp.testing.sensible import RATIOS

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
ALL_KINDS = tuple(name for name in KINDS if not name.endswith("_source"))
quick = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])
sure = settings(database=None, derandomize=True, max_examples=500, deadline=None)

cascode = stage_of(CASCODE + CASCODE_SPAN)
emitter = stage_of(COMMON_EMITTER)
without_bias = stage_of(COMMON_SOURCE)


def side_value(stage: Stage, point: BiasPoint, name: str) -> float:
    powers = stage.aliases.get(name, {name: 1})
    return float(np.prod([point[symbol] ** power for symbol, power in powers.items()]))


def place_in_box(stage: Stage, point: BiasPoint) -> np.ndarray:
    """u of a point: where on each side its value lies, geometrically."""
    rows = []
    for side in stage.span.sides:
        low, high = float(side.low), float(side.high)
        rows.append([np.log(side_value(stage, point, side.name) / low) / np.log(high / low)])
    return np.array(rows)


def at(polynomial: fmpq_poly, omega: Fraction) -> tuple[Fraction, Fraction]:
    """Real and imaginary part of a polynomial at s = jω, exactly."""
    parts = [Fraction(0), Fraction(0)]
    for k, c in enumerate(polynomial.coeffs()):
        parts[k % 2] += Fraction(int(c.p), int(c.q)) * omega**k * (-1) ** (k // 2)
    return parts[0], parts[1]


def within(ratio: float, low: float, high: float) -> bool:
    return low * (1 - 1e-9) <= ratio <= high * (1 + 1e-9)


# Within the span


@pytest.mark.parametrize("stage", [cascode, emitter, common_source()], ids=lambda s: s.title)
def test_points_are_points_of_the_box(stage: Stage) -> None:
    """Against the box that the ledger samples: the same sides give the same values, followers and all."""
    box = Box.of(stage)

    @quick
    @given(bias_points(stage))
    def run(point: BiasPoint) -> None:
        u = place_in_box(stage, point)
        assert (u >= -1e-12).all()
        assert (u <= 1 + 1e-12).all()
        expected = box.values(u)
        for name, value in point.items():
            assert value == pytest.approx(float(np.ravel(expected[name])[0]), rel=1e-11)

    run()


def test_corners_of_the_box_are_met() -> None:
    corner = find(
        bias_points(common_source()), lambda p: p["gm1"] == 8e-3 and p["gds1"] == 1e-3, settings=sure
    )
    assert corner.changed == ("gm1", "gds1")


def test_rows_of_a_table_are_the_points(tmp_path: Path) -> None:
    rows = [(2e-3, 1e-4), (4.1e-3, 2.1e-4), (8e-3, 9e-4)]
    lines = ["gm1 [mS],gds1 [uS]", *(f"{1e3 * gm:g},{1e6 * gds:g}" for gm, gds in rows)]
    (tmp_path / "corners.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    text = COMMON_SOURCE + '[bias]\nM1 = { gm = "4.1 mS", gds = "0.21 mS" }\nRL = "1.2 kohm"\nCL = "3.3 pF"\n'
    stage = stage_of(text + '[span]\ntable = "corners.csv"\n', tmp_path)
    met: set[tuple[float, float]] = set()

    @quick
    @given(bias_points(stage))
    def run(point: BiasPoint) -> None:
        met.add((point["gm1"], point["gds1"]))
        assert point["RL"] == 1200

    run()
    assert met == {(float(f"{a:g}"), float(f"{b:g}")) for a, b in rows}
    assert find(bias_points(stage), lambda _: True, settings=sure).changed == ()


def test_only_the_symbols_asked_for_vary() -> None:
    @quick
    @given(bias_points(cascode, "M1"))
    def run(point: BiasPoint) -> None:
        assert set(point.changed) <= {"gm1", "gds1"}

    run()
    with pytest.raises(ReadError, match="gm3"):
        bias_points(cascode, ["gm1", "gm3"])


def test_a_current_gain_at_its_bias_stays_there_while_gm_moves() -> None:
    point = find(bias_points(emitter), lambda p: p["gm1"] != 40e-3, settings=sure)
    assert side_value(emitter, point, "beta1") == pytest.approx(160, rel=1e-12)


# Sensible ones


@pytest.mark.parametrize(
    "text", [COMMON_SOURCE, COMMON_EMITTER.split("[bias]")[0], CASCODE.split("[bias]")[0]]
)
def test_without_a_bias_points_are_physically_sensible(text: str) -> None:
    stage = stage_of(text)

    @quick
    @given(bias_points(stage))
    def run(point: BiasPoint) -> None:
        assert list(point) == list(stage.symbols)
        for part in stage.parts.values():
            value = {name: point[part.symbol(name)] for name in part.parameters}
            if part.kind.name == "mosfet":
                assert within(value["gm"] / value["gds"], 5, 200)
                assert "gmb" not in value or within(value["gmb"] / value["gm"], 0.05, 0.4)
            if part.kind.name == "bjt":
                assert within(value["gm"] / value["gpi"], 20, 500)
                assert within(value["gm"] / value["go"], 500, 5000)

    run()


def test_capacitances_keep_their_usual_ratios() -> None:
    @quick
    @given(random_stages(devices=["mosfet", "bjt"]))
    def run(stage: Stage) -> None:
        for part in stage.parts.values():
            for name in part.parameters:
                ratio = RATIOS.get((part.kind.name, name))
                if ratio is not None and ratio.to in part.parameters:
                    found = float(stage.bias[part.symbol(name)] / stage.bias[part.symbol(ratio.to)])
                    assert within(found, ratio.low, ratio.high)

    run()


def test_a_bias_out_of_the_ordinary_is_a_point_all_the_same() -> None:
    """gm/gds of 2, which no rule of thumb has."""
    text = COMMON_SOURCE + '[bias]\nM1 = { gm = "1 mS", gds = "0.5 mS" }\nRL = "1 kohm"\nCL = "1 pF"\n'
    stage = stage_of(text)
    assert find(bias_points(stage), lambda _: True, settings=sure).changed == ()
    assert find(bias_points(stage), lambda p: p["gds1"] / p["gm1"] < 0.2, settings=sure)


def test_a_body_effect_of_zero_stays_zero() -> None:
    stage = stage_of(CASCODE.replace('gmb = "0.6 mS"', "gmb = 0"))

    @quick
    @given(bias_points(stage))
    def run(point: BiasPoint) -> None:
        assert point["gmb2"] == 0

    run()


# Shrinking


@pytest.mark.parametrize("stage", [cascode, emitter, common_source(), common_source(span=False)])
def test_the_simplest_point_is_the_bias(stage: Stage) -> None:
    point = find(bias_points(stage), lambda _: True, settings=sure)
    assert point.changed == ()
    assert point.words == "the bias point"
    assert point == {name: float(value) for name, value in stage.bias.items()}


@pytest.mark.parametrize(
    ("condition", "changed"),
    [
        (lambda p: p["gm1"] > 6e-3, {"gm1"}),
        (lambda p: p["gds1"] * p["RL"] > 1, {"gds1"}),
        (lambda p: p["gm1"] * p["RL"] > 9 and p["gds1"] < 2e-4, {"gm1", "gds1"}),
    ],
)
def test_what_does_not_matter_goes_back_to_the_bias(condition: Any, changed: set[str]) -> None:
    point = find(bias_points(common_source()), condition, settings=sure)
    assert set(point.changed) == changed


def test_values_are_short_decimals() -> None:
    @quick
    @given(bias_points(common_source(span=False)))
    def run(point: BiasPoint) -> None:
        for name in point.changed:
            digits = f"{point[name]:.12e}".split("e")[0].replace(".", "").rstrip("0")
            assert len(digits) <= 3  # those of the bias, a decade away, or two

    run()


# How it prints


def test_a_point_reads_as_one_writes_it() -> None:
    point = BiasPoint(common_source(), {"gds1": 2e-4, "gm1": 4.1e-3})
    assert repr(point) == "gm1 = 4.1 mS, gds1 = 200 uS"
    assert point.words == "the bias point but for gds1 = 200 uS (the stage file has 210 uS)"
    assert pickle.loads(pickle.dumps(point)) == point


def test_what_the_span_sets_by_an_alias_is_told_by_it() -> None:
    point = find(bias_points(emitter), lambda p: p["gm1"] / p["gpi1"] < 110, settings=sure)
    assert point.words == "the bias point but for beta1 = 100 (the stage file has 160)"


def test_without_a_bias_all_is_told() -> None:
    point = find(bias_points(without_bias), lambda _: True, settings=sure)
    assert point.words == repr(point)
    assert re.fullmatch(r"gm1 = .* mS, gds1 = .*S, RL = .*ohm, CL = .*F", repr(point))


@pytest.mark.parametrize("stage", [cascode, emitter, common_source(span=False)])
def test_lines_of_a_stage_file_read_back_to_the_point(stage: Stage) -> None:
    text = (stage.source or b"").decode()

    @quick
    @given(bias_points(stage))
    def run(point: BiasPoint) -> None:
        lines = "\n".join(point.stage_file_lines())
        again = stage_of(text.split("[bias]")[0] + "[bias]\n" + lines)
        assert {name: float(value) for name, value in again.bias.items()} == point

    run()


# Random stages


@quick
@given(random_stages(devices=ALL_KINDS))
def test_random_stages_have_one_solution(stage: Stage) -> None:
    """Against the sparse tableau, which knows nothing of the nodal matrix."""
    (asked,) = stage.asked.values()
    omega = Fraction(10) ** 6
    numerator, denominator = (at(p, omega) for p in derive(stage, asked).exact_coefficients)
    assume(denominator != (0, 0))
    size = denominator[0] ** 2 + denominator[1] ** 2
    real = numerator[0] * denominator[0] + numerator[1] * denominator[1]
    imaginary = numerator[1] * denominator[0] - numerator[0] * denominator[1]
    found = complex(float(real / size), float(imaginary / size))
    assert found == pytest.approx(solved_by_tableau(stage, asked, omega), rel=1e-12, abs=1e-30)


@quick
@given(random_stages(max_nodes=3, max_parts=2, devices=["mosfet"]))
def test_random_stages_keep_to_what_is_asked(stage: Stage) -> None:
    assert len({node for part in stage.parts.values() for node in part.nodes} - {"gnd"}) <= 3
    kinds = [part.kind.name for part in stage.parts.values()]
    assert 1 <= kinds.count("mosfet") <= 2
    assert set(kinds) <= {"mosfet", "resistor", "voltage_source", "current_source"}
    assert set(stage.bias) == set(stage.symbols)


@quick
@given(random_stages())
def test_a_random_stage_prints_as_a_file_that_reads_back(stage: Stage) -> None:
    text = "\n".join(line[2:] for line in repr(stage).splitlines()[1:-1])
    again = parse_stage(text.encode(), file=None, folder=Path())
    assert replace(again, source=None) == replace(stage_plain(stage), source=None)


def stage_plain(stage: Stage) -> Stage:
    return Stage(**{name: getattr(stage, name) for name in Stage.__dataclass_fields__})


def test_the_simplest_random_stage_is_small() -> None:
    stage = find(
        random_stages(), lambda s: any(p.kind.name == "mosfet" for p in s.parts.values()), settings=sure
    )
    assert len(stage.parts) == 4  # the drive, two resistors and the transistor


def test_an_unknown_kind_of_device_is_named() -> None:
    with pytest.raises(StageError, match=r"no kind of part is called .mosfett.; .*mosfet"):
        random_stages(devices=["mosfett"])


# Stages of files


@quick
@given(stages_of(RECIPES).map(symamp.Stage))
def test_stages_of_a_folder(stage: symamp.Stage) -> None:
    assert stage.responses
    assert "recipes" in repr(stage.data)


def test_a_folder_without_stage_files_is_named(tmp_path: Path) -> None:
    with pytest.raises(StageError, match="no stage file in "):
        stages_of(tmp_path)


def test_a_span_that_is_taken_off_leaves_sensible_points() -> None:
    free = replace(cascode, span=Span())
    point = find(bias_points(free), lambda p: p["CL"] > 1e-11, settings=sure)
    assert point.changed == ("CL",)


@quick
@given(st.data())
def test_points_of_any_recipe_are_values_that_its_response_takes(data: st.DataObject) -> None:
    stage = data.draw(stages_of(RECIPES))
    point = data.draw(bias_points(stage))
    for name in stage.asked:
        assert np.isfinite(symamp.Stage(stage).response(name).at(1e6, bias=point))
