"""Claims built from published closed forms: stages of one MOSFET, cascodes and mirrors.

Numbered as in the collection the forms are from. GM Gray, Hurst, Lewis & Meyer 5e; RF Razavi, Fundamentals;
R2 Razavi, CMOS 2e; SCH Cathey. A section or an equation's number with * is from memory. What is left over, and the
error, are worked out by hand from the form that is cited.
"""

from __future__ import annotations

import math

import pytest
import sympy
from claims_by_hand import FAILS, HOLDS, WRONG, Circuit, Row, Values, compare
from symbolic import symbols

gm1, gm2, gm4, gmb1, gmb2, gds1, gds2, gds4 = symbols("gm1 gm2 gm4 gmb1 gmb2 gds1 gds2 gds4")
Rsig, RL, RD, RS, RF, CL, cgs, cgd = symbols("Rsig RL RD RS RF CL cgs1 cgd1")
PI = sympy.pi

COMMON_SOURCE = Circuit(
    """
    mosfet.M1 = { gate = "g", drain = "d", source = "gnd" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.Rsig = ["in", "g"]
    resistor.RL = ["d", "gnd"]
    capacitor.CL = ["d", "gnd"]
    response.gain = { from = "VIN", to = "d" }
    """,
    {"M1": {"gm": 5e-3, "cgs": 0.4e-12, "cgd": 0.1e-12}, "Rsig": 20e3, "RL": 4e3, "CL": 0.7e-12},
)
b1 = Rsig * (cgs + cgd * (1 + gm1 * RL)) + RL * (cgd + CL)
b2 = Rsig * RL * (cgs * cgd + cgs * CL + cgd * CL)
MILLER = "Rsig*(cgs1 + cgd1*(1 + gm1*RL))"
tau = Rsig * (cgs + cgd * (1 + gm1 * RL))


def poles(v: Values) -> tuple[float, float]:
    """1 + s·b1 + s²·b2 = 0 solved in numbers, the smaller one first."""
    name = {sympy.Symbol(n, positive=True): x for n, x in v.items()}
    one, two = (float(c.subs(name)) for c in (b1, b2))
    root = math.sqrt(one**2 - 4 * two)
    return -2 / (one + root), -(one + root) / (2 * two)


def number(expression: sympy.Expr, v: Values) -> float:
    return float(expression.subs({sympy.Symbol(n, positive=True): x for n, x in v.items()}))


def half_power(v: Values) -> float:
    """The bandwidth in Hz of −gm·RL(1 − s·cgd/gm)/(1 + b1·s + b2·s²): a quadratic in ω²."""
    one, two, z = number(b1, v), number(b2, v), v["cgd1"] / v["gm1"]
    # (1 + z²u)·2 = (1 − b2·u)² + b1²·u
    a, b, c = two**2, one**2 - 2 * two - 2 * z**2, -1.0
    u = 2 * -c / (b + math.sqrt(b * b - 4 * a * c))
    return math.sqrt(u) / (2 * math.pi)


GM_733 = "1: GM (7.33); R2 6.2*"
_left_of_miller = RL * (cgs * cgd + cgs * CL + cgd * CL) + tau**2 / Rsig
FIRST_POLE = tuple(
    each / _left_of_miller for each in (RL * cgd**2, RL**2 * gm1 * cgd**2, RL**2 * gm1 * cgd * CL)
)
OF_COMMON_SOURCE = (
    Row(GM_733, "gain.dc", "-gm1*RL", HOLDS),
    Row(GM_733, "gain.dc", "gm1*RL", WRONG, -2, says=("its sign is wrong",)),
    Row(GM_733, "gain.dc.magnitude", "gm1*RL", HOLDS),
    Row(GM_733, "gain.z1", "gm1/cgd1", HOLDS),
    Row(GM_733, "gain.z1.hz", "gm1/(2*pi*cgd1)", HOLDS),
    Row(GM_733, "gain.z1.hz", "gm1/cgd1", WRONG, 2 * PI - 1, says=("too large by a factor of 2π", "Hz and rad/s")),
    Row(GM_733, "gain.z1", "-gm1/cgd1", WRONG, -2, says=("its sign is wrong",)),
    Row(GM_733, "gain.z1", "gm1/cgs1", WRONG, cgd / cgs - 1, says=("cgd1", "cgs1")),
    Row(GM_733, "gain.b1", f"{MILLER} + RL*(cgd1 + CL)", HOLDS),
    Row(GM_733, "gain.b1", MILLER, HOLDS, -RL * (cgd + CL) / b1, (RL * cgd / tau, RL * CL / tau)),
    Row(
        GM_733, "gain.b1", "Rsig*(cgs1 + cgd1) + RL*(cgd1 + CL)", FAILS, -Rsig * cgd * gm1 * RL / b1,
        (Rsig * cgd * gm1 * RL / (Rsig * (cgs + cgd) + RL * (cgd + CL)),), ("to be small",),
    ),
    Row(GM_733, "gain.b1", "cgs1 + cgd1*(1 + gm1*RL)", WRONG, None, says=("F", "a resistance")),
    Row(GM_733, "gain.b2", "Rsig*RL*(cgs1*cgd1 + cgs1*CL + cgd1*CL)", HOLDS),
    Row(
        GM_733, "gain.b2", "Rsig*RL*cgs1*CL", FAILS, cgs * CL / (cgs * cgd + cgs * CL + cgd * CL) - 1,
        (cgd / CL, cgd / cgs),
    ),
    Row(GM_733, "gain.p1", f"-1/({MILLER})", HOLDS, lambda v: -1 / number(tau, v) / poles(v)[0] - 1, FIRST_POLE),
    Row(
        GM_733, "gain.p1.magnitude", f"1/({MILLER})", HOLDS,
        lambda v: 1 / number(tau, v) / abs(poles(v)[0]) - 1, FIRST_POLE,
    ),
    Row(
        GM_733, "gain.p1", f"1/({MILLER})", WRONG, lambda v: 1 / number(tau, v) / poles(v)[0] - 1,
        says=("sign", ".magnitude may be meant"),
    ),
    Row(
        GM_733, "gain.p2", f"-({MILLER} + RL*(cgd1 + CL))/(Rsig*RL*(cgs1*cgd1 + cgs1*CL + cgd1*CL))", HOLDS,
        lambda v: -number(b1 / b2, v) / poles(v)[1] - 1,
        tuple(Rsig * RL * each / b1**2 for each in (cgs * cgd, cgs * CL, cgd * CL)),
    ),
    Row(
        "1, and the Miller trust among the rules of thumb: the pole of the output node is no p2 once poles split",
        "gain.p2", "-1/(RL*(cgd1 + CL))", FAILS,
        lambda v: -1 / number(RL * (cgd + CL), v) / poles(v)[1] - 1, None,
    ),
    Row(
        GM_733, "gain.bandwidth", f"1/(2*pi*({MILLER} + RL*(cgd1 + CL)))", HOLDS,
        lambda v: 1 / (2 * math.pi * number(b1, v)) / half_power(v) - 1, None,
    ),
    Row(
        GM_733, "gain.bandwidth", f"1/({MILLER} + RL*(cgd1 + CL))", WRONG,
        lambda v: 1 / number(b1, v) / half_power(v) - 1, None, ("Hz and rad/s",),
    ),
)  # fmt: skip

FOLLOWER = Circuit(
    """
    mosfet.M1 = { gate = "g", drain = "gnd", source = "out" }
    voltage_source.VIN = ["g", "gnd"]
    resistor.RL = ["out", "gnd"]
    response.gain = { from = "VIN", to = "out" }
    response.rout = { looking_into = "out", without = ["RL"] }
    """,
    {"M1": {"gm": 8e-3, "gds": 0.1e-3, "gmb": 0.4e-3}, "RL": 5e3},
)
R2_34 = "8: R2 3.4*"
both1 = gm1 + gmb1
OF_FOLLOWER = (
    Row(R2_34, "gain.dc", "gm1/(gm1 + gmb1 + 1/ro1 + 1/RL)", HOLDS),
    Row(
        R2_34, "gain.dc", "gm1/(gm1 + gmb1)", HOLDS, (gds1 * RL + 1) / (both1 * RL), (gds1 / both1, 1 / (both1 * RL))
    ),
    Row(
        R2_34, "gain.dc", "1", HOLDS, (gmb1 + gds1 + 1 / RL) / gm1, (gmb1 / gm1, gds1 / gm1, 1 / (gm1 * RL)),
    ),
    Row(
        R2_34, "gain.dc", "gm1*RL/(1 + gm1*RL)", HOLDS, (gmb1 + gds1) * RL / (1 + gm1 * RL),
        (gmb1 * RL / (1 + gm1 * RL), gds1 * RL / (1 + gm1 * RL)),
    ),
    Row(
        R2_34, "gain.dc", "gmb1/(gm1 + gmb1)", FAILS, gmb1 * (both1 + gds1 + 1 / RL) / (gm1 * both1) - 1,
        (gm1 / gmb1, gmb1 / gm1, gds1 / gm1, 1 / (gm1 * RL)), ("takes gm1/gmb1 to be small, and that is 20",),
    ),
    Row(R2_34, "rout.dc", "1/gm1", HOLDS, (gmb1 + gds1) / gm1, (gmb1 / gm1, gds1 / gm1)),
    Row(R2_34, "rout.dc", "(1/(gm1 + gmb1)) || ro1", HOLDS),
    Row(
        R2_34, "rout.dc", "2/gm1", WRONG, 2 * (both1 + gds1) / gm1 - 1, (2 * gmb1 / gm1, 2 * gds1 / gm1),
        ("too large by a factor of 2",),
    ),
    Row(R2_34, "rout.dc", "gm1", WRONG, None, says=("S", "ohm")),
)  # fmt: skip

DEGENERATED = Circuit(
    """
    mosfet.M1 = { gate = "g", drain = "d", source = "x" }
    voltage_source.VIN = ["g", "gnd"]
    resistor.RS = ["x", "gnd"]
    resistor.RD = ["d", "gnd"]
    response.gain = { from = "VIN", to = "d" }
    response.rout = { looking_into = "d", without = ["RD"] }
    """,
    {"M1": {"gm": 10e-3, "gds": 0.05e-3, "gmb": 1e-3}, "RS": 2e3, "RD": 5e3},
)
R2_335 = "4: R2 3.3.5*, GM 3.3.8*"
# All times gds1: Av = −gm·RD/(gds(RD + RS) + 1 + (gm + gmb)RS).
below = gds1 * (RD + RS) + 1 + both1 * RS
OF_DEGENERATED = (
    Row(R2_335, "rout.dc", "ro1 + RS + (gm1 + gmb1)*ro1*RS", HOLDS),
    Row(
        R2_335, "rout.dc", "gm1*ro1*RS", FAILS, gm1 * RS / (1 + gds1 * RS + both1 * RS) - 1,
        (1 / (gm1 * RS), gds1 / gm1, gmb1 / gm1),
    ),
    Row(
        R2_335, "rout.dc", "ro1*(1 + (gm1 + gmb1)*RS)", HOLDS, -gds1 * RS / (1 + (both1 + gds1) * RS),
        (gds1 * RS / (1 + both1 * RS),),
    ),
    Row(
        R2_335, "gain.dc", "-RD/RS", FAILS, below / (gm1 * RS) - 1,
        (1 / (gm1 * RS), gmb1 / gm1, gds1 / gm1, gds1 * RD / (gm1 * RS)),
    ),
    Row(
        R2_335, "gain.dc", "-gm1*RD/(1 + (gm1 + gmb1)*RS)", HOLDS, below / (1 + both1 * RS) - 1,
        (gds1 * RD / (1 + both1 * RS), gds1 * RS / (1 + both1 * RS)),
    ),
    Row(R2_335, "gain.dc", "-gm1*RD", FAILS, below - 1, (RS * gm1, RS * gmb1, RS * gds1, RD * gds1), ("to be small",)),
    Row(R2_335, "gain.dc", "-RS/RD", WRONG, RS * below / (RD**2 * gm1) - 1, says=("RS", "RD")),
)  # fmt: skip

CASCODE = Circuit(
    """
    mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
    mosfet.M2 = { gate = "gnd", drain = "out", source = "x" }
    capacitor.CL = ["out", "gnd"]
    voltage_source.VIN = ["in", "gnd"]
    response.gain = { from = "VIN", to = "out" }
    response.rout = { looking_into = "out" }
    """,
    {
        "M1": {"gm": 4.1e-3, "gds": 0.21e-3},
        "M2": {"gm": 3.9e-3, "gds": 0.24e-3, "gmb": 0.62e-3},
        "CL": 3.3e-12,
    },
)
GM_34, GM_952 = "12: GM 3.4*; R2 3.6*", "13: GM (9.52) with no Cp"
both2 = gm2 + gmb2
up, out = both2 + gds2, both2 + gds1 + gds2  # gain −gm1·up/(gds1·gds2), rout out/(gds1·gds2)
AT_DC, ROUT = gm1 * up / (gds1 * gds2), out / (gds1 * gds2)


def crossing(v: Values) -> float:
    """|A0|·|p1|·√(1 − 1/A0²) of a response with one pole."""
    gain = number(AT_DC, v)
    return gain / number(ROUT * CL, v) * math.sqrt(1 - 1 / gain**2)


OF_CASCODE = (
    Row("section 7's worked case", "gain.dc", "-gm1*gm2*ro1*ro2", FAILS, -(gmb2 + gds2) / up, (gmb2 / gm2, gds2 / gm2)),
    Row(GM_34, "gain.dc", "-gm1*ro1*((gm2 + gmb2)*ro2 + 1)", HOLDS),
    Row(GM_34, "gain.dc", "-gm1*(gm2 + gmb2)*ro1*ro2", HOLDS, -gds2 / up, (gds2 / both2,)),
    Row(GM_34, "gain.dc", "-gm1*ro1*(gm2*ro2 + 1)", FAILS, -gmb2 / up, (gmb2 / (gm2 + gds2),)),
    Row(
        GM_34, "gain.dc", "-gm1*gm2*ro1*ro2/2", WRONG, gm2 / (2 * up) - 1, (2 * gmb2 / gm2, 2 * gds2 / gm2),
        ("too small by a factor of 2",),
    ),
    Row(
        "a factor before a sum of two terms, of which none is small", "gain.dc", "-gm1*(gm2 + gmb2)*ro1*ro2/2",
        WRONG, both2 / (2 * up) - 1, (2 * gds2 / both2,), ("too small by a factor of 2",),
    ),
    Row(
        GM_34, "gain.dc", "-2*gm1*(gm2 + gmb2)*ro1*ro2", WRONG, 2 * both2 / up - 1, (gds2 / both2,),
        ("too large by a factor of 2",),
    ),
    Row(GM_34, "rout.dc", "3*(ro1 + ro2 + (gm2 + gmb2)*ro1*ro2)", WRONG, 2, (), ("too large by a factor of 3",)),
    Row(GM_34, "gain.dc", "gm1*gm2*ro1*ro2", WRONG, -gm2 / up - 1, says=("its sign is wrong",)),
    Row(
        GM_34, "gain.dc", "-gm1*gm2*ro1*ro1", WRONG, gm2 * gds2 / (gds1 * up) - 1,
        says=("gds1 and gds2 would have to be equal",),
    ),
    Row(
        GM_34, "gain.dc", "-gm1*gm1*ro1*ro2", WRONG, gm1 / up - 1,
        says=("gm2 and gm1 would have to be equal", "gm2/gm1 is 0.9512"),
    ),
    Row(GM_34, "gain.dc", "-gm1*gm2*ro1", WRONG, None, says=("S", "a pure number", "a resistance")),
    Row(GM_34, "gain.dc", "-gm1*ro1", FAILS, gds2 / up - 1, (gm2 / gds2, gmb2 / gds2), ("to be small",)),
    Row(GM_34, "rout.dc", "ro1 + ro2 + (gm2 + gmb2)*ro1*ro2", HOLDS),
    Row(GM_34, "rout.dc", "gm2*ro1*ro2", HOLDS, gm2 / out - 1, (gmb2 / gm2, gds1 / gm2, gds2 / gm2), within="25 %"),
    Row(GM_34, "rout.dc", "gm2*ro2*ro2", WRONG, gm2 * gds1 / (gds2 * out) - 1, says=("would have to be equal",)),
    Row(GM_952, "gain.p1", "-1/((ro1 + ro2 + (gm2 + gmb2)*ro1*ro2)*CL)", HOLDS),
    Row(GM_952, "gain.p1.hz", "1/(2*pi*(ro1 + ro2 + (gm2 + gmb2)*ro1*ro2)*CL)", HOLDS),
    Row(
        GM_952, "gain.p1.hz", "1/((gm2 + gmb2)*ro1*ro2*CL)", WRONG, 2 * PI * out / both2 - 1,
        says=("2π", "Hz and rad/s"),
    ),
    Row(
        GM_952, "gain.p1", "-1/((gm2 + gmb2)*ro1*ro2*CL)", HOLDS, (gds1 + gds2) / both2,
        (gds1 / both2, gds2 / both2),
    ),
    Row(GM_952, "gain.bandwidth", "1/(2*pi*(ro1 + ro2 + (gm2 + gmb2)*ro1*ro2)*CL)", HOLDS),
    Row(GM_952, "gain.gain_bandwidth", "gm1/(2*pi*CL)", HOLDS, gds1 / up, (gds1 / up,)),
    Row(GM_952, "gain.gain_bandwidth", "gm1/CL", WRONG, 2 * PI * (1 + gds1 / up) - 1, says=("Hz and rad/s",)),
    Row(
        GM_952, "gain.unity_gain_frequency", "gm1/(2*pi*CL)", HOLDS,
        lambda v: v["gm1"] / v["CL"] / crossing(v) - 1, None,
    ),
    Row(
        GM_952, "gain.phase_margin", "90 deg", HOLDS,
        lambda v: 90 - (180 - math.degrees(math.atan(crossing(v) * number(ROUT * CL, v)))), (), within="2 deg",
    ),
    Row(
        GM_34, "gain.dc.db", "gm1*(gm2 + gmb2)*ro1*ro2", HOLDS,
        lambda v: 20 * math.log10(number(both2 / up, v)), (gds2 / both2,), within="0.5 dB",
    ),
    Row(
        GM_34, "gain.dc.db", "51.5 dB", HOLDS, lambda v: 51.5 - 20 * math.log10(number(AT_DC, v)), (), within="0.5 dB"
    ),
)  # fmt: skip

CASCODE_MIRROR = Circuit(
    """
    mosfet.M1 = { gate = "a", drain = "a", source = "gnd" }
    mosfet.M3 = { gate = "c", drain = "c", source = "a", body = "a" }
    mosfet.M2 = { gate = "a", drain = "x", source = "gnd" }
    mosfet.M4 = { gate = "c", drain = "out", source = "x", body = "x" }
    current_source.IREF = ["gnd", "c"]
    response.rout = { looking_into = "out" }
    response.diode = { looking_into = "a", without = ["M3", "M4", "IREF"] }
    """,
    {f"M{k}": {"gm": 2e-3, "gds": (0.04 + 0.01 * k) * 1e-3} for k in (1, 2, 3, 4)},
)
R2_52 = "22: R2 5.2*"
OF_MIRROR = (
    Row(R2_52, "rout.dc", "ro2 + ro4 + gm4*ro2*ro4", HOLDS),
    Row(
        R2_52, "rout.dc", "gm4*ro2*ro4", HOLDS, -(gds2 + gds4) / (gm4 + gds2 + gds4), (gds2 / gm4, gds4 / gm4)
    ),
    Row(
        R2_52, "rout.dc", "gm2*ro2*ro4", WRONG, gm2 / (gm4 + gds2 + gds4) - 1,
        says=("gm4 and gm2 would have to be equal",),
    ),
    Row(R2_52, "diode.dc", "1/gm1", HOLDS, gds1 / gm1, (gds1 / gm1,)),
    Row(R2_52, "diode.dc", "ro1", FAILS, gm1 / gds1, (gm1 / gds1,)),
)  # fmt: skip

GROUPS = (
    (COMMON_SOURCE, OF_COMMON_SOURCE),
    (FOLLOWER, OF_FOLLOWER),
    (DEGENERATED, OF_DEGENERATED),
    (CASCODE, OF_CASCODE),
    (CASCODE_MIRROR, OF_MIRROR),
)
ROWS = [(circuit, row) for circuit, rows in GROUPS for row in rows]


@pytest.mark.parametrize(("circuit", "row"), ROWS, ids=[str(row) for _, row in ROWS])
def test_claim(circuit: Circuit, row: Row) -> None:
    compare(circuit, row)


def test_there_are_enough() -> None:
    assert len(ROWS) >= 60
