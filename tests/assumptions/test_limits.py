"""Step 1 and 2 where they leave something odd: zero, infinity, 0/0, a limit that depends, a dc that moves."""

from __future__ import annotations

import assumed_stages as stages
import pytest

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.merge import pooled
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder

BOTH = pytest.mark.parametrize("nested", [False, True], ids=["written", "nested"])


def put(b: StageBuilder, name: str = "gain", nested: bool = False) -> Approximation:
    stage = b.stage()
    return Approximator(stages.exact(stage, name, nested=nested)).under(read_assumptions(stage))


def divider() -> StageBuilder:
    b = StageBuilder("divider")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("R1", "in", "out", "1 kohm")
    b.resistor("R2", "out", "gnd", "2 kohm")
    b.capacitor("C1", "in", "out", "1 nF")
    b.capacitor("C2", "out", "gnd", "3 nF")
    b.response("gain", source="VIN", to="out")
    b.response("zin", looking_into="VIN")
    b.response("zout", looking_into="out")
    return b


@BOTH
def test_both_of_a_divider_shorted_depends_on_which_goes_first(nested):
    b = divider()
    b.assume("it", short=["R1", "R2"])
    made = put(b, nested=nested)
    assert made.response is None
    assert made.why == "the limit depends on which goes first (R1, R2 remain)"


@BOTH
def test_one_of_them_alone_does_not(nested):
    for name, value in (("R1", 1.0), ("R2", 0.0)):
        b = divider()
        b.assume("it", short=name)
        made = put(b, nested=nested)
        assert made.response is not None
        assert made.response.quantity("dc").value == value


@BOTH
def test_both_capacitors_neglected_leave_the_resistors(nested):
    b = divider()
    b.assume("it", neglect=["C1", "C2"])
    made = put(b, nested=nested)
    assert made.response.quantity("dc").value == pytest.approx(2 / 3)
    assert made.response.quantity("hf").value == pytest.approx(2 / 3)
    assert made.remarks == ()


@BOTH
def test_a_sum_of_two_that_go_is_a_ratio_that_stays(nested):
    """Both conductances of a node without capacitors go to zero: V = I·1/(G1 + G2) grows; their share remains."""
    b = StageBuilder("two to ground")
    b.current_source("IIN", "gnd", "x")
    b.mosfet("M1", gate="gnd", drain="x", source="gnd", gm="1 mS", gds="1 uS")
    b.mosfet("M2", gate="x", drain="y", source="gnd", gm="1 mS", gds="2 uS")
    b.response("z", looking_into="x")
    b.response("y", source="IIN", to="y")
    b.assume("it", neglect=["gds1", "gds2"])
    assert put(b, "z", nested).why == "the response grows without bound"
    assert put(b, "y", nested).why == "the response grows without bound"


@BOTH
def test_a_response_that_goes_to_zero_is_zero(nested):
    b = divider()
    b.assume("it", short="R2")
    made = put(b, "zout", nested)
    assert made.remarks == ("the approximate response is zero",)
    assert made.response.quantity("dc").value == 0
    assert made.response.at(1e3) == 0


@BOTH
def test_dc_that_is_not_the_limit_of_dc(nested):
    """A coupling capacitor blocks DC however large it is; shorted, the zero at DC cancels its pole."""
    b = StageBuilder("coupled")
    b.voltage_source("VIN", "in", "gnd")
    b.capacitor("CB", "in", "out", "1 uF")
    b.resistor("RB", "out", "gnd", "10 kohm")
    b.capacitor("CL", "out", "gnd", "1 pF")
    b.resistor("RL", "out", "load", "10 kohm")
    b.resistor("RX", "load", "gnd", "10 kohm")
    b.response("gain", source="VIN", to="load")
    b.assume("it", short="CB")
    made = put(b, nested=nested)
    assert made.remarks == ("the limit's dc is not the limit of dc: a root reached s = 0 and cancelled",)
    assert made.response.quantity("dc").value == pytest.approx(0.5)


@BOTH
def test_a_bypass_that_moves_dc_without_a_zero_there(nested):
    b = stages.degenerated()
    b.assume("it", short="CE")
    made = put(b, "rout", nested)
    assert made.response is not None
    assert any("not the limit of dc" in remark for remark in made.remarks)


@BOTH
def test_a_neglected_capacitor_takes_no_root_to_zero(nested):
    b = stages.degenerated()
    b.assume("it", neglect=["cpi", "cmu"])
    assert put(b, nested=nested).remarks == ()


@BOTH
def test_nothing_left(nested):
    """Two nodes, each driven by the difference of two sources that equal parts make the same: 0/0."""
    b = StageBuilder("two differences")
    b.voltage_source("VIN", "in", "gnd")
    for node, plus, minus in (("a", "G1", "G2"), ("b", "G3", "G4")):
        b.vccs(plus, out=(node, "gnd"), control=("in", "gnd"), value="1 mS")
        b.vccs(minus, out=("gnd", node), control=("in", "gnd"), value="2 mS")
        b.resistor(f"R{node}", node, "gnd", "1 kohm")
    b.response("late", source="VIN", to="a", over="b")
    b.assume("first", equal=["G1", "G2"])
    assert put(b, "late", nested).response.quantity("dc").value == 0
    b.assume("second", equal=["G3", "G4"])
    assert put(b, "late", nested).why == "0/0: nothing is left of the response"


@BOTH
def test_a_formula_that_divides_by_zero(nested):
    b = stages.two_stage()
    b.assume("it", set_={"RZ": "1/(gm6 - gm6)"})
    assert put(b, nested=nested).why == "the formula set for RZ divides by zero"


@BOTH
def test_a_denominator_that_equal_parts_make_zero(nested):
    """A positive feedback of the same gm as the load: with both the same the output's conductance is gone."""
    b = StageBuilder("negative conductance")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="out", source="gnd", gm="1 mS", gds="1 uS")
    b.vccs("GN", out=("gnd", "out"), control=("out", "gnd"), value="0.9 mS")
    b.vccs("GP", out=("out", "gnd"), control=("out", "gnd"), value="1 mS")
    b.response("gain", source="VIN", to="out")
    b.assume("same", equal=["GN", "GP"])
    made = put(b, nested=nested)
    assert made.response.quantity("dc").value == pytest.approx(-1e-3 / 1e-6)
    b.assume("none", neglect="gds1")
    assert put(b, nested=nested).why == "the response grows without bound"


@BOTH
def test_equal_conductances_that_cancel_leave_an_infinite_response(nested):
    b = StageBuilder("nothing but negative conductance")
    b.current_source("IIN", "gnd", "out")
    b.vccs("GN", out=("gnd", "out"), control=("out", "gnd"), value="0.9 mS")
    b.vccs("GP", out=("out", "gnd"), control=("out", "gnd"), value="1 mS")
    b.response("z", looking_into="out")
    b.assume("same", equal=["GN", "GP"])
    made = put(b, "z", nested)
    assert made.response is None
    assert made.why == "the response is infinite"


def test_a_limit_and_a_formula_for_one_symbol():
    """gds6 stands for 2·gds1, so to neglect gds1 neglects it too; RZ has a formula and goes to no limit."""
    b = stages.two_stage()
    b.assume("a", set_={"gds6": "2*gds1"})
    b.assume("b", neglect="gds1")
    made = put(b)
    assert made.response.quantity("p1").value == 0
    assert made.response.form.symbols.isdisjoint({"gds1", "gds6"})


def test_a_limit_of_what_has_a_formula_says_so():
    b = stages.two_stage()
    b.assume("a", set_={"RZ": "1/gm6"})
    plain = put(b)
    b.assume("b", short="RZ")
    made = put(b)
    assert made.remarks == ("RZ has a formula, and goes where that goes",)
    assert stages.same(made.response, plain.response)


def test_limits_follow_parts_that_are_one():
    b = stages.cascode()
    b.assume("same", equal=["M1", "M2"])
    b.assume("none", neglect="gds2")
    stage = b.stage()
    ask = pooled(stage, read_assumptions(stage))
    assert ask.orders == {"gds1": 1}
    assert put(b).response.form.symbols.isdisjoint({"gds1", "gds2"})


def test_equal_keeps_what_the_leader_lacks():
    b = stages.differential_pair()
    b.assume("it", equal=["M1", "M3"])
    made = put(b)
    assert "cgs3" in made.response.form.symbols
    assert "gm3" not in made.response.form.symbols


def test_dominant_capacitor_keeps_that_capacitor_alone():
    b = stages.common_source()
    b.assume("it", dominant_capacitor="cgd1")
    made = put(b)
    assert {n for n in made.response.form.symbols if n[0] in "cC"} == {"cgd1"}


@BOTH
@pytest.mark.parametrize(
    ("asked", "dc", "hf"),
    [
        ({"short": "L1"}, 0, 2),
        ({"open_": "L2"}, 2, 0),
        ({"short": "L1", "open_": ["L2", "C1"]}, 2, 2),
        ({"neglect": "E1"}, 0, 0),
    ],
)
def test_inductors_and_gains(asked, dc, hf, nested):
    b = StageBuilder("filter with a controlled source")
    b.voltage_source("VIN", "in", "gnd")
    b.inductor("L1", "in", "x", "1 uH")
    b.capacitor("C1", "x", "gnd", "1 nF")
    b.vcvs("E1", out=("y", "gnd"), control=("x", "gnd"), value="2")
    b.resistor("R1", "y", "out", "50 ohm")
    b.inductor("L2", "out", "gnd", "2 uH")
    b.response("gain", source="VIN", to="out")
    b.assume("it", **asked)
    made = put(b, nested=nested)
    assert made.response.quantity("dc").value == pytest.approx(dc)
    assert made.response.quantity("hf").value == pytest.approx(hf)
