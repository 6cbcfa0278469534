"""Claims built from published closed forms: two-stage op amp, pair with mirror, regulated cascode, common gate.

Numbered as in the collection the forms are from. SS Sedra & Smith; GM Gray, Hurst, Lewis & Meyer 5e; RF Razavi,
Fundamentals; R2 Razavi, CMOS 2e; AH Allen & Holberg. A section or an equation's number with * is from memory. What is
left over, and the error, are worked out by hand from the form that is cited.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
import sympy
import test_claims_published
import test_claims_published_bipolar
from claims_by_hand import FAILS, HOLDS, WRONG, Circuit, Row, Values, compare, of_shape
from symbolic import same, symbols

gm1, gm2, gm3, gmb1, gds1, gds2, gds3 = symbols("gm1 gm2 gm3 gmb1 gds1 gds2 gds3")
R1, R2, Rz, C1, C2, CC, RD, EB = symbols("R1 R2 Rz C1 C2 CC RD EB")

TWO_STAGES = """
    mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
    mosfet.M2 = { gate = "x", drain = "out", source = "gnd" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.R1 = ["x", "gnd"]
    resistor.R2 = ["out", "gnd"]
    capacitor.C1 = ["x", "gnd"]
    capacitor.C2 = ["out", "gnd"]
    response.gain = { from = "VIN", to = "out" }
    """
BIAS: dict[str, Any] = {
    "M1": {"gm": 1e-3}, "M2": {"gm": 10e-3}, "R1": 100e3, "R2": 50e3, "C1": 0.2e-12, "C2": 10e-12, "CC": 3e-12,
}  # fmt: skip
MILLER = Circuit(TWO_STAGES + 'capacitor.CC = ["x", "out"]\n', BIAS)
NULLING = Circuit(
    TWO_STAGES + 'capacitor.CC = ["z", "out"]\nresistor.Rz = ["x", "z"]\n', {**BIAS, "Rz": 20.0}
)
BUFFERED = Circuit(
    TWO_STAGES + 'vcvs.EB = { out = ["z", "gnd"], control = ["out", "gnd"] }\ncapacitor.CC = ["x", "z"]\n',
    {**BIAS, "EB": 0.95},
)
K = C1 * C2 + C1 * CC + C2 * CC
T = gm2 * R1 * R2 * CC
small = R1 * (C1 + CC) + R2 * (C2 + CC)
SMALL_SHARES = tuple(each / T for each in (R1 * C1, R1 * CC, R2 * C2, R2 * CC))
K_SHARES = tuple(each * R1 * R2 / T**2 for each in (C1 * C2, C1 * CC, C2 * CC))


def number(expression: sympy.Expr, v: Values) -> float:
    return float(expression.subs({sympy.Symbol(n, positive=True): x for n, x in v.items()}))


def poles(v: Values) -> tuple[float, float]:
    """1 + s(T + small) + s²R1·R2·K = 0, the smaller root first."""
    one, two = number(T + small, v), number(R1 * R2 * K, v)
    root = math.sqrt(one**2 - 4 * two)
    return -2 / (one + root), -(one + root) / (2 * two)


def falls_through(v: Values, level: float) -> float:
    """The ω at which the magnitude of gm1·R1·gm2·R2(1 − s·CC/gm2)/((1 − s/p1)(1 − s/p2)) falls through a level."""
    p1, p2 = poles(v)

    def above(w: float) -> bool:
        gain = number(gm1 * R1 * gm2 * R2, v) * math.hypot(1, w * v["CC"] / v["gm2"])
        return gain / math.hypot(1, w / p1) / math.hypot(1, w / p2) > level

    low, high = 1.0, 1e12
    for _ in range(200):
        middle = math.sqrt(low * high)
        low, high = (middle, high) if above(middle) else (low, middle)
    return low


def margin(v: Values) -> float:
    w, (p1, p2) = falls_through(v, 1.0), poles(v)
    lag = math.atan(w * v["CC"] / v["gm2"]) + math.atan(w / -p1) + math.atan(w / -p2)
    return 180 - math.degrees(lag)


def product(v: Values) -> float:
    """|dc|·bandwidth in Hz."""
    dc = number(gm1 * R1 * gm2 * R2, v)
    return dc * falls_through(v, dc / math.sqrt(2)) / (2 * math.pi)


def pole_error(index: int, claimed: sympy.Expr) -> Callable[[Values], float]:
    return lambda v: number(claimed, v) / poles(v)[index - 1] - 1


GM_94 = "26: GM 9.4; AH 6.2*"
OF_MILLER = (
    Row(GM_94, "gain.dc", "gm1*R1*gm2*R2", HOLDS),
    Row(GM_94, "gain.dc", "-gm1*R1*gm2*R2", WRONG, -2, says=("its sign is wrong",)),
    Row(GM_94, "gain.dc", "gm1*R1*R2", WRONG, None, says=("ohm", "a pure number", "a conductance")),
    Row(GM_94, "gain.dc", "gm1*R1*gm2*R1", WRONG, R1 / R2 - 1, says=("R2 and R1 would have to be equal",)),
    Row(GM_94, "gain.z1", "gm2/CC", HOLDS),
    Row(GM_94, "gain.z1", "-gm2/CC", WRONG, -2, says=("its sign is wrong",)),
    Row(GM_94, "gain.z1", "gm1/CC", WRONG, gm1 / gm2 - 1, says=("gm2 and gm1 would have to be equal",)),
    Row(GM_94, "gain.z1.hz", "gm2/CC", WRONG, 2 * sympy.pi - 1, says=("Hz and rad/s",)),
    Row(GM_94, "gain.b1", "gm2*R1*R2*CC", HOLDS, -small / (T + small), SMALL_SHARES),
    Row(GM_94, "gain.b2", "R1*R2*(C1*C2 + C1*CC + C2*CC)", HOLDS),
    Row(GM_94, "gain.b2", "R1*R2*C2*CC", HOLDS, -C1 * (C2 + CC) / K, (C1 / CC, C1 / C2)),
    Row(GM_94, "gain.p1", "-1/(gm2*R1*R2*CC)", HOLDS, pole_error(1, -1 / T), (*SMALL_SHARES, *K_SHARES)),
    Row(
        GM_94, "gain.p1.hz", "1/(2*pi*gm2*R1*R2*CC)", HOLDS, pole_error(1, -1 / T), (*SMALL_SHARES, *K_SHARES)
    ),
    Row(
        GM_94, "gain.p2", "-gm2*CC/(C1*C2 + CC*(C1 + C2))", HOLDS, pole_error(2, -gm2 * CC / K),
        (*SMALL_SHARES, *(each / (gm2**2 * R1 * R2 * CC**2) for each in (C1 * C2, C1 * CC, C2 * CC))),
    ),
    Row(
        "26, the p2 of a large Miller capacitance: GM 9.4", "gain.p2.magnitude", "gm2/C2", HOLDS,
        pole_error(2, -gm2 / C2), (*SMALL_SHARES, C1 / CC, C1 / C2, C2 / (gm2**2 * R1 * R2 * CC)),
    ),
    Row(GM_94, "gain.p2", "gm2/C2", WRONG, pole_error(2, gm2 / C2), (), ("sign", ".magnitude may be meant")),
    Row(
        "GB of the dominant pole: GM 9.4", "gain.gain_bandwidth", "gm1/(2*pi*CC)", HOLDS,
        lambda v: number(gm1 / CC, v) / (2 * math.pi) / product(v) - 1, None,
    ),
    Row(
        "GB of the dominant pole: GM 9.4", "gain.gain_bandwidth", "gm2/(2*pi*CC)", WRONG,
        lambda v: number(gm2 / CC, v) / (2 * math.pi) / product(v) - 1, None, ("gm1 and gm2 would have to be equal",),
    ),
    Row(
        "GB of the dominant pole: GM 9.4", "gain.unity_gain_frequency", "gm1/(2*pi*CC)", HOLDS,
        lambda v: number(gm1 / CC, v) / falls_through(v, 1.0) - 1, None,
    ),
    Row("26: GM 9.4", "gain.phase_margin", "65 deg", HOLDS, lambda v: 65 - margin(v), (), (), "3 deg"),
    Row("26: GM 9.4", "gain.phase_margin", "90 deg", FAILS, lambda v: 90 - margin(v), (), ("deg",), "3 deg"),
)  # fmt: skip

AH_62 = "27: GM 9.4; AH 6.2-6.3*"
OF_NULLING = (
    Row(AH_62, "gain.z1", "1/(CC*(1/gm2 - Rz))", HOLDS),
    Row(AH_62, "gain.z1", "gm2/CC", HOLDS, -gm2 * Rz, (-gm2 * Rz,), within="25 %"),
    Row(AH_62, "gain.b1", "R1*(C1 + CC) + R2*(C2 + CC) + gm2*R1*R2*CC + Rz*CC", HOLDS),
    Row(
        AH_62, "gain.b2", "R1*R2*(C1*C2 + C1*CC + C2*CC)", HOLDS,
        R1 * R2 * K / (R1 * R2 * K + Rz * CC * (R1 * C1 + R2 * C2)) - 1,
        (Rz * CC * C1 / (R2 * K), Rz * CC * C2 / (R1 * K)),
    ),
    Row(AH_62, "gain.b3", "R1*R2*Rz*C1*C2*CC", HOLDS),
    Row(AH_62, "gain.b3", "R1*R2*Rz*C1*C2", WRONG, None, says=("a capacitance",)),
    Row(AH_62, "gain.p3", "-1/(Rz*C1)", HOLDS, lambda v: third_pole_error(v), None),
)  # fmt: skip


def third_pole_error(v: Values) -> float:
    R, Z = number(R1 * R2, v), v["Rz"]
    first = number(T + small + Rz * CC, v)
    second = R * number(K, v) + number(Rz * CC * (R1 * C1 + R2 * C2), v)
    scale = 1e-9  # s, so that the roots are of the order of 1
    third = number(R1 * R2 * Rz * C1 * C2 * CC, v)
    found = np.roots([third / scale**3, second / scale**2, first / scale, 1.0]) / scale
    return float(-1 / (Z * v["C1"]) / found.real.min() - 1)


REGULATED = Circuit(
    """
    mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
    mosfet.M2 = { gate = "g2", drain = "out", source = "x", body = "x" }
    mosfet.M3 = { gate = "x", drain = "g2", source = "gnd" }
    voltage_source.VIN = ["in", "gnd"]
    response.rout = { looking_into = "out" }
    """,
    {f"M{k}": {"gm": 2e-3, "gds": k * 0.03e-3} for k in (1, 2, 3)},
)
COMMON_GATE = Circuit(
    """
    mosfet.M1 = { gate = "gnd", drain = "d", source = "x" }
    current_source.IIN = ["gnd", "x"]
    resistor.RD = ["d", "gnd"]
    response.rin = { looking_into = "x" }
    """,
    {"M1": {"gm": 4e-3, "gmb": 0.8e-3, "gds": 0.02e-3}, "RD": 4e3},
)
both = gm1 + gmb1
OF_REGULATED = (
    Row("15: GM 3.4.3*", "rout.dc", "ro1 + ro2 + gm2*(1 + gm3*ro3)*ro1*ro2", HOLDS),
    Row(
        "15: GM 3.4.3*", "rout.dc", "gm2*gm3*ro1*ro2*ro3", HOLDS,
        gm2 * gm3 / ((gds1 + gds2 + gm2) * gds3 + gm2 * gm3) - 1,
        (gds3 / gm3, gds1 * gds3 / (gm2 * gm3), gds2 * gds3 / (gm2 * gm3)),
    ),
)  # fmt: skip
OF_COMMON_GATE = (
    Row("6: R2 3.5*", "rin.dc", "(RD + ro1)/(1 + (gm1 + gmb1)*ro1)", HOLDS),
    Row(
        "6: R2 3.5*", "rin.dc", "1/(gm1 + gmb1)", HOLDS, (both + gds1) / (both * (1 + gds1 * RD)) - 1,
        (gds1 * RD, gds1 / both),
    ),
    Row(
        "6: R2 3.5*", "rin.dc", "1/gm1", FAILS, (both + gds1) / (gm1 * (1 + gds1 * RD)) - 1,
        (gds1 * RD, gmb1 / gm1, gds1 / gm1),
    ),
)  # fmt: skip

NODES = Circuit(
    """
    mosfet.M1 = { gate = "gnd", drain = "d", source = "x", body = "x" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.Rs = ["in", "x"]
    resistor.RL = ["d", "gnd"]
    capacitor.CX = ["x", "gnd"]
    capacitor.CY = ["d", "gnd"]
    response.gain = { from = "VIN", to = "d" }
    """,
    {"M1": {"gm": 4e-3}, "Rs": 50.0, "RL": 2e3, "CX": 0.1e-12, "CY": 1e-12},
)
GM_782 = "7: GM (7.82); RF 11*; ro = ∞"
Rs_, RL_ = symbols("Rs RL")
OF_NODES = (
    Row(GM_782, "gain.p1", "-1/(RL*CY)", HOLDS),
    Row(GM_782, "gain.p2", "-1/((Rs || (1/gm1))*CX)", HOLDS),
    Row(GM_782, "gain.p2.hz", "(1 + gm1*Rs)/(2*pi*Rs*CX)", HOLDS),
    Row(GM_782, "gain.p1", "1/(RL*CY)", WRONG, lambda v: -2, (), ("sign",)),
    Row(GM_782, "gain.dc", "gm1*RL/(1 + gm1*Rs)", HOLDS),
    Row(GM_782, "gain.dc", "gm1*RL", FAILS, gm1 * Rs_, (gm1 * Rs_,)),
)

PAIR_TEXT = """
    mosfet.M1 = { gate = "p", drain = "m", source = "t", body = "t" }
    mosfet.M2 = { gate = "n", drain = "out", source = "t", body = "t" }
    mosfet.M3 = { gate = "m", drain = "m", source = "gnd" }
    mosfet.M4 = { gate = "m", drain = "out", source = "gnd" }
    voltage_source.VP = ["p", "gnd"]
    voltage_source.VN = ["n", "gnd"]
    """
EQUAL = '[[assumption]]\nname = "the pair is one"\nequal = ["M1", "M2"]\n'
EQUAL += '[[assumption]]\nname = "the mirror is one"\nequal = ["M3", "M4"]\n'
FOUR = {
    "M1": {"gm": 2e-3, "gds": 0.05e-3}, "M2": {"gm": 2e-3, "gds": 0.05e-3},
    "M3": {"gm": 1e-3, "gds": 0.04e-3}, "M4": {"gm": 1e-3, "gds": 0.04e-3},
}  # fmt: skip
IDEAL_TAIL = Circuit(
    PAIR_TEXT
    + """
    current_source.ITAIL = ["t", "gnd"]
    response.gain = { from = { VP = 0.5, VN = -0.5 }, to = "out" }
    response.zout = { looking_into = "out" }
    """,
    FOUR,
)
TAIL = Circuit(
    PAIR_TEXT
    + """
    resistor.RSS = ["t", "gnd"]
    response.gain = { from = { VP = 1, VN = 1 }, to = "out" }
    """,
    {**FOUR, "RSS": 200e3},
)
DOUBLET = Circuit(
    PAIR_TEXT
    + """
    current_source.ITAIL = ["t", "gnd"]
    voltage_source.VOUT = ["out", "gnd"]
    capacitor.CM = ["m", "gnd"]
    response.gain = { from = { VP = 0.5, VN = -0.5 }, to = "VOUT" }
    """,
    {**{label: {"gm": each["gm"]} for label, each in FOUR.items()}, "CM": 50e-15},
)


def common_mode_error(v: Values) -> float:
    """Of −1/(2gp·RSS) against form 24 at the bias point, where the devices of each pair are equal."""
    gn, gp, ron, rop, tail = v["gm1"], v["gm3"], 1 / v["gds1"], 1 / v["gds3"], v["RSS"]
    exact = -gn * ron * rop / ((1 + gp * rop) * (2 * tail * (1 + gn * ron) + ron) + rop)
    return -1 / (2 * gp * tail) / exact - 1


R2_53 = "23: R2 5.3*"
OF_PAIR = (
    (IDEAL_TAIL, Row(
        R2_53, "gain.dc", "gm1*(ro1 || ro3)", HOLDS, lambda v: v["gds3"] / (2 * v["gm3"] + v["gds3"]),
        (gds3 / (2 * gm3 + gds3),),
    )),
    (IDEAL_TAIL, Row(
        R2_53, "gain.dc", "gm2*(ro2 || ro4)", HOLDS, lambda v: v["gds3"] / (2 * v["gm3"] + v["gds3"]),
        (gds3 / (2 * gm3 + gds3),),
    )),
    (IDEAL_TAIL, Row(
        # Half of it is a limit of the form: that for gdsp far above gp.
        R2_53, "gain.dc", "gm1*(ro1 || ro3)/2", FAILS,
        lambda v: (v["gds3"] / (2 * v["gm3"] + v["gds3"]) + 1) / 2 - 1, (gm3 / (gm3 + gds3),),
    )),
    # rop/(2ron(1 + gp·rop)) = gdsn/(2(gp + gdsp)) is what the exact form adds.
    (IDEAL_TAIL, Row(
        R2_53, "zout.dc", "ro2 || ro4", HOLDS,
        lambda v: 1 / (1 + v["gds1"] / (2 * (v["gm3"] + v["gds3"]))) - 1, (gds1 / (2 * (gm3 + gds3)),),
    )),
    (TAIL, Row("24: SS 7.5*", "gain.dc", "-1/(2*gm3*RSS)", HOLDS, common_mode_error, None)),
    (TAIL, Row("24: SS 7.5*", "gain.dc", "-1/(gm3*RSS)", WRONG,
        lambda v: 2 * common_mode_error(v) + 1, None, ("too large by a factor of 2",))),
    (DOUBLET, Row("25: GM (7.134)", "gain.p1", "-gm3/CM", HOLDS, lambda v: 0.0)),
    (DOUBLET, Row("25: GM (7.134)", "gain.z1", "-2*gm3/CM", HOLDS, lambda v: 0.0)),
    (DOUBLET, Row(
        "25: GM (7.134)", "gain.z1", "-gm3/CM", WRONG, lambda v: -0.5, None, ("too small by a factor of 2",),
    )),
    (DOUBLET, Row("25: GM (7.134)", "gain.z1.hz", "gm3/(pi*CM)", HOLDS, lambda v: 0.0)),
)  # fmt: skip

GROUPS = (
    (MILLER, OF_MILLER),
    (NULLING, OF_NULLING),
    (REGULATED, OF_REGULATED),
    (COMMON_GATE, OF_COMMON_GATE),
    (NODES, OF_NODES),
)
ROWS = [(circuit, row) for circuit, rows in GROUPS for row in rows]


@pytest.mark.parametrize(("circuit", "row"), ROWS, ids=[str(row) for _, row in ROWS])
def test_claim(circuit: Circuit, row: Row) -> None:
    compare(circuit, row)


@pytest.mark.parametrize(("circuit", "row"), OF_PAIR, ids=[str(row) for _, row in OF_PAIR])
def test_claim_about_a_matched_pair(circuit: Circuit, row: Row) -> None:
    """After the stage's `equal`: what is taken to be 1 is 1 at this bias, and costs nothing."""
    plain = Row(row.source, row.about, row.formula, row.verdict, row.error, None, row.says, row.within)
    found = compare(circuit, plain, EQUAL)
    taken = [c for c in found.conditions if c.assumption]
    assert all(c.target == 1 and c.at_bias == 1 and abs(c.effect or 0.0) < 1e-12 for c in taken)
    if row.left is not None:
        left = [of_shape(c.ratio) for c in found.conditions if not c.assumption]
        assert len(left) == len(row.left)
        assert all(same(a, b) for a, b in zip(left, row.left, strict=True))


def test_28_buffer_whose_gain_is_set_to_one() -> None:
    """28: GM 9.4*; AH 6.2*. b1 without the feedforward; the buffer's gain of 0.95 is listed with its own error."""
    made = '[[assumption]]\nname = "its gain is one"\nset = { EB = "1" }'

    def error(v: Values) -> float:
        rest = number(R1 * (C1 + CC) + R2 * C2, v)
        return (rest + number(T, v)) / (rest + 0.95 * number(T, v)) - 1

    row = Row("28: GM 9.4*", "gain.b1", "R1*(C1 + CC) + R2*C2 + gm2*R1*R2*CC", HOLDS, error, None)
    found = compare(BUFFERED, row, made)
    (only,) = found.conditions
    assert only.assumption == "its gain is one"
    assert only.at_bias == pytest.approx(0.95)
    assert only.effect == pytest.approx(error(BUFFERED.values), rel=1e-9)
    compare(BUFFERED, Row("28", "gain.b2", "R1*R2*C2*(C1 + CC)", HOLDS, lambda v: 0.0, None), made)


def test_there_are_many() -> None:
    """Each from a published form, with its verdict by hand."""
    others = [*test_claims_published.ROWS, *test_claims_published_bipolar.ROWS]
    assert len([*ROWS, *OF_PAIR, *others]) >= 140
    assert {row.verdict for _, row in (*ROWS, *others)} == {HOLDS, FAILS, WRONG}
