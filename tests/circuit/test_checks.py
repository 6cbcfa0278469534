"""What the structural checks refuse is singular, and what they let pass is what can be solved.

The judge is a nodal matrix of our own here, with random values modulo a prime: its determinant is zero for a
network that is singular whatever its values, and for any other only by a chance of about 1e-16
(Schwartz 1980, Zippel 1979: from memory).
"""

from __future__ import annotations

import random
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.circuit.checks import check_asked, check_looking_into, check_network, nodes_of, shorted_by
from symamp.circuit.kinds import KINDS
from symamp.circuit.stage import Asked, Part, Stage
from symamp.errors import NetworkError, StageError

PRIME = 2**61 - 1


def part(
    kind: str, label: str, nodes: str, parameters: str | None = None, control: str | None = None
) -> Part:
    record = KINDS[kind]
    chosen = record.default_parameters if record.prefixed else tuple(p.name for p in record.parameters)
    if parameters is not None:
        chosen = tuple(parameters.split())
    return Part(record, label, tuple(nodes.split()), chosen, control)


def stage_of(*parts: Part) -> Stage:
    return Stage("t", {p.label: p for p in parts}, {}, {}, {}, {})


def refused(*parts: Part, without: tuple[str, ...] = ()) -> NetworkError:
    with pytest.raises(NetworkError) as caught:
        check_network(stage_of(*parts), without)
    assert caught.value.remedy
    assert determinant(tuple(p for p in parts if p.label not in without)) == 0
    return caught.value


def passes(*parts: Part, without: tuple[str, ...] = ()) -> None:
    check_network(stage_of(*parts), without)
    assert determinant(tuple(p for p in parts if p.label not in without)) != 0


VIN = part("voltage_source", "VIN", "in gnd")
M1 = part("mosfet", "M1", "in out gnd gnd")
LOAD = part("resistor", "RL", "out gnd")


# Loops ------------------------------------------------------------------------------------------------------


def test_parallel_voltage_sources() -> None:
    error = refused(VIN, part("voltage_source", "VB", "gnd in"), M1)
    assert "VIN and VB are a loop" in error.problem
    assert error.key == "voltage_source.VB"


def test_a_loop_names_its_parts_and_no_others() -> None:
    error = refused(
        part("voltage_source", "VA", "a gnd"),
        part("voltage_source", "VX", "x gnd"),
        part("vcvs", "EB", "b a x gnd"),
        part("ccvs", "HC", "c b", control="RL"),
        part("voltage_source", "VD", "c gnd"),
        part("resistor", "RL", "x gnd"),
    )
    assert "VA, EB, HC and VD are a loop" in error.problem
    assert "VX" not in error.problem


def test_a_source_on_one_node() -> None:
    assert (
        "both ends of voltage source VB are on node in"
        in refused(VIN, part("voltage_source", "VB", "in in"), M1).problem
    )


def test_an_ammeter_closes_a_loop() -> None:
    error = refused(VIN, part("cccs", "F1", "out gnd in gnd"), LOAD)
    assert "VIN and F1" in error.problem
    passes(VIN, part("cccs", "F1", "out gnd in a"), part("resistor", "RA", "a gnd"), LOAD)


def test_a_loop_whose_current_is_measured_can_be_solved() -> None:
    passes(VIN, part("ccvs", "H1", "in gnd", control="VIN"))


def test_an_opamp_needs_feedback() -> None:
    amp = part("opamp", "A1", "gnd in out")
    assert "inputs of op amp A1 are tied together by VIN" in refused(VIN, amp, LOAD).problem
    fed_back = part("opamp", "A1", "gnd x out")
    passes(VIN, fed_back, part("resistor", "R1", "in x"), part("resistor", "R2", "x out"))
    passes(VIN, part("opamp", "A1", "in out out"))


# Islands ----------------------------------------------------------------------------------------------------


def test_a_gate_with_no_drive() -> None:
    error = refused(VIN, replace(M1, nodes=("g", "out", "gnd", "gnd")), LOAD)
    assert "node g hangs on nothing" in error.problem
    assert "gate of M1" in error.problem
    assert error.key == "mosfet.M1"
    passes(replace(M1, nodes=("g", "out", "gnd", "gnd"), parameters=("gm", "gds", "cgs")))


def test_a_node_that_only_controls() -> None:
    error = refused(VIN, part("vccs", "G1", "out gnd in c"), LOAD)
    assert "node c hangs on nothing" in error.problem
    assert "control minus of G1" in error.problem


def test_a_body_without_elements() -> None:
    assert "body of M1" in refused(VIN, replace(M1, nodes=("in", "out", "gnd", "b"))).problem


@pytest.mark.parametrize(
    "coupling",
    [
        part("transformer", "T1", "in gnd a b"),
        part("vccs", "G1", "a b in gnd"),
        part("cccs", "F1", "a b in x"),
    ],
)
def test_an_island_that_is_coupled_but_not_joined(coupling: Part) -> None:
    network = (VIN, part("resistor", "RX", "x gnd"), part("resistor", "RA", "in x"), coupling)
    load = part("resistor", "RL", "a b")
    error = refused(*network, load)
    assert "nodes a and b hang on nothing" in error.problem
    passes(*network, load, part("capacitor", "CB", "b gnd"))


def test_a_cut_of_current_sources() -> None:
    error = refused(
        VIN,
        M1,
        part("current_source", "IA", "a gnd"),
        part("current_source", "IB", "out b"),
        part("current_source", "IC", "gnd in"),
        part("resistor", "RAB", "a b"),
    )
    assert "IA and IB alone join nodes a and b" in error.problem
    assert "IC" not in error.problem
    assert error.key == "current_source.IA"


def test_a_source_controlled_by_a_current_source_is_one() -> None:
    drive = part("current_source", "IA", "in gnd")
    shunt = part("resistor", "RA", "in gnd")
    assert "node out" in refused(drive, shunt, part("cccs", "F1", "out gnd", control="IA")).problem
    passes(drive, shunt, part("cccs", "F1", "out gnd", control="IA"), LOAD)


def test_a_drain_that_sees_no_conductance() -> None:
    error = refused(VIN, replace(M1, parameters=("gm",)))
    assert "nothing fixes the voltage of node out" in error.problem
    assert "drain of M1" in error.problem
    passes(VIN, replace(M1, parameters=("gm",)), LOAD)
    passes(replace(M1, nodes=("out", "out", "gnd", "gnd"), parameters=("gm",)))  # its gate on its drain: 1/gm


def test_the_inner_base() -> None:
    passes(VIN, part("bjt", "Q1", "in out gnd", "gm gpi go rx"))
    passes(VIN, part("bjt", "Q1", "in out gnd", "gm go"))
    error = refused(part("bjt", "Q1", "b out gnd", "gm go rx"))
    assert "node b hangs on nothing" in error.problem


def test_parts_taken_off() -> None:
    ammeter = part("cccs", "F1", "out gnd", control="RL2")
    network = (VIN, part("resistor", "RL2", "in gnd"), ammeter, LOAD)
    passes(*network)
    passes(*network, without=("F1", "RL2"))
    refused(*network, without=("RL",))
    with pytest.raises(NetworkError, match="the current of RL2, which is taken off, controls F1"):
        check_network(stage_of(*network), ("RL2",))


# Nodes and impedances ---------------------------------------------------------------------------------------


def test_nodes_in_file_order() -> None:
    stage = stage_of(M1, VIN, part("resistor", "RB", "z out"))
    assert nodes_of(stage) == ("in", "out", "z")
    assert nodes_of(stage, ("RB",)) == ("in", "out")


def test_what_shorts_a_pair() -> None:
    stage = stage_of(
        VIN,
        part("voltage_source", "VB", "a in"),
        M1,
        part("ccvs", "H1", "out gnd c a"),
        part("cccs", "F1", "x gnd d e"),
    )
    assert shorted_by(stage, ("in", "gnd")) == ("VIN",)
    assert shorted_by(stage, ("gnd", "c")) == ("VIN", "VB")
    assert shorted_by(stage, ("in", "gnd"), ("VIN",)) == ()
    assert shorted_by(stage, ("out", "gnd")) == ()
    assert shorted_by(stage, ("d", "e")) == ()  # a short that belongs to the network


def test_looking_into_a_shorted_node_proposes_the_source() -> None:
    stage = stage_of(VIN, M1)
    with pytest.raises(StageError, match="node in is shorted by VIN") as caught:
        check_looking_into(stage, Asked("zin", looking_into=("in", "gnd")))
    assert 'looking_into = "VIN"' in caught.value.remedy
    assert caught.value.key == "response.zin.looking_into"
    check_asked(stage, Asked("rout", looking_into=("out", "gnd")))
    check_asked(stage, Asked("zin", looking_source="VIN"))


def test_a_node_that_goes_with_its_part() -> None:
    stage = stage_of(VIN, M1, part("resistor", "RZ", "z out"), part("capacitor", "CZ", "z gnd"))
    with pytest.raises(StageError, match="nothing is left at node z with RZ and CZ taken off"):
        check_asked(stage, Asked("gain", to=("z", "gnd"), without=("RZ", "CZ")))


# Against the determinant ------------------------------------------------------------------------------------


NODES = st.sampled_from(["gnd", "a", "b", "c", "d"])
SIMPLE = ("resistor", "capacitor", "voltage_source", "current_source")
ARITY = {"mosfet": 4, "bjt": 3, "opamp": 3, "transformer": 4, "vccs": 4, "vcvs": 4, "cccs": 4, "ccvs": 4}


@st.composite
def networks(draw: st.DrawFn, kinds: tuple[str, ...]) -> tuple[Part, ...]:
    parts: list[Part] = []
    for index in range(draw(st.integers(1, 7))):
        kind = draw(st.sampled_from(kinds))
        nodes = [draw(NODES) for _ in range(ARITY.get(kind, 2))]
        control = None
        two = [p.label for p in parts if len(p.kind.terminals) == 2]
        if kind in ("cccs", "ccvs") and two and draw(st.booleans()):
            nodes, control = nodes[:2], draw(st.sampled_from(two))
        parameters = None
        if KINDS[kind].prefixed:
            names = [p.name for p in KINDS[kind].parameters]
            parameters = " ".join(name for name in names if name == "gm" or draw(st.booleans()))
        parts.append(part(kind, f"P{index}", " ".join(nodes), parameters, control))
    return tuple(parts)


@given(networks(tuple(KINDS)))
@settings(max_examples=400, deadline=None)
def test_what_is_refused_is_singular(parts: tuple[Part, ...]) -> None:
    try:
        check_network(stage_of(*parts))
    except NetworkError:
        assert determinant(parts) == 0


@given(networks(SIMPLE))
@settings(max_examples=300, deadline=None)
def test_without_controlled_sources_what_passes_is_solvable(parts: tuple[Part, ...]) -> None:
    try:
        check_network(stage_of(*parts))
    except NetworkError:
        return
    assert determinant(parts) != 0


def determinant(parts: tuple[Part, ...]) -> int:
    """The determinant modulo PRIME of the sparse tableau: voltages, then one current for every element."""
    chance = random.Random(2026)
    nodes = [n for n in dict.fromkeys(n for p in parts for n in (*p.nodes, *inner(p))) if n != "gnd"]
    rows: list[dict[object, int]] = [{} for _ in nodes]
    own: list[dict[object, int]] = []

    def through(current: object, plus: str, minus: str) -> None:
        for node, sign in ((plus, 1), (minus, -1)):
            if node != "gnd":
                row = rows[nodes.index(node)]
                row[current] = row.get(current, 0) + sign

    def voltage(plus: str, minus: str, factor: int = 1) -> dict[object, int]:
        row: dict[object, int] = {}
        for node, sign in ((plus, factor), (minus, -factor)):
            if node != "gnd":
                row[node] = row.get(node, 0) + sign
        return row

    def merged(*terms: dict[object, int]) -> dict[object, int]:
        row: dict[object, int] = {}
        for term in terms:
            for key, value in term.items():
                row[key] = row.get(key, 0) + value
        return row

    for p in parts:
        at = dict(zip(p.kind.terminals, p.nodes, strict=False)) | {"gnd": "gnd"}
        at["inner"] = next(iter(inner(p)), at.get("base", ""))
        for number, element in enumerate(p.kind.elements):
            if element.parameter is not None and element.parameter not in p.parameters:
                continue
            n = [at[t] for t in element.terminals if t in at]
            current, value = (p.label, number), chance.randrange(1, PRIME)
            me = {current: 1}
            match element.what:
                case "conductance" | "capacitance" | "resistance" | "inductance":
                    own.append(merged(me, voltage(n[0], n[1], value)))
                case "voltage_source":
                    own.append(voltage(n[0], n[1]))
                case "current_source":
                    own.append(me)
                case "vccs":
                    own.append(merged(me, voltage(n[2], n[3], value)))
                case "vcvs":
                    own.append(merged(voltage(n[0], n[1]), voltage(n[2], n[3], value)))
                case "cccs" | "ccvs":
                    control: object = (p.control, 0)
                    if p.control is None:
                        control = (p.label, "ammeter")
                        through(control, n[2], n[3])
                        own.append(voltage(n[2], n[3]))
                    left = me if element.what == "cccs" else voltage(n[0], n[1])
                    own.append(merged(left, {control: value}))
                case "opamp":
                    own.append(voltage(n[0], n[1]))
                    n = [n[2], "gnd"]
                case "transformer":
                    own.append(merged(voltage(n[0], n[1]), voltage(n[2], n[3], value)))
                    own.append({current: value, (p.label, "secondary"): 1})
                    through((p.label, "secondary"), n[2], n[3])
            through(current, n[0], n[1])
    return eliminated([*rows, *own])


def inner(p: Part) -> tuple[str, ...]:
    return (f"{p.label}'",) if "rx" in p.parameters else ()


def eliminated(rows: list[dict[object, int]]) -> int:
    columns = list(dict.fromkeys(key for row in rows for key in row))
    if len(columns) < len(rows):
        return 0
    matrix = [[row.get(key, 0) % PRIME for key in columns] for row in rows]
    product = 1
    for k in range(len(matrix)):
        pivot = next((i for i in range(k, len(matrix)) if matrix[i][k]), None)
        if pivot is None:
            return 0
        matrix[k], matrix[pivot] = matrix[pivot], matrix[k]
        product = product * matrix[k][k] % PRIME
        scale = pow(matrix[k][k], -1, PRIME)
        for row in matrix[k + 1 :]:
            if row[k]:
                factor = row[k] * scale % PRIME
                row[k:] = [(a - factor * b) % PRIME for a, b in zip(row[k:], matrix[k][k:], strict=True)]
    return product
