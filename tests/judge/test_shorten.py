"""The shortest formulas: known results recovered, errors measured again by nodal analysis, bounds kept."""

from __future__ import annotations

import random
import sys
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from nodal import Nodal

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.errors import StageError
from symamp.formula import evaluate, parse
from symamp.judge.sample import sample_of
from symamp.judge.shorten import Shortening, Shortest, make_shortest
from symamp.span.points import Box

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
sys.path.append(str(Path(__file__).resolve().parents[1] / "exact"))

CASCODE = """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }
[capacitor]
CL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
[bias]
M1 = { gm = "5 mS", gds = "0.1 mS" }
M2 = { gm = "5 mS", gds = "0.1 mS", gmb = "0.9 mS" }
CL = "2 pF"
"""
FOLLOWER = """
[mosfet]
M1 = { gate = "in", drain = "gnd", source = "out" }
[resistor]
RS = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "5 mS", gds = "0.05 mS", gmb = "0.9 mS" }
RS = "50 kohm"
[span]
gm1 = ["3 mS", "8 mS"]
"""
DEGENERATED = """
[bjt]
Q1 = { base = "in", collector = "out", emitter = "e" }
[resistor]
RC = ["out", "gnd"]
RE = ["e", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
Q1 = { gm = "40 mS", beta = "200", ro = "100 kohm" }
RC = "5 kohm"
RE = "1 kohm"
[span]
gm1 = ["30 mS", "60 mS"]
"""
OPAMP = """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "x", drain = "out", source = "gnd" }
[capacitor]
C1 = ["x", "gnd"]
C2 = ["out", "gnd"]
CC = ["x", "out"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "0.5 mS", gds = "4 uS" }
M2 = { gm = "4 mS", gds = "30 uS" }
C1 = "0.2 pF"
C2 = "5 pF"
CC = "2 pF"
"""


def stage_of(*texts: str, folder: Path = Path()) -> Stage:
    return parse_stage("".join(texts).encode(), file=None, folder=folder)


def shortest(stage: Stage, name: str, within: float, points: int = 512) -> Shortest:
    return make_shortest(stage, within, quantities=[name], points=points).found[0]


def test_two_devices_in_series_multiply_the_output_resistance() -> None:
    """gm2·ro1·ro2, with the body effect gm2 + gmb2 (Gray, Hurst, Lewis, Meyer, 5e, 3.4)."""
    found = shortest(stage_of(CASCODE), "rout.dc", 0.05)
    assert found.shape is not None
    assert found.shape.text() == "(gm2 + gmb2)/(gds1*gds2)"
    assert shortest(stage_of(CASCODE), "rout.dc", 0.25).shape.text() == "gm2/(gds1*gds2)"  # type: ignore[union-attr]


def test_a_follower_loses_what_the_body_takes() -> None:
    """gm/(gm + gmb) (Razavi, Design of Analog CMOS Integrated Circuits, 2e, 3.4, from memory)."""
    found = shortest(stage_of(FOLLOWER), "gain.dc", 0.03)
    assert found.shape is not None
    assert found.shape.text() == "gm1/(gm1 + gmb1)"


def test_degeneration_sets_the_gain() -> None:
    """−RC/RE (common practice)."""
    found = shortest(stage_of(DEGENERATED), "gain.dc", 0.06)
    assert found.shape is not None
    assert found.shape.text() == "-RC/RE"


def test_the_poles_of_a_two_stage_op_amp() -> None:
    """−1/(R1·gm2·R2·Cc) and −gm2·Cc/(C1·C2 + Cc·(C1 + C2)) (Gray, Hurst, Lewis, Meyer, 5e, 9.4)."""
    stage = stage_of(OPAMP)
    first, second = shortest(stage, "gain.p1", 0.05), shortest(stage, "gain.p2", 0.02)
    assert first.shape is not None
    assert second.shape is not None
    assert first.shape.text() == "-gds1*gds2/(gm2*CC)"
    values = {name: float(value) for name, value in stage.bias.items()}
    gm2, c1, c2, cc = (values[name] for name in ("gm2", "C1", "C2", "CC"))
    text_book = -gm2 * cc / (c1 * c2 + cc * (c1 + c2))
    assert evaluate(parse(second.shape.text()), values.__getitem__) == pytest.approx(text_book, rel=1e-12)


@pytest.mark.parametrize(
    ("name", "within"), [("gain.dc", 0.05), ("gain.p1", 0.05), ("rout.dc", 0.02), ("gain.p2", 0.1)]
)
def test_the_error_by_nodal_analysis_at_a_thousand_bias_points(name: str, within: float) -> None:
    stage = read_stage(RECIPES / "the-shortest-formula" / "frontend.stage.toml")
    found = shortest(stage, name, within)
    assert found.shape is not None
    assert found.judged is not None
    assert found.judged.span is not None
    assert found.judged.span.proved
    node, asked = parse(found.shape.text()), stage.asked[name.partition(".")[0]]
    draw = np.random.default_rng(11)
    box = Box.of(stage)
    points = box.values(draw.uniform(size=(box.dimensions, 1000)))
    low, high = found.judged.span.bounds or (0.0, 0.0)
    assert max(abs(low), abs(high)) <= within
    for k in range(1000):
        values = {n: float(np.ravel(v)[k] if np.ndim(v) else v) for n, v in points.items()}
        solved = Nodal(stage, asked, values)
        exact = solved.dc() if name.endswith("dc") else solved.poles()[int(name[-1]) - 1].real
        error = evaluate(node, values.__getitem__) / exact - 1
        assert low - 1e-6 <= error <= high + 1e-6


def test_a_looser_bound_never_gives_a_longer_formula() -> None:
    stage = read_stage(RECIPES / "the-shortest-formula" / "frontend.stage.toml")
    for name in ("gain.dc", "gain.p1", "rout.dc"):
        terms = [shortest(stage, name, within, 128).terms for within in (0.002, 0.01, 0.05, 0.2)]
        assert all(term is not None for term in terms)
        assert terms == sorted(terms, reverse=True)  # type: ignore[type-var]
        assert terms[-1] < terms[0]  # type: ignore[operator]


def test_it_rests_on_what_it_needs_and_no_more() -> None:
    stage = read_stage(RECIPES / "the-shortest-formula" / "frontend.stage.toml")
    found = shortest(stage, "rout.dc", 0.05)
    assert found.assumptions == ("the ground strap is a short", "ro is small against RL")
    assert found.own == 1
    assert len(found.tables) == 1
    assert 'small = ["ro"]' in found.tables[0]
    assert found.account is not None
    shares = [share.figures["share"] for share in found.account.assumptions]
    assert sum(shares) == pytest.approx(found.account.error)  # type: ignore[arg-type]
    assert found.judged is not None
    assert found.judged.error == pytest.approx(found.account.error, rel=1e-9)  # type: ignore[arg-type]


def test_the_trade_off_goes_from_exact_to_shortest() -> None:
    found = shortest(stage_of(CASCODE, '[span]\ngm2 = "20 %"\n'), "gain.dc", 0.05)
    terms = [step.terms for step in found.tradeoff]
    worst = [step.worst for step in found.tradeoff]
    assert terms == sorted(terms, reverse=True)
    assert worst == sorted(worst)
    assert terms[0] == found.exact_terms
    assert worst[0] == 0
    assert terms[-1] < (found.terms or 0)


def test_a_table_is_held_row_by_row(tmp_path: Path) -> None:
    rows = ["gm2 [mS],gds1 [uS]", *(f"{3 + k % 5},{60 + 20 * (k % 3)}" for k in range(15))]
    (tmp_path / "rows.csv").write_text("\n".join(rows) + "\n")
    stage = stage_of(CASCODE, '[span]\ntable = "rows.csv"\n', folder=tmp_path)
    found = shortest(stage, "gain.dc", 0.05)
    assert found.judged is not None
    assert found.judged.span is not None
    assert "row" in found.judged.span.where_least
    assert max(abs(found.judged.span.least), abs(found.judged.span.greatest)) <= 0.05
    assert sample_of(stage).points == 16


def test_a_sample_begins_with_the_bias_point() -> None:
    stage = stage_of(FOLLOWER)
    sample = sample_of(stage)
    assert sample.values["gm1"][0] == pytest.approx(5e-3)
    assert {sample.values["gm1"].min(), sample.values["gm1"].max()} == {3e-3, 8e-3}
    assert sample.values["gds1"].shape == (sample.points,)


@pytest.mark.parametrize("name", ["gain.dc.db", "gain.p1.hz", "gain", "gain.px", "nothing.dc"])
def test_what_cannot_be_shortened_is_refused(name: str) -> None:
    with pytest.raises(StageError) if name != "gain.px" else pytest.raises(Exception, match="no quantity"):
        make_shortest(stage_of(CASCODE), 0.05, quantities=[name])


def test_a_quantity_without_value_says_so() -> None:
    found = shortest(stage_of(CASCODE), "gain.z1", 0.05)
    assert found.shape is None
    assert found.why


def test_usual_quantities_where_none_is_named() -> None:
    made: Shortening = make_shortest(stage_of(CASCODE), 0.05, points=64)
    assert [found.name for found in made.found] == [
        "gain.dc", "gain.p1", "gain.bandwidth", "rout.dc", "rout.p1", "rout.bandwidth",
    ]  # fmt: skip


def test_a_folded_cascode_that_is_not_written_out() -> None:
    from big_stages import folded_cascode

    stage = folded_cascode()
    made = make_shortest(stage, 0.05, quantities=["gain.dc", "gain.p1"], points=64)
    values = {name: float(value) for name, value in stage.bias.items()}
    solved = Nodal(stage, stage.asked["gain"], values)
    for found, exact in zip(made.found, (solved.dc(), solved.poles()[0].real), strict=True):
        assert found.shape is not None
        assert found.terms is not None
        assert found.terms <= 30
        assert abs(evaluate(parse(found.shape.text()), values.__getitem__) / exact - 1) <= 0.05
        assert found.exact_terms > 10**6


def test_an_op_amp_of_twenty_transistors() -> None:
    from big_stages import bipolar_opamp

    stage = bipolar_opamp(with_rx=False)
    found = shortest(stage, "gain.dc", 0.10, 64)
    assert found.shape is not None
    assert found.terms is not None
    assert found.terms <= 30
    assert found.exact_terms > 10**18
    draw = random.Random(5)
    node = parse(found.shape.text())
    exact_at = []
    for spread in (0.0, *([0.02] * 50)):
        values = {n: float(v) * (1 + draw.uniform(-spread, spread)) for n, v in stage.bias.items()}
        moved = replace(stage, bias={n: Fraction(v) for n, v in values.items()})
        exact = Nodal(moved, stage.asked["gain"], values).dc()
        exact_at.append(evaluate(node, values.__getitem__) / exact - 1)
    assert abs(exact_at[0]) <= 0.10  # at the bias point, which is all that this stage gives
    assert max(map(abs, exact_at)) <= 0.5
