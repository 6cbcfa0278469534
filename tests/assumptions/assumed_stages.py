"""Stages for the tests of assumptions, with bias values, and short ways to put assumptions to them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import write_out
from symamp.exact.response import Response
from symamp.exact.shape import polynomial_text
from symamp.exact.system import build_system
from symamp.formula import evaluate, parse


def common_source() -> StageBuilder:
    """A common source behind a signal source's resistance, with the capacitance that bridges it."""
    b = StageBuilder("Common source")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("RS", "in", "g", "10 kohm")
    b.mosfet("M1", gate="g", drain="out", source="gnd", gm="2 mS", gds="50 uS", cgs="80 fF", cgd="15 fF")
    b.resistor("RL", "out", "gnd", "8 kohm")
    b.capacitor("CL", "out", "gnd", "200 fF")
    b.response("gain", source="VIN", to="out")
    b.response("gate", source="VIN", to="g")
    b.response("rout", looking_into="out")
    b.response("zin", looking_into="VIN")
    return b


def cascode() -> StageBuilder:
    """A cascode into a capacitive load."""
    b = StageBuilder("Cascode")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS", cdb="20 fF")
    b.mosfet(
        "M2", gate="gnd", drain="out", source="x", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS", cgs="40 fF"
    )
    b.capacitor("CL", "out", "gnd", "3.3 pF")
    b.response("gain", source="VIN", to="out")
    b.response("mid", source="VIN", to="x")
    b.response("late", source="VIN", to="out", over="x")
    b.response("rout", looking_into="out")
    return b


def follower() -> StageBuilder:
    """A source follower on a resistor, driven through a resistance."""
    b = StageBuilder("Source follower")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("RG", "in", "g", "5 kohm")
    b.mosfet(
        "M1",
        gate="g",
        drain="gnd",
        source="out",
        gm="5 mS",
        gds="0.1 mS",
        gmb="0.9 mS",
        cgs="100 fF",
        cgd="20 fF",
    )
    b.resistor("RS", "out", "gnd", "2 kohm")
    b.capacitor("CL", "out", "gnd", "1 pF")
    b.response("gain", source="VIN", to="out")
    b.response("rout", looking_into="out")
    return b


def degenerated() -> StageBuilder:
    """A common emitter with emitter resistor, base resistance and coupling and bypass capacitors."""
    b = StageBuilder("Common emitter")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("RG", "in", "s1", "600 ohm")
    b.capacitor("CIN", "s1", "b", "10 uF")
    b.resistor("RB", "b", "gnd", "47 kohm")
    b.bjt(
        "Q1",
        base="b",
        collector="c",
        emitter="e",
        gm="40 mS",
        beta="150",
        ro="60 kohm",
        cpi="12 pF",
        cmu="1.5 pF",
    )
    b.resistor("RE", "e", "gnd", "470 ohm")
    b.capacitor("CE", "e", "gnd", "100 uF")
    b.resistor("RC", "c", "gnd", "3.3 kohm")
    b.capacitor("COUT", "c", "out", "1 uF")
    b.resistor("RL", "out", "gnd", "10 kohm")
    b.response("gain", source="VIN", to="out")
    b.response("rout", looking_into="c")
    return b


def differential_pair() -> StageBuilder:
    """A differential pair with a current mirror for a load and a tail with finite conductance."""
    b = StageBuilder("Differential pair with mirror")
    b.voltage_source("VP", "inp", "gnd")
    b.voltage_source("VN", "inn", "gnd")
    b.mosfet("M1", gate="inp", drain="m", source="t", body="t", gm="2 mS", gds="40 uS")
    b.mosfet("M2", gate="inn", drain="out", source="t", body="t", gm="2.1 mS", gds="44 uS")
    b.mosfet("M3", gate="m", drain="m", source="gnd", gm="1.5 mS", gds="30 uS", cgs="60 fF")
    b.mosfet("M4", gate="m", drain="out", source="gnd", gm="1.6 mS", gds="33 uS", cgs="62 fF")
    b.mosfet("M5", gate="gnd", drain="t", source="gnd", gm="3 mS", gds="25 uS")
    b.capacitor("CL", "out", "gnd", "1 pF")
    b.response("gain", source={"VP": "0.5", "VN": "-0.5"}, to="out")
    b.response("common", source={"VP": 1, "VN": 1}, to="out")
    return b


def two_stage() -> StageBuilder:
    """A two-stage amplifier compensated by a capacitor and a resistor, each stage as one transistor."""
    b = StageBuilder("Two stages with compensation")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="a", source="gnd", gm="1 mS", gds="10 uS")
    b.capacitor("C1", "a", "gnd", "100 fF")
    b.mosfet("M6", gate="a", drain="out", source="gnd", gm="5 mS", gds="60 uS")
    b.capacitor("CC", "a", "r", "2 pF")
    b.resistor("RZ", "r", "out", "300 ohm")
    b.capacitor("CL", "out", "gnd", "5 pF")
    b.response("gain", source="VIN", to="out")
    return b


def exact(stage: Stage, name: str = "gain", *, nested: bool = False) -> Response:
    """The exact response, written out; on request as its minor graph, however small."""
    asked = stage.asked[name]
    ratio = ratio_of(build_system(stage, asked.without), asked)
    form = nested_of(stage, ratio) if nested else write_out(ratio, stage.symbols)
    return Response(stage, asked, ratio.unit, form)


def under(b: StageBuilder, name: str = "gain", **assumption: Any) -> Approximation:
    """The response of a stage under one assumption, added to those that the builder has."""
    if assumption:
        b.assume("it", **assumption)
    stage = b.stage()
    return Approximator(exact(stage, name)).under(read_assumptions(stage))


def formula_value(text: str, values: Mapping[str, float]) -> float:
    """The value of a formula in the grammar of stage files."""
    return evaluate(parse(text), values.__getitem__)


def texts(response: Response, which: str) -> list[str]:
    """The coefficients of numerator or denominator as text."""
    return [polynomial_text(c) for c in getattr(response.form, which)]


def same(a: Response, b: Response) -> bool:
    """Whether two written-out responses are the same ratio with the same word on roots."""
    rows: list[Sequence[str]] = []
    for response in (a, b):
        rows.append([*texts(response, "numerator"), "/", *texts(response, "denominator")])
    return rows[0] == rows[1] and (a.apart, a.single_pole) == (b.apart, b.single_pole)
