"""Nested responses: every kind but dominance gives what the written-out response gives, by value."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import assumed_stages as stages
import numpy as np
import pytest

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact import derive
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.forms import Expanded, Nested
from symamp.exact.response import Response

CC_A = {"part": "CC", "from": "a", "to": "r"}

# (stage, response, assumptions); each set is put to both forms.
CASES: dict[str, tuple[Any, str, list[dict[str, Any]]]] = {
    "neglect cgd": (stages.common_source, "gain", [{"neglect": "cgd"}]),
    "neglect gm": (stages.common_source, "gain", [{"neglect": "gm"}]),
    "neglect gds of a cascode": (stages.cascode, "gain", [{"neglect": "gmb"}, {"neglect": "gds1"}]),
    "neglect all gds": (stages.cascode, "gain", [{"neglect": "gds"}]),
    "neglect in a ratio of nodes": (stages.cascode, "late", [{"neglect": "gds2"}]),
    "neglect gds in an impedance": (stages.cascode, "rout", [{"neglect": "gds1"}]),
    "neglect of a follower": (stages.follower, "gain", [{"neglect": ["gds", "gmb"]}]),
    "neglect in a bipolar stage": (stages.degenerated, "gain", [{"neglect": ["go", "cmu"]}]),
    "neglect gm to zero": (stages.cascode, "gain", [{"neglect": ["gm", "gds"]}]),
    "open": (stages.common_source, "gain", [{"open_": ["RL"]}]),
    "open of a capacitor": (stages.degenerated, "gain", [{"open_": ["CE"]}]),
    "open all loads": (stages.common_source, "rout", [{"open_": ["RL", "CL"]}, {"neglect": ["gds", "cgd"]}]),
    "short of resistor": (stages.common_source, "gain", [{"short": ["RS"]}]),
    "short of coupling capacitors": (stages.degenerated, "gain", [{"short": ["CIN", "COUT"]}]),
    "short of bypass": (stages.degenerated, "gain", [{"short": ["CE", "CIN", "COUT"]}]),
    "short of load": (stages.follower, "gain", [{"short": ["RS"]}]),
    "dominant capacitor": (stages.common_source, "gain", [{"dominant_capacitor": "CL"}]),
    "dominant capacitor of two stages": (stages.two_stage, "gain", [{"dominant_capacitor": "CC"}]),
    "equal": (stages.differential_pair, "gain", [{"equal": ["M1", "M2"]}]),
    "equal twice": (stages.differential_pair, "gain", [{"equal": ["M1", "M2"]}, {"equal": ["M3", "M4"]}]),
    "equal and neglect": (
        stages.differential_pair,
        "common",
        [{"equal": ["M1", "M2"]}, {"neglect": ["gds5"]}],
    ),
    "equal makes it zero": (
        stages.differential_pair,
        "common",
        [{"equal": ["M1", "M2"]}, {"equal": ["M3", "M4"]}, {"neglect": ["gds", "cgs"]}],
    ),
    "set": (stages.two_stage, "gain", [{"set_": {"RZ": "1/gm6"}}]),
    "set to a number": (stages.two_stage, "gain", [{"set_": {"RZ": "0 ohm"}}]),
    "set to a number that cancels a zero": (stages.two_stage, "gain", [{"set_": {"RZ": "200 ohm"}}]),
    "a cancelled zero and poles far apart": (
        stages.two_stage,
        "gain",
        [{"set_": {"RZ": "200 ohm"}}, {"poles_far_apart": True}],
    ),
    "set in a chain": (stages.two_stage, "gain", [{"set_": {"RZ": "1/gm6", "gm6": "4*gm1"}}]),
    "set of a neglected symbol": (
        stages.two_stage,
        "gain",
        [{"set_": {"gds6": "2*gds1"}}, {"neglect": ["gds1"]}],
    ),
    "set to a sum of which one goes": (
        stages.two_stage,
        "gain",
        [{"set_": {"CL": "CC + 3*C1"}}, {"neglect": ["C1"]}],
    ),
    "set on an equal part": (
        stages.differential_pair,
        "gain",
        [{"equal": ["M1", "M2"]}, {"set_": {"gm2": "2*gm3"}}],
    ),
    "miller of a device": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}],
    ),
    "miller at one end": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out", "ends": "from"}}],
    ),
    "miller of a conductance": (
        stages.follower,
        "gain",
        [{"miller": {"part": "gds1", "from": "out", "to": "gnd", "ends": "from"}}],
    ),
    "miller across a resistor": (
        stages.two_stage,
        "gain",
        [{"miller": {"part": "RZ", "from": "r", "to": "out"}}],
    ),
    "miller and neglect": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}, {"neglect": ["gds"]}],
    ),
    "miller and open": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}, {"open_": ["RL"]}],
    ),
    "miller of an impedance": (
        stages.common_source,
        "rout",
        [{"miller": {"part": "cgd1", "from": "out", "to": "g", "ends": "from"}}, {"short": ["CL"]}],
    ),
    "miller of what the source sees": (
        stages.common_source,
        "zin",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}],
    ),
    "miller with a set bridge": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}, {"set_": {"cgd1": "CL/10"}}],
    ),
    "miller of a bridge that goes": (
        stages.common_source,
        "gain",
        [{"miller": {"part": "cgd1", "from": "g", "to": "out"}}, {"neglect": ["cgd1"]}],
    ),
    "dominant pole": (stages.common_source, "gain", [{"dominant_pole": True}]),
    "dominant pole of two stages": (stages.two_stage, "gain", [{"dominant_pole": True}]),
    "dominant pole after neglect": (
        stages.cascode,
        "gain",
        [{"dominant_pole": True}, {"neglect": ["gmb", "cdb"]}],
    ),
    "dominant pole after equal": (
        stages.differential_pair,
        "gain",
        [{"dominant_pole": True}, {"equal": ["M3", "M4"]}, {"equal": ["M1", "M2"]}],
    ),
    "poles far apart": (stages.two_stage, "gain", [{"poles_far_apart": True}]),
    "both words on poles": (stages.two_stage, "gain", [{"poles_far_apart": True}, {"dominant_pole": True}]),
    "far apart with coupling": (stages.degenerated, "gain", [{"poles_far_apart": True}]),
    "far apart after shorts": (
        stages.degenerated,
        "gain",
        [{"poles_far_apart": True}, {"short": ["CIN", "COUT", "CE"]}],
    ),
    "band low": (stages.degenerated, "gain", [{"band": "1 Hz"}]),
    "band middle": (stages.degenerated, "gain", [{"band": "10 kHz"}]),
    "band high": (stages.two_stage, "gain", [{"band": "10 GHz"}]),
}


def both(case: str) -> tuple[Stage, Approximation, Approximation]:
    """The stage of a case, and its approximation of the written-out and of the nested response."""
    make, name, assumptions = CASES[case]
    b: StageBuilder = make()
    for number, assumption in enumerate(assumptions):
        b.assume(f"assumption {number}", **assumption)
    stage = b.stage()
    made = read_assumptions(stage)
    written, graph = (Approximator(stages.exact(stage, name, nested=n)).under(made) for n in (False, True))
    return stage, written, graph


@pytest.fixture
def _stay_nested(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(derive, "EXPAND_LIMIT", 0)


@pytest.mark.usefixtures("_stay_nested")
@pytest.mark.parametrize("case", CASES)
def test_as_written_out_at_the_bias_point(case: str) -> None:
    _, written, graph = both(case)
    assert (written.response is None) == (graph.response is None), (written.why, graph.why)
    assert written.why == graph.why
    assert written.remarks == graph.remarks
    if written.response is None or graph.response is None:
        return
    assert isinstance(written.response.form, Expanded)
    compare_exactly(written.response, graph.response)
    compare_figures(written.response, graph.response)
    for hz in (1e2, 1e6, 1e10):
        assert graph.response.at(hz) == pytest.approx(written.response.at(hz), rel=1e-7)


@pytest.mark.usefixtures("_stay_nested")
@pytest.mark.parametrize("case", CASES)
def test_as_written_out_at_many_points(case: str) -> None:
    stage, written, graph = both(case)
    if written.response is None or graph.response is None:
        return
    random = np.random.default_rng(5)
    points = 6
    values = {n: float(v) * random.uniform(0.5, 2, points) for n, v in stage.bias.items()}
    pairs = [r.figures(values, points) for r in (written.response, graph.response)]
    compare_arrays(*pairs)
    hz = np.geomspace(1, 1e10, points)
    at = [r.at(hz, values) for r in (written.response, graph.response)]
    np.testing.assert_allclose(at[1], at[0], rtol=1e-7)


def compare_exactly(written: Response, graph: Response) -> None:
    """N/D of both at the bias point, as rational numbers: the same in lowest terms, but for a factor."""
    (n1, d1), (n2, d2) = written.exact_coefficients, graph.exact_coefficients
    assert n1 * d2 == n2 * d1


def compare_figures(written: Response, graph: Response) -> None:
    for name in ("dc", "hf", "bandwidth", "peak", "unity_gain_frequency", "high_corner", "p1", "p2", "z1"):
        one, other = (r.quantity(name) for r in (written, graph))
        assert one.why == other.why, name
        if one.value is not None:
            assert other.value == pytest.approx(one.value, rel=1e-8, abs=1e-300), name


def compare_arrays(written: Any, graph: Any) -> None:
    for name in ("dc", "hf", "bandwidth", "peak"):
        one, other = (figures.value(parse_quantity(name)) for figures in (written, graph))
        np.testing.assert_allclose(other, one, rtol=1e-7, atol=1e-300, err_msg=name)
    for name in ("poles", "zeros"):
        one, other = getattr(written, name), getattr(graph, name)
        assert np.count_nonzero(~np.isnan(one)) == np.count_nonzero(~np.isnan(other)), name
        rows = min(len(one), len(other))
        np.testing.assert_allclose(other[:rows], one[:rows], rtol=1e-6, atol=1e-300, err_msg=name)


def full_pair() -> StageBuilder:
    """A fully differential pair: with both halves the same, what its tail does is not seen."""
    b = StageBuilder("Fully differential pair")
    b.voltage_source("VP", "inp", "gnd")
    b.voltage_source("VN", "inn", "gnd")
    b.mosfet(
        "M1", gate="inp", drain="op", source="t", body="t", gm="2 mS", gds="40 uS", cgs="50 fF", cgd="8 fF"
    )
    b.mosfet(
        "M2", gate="inn", drain="on", source="t", body="t", gm="2.1 mS", gds="44 uS", cgs="52 fF", cgd="9 fF"
    )
    b.resistor("R1", "op", "gnd", "5 kohm")
    b.resistor("R2", "on", "gnd", "5.1 kohm")
    b.capacitor("C1", "op", "gnd", "100 fF")
    b.capacitor("C2", "on", "gnd", "105 fF")
    b.capacitor("CT", "t", "gnd", "200 fF")
    b.resistor("RT", "t", "gnd", "20 kohm")
    b.response("gain", source={"VP": "0.5", "VN": "-0.5"}, to=("op", "on"))
    for first, second in (("M1", "M2"), ("R1", "R2"), ("C1", "C2")):
        b.assume(f"{first} is {second}", equal=[first, second])
    return b


@pytest.mark.usefixtures("_stay_nested")
@pytest.mark.parametrize(
    "more", [{}, {"dominant_pole": True}, {"poles_far_apart": True}, {"band": "100 MHz"}]
)
def test_what_both_halves_hide_is_divided_out(more):
    b = full_pair()
    if more:
        b.assume("more", **more)
    stage = b.stage()
    made = read_assumptions(stage)
    written, graph = (Approximator(stages.exact(stage, nested=n)).under(made).response for n in (False, True))
    compare_figures(written, graph)
    values = {n: float(v) * np.linspace(0.7, 1.6, 4) for n, v in stage.bias.items()}
    compare_arrays(written.figures(values, 4), graph.figures(values, 4))
    if not more:
        assert [len(r.poles()) for r in (written, graph)] == [1, 1]
        assert graph.quantity("p1").value == pytest.approx(-(1 / 5e3 + 40e-6) / (100e-15 + 8e-15))


def test_what_is_left_is_written_out_where_it_is_small_enough(monkeypatch):
    """Without its capacitances the stage is small and its terms are there; with them they are generated."""
    monkeypatch.setattr(derive, "EXPAND_LIMIT", 10)
    b = stages.common_source()
    b.assume("slow", neglect=["cgs", "cgd", "CL"])
    b.assume("high", small="gds", against="1/RL")
    stage = b.stage()
    engine = Approximator(derive.derive(stage, stage.asked["gain"]))
    assert isinstance(engine.exact.form, Nested)
    made = read_assumptions(stage)
    left = engine.under(made).response
    assert isinstance(left.form, Expanded)
    assert left.quantity("dc").text == "-gm1*RL"
    with_them = engine.under(made[1:])
    assert with_them.left == {}
    assert isinstance(with_them.response.form, Expanded)
    assert with_them.response.quantity("dc").text == "-gm1*RL"


def test_a_bridge_too_is_written_out_then(monkeypatch):
    monkeypatch.setattr(derive, "EXPAND_LIMIT", 10)
    b = stages.common_source()
    b.assume("slow", neglect=["cgs", "CL", "gds"])
    b.assume("split", miller={"part": "cgd1", "from": "g", "to": "out"})
    stage = b.stage()
    engine = Approximator(derive.derive(stage, stage.asked["gain"]))
    assert isinstance(engine.exact.form, Nested)
    left = engine.under(read_assumptions(stage)).response
    assert isinstance(left.form, Expanded)
    assert left.quantity("p1").text == "-1/(RS*cgd1*(1 + gm1*RL))"


def test_a_nested_response_lacks_what_its_rules_lack():
    """CF and RZ have no value, but formulas; gm6 has none, and their formulas need it."""
    b = stages.two_stage()
    b.assume("one", set_={"RZ": "1/gm6", "C1": "CC/20"})
    stage = b.stage()
    bias = {n: v for n, v in stage.bias.items() if n not in ("RZ", "C1")}
    stage = replace(stage, bias=bias)
    made = Approximator(stages.exact(stage, nested=True)).under(read_assumptions(stage))
    assert made.response.missing == ()
    assert made.response.quantity("p1").value is not None
    stage = replace(stage, bias={n: v for n, v in bias.items() if n != "gm6"})
    made = Approximator(stages.exact(stage, nested=True)).under(read_assumptions(stage))
    assert made.response.missing == ("gm6",)
