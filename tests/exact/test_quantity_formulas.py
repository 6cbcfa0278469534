"""Formulas of quantities and their faces: where a sign is sure there is one, and it is the value's."""

from __future__ import annotations

import math

import pytest

from symamp.circuit.builder import StageBuilder
from symamp.exact.derive import derive
from symamp.exact.response import Response


def common_source(gate: str = "in") -> Response:
    """gain = −(gm1 − s·cgd1)/(gds1 + s·(CL + cgd1))."""
    build = StageBuilder("common source")
    build.voltage_source("VIN", "in", "gnd")
    build.mosfet("M1", gate=gate, drain="out", source="gnd", gm="2 mS", gds="0.1 mS", cgd="10 fF")
    build.capacitor("CL", "out", "gnd", "1 pF")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    return derive(stage, stage.asked["gain"])


@pytest.mark.parametrize(
    ("name", "formula", "value"),
    [
        ("p1", "-gds1/(CL + cgd1)", -1e-4 / 1.01e-12),
        ("p1.magnitude", "gds1/(CL + cgd1)", 1e-4 / 1.01e-12),
        ("p1.hz", "gds1/(2*pi*(CL + cgd1))", 1e-4 / 1.01e-12 / (2 * math.pi)),
        ("p1.re", "-gds1/(CL + cgd1)", -1e-4 / 1.01e-12),
        ("p1.im", "0", 0),
        ("z1.hz", "gm1/(2*pi*cgd1)", 2e-3 / 1e-14 / (2 * math.pi)),
        ("dc.magnitude", "gm1/gds1", 20),
        ("hf.magnitude", "cgd1/(CL + cgd1)", 1 / 101),
        ("a1.magnitude", "cgd1/gds1", 1e-10),
        ("dc.db", None, 20 * math.log10(20)),
        ("p1.deg", None, 180),
        ("bandwidth.hz", None, 15.76e6),
    ],
)
def test_a_face_has_a_formula_where_its_quantity_has_a_sure_sign(
    name: str, formula: str | None, value: float
) -> None:
    found = common_source().quantity(name)
    assert found.text == formula
    assert found.value == pytest.approx(value, rel=1e-3)


def test_no_size_is_written_out_of_a_sum_that_may_have_either_sign() -> None:
    build = StageBuilder("two paths")
    build.voltage_source("VIN", "in", "gnd")
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm="2 mS", gds="0.1 mS")
    build.resistor("RF", "in", "out", "1 kohm")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    gain = derive(stage, stage.asked["gain"])
    assert gain.quantity("dc").text == "-(gm1*RF - 1)/(1 + gds1*RF)"
    assert gain.quantity("dc.magnitude").text is None
    assert gain.quantity("dc.magnitude").value == pytest.approx(1 / 1.1)


def test_no_size_is_written_out_of_a_gain_that_may_be_negative() -> None:
    build = StageBuilder("controlled source")
    build.voltage_source("VIN", "in", "gnd")
    build.vcvs("EX", out=("out", "gnd"), control=("in", "gnd"), value=-3)
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    gain = derive(stage, stage.asked["gain"])
    assert (gain.quantity("dc").text, gain.quantity("dc.magnitude").text) == ("EX", None)
    assert gain.quantity("dc.magnitude").value == 3


def test_without_a_bias_the_smaller_root_is_told_by_the_sign_of_b() -> None:
    """A tank beside a negative conductance, 1 − GX·LA·s + LA·CA·s²: p1 has the minus before its root."""
    build = StageBuilder("negative conductance")
    build.vccs("GX", out=("gnd", "out"), control=("out", "gnd"))
    build.inductor("LA", "out", "gnd")
    build.capacitor("CA", "out", "gnd")
    build.response("zout", looking_into="out")
    stage = build.stage()
    zout = derive(stage, stage.asked["zout"])
    first, second = (zout.quantity(name).formula for name in ("p1", "p2"))
    values = {symbol: 10 if symbol.name == "GX" else 1 for symbol in first.free_symbols}
    assert abs(first.subs(values)) < abs(second.subs(values))
