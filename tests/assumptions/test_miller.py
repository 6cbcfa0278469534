"""Miller's theorem: what bridges, by which gain, and the words where there is none."""

from __future__ import annotations

import assumed_stages as stages
import pytest

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder

BOTH = pytest.mark.parametrize("nested", [False, True], ids=["written", "nested"])
BRIDGE = {"part": "cgd1", "from": "g", "to": "out"}


def put(b: StageBuilder, name: str = "gain", nested: bool = False) -> Approximation:
    stage = b.stage()
    return Approximator(stages.exact(stage, name, nested=nested)).under(read_assumptions(stage))


def feedback(**bridge) -> StageBuilder:
    """An inverting stage of gain −A at DC with a bridge of two terminals from its input to its output."""
    b = StageBuilder("bridge")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("RS", "in", "g", "1 kohm")
    b.vcvs("E1", out=("y", "gnd"), control=("g", "gnd"), value="-20")
    b.resistor("RO", "y", "out", "100 ohm")
    b.response("gain", source="VIN", to="out")
    b.response("zin", looking_into="g")
    for kind, value in bridge.items():
        getattr(b, kind)("XF", "g", "out", value)
    return b


@BOTH
def test_a_resistor(nested):
    """RF to both ends: RF/(1 − A) and RF/(1 − 1/A), A with RF in place; at DC that is exact."""
    b = feedback(resistor="10 kohm")
    exact = stages.exact(b.stage())
    b.assume("it", miller={"part": "XF", "from": "g", "to": "out"})
    made = put(b, nested=nested)
    assert made.response.quantity("dc").value == pytest.approx(exact.quantity("dc").value, rel=1e-12)
    assert made.response.quantity("dc").value != pytest.approx(-20, rel=0.1)


@BOTH
def test_a_resistor_at_one_end(nested):
    b = feedback(resistor="10 kohm")
    b.assume("it", miller={"part": "XF", "from": "g", "to": "out", "ends": "from"})
    a = (-20 * 1e-2 + 1e-4) / (1e-2 + 1e-4)  # (E·G_O + G_F)/(G_O + G_F)
    expected = -20 * (1 / 1e3) / (1 / 1e3 + 1e-4 * (1 - a))
    assert put(b, nested=nested).response.quantity("dc").value == pytest.approx(expected, rel=1e-12)


@BOTH
def test_an_inductor_has_its_own_gain_of_one_at_dc(nested):
    """At DC the inductor is a short, so A = 1 and both halves are open."""
    b = feedback(inductor="1 mH")
    b.assume("it", miller={"part": "XF", "from": "g", "to": "out"})
    assert put(b, nested=nested).response.quantity("dc").value == pytest.approx(-20)


@BOTH
def test_the_gain_is_that_of_the_response_own_drive(nested):
    """From the input node the drive is a test current; A is the same, since the stage is driven at g."""
    b = feedback(capacitor="1 pF")
    b.assume("it", miller={"part": "XF", "from": "g", "to": "out"})
    made = put(b, "zin", nested)
    # RS in parallel with C·(1 + 20)
    assert made.response.quantity("dc").value == pytest.approx(1e3)
    assert made.response.quantity("p1").value == pytest.approx(-1 / (1e3 * 21e-12))


@BOTH
def test_looking_into_the_output_drives_it_backwards(nested):
    b = stages.common_source()
    b.resistor("RB", "g", "out", "1 Mohm")
    b.assume("it", miller={"part": "cgd1", "from": "out", "to": "g"})
    made = put(b, "rout", nested)
    # A = V(g)/V(out) = RS/(RS + RB) at DC: cgd·(1 − A) at the output, cgd·(1 − 1/A), which is negative, at g.
    a = 1e4 / (1e4 + 1e6)
    s = 2j * 3.141592653589793e7
    gate = 1e-6 / (1e-6 + 1e-4 + s * (80e-15 + 15e-15 * (1 - 1 / a)))
    admittance = 5e-5 + 1 / 8e3 + s * (200e-15 + 15e-15 * (1 - a)) + 2e-3 * gate + 1e-6 * (1 - gate)
    assert made.response.at(1e7) == pytest.approx(1 / admittance, rel=1e-9)


@BOTH
def test_looking_into_a_source(nested):
    b = stages.common_source()
    b.assume("it", miller=BRIDGE)
    made = put(b, "zin", nested)
    a = -2e-3 / (5e-5 + 1 / 8e3)
    total = 80e-15 + 15e-15 * (1 - a)
    assert made.response.at(1e6) == pytest.approx(1e4 + 1 / (2j * 3.141592653589793e6 * total), rel=1e-9)


def test_a_device_capacitance_bridges_and_the_device_stays():
    b = stages.common_source()
    b.assume("it", miller=BRIDGE)
    made = put(b)
    assert {"gm1", "gds1", "cgs1", "cgd1"} <= made.response.form.symbols
    assert all(" at " not in name for name in made.response.form.context.names())


@BOTH
def test_several_bridges(nested):
    """Two bridges over two stages: each by its own gain, both in place."""
    b = stages.two_stage()
    b.capacitor("CF", "a", "out", "50 fF")
    b.assume("one", miller={"part": "CF", "from": "a", "to": "out"})
    b.assume("two", miller={"part": "CC", "from": "a", "to": "r"})
    b.assume("three", short="RZ")
    made = put(b, nested=nested)
    gain = 5e-3 / 60e-6
    bridge = 2e-12 + 50e-15
    assert made.response.quantity("p1").value == pytest.approx(-10e-6 / (100e-15 + bridge * (1 + gain)))
    assert made.response.quantity("p2").value == pytest.approx(-60e-6 / (5e-12 + bridge * (1 + 1 / gain)))


@BOTH
def test_a_gain_of_zero_in_words(nested):
    """Past a coupling capacitor the output does not move at DC."""
    b = stages.degenerated()
    b.capacitor("CF", "b", "out", "1 pF")
    b.assume("it", miller={"part": "CF", "from": "b", "to": "out"})
    made = put(b, nested=nested)
    assert made.response is None
    # The input is coupled too, so that at s = 0 the gain is that of the blocked stage, b to out: zero.
    assert made.why == "Miller across CF: A = V(out)/V(b) is zero at s = 0, so 1 − 1/A does not exist"


@BOTH
def test_a_gain_of_zero_at_one_end_is_a_capacitor_to_ground(nested):
    b = stages.degenerated()
    b.capacitor("CF", "b", "out", "1 pF")
    b.assume("it", miller={"part": "CF", "from": "b", "to": "out", "ends": "from"})
    assert put(b, nested=nested).response is not None


@BOTH
def test_no_voltage_to_start_from_in_words(nested):
    b = stages.common_source()
    b.assume("it", miller=BRIDGE)
    made = put(b, "rout", nested)
    assert made.response is None
    assert made.why == (
        "Miller across cgd1: V(g) is zero at s = 0, or V(out) infinite, so A = V(out)/V(g) does not exist"
    )


@BOTH
def test_a_gain_without_bound_in_words(nested):
    """With neither load nor output conductance the output of the transconductance has no DC path."""
    b = stages.common_source()
    b.assume("it", miller=BRIDGE)
    b.assume("ideal load", open_=["RL"], neglect=["gds"])
    made = put(b, nested=nested)
    assert made.response is None
    assert "V(out) infinite" in made.why


@BOTH
def test_no_voltage_whatever_the_frequency_in_words(nested):
    """The gate is at signal ground through the resting source: V(g) is zero at all frequencies."""
    b = StageBuilder("no voltage")
    b.voltage_source("VIN", "g", "gnd")
    b.mosfet("M1", gate="g", drain="out", source="gnd", gm="2 mS", gds="50 uS", cgd="15 fF")
    b.response("rout", looking_into="out")
    b.assume("it", miller=BRIDGE)
    made = put(b, "rout", nested)
    assert made.response is None
    assert "V(g) is zero" in made.why


@BOTH
def test_a_bridge_that_goes_to_its_limit_is_no_bridge(nested):
    b = stages.common_source()
    b.assume("one", miller=BRIDGE)
    b.assume("two", neglect="cgd1")
    made = put(b, nested=nested)
    assert made.remarks == ("cgd1 is taken to its limit, so there is no bridge to split",)
    plain = stages.common_source()
    plain.assume("two", neglect="cgd1")
    assert made.response.at(1e9) == pytest.approx(put(plain).response.at(1e9))


@BOTH
@pytest.mark.parametrize("limit", [{"neglect": "gds1"}, {"open_": "CL"}, {"open_": "RL"}])
def test_the_gain_is_that_which_the_limits_leave(nested, limit):
    """Step 2 before step 3: both in one set are the bridge split on the stage so simplified."""
    b = stages.common_source()
    b.assume("one", miller=BRIDGE)
    b.assume("two", **limit)
    made = put(b, nested=nested)
    g = {"gds1": 5e-5, "RL": 1 / 8e3, "CL": 200e-15}
    g[next(iter(limit.values()))] = 0.0
    a = -2e-3 / (g["gds1"] + g["RL"])
    s = 2j * 3.141592653589793e9
    front = 1 / (1 + 1e4 * s * (80e-15 + 15e-15 * (1 - a)))
    back = -2e-3 / (g["gds1"] + g["RL"] + s * (g["CL"] + 15e-15 * (1 - 1 / a)))
    assert made.response.at(1e9) == pytest.approx(front * back, rel=1e-9)


@BOTH
def test_the_value_is_that_of_the_bridge_after_step_1(nested):
    b = stages.common_source()
    b.capacitor("CF", "g", "out", "1 pF")
    b.assume("one", miller={"part": "CF", "from": "g", "to": "out"})
    b.assume("two", set_={"CF": "CL/10"})
    b.assume("three", neglect="cgd1")
    made = put(b, nested=nested)
    a = -2e-3 / (5e-5 + 1 / 8e3)
    assert made.response.quantity("p1").value == pytest.approx(-1 / (1e4 * (80e-15 + 20e-15 * (1 - a))))
    if not nested:
        assert "CF" not in made.response.form.symbols


def test_the_dominance_after_a_bridge():
    b = stages.common_source()
    b.assume("one", miller=BRIDGE)
    b.assume("two", small="gds", against="1/RL")
    b.assume("three", small="1", against="gm1*RL")
    made = put(b)
    # (1 + gm·RL) has become gm·RL, and 1 + 1/(gm·RL) has become 1.
    assert made.response.form.denominator[0].is_constant()
    b1, b2 = (set(text.split(" + ")) for text in stages.texts(made.response, "denominator")[1:])
    assert b1 == {"RS*cgs1", "RL*cgd1", "RL*CL", "gm1*RS*RL*cgd1"}
    assert b2 == {"RS*RL*cgs1*cgd1", "RS*RL*cgs1*CL", "gm1*RS*RL**2*cgd1**2", "gm1*RS*RL**2*cgd1*CL"}
