"""Stages and hand formulas for the tests of ways and of the catalogue: text-book stages, values of our own making."""

from __future__ import annotations

from pathlib import Path

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.exact.asked_quantity import Quantity, parse_quantity
from symamp.exact.derive import derive
from symamp.exact.formulas import PolyRatio
from symamp.exact.response import Response
from symamp.formula import parse
from symamp.judge.claimed import claimed_ratio, claimed_symbols, claims_ring

_HEAD = '[voltage_source]\nVIN = ["in", "gnd"]\n'

TEXTS: dict[str, str] = {
    "common source": _HEAD
    + """
[mosfet]
M1 = { gate = "g", drain = "out", source = "gnd" }
[resistor]
RS = ["in", "g"]
RL = ["out", "gnd"]
[capacitor]
CL = ["out", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
[bias]
M1 = { gm = "5 mS", gds = "20 uS", cgs = "0.4 pF", cgd = "0.1 pF", cdb = "30 fF" }
RS = "20 kohm"
RL = "4 kohm"
CL = "0.7 pF"
""",
    "degenerated": _HEAD
    + """
[mosfet]
M1 = { gate = "in", drain = "out", source = "s" }
[resistor]
RD = ["out", "gnd"]
RS = ["s", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out", without = ["RD"] }
[bias]
M1 = { gm = "6 mS", gds = "10 uS", gmb = "0.9 mS" }
RD = "8 kohm"
RS = "1.5 kohm"
""",
    "cascode": _HEAD
    + """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }
[resistor]
RL = ["out", "gnd"]
[capacitor]
CL = ["out", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
bare = { from = "VIN", to = "out", without = ["RL"] }
[bias]
M1 = { gm = "4.1 mS", gds = "0.11 mS", cgd = "20 fF", cdb = "25 fF" }
M2 = { gm = "3.9 mS", gds = "0.14 mS", gmb = "0.62 mS", csb = "60 fF", cdb = "30 fF" }
RL = "4.7 Mohm"
CL = "3.3 pF"
""",
    "follower": _HEAD
    + """
[mosfet]
M1 = { gate = "g", drain = "gnd", source = "out" }
[resistor]
RG = ["in", "g"]
RS = ["out", "gnd"]
[capacitor]
CL = ["out", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
[bias]
M1 = { gm = "6.4 mS", gds = "0.12 mS", gmb = "1.1 mS", cgs = "0.2 pF", cgd = "40 fF" }
RG = "3.3 kohm"
RS = "22 kohm"
CL = "150 pF"
""",
    "common gate": """
[current_source]
IIN = ["gnd", "s"]
[mosfet]
M1 = { gate = "gnd", drain = "out", source = "s" }
[resistor]
RD = ["out", "gnd"]
[response]
rin = { looking_into = "s" }
[bias]
M1 = { gm = "5 mS", gds = "50 uS", gmb = "0.8 mS" }
RD = "2 kohm"
""",
    "two stages": _HEAD
    + """
[vccs]
gm1 = { out = ["x", "gnd"], control = ["in", "gnd"] }
gm2 = { out = ["out", "gnd"], control = ["x", "gnd"] }
[resistor]
R1 = ["x", "gnd"]
R2 = ["out", "gnd"]
[capacitor]
C1 = ["x", "gnd"]
C2 = ["out", "gnd"]
CC = ["x", "out"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
gm1 = "0.35 mS"
gm2 = "2.4 mS"
R1 = "310 kohm"
R2 = "42 kohm"
C1 = "0.22 pF"
C2 = "5.6 pF"
CC = "1.5 pF"
""",
    "op amp": _HEAD
    + """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M3 = { gate = "gnd", drain = "x", source = "gnd" }
M6 = { gate = "x", drain = "out", source = "gnd" }
M7 = { gate = "gnd", drain = "out", source = "gnd" }
[capacitor]
CC = ["x", "r"]
CL = ["out", "gnd"]
[resistor]
RZ = ["r", "out"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "0.5 mS", gds = "4 uS", cgd = "8 fF", cdb = "10 fF" }
M3 = { gm = "0.4 mS", gds = "5 uS", cgd = "6 fF", cdb = "9 fF" }
M6 = { gm = "4 mS", gds = "30 uS", cgs = "120 fF", cgd = "25 fF", cdb = "30 fF" }
M7 = { gm = "2 mS", gds = "40 uS", cgd = "20 fF", cdb = "28 fF" }
CC = "2 pF"
CL = "5 pF"
RZ = "400 ohm"
""",
    "full op amp": """
[voltage_source]
VP = ["inp", "gnd"]
VN = ["inn", "gnd"]
[mosfet]
M1 = { gate = "inp", drain = "m", source = "t" }
M2 = { gate = "inn", drain = "x", source = "t" }
M3 = { gate = "m", drain = "m", source = "gnd" }
M4 = { gate = "m", drain = "x", source = "gnd" }
M5 = { gate = "gnd", drain = "t", source = "gnd" }
M6 = { gate = "x", drain = "out", source = "gnd" }
M7 = { gate = "gnd", drain = "out", source = "gnd" }
[capacitor]
CC = ["x", "out"]
CL = ["out", "gnd"]
[response]
gain = { from = { VP = 0.5, VN = -0.5 }, to = "out" }
[bias]
M1 = { gm = "2 mS", gds = "20 uS", gmb = "0.3 mS", cgs = "50 fF", cgd = "10 fF", cdb = "12 fF", csb = "15 fF" }
M2 = { gm = "2 mS", gds = "20 uS", gmb = "0.3 mS", cgs = "50 fF", cgd = "10 fF", cdb = "12 fF", csb = "15 fF" }
M3 = { gm = "1.5 mS", gds = "30 uS", cgs = "60 fF", cgd = "10 fF", cdb = "12 fF" }
M4 = { gm = "1.5 mS", gds = "30 uS", cgs = "60 fF", cgd = "10 fF", cdb = "12 fF" }
M5 = { gm = "3 mS", gds = "40 uS", cgd = "10 fF", cdb = "12 fF" }
M6 = { gm = "8 mS", gds = "80 uS", cgs = "100 fF", cgd = "20 fF", cdb = "22 fF" }
M7 = { gm = "5 mS", gds = "70 uS", cgd = "20 fF", cdb = "22 fF" }
CC = "1 pF"
CL = "3 pF"
""",
    "pair": """
[voltage_source]
VP = ["inp", "gnd"]
VN = ["inn", "gnd"]
[mosfet]
M1 = { gate = "inp", drain = "m", source = "t", body = "t" }
M2 = { gate = "inn", drain = "out", source = "t", body = "t" }
M3 = { gate = "m", drain = "m", source = "gnd" }
M4 = { gate = "m", drain = "out", source = "gnd" }
[resistor]
RT = ["t", "gnd"]
[response]
gain = { from = { VP = 0.5, VN = -0.5 }, to = "out" }
common = { from = { VP = 1, VN = 1 }, to = "out" }
[bias]
M1 = { gm = "2 mS", gds = "20 uS" }
M2 = { gm = "2 mS", gds = "20 uS" }
M3 = { gm = "1.5 mS", gds = "30 uS" }
M4 = { gm = "1.5 mS", gds = "30 uS" }
RT = "200 kohm"
""",
    "emitter follower": _HEAD
    + """
[bjt]
Q1 = { base = "b", collector = "gnd", emitter = "out" }
[resistor]
RB = ["in", "b"]
RE = ["out", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
rin = { looking_into = "VIN" }
[bias]
Q1 = { gm = "40 mS", beta = "150", ro = "60 kohm" }
RB = "200 ohm"
RE = "2 kohm"
""",
    "common emitter": _HEAD
    + """
[bjt]
Q1 = { base = "b", collector = "out", emitter = "e" }
[resistor]
RB = ["in", "b"]
RC = ["out", "gnd"]
RE = ["e", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rin = { looking_into = "VIN" }
[bias]
Q1 = { gm = "38 mS", beta = "160", ro = "90 kohm" }
RB = "300 ohm"
RC = "6.8 kohm"
RE = "470 ohm"
""",
}

# (stage, response.quantity, hand formula), each with the section of a text book that has it, or common practice.
FORMULAS: tuple[tuple[str, str, str], ...] = (
    ("common source", "gain.dc", "-gm1*RL"),  # Sedra & Smith, common source with a load small against ro
    ("common source", "gain.dc", "-gm1*ro1"),  # intrinsic gain: an ideal current source for a load
    ("common source", "gain.p1", "-1/(RS*(cgs1 + cgd1*(1 + gm1*RL)))"),  # Miller's approximation
    ("common source", "rout.dc", "RL"),
    ("degenerated", "gain.dc", "-RD/RS"),  # common practice
    ("degenerated", "gain.dc", "-gm1*RD/(1 + gm1*RS)"),  # Razavi 2e 3.3.5, from memory
    ("degenerated", "gain.dc", "-gm1*RD/(1 + (gm1 + gmb1)*RS)"),
    ("degenerated", "rout.dc", "(gm1 + gmb1)*ro1*RS"),  # Razavi 2e 3.3.5, from memory
    ("degenerated", "rout.dc", "gm1*ro1*RS + ro1"),
    ("cascode", "bare.dc", "-gm1*gm2*ro1*ro2"),  # Gray et al. 3.4, from memory
    ("cascode", "gain.dc", "-gm1*gm2*ro1*ro2"),
    ("cascode", "rout.dc", "gm2*ro1*ro2"),
    ("cascode", "bare.dc", "-gm1*(gm2 + gmb2)*ro1*ro2"),
    ("cascode", "bare.p1", "-1/(gm2*ro1*ro2*CL)"),  # common practice
    ("cascode", "gain.dc", "-gm1*RL"),
    ("follower", "gain.dc", "gm1/(gm1 + gmb1)"),  # Razavi 2e 3.4, from memory
    ("follower", "gain.dc", "1"),
    ("follower", "rout.dc", "1/(gm1 + gmb1)"),
    ("follower", "rout.dc", "1/gm1"),
    ("follower", "gain.p1", "-(gm1 + gmb1)/CL"),
    ("common gate", "rin.dc", "1/(gm1 + gmb1)"),  # Razavi 2e 3.5, from memory
    ("common gate", "rin.dc", "1/gm1"),
    ("two stages", "gain.p1", "-1/(R1*gm2*R2*CC)"),  # Gray et al. 9.4, from memory
    ("two stages", "gain.p2", "-gm2*CC/(C1*C2 + CC*(C1 + C2))"),
    ("two stages", "gain.p2", "-gm2/C2"),
    ("op amp", "gain.dc", "gm1*gm6/((gds1 + gds3)*(gds6 + gds7))"),
    ("op amp", "gain.p1", "-(gds1 + gds3)*(gds6 + gds7)/(gm6*CC)"),
    ("op amp", "gain.p2", "-gm6/CL"),
    ("op amp", "gain.z1", "1/(CC*(1/gm6 - RZ))"),  # Allen & Holberg 6.3, from memory
    ("pair", "gain.dc", "gm1/(gds2 + gds4)"),  # Razavi 2e 5.3, from memory
    ("pair", "common.dc", "-1/(2*gm3*RT)"),  # Sedra & Smith 7.5, from memory
    ("emitter follower", "gain.dc", "gm1*RE/(1 + gm1*RE)"),
    ("emitter follower", "gain.dc", "1"),
    ("emitter follower", "rout.dc", "1/gm1"),
    ("emitter follower", "rout.dc", "1/gm1 + RB/beta1"),  # Sedra & Smith 5, from memory
    ("emitter follower", "rin.dc", "beta1*RE"),
    ("common emitter", "gain.dc", "-RC/RE"),  # common practice
    ("common emitter", "gain.dc", "-gm1*RC/(1 + gm1*RE)"),
    ("common emitter", "gain.dc", "-beta1*RC/(RB + rpi1 + (1 + beta1)*RE)"),
    ("common emitter", "rin.dc", "RB + rpi1 + beta1*RE"),
)


def stage_named(name: str, *more: str) -> Stage:
    """A stage, with further text at its end."""
    text = f'title = "{name}"\n{TEXTS[name]}{"".join(more)}'
    return parse_stage(text.encode(), file="my.stage.toml", folder=Path())


def response_of(stage: Stage, name: str) -> Response:
    return derive(stage, stage.asked[name])


def target_of(stage: Stage, formula: str) -> PolyRatio:
    """A hand formula as a ratio of polynomials."""
    node = parse(formula)
    above, below = claimed_ratio(stage, node, claims_ring(stage, claimed_symbols(stage, node)))
    return above, below


def about(text: str) -> tuple[str, Quantity]:
    response, _, quantity = text.partition(".")
    return response, parse_quantity(quantity)
