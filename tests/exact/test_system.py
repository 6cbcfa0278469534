"""The nodal matrix: each kind of part, alone or nearly so, against what a hand calculation gives."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import Any

import pytest

from symamp.circuit.builder import StageBuilder
from symamp.errors import NetworkError, StageError
from symamp.exact.derive import derive, undetermined
from symamp.exact.response import Response
from symamp.exact.system import Term, build_system, without_symbols


def start() -> StageBuilder:
    """A stage with a voltage source at node `in`."""
    build = StageBuilder("one part")
    build.voltage_source("VIN", "in", "gnd")
    return build


def derived(build: StageBuilder, **asked: Any) -> Response:
    build.response("r", **asked)
    stage = build.stage()
    return derive(stage, stage.asked["r"])


def written(response: Response) -> tuple[str, str]:
    """Numerator and denominator, coefficients of s in brackets, as FLINT writes them."""
    form = response.form
    return str([str(c) for c in form.numerator]), str([str(c) for c in form.denominator])  # type: ignore[union-attr]


def test_resistor_and_capacitor() -> None:
    build = start()
    build.resistor("R1", "in", "out")
    build.capacitor("C1", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['1']", "['1', 'R1*C1']")


def test_inductor_and_its_impedance() -> None:
    build = start()
    build.inductor("L1", "in", "out")
    build.resistor("R1", "out", "gnd")
    assert written(derived(build, looking_into="VIN")) == ("['R1', 'L1']", "['1']")


def test_mosfet_carries_its_current_from_drain_to_source() -> None:
    build = start()
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm=1, gds=1)
    response = derived(build, source="VIN", to="out")
    assert written(response) == ("['-gm1']", "['gds1']")
    assert response.unit == ""


def test_body_effect_of_a_follower() -> None:
    build = start()
    build.mosfet("M1", gate="in", drain="gnd", source="out", body="gnd", gm=1, gds=1, gmb=1)
    assert written(derived(build, source="VIN", to="out")) == ("['gm1']", "['gm1 + gmb1 + gds1']")


@pytest.mark.parametrize(
    ("name", "pair"),
    [("cgs", "gs"), ("cgd", "gd"), ("cgb", "gb"), ("cdb", "db"), ("csb", "sb")],
)
def test_each_capacitance_of_a_mosfet_lies_between_its_terminals(name: str, pair: str) -> None:
    build = StageBuilder("one capacitance")
    build.mosfet("M1", gate="g", drain="d", source="s", body="b", gm=1, gds=1, gmb=0, **{name: 1e-12})
    for node in "gdsb":
        build.voltage_source(f"V{node}", node, "gnd")
    # At unit voltage on one end, the current out of the other end's source is s·C.
    response = derived(build, source=f"V{pair[0]}", to=f"V{pair[1]}")
    form = response.form
    assert str(form.numerator[1]) == f"{name}1"  # type: ignore[union-attr]
    assert response.unit == "S"


def test_bipolar_transistor_behind_its_base_resistance() -> None:
    build = start()
    build.bjt("Q1", base="in", collector="out", emitter="gnd", gm=1, gpi=1, go=1, rx=1)
    assert written(derived(build, source="VIN", to="out")) == ("['-gm1']", "['gpi1*go1*rx1 + go1']")


def test_a_base_without_resistance_is_the_inner_base() -> None:
    build = start()
    build.bjt("Q1", base="in", collector="out", emitter="gnd", gm=1, gpi=1, go=1, cpi=1e-12)
    assert written(derived(build, source="VIN", to="VIN")) == ("['-gpi1', '-cpi1']", "['1']")


def test_vccs_takes_its_current_out_of_the_first_node() -> None:
    build = start()
    build.vccs("G1", out=("out", "gnd"), control=("in", "gnd"))
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['-G1*RL']", "['1']")


def test_vcvs_is_a_stiff_source() -> None:
    build = start()
    build.vcvs("E1", out=("out", "gnd"), control=("in", "gnd"))
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['E1']", "['1']")


@pytest.mark.parametrize("kind", ["resistor", "capacitor", "inductor"])
def test_cccs_reads_a_part_from_its_first_node_to_its_second(kind: str) -> None:
    build = start()
    getattr(build, kind)("X1", "in", "gnd")
    build.cccs("F1", out=("out", "gnd"), control="X1")
    build.resistor("RL", "out", "gnd")
    expected = {
        "resistor": ("['-F1*RL']", "['X1']"),
        "capacitor": ("['0', '-F1*RL*X1']", "['1']"),
        "inductor": ("['-F1*RL']", "['0', 'X1']"),
    }
    assert written(derived(build, source="VIN", to="out")) == expected[kind]


def test_ccvs_reads_an_ammeter() -> None:
    build = start()
    build.resistor("R1", "in", "a")
    build.ccvs("H1", out=("out", "gnd"), control=("a", "gnd"))
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['H1']", "['R1']")


def test_a_voltage_source_that_is_read_has_its_current_from_plus_to_minus() -> None:
    build = start()
    build.resistor("R1", "in", "gnd")
    build.ccvs("H1", out=("out", "gnd"), control="VIN")
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['-H1']", "['R1']")


def test_a_current_source_that_is_read_drives_as_any_other() -> None:
    build = StageBuilder("current source")
    build.current_source("I1", "gnd", "in")
    build.resistor("R1", "in", "gnd")
    build.cccs("F1", out=("out", "gnd"), control="I1")
    build.resistor("RL", "out", "gnd")
    response = derived(build, source={"I1": Fraction(1, 4)}, to="out")
    assert written(response) == ("['-F1*RL']", "['4']")
    assert response.unit == "ohm"
    build.response("seen", looking_into="I1")
    stage = build.stage()
    assert written(derive(stage, stage.asked["seen"])) == ("['R1']", "['1']")


def test_two_parts_may_read_one_current() -> None:
    build = start()
    build.resistor("R1", "in", "gnd")
    build.cccs("F1", out=("gnd", "out"), control="R1")
    build.cccs("F2", out=("gnd", "out"), control="R1")
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['F1*RL + F2*RL']", "['R1']")


def test_ideal_op_amp_inverts() -> None:
    build = start()
    build.resistor("R1", "in", "x")
    build.resistor("R2", "x", "out")
    build.opamp("OA", plus="gnd", minus="x", out="out")
    assert written(derived(build, source="VIN", to="out")) == ("['-R2']", "['R1']")


def test_transformer_shows_its_load_times_the_turns_ratio_squared() -> None:
    build = start()
    build.transformer("T1", primary=("in", "gnd"), secondary=("out", "gnd"))
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, looking_into="VIN")) == ("['T1^2*RL']", "['1']")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    assert written(derive(stage, stage.asked["gain"])) == ("['1']", "['T1']")


def test_current_source_leaves_by_its_second_node() -> None:
    build = StageBuilder("current source")
    build.current_source("I1", "gnd", "out")
    build.resistor("RL", "out", "gnd")
    assert written(derived(build, source="I1", to="out")) == ("['RL']", "['1']")


def test_weights_are_exact() -> None:
    build = StageBuilder("three sources into one node")
    for k in (1, 2):
        build.voltage_source(f"V{k}", f"a{k}", "gnd")
        build.resistor(f"R{k}", f"a{k}", "out")
    build.resistor("R3", "out", "gnd")
    build.response("r", source={"V1": Fraction(1, 8), "V2": Fraction(-3, 4)}, to="out")
    stage = build.stage()
    numerator, denominator = written(derive(stage, stage.asked["r"]))
    assert numerator == "['-6*R1*R3 + R2*R3']"
    assert denominator == "['8*R1*R2 + 8*R1*R3 + 8*R2*R3']"


def test_weights_that_no_decimal_can_write_are_exact_too() -> None:
    build = start()
    build.resistor("R1", "in", "out")
    build.resistor("R2", "out", "gnd")
    build.response("r", source="VIN", to="out")
    stage = build.stage()
    third = replace(stage.asked["r"], drive={"VIN": Fraction(1, 3)})
    assert written(derive(stage, third)) == ("['R2']", "['3*R1 + 3*R2']")


def test_a_weight_divides_out_of_a_ratio_of_two_voltages() -> None:
    build = start()
    build.resistor("R1", "in", "out")
    build.resistor("R2", "out", "gnd")
    response = derived(build, source={"VIN": Fraction(3, 8)}, to="out", over="in")
    assert written(response) == ("['R2']", "['R1 + R2']")


def test_impedance_between_two_nodes_of_a_bridge() -> None:
    build = StageBuilder("bridge")
    build.resistor("R1", "a", "gnd")
    build.resistor("R2", "b", "gnd")
    build.resistor("R3", "a", "b")
    response = derived(build, looking_into=("a", "b"))
    assert written(response) == ("['R1*R3 + R2*R3']", "['R1 + R2 + R3']")
    assert response.unit == "ohm"


def test_parts_taken_off_are_gone_with_their_symbols() -> None:
    build = start()
    build.resistor("R1", "in", "out")
    build.resistor("R2", "out", "gnd")
    build.resistor("RL", "out", "gnd")
    response = derived(build, source="VIN", to="out", without="RL")
    assert written(response) == ("['R2']", "['R1 + R2']")
    assert "RL" not in build_system(response.stage, ("RL",)).symbols


def test_sources_at_rest_are_shorts_and_opens() -> None:
    build = start()
    build.resistor("R1", "in", "out")
    build.voltage_source("VB", "b", "gnd")
    build.resistor("R2", "out", "b")
    build.current_source("IB", "out", "gnd")
    assert written(derived(build, source="VIN", to="out")) == ("['R2']", "['R1 + R2']")


def test_columns_have_names() -> None:
    build = start()
    build.bjt("Q1", base="in", collector="out", emitter="gnd", gm=1, gpi=1, go=1, rx=1)
    build.resistor("R1", "out", "gnd")
    build.cccs("F1", out=("out", "gnd"), control="R1")
    build.response("r", source="VIN", to="out")
    names = build_system(build.stage()).column_names()
    assert sorted(names) == list(range(len(names)))
    assert set(names.values()) == {
        "the voltage of node in",
        "the voltage of node out",
        "the voltage of node Q1's inner base",
        "the current of VIN",
        "the current of R1",
    }


def test_symbols_put_to_zero_leave_the_matrix() -> None:
    build = start()
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm=1, gds=1)
    build.resistor("RL", "out", "gnd")
    build.response("r", source="VIN", to="out")
    system = without_symbols(build_system(build.stage()), {"gds1", "RL"})
    out = system.node["out"]
    assert system.rows[out][out] == (Term(1, "RL", -1, 0),)  # 1/RL is no factor RL
    assert "gds1" not in system.symbols


def test_an_unknown_that_nothing_sets_is_named() -> None:
    build = start()
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm=1, gds=1)
    build.mosfet("M2", gate="out", drain="late", source="gnd", gm=1, gds=1)
    build.response("r", source="VIN", to="late")
    system = build_system(build.stage())
    assert undetermined(system) == []
    assert undetermined(without_symbols(system, {"gds1", "gds2"})) == ["the voltage of node late"]


def test_what_is_zero_or_infinite_whatever_the_values_is_said() -> None:
    build = start()
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm=1, gds=1)
    build.resistor("RL", "out", "gnd")
    build.response("back", source="VIN", to="out", over="apart")
    build.resistor("RA", "apart", "gnd")
    stage = build.stage()
    with pytest.raises(StageError, match="infinite"):
        derive(stage, stage.asked["back"])
    other = start()
    other.resistor("R1", "in", "gnd")
    other.resistor("R2", "apart", "gnd")
    with pytest.raises(StageError, match="identically zero"):
        derived(other, source="VIN", to="apart")


def test_an_op_amp_without_feedback_has_no_solution() -> None:
    build = start()
    build.resistor("R1", "in", "x")
    build.resistor("R2", "x", "gnd")
    build.opamp("OA", plus="gnd", minus="x", out="out")
    build.resistor("RL", "out", "gnd")
    with pytest.raises(NetworkError, match="nothing sets"):
        derived(build, source="VIN", to="out")
