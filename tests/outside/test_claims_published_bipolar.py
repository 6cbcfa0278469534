"""Claims built from published closed forms: bipolar stages.

Numbered as in the collection the forms are from. SS Sedra & Smith; S7 Sedra & Smith 7e; GM Gray, Hurst, Lewis & Meyer
5e; RF Razavi, Fundamentals. A section or an equation's number with * is from memory. What is left over, and the
error, are worked out by hand from the form that is cited.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import sympy
from claims_by_hand import FAILS, HOLDS, WRONG, Circuit, Row, Values, compare
from symbolic import symbols

gm, gpi, go, cpi, cmu = symbols("gm1 gpi1 go1 cpi1 cmu1")
gm2, gpi2, go2, go3, gm3, gpi3 = symbols("gm2 gpi2 go2 go3 gm3 gpi3")
Rs, RL, RB, RC, RE = symbols("Rs RL RB RC RE")
GM_729 = "17: GM (7.29)"


def number(expression: sympy.Expr, v: Values) -> float:
    return float(expression.subs({sympy.Symbol(n, positive=True): x for n, x in v.items()}))


COMMON_EMITTER = Circuit(
    """
    bjt.Q1 = { base = "b", collector = "c", emitter = "gnd" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.Rs = ["in", "b"]
    resistor.RL = ["c", "gnd"]
    response.gain = { from = "VIN", to = "c" }
    """,
    {"Q1": {"gm": 0.04, "gpi": 0.4e-3, "cpi": 10e-12, "cmu": 0.5e-12}, "Rs": 1e3, "RL": 5e3},
)
# With R = Rs/(1 + gpi·Rs), gain −gm·RL/(1 + gpi·Rs).
R = Rs / (1 + gpi * Rs)
b1 = R * (cpi + cmu * (1 + gm * RL)) + RL * cmu
b2 = R * RL * cpi * cmu
far = b2 / b1**2  # its numerator has the two terms of 1 + gpi·Rs
tau = R * (cpi + cmu * (1 + gm * RL))


def second_pole(v: Values) -> float:
    one, two = number(b1, v), number(b2, v)
    return -(one + math.sqrt(one**2 - 4 * two)) / (2 * two)


OF_COMMON_EMITTER = (
    Row(GM_729, "gain.dc", "-gm1*RL*rpi1/(rpi1 + Rs)", HOLDS),
    Row(GM_729, "gain.dc", "-beta1*RL/(rpi1 + Rs)", HOLDS),
    Row(GM_729, "gain.dc", "-gm1*RL", FAILS, gpi * Rs, (gpi * Rs,)),
    Row(GM_729, "gain.dc", "-beta1*RL/Rs", FAILS, 1 / (gpi * Rs), (1 / (gpi * Rs),), ("to be small, and that is 2.5",)),
    Row(GM_729, "gain.dc", "-beta1*RL", WRONG, None, says=("ohm", "a pure number", "a conductance")),
    Row(GM_729, "gain.z1", "gm1/cmu1", HOLDS),
    Row(GM_729, "gain.z1", "gm1/cpi1", WRONG, cmu / cpi - 1, says=("cmu1", "cpi1")),
    Row(GM_729, "gain.b2", "(Rs || rpi1)*RL*cpi1*cmu1", HOLDS),
    Row(GM_729, "gain.b2", "Rs*RL*cpi1*cmu1", FAILS, gpi * Rs, (gpi * Rs,)),
    Row(GM_729, "gain.b2", "(Rs || rpi1)*cpi1*cmu1", WRONG, None, says=("a resistance",)),
    Row(
        GM_729, "gain.b1", "(Rs || rpi1)*(cpi1 + cmu1*(1 + gm1*RL))", HOLDS, -RL * cmu / b1,
        (RL * cmu / (tau / R * Rs), RL * cmu * gpi / (tau / R)),
    ),
    Row(
        "17: GM (7.29), p2 with the poles far apart", "gain.p2.magnitude",
        "((Rs || rpi1)*(cpi1 + cmu1*(1 + gm1*RL)) + RL*cmu1)/((Rs || rpi1)*RL*cpi1*cmu1)", HOLDS,
        lambda v: number(b1 / b2, v) / -second_pole(v) - 1, (far / (1 + gpi * Rs), far * gpi * Rs / (1 + gpi * Rs)),
    ),
    Row(
        "17, and the rule of thumb: the output node's own pole is no p2 once the poles split", "gain.p2",
        "-1/(RL*cmu1)", FAILS, lambda v: -1 / number(RL * cmu, v) / second_pole(v) - 1, None,
    ),
)  # fmt: skip

DEGENERATED = Circuit(
    """
    bjt.Q1 = { base = "b", collector = "c", emitter = "e" }
    resistor.RE = ["e", "gnd"]
    voltage_source.VIN = ["b", "gnd"]
    resistor.RC = ["c", "gnd"]
    response.gain = { from = "VIN", to = "c" }
    response.rin = { looking_into = "VIN" }
    """,
    {"Q1": {"gm": 0.04, "gpi": 0.4e-3}, "RE": 1e3, "RC": 5e3},
)
GM_338 = "18: GM 3.3.8*; SS 5*"
below = 1 + (gpi + gm) * RE  # of rin = below/gpi and gain −gm·RC/below
OF_DEGENERATED = (
    Row(GM_338, "rin.dc", "rpi1 + (1 + beta1)*RE", HOLDS),
    Row(GM_338, "rin.dc", "rpi1 + beta1*RE", HOLDS, -gpi * RE / below, (gpi * RE / (1 + gm * RE),)),
    Row(GM_338, "rin.dc", "beta1*RE", HOLDS, -(1 + gpi * RE) / below, (1 / (gm * RE), gpi / gm)),
    Row(GM_338, "rin.dc", "rpi1", FAILS, 1 / below - 1, (gm * RE, gpi * RE), ("gm1",)),
    Row(GM_338, "rin.dc", "beta1", WRONG, None, says=("ohm",)),
    Row(GM_338, "gain.dc", "-beta1*RC/(rpi1 + (1 + beta1)*RE)", HOLDS),
    Row(GM_338, "gain.dc", "-RC/RE", HOLDS, (1 + gpi * RE) / (gm * RE), (1 / (gm * RE), gpi / gm)),
    Row(GM_338, "gain.dc", "RC/RE", WRONG, -(below / (gm * RE)) - 1, (), ("its sign is wrong",)),
    Row(GM_338, "gain.dc", "-2*RC/RE", WRONG, 2 * below / (gm * RE) - 1, None, ("too large by a factor of 2",)),
)  # fmt: skip

FOLLOWER = Circuit(
    """
    bjt.Q1 = { base = "b", collector = "gnd", emitter = "e" }
    resistor.RB = ["b", "gnd"]
    resistor.RE = ["e", "gnd"]
    response.rin = { looking_into = "b", without = ["RB"] }
    response.rout = { looking_into = "e", without = ["RE"] }
    """,
    {"Q1": {"gm": 0.04, "gpi": 0.4e-3, "go": 0.02e-3}, "RB": 1e3, "RE": 1e3},
)
GM_747 = "19: GM (7.47-7.53)"
# rout = 1/(go + (gpi + gm)/(1 + gpi·RB))
load = (1 + gpi * RB) * go + gpi + gm
OF_FOLLOWER = (
    Row(GM_747, "rout.dc", "ro1 || ((rpi1 + RB)/(1 + beta1))", HOLDS),
    Row(GM_747, "rin.dc", "rpi1 + (1 + beta1)*(RE || ro1)", HOLDS),
    Row(
        GM_747, "rout.dc", "1/gm1 + RB/beta1", HOLDS, load / gm - 1, (gpi / gm, go / gm, go * gpi * RB / gm)
    ),
    Row(
        GM_747, "rout.dc", "1/gm1", FAILS, load / (gm * (1 + gpi * RB)) - 1,
        (RB * gpi, gpi / gm, go / gm, go * gpi * RB / gm),
    ),
    Row(GM_747, "rout.dc", "RB/(1 + beta1)", FAILS, RB * gpi * load / ((gpi + gm) * (1 + gpi * RB)) - 1, None),
)  # fmt: skip

WITH_CAPACITOR = Circuit(
    """
    bjt.Q1 = { base = "b", collector = "gnd", emitter = "e" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.Rs = ["in", "b"]
    resistor.RL = ["e", "gnd"]
    response.gain = { from = "VIN", to = "e" }
    """,
    {"Q1": {"gm": 0.04, "gpi": 0.4e-3, "cpi": 10e-12}, "Rs": 1e3, "RL": 1e3},
)
# p1 = −(gpi + g)/cpi, g = (1 + gm·RL)/(Rs + RL)
whole = gpi * (Rs + RL) + 1 + gm * RL
OF_WITH_CAPACITOR = (
    Row(GM_747, "gain.z1", "-(gm1 + 1/rpi1)/cpi1", HOLDS),
    Row(GM_747, "gain.z1", "-gm1/cpi1", HOLDS, -gpi / (gm + gpi), (gpi / gm,)),
    Row(GM_747, "gain.z1", "gm1/cpi1", WRONG, -gm / (gm + gpi) - 1, None, ("its sign is wrong",)),
    Row(GM_747, "gain.p1", "-1/(cpi1*(rpi1 || ((Rs + RL)/(1 + gm1*RL))))", HOLDS),
    Row(
        GM_747, "gain.p1.hz", "gm1*RL/(2*pi*(Rs + RL)*cpi1)", HOLDS, gm * RL / whole - 1,
        (1 / (gm * RL), gpi / gm, gpi * Rs / (gm * RL)),
    ),
    Row(
        GM_747, "gain.p1.magnitude", "gm1*(Rs + RL)/cpi1", WRONG, None,
        says=("in ohm/s, and the quantity is in rad/s", "a conductance"),
    ),
)  # fmt: skip

CASCODE = Circuit(
    """
    bjt.Q1 = { base = "in", collector = "x", emitter = "gnd" }
    bjt.Q2 = { base = "gnd", collector = "out", emitter = "x" }
    voltage_source.VIN = ["in", "gnd"]
    response.rout = { looking_into = "out" }
    """,
    {f"Q{k}": {"gm": 0.04, "gpi": 0.4e-3, "go": k * 10e-6} for k in (1, 2)},
)
RF_9 = "20: RF 9*"
# rout = (go1 + gpi2 + gm2 + go2)/(go2(go1 + gpi2))
OF_CASCODE = (
    Row(RF_9, "rout.dc", "(1 + gm2*(ro1 || rpi2))*ro2 + (ro1 || rpi2)", HOLDS),
    Row(
        RF_9, "rout.dc", "beta2*ro2", HOLDS, gm2 * (go + gpi2) / (gpi2 * (go + gpi2 + gm2 + go2)) - 1,
        (gpi2 / gm2, go2 / gm2, go / gpi2, go / gm2),
    ),
    Row(
        RF_9, "rout.dc", "gm2*(ro1 || rpi2)*ro2", HOLDS, gm2 / (go + gpi2 + gm2 + go2) - 1,
        (go / gm2, gpi2 / gm2, go2 / gm2),
    ),
    Row(
        RF_9, "rout.dc", "beta2*ro1", WRONG, gm2 * go2 * (go + gpi2) / (gpi2 * go * (go + gpi2 + gm2 + go2)) - 1,
        says=("go1 and go2 would have to be equal",),
    ),
)  # fmt: skip

WILSON = Circuit(
    """
    bjt.Q1 = { base = "b", collector = "a", emitter = "gnd" }
    bjt.Q2 = { base = "b", collector = "b", emitter = "gnd" }
    bjt.Q3 = { base = "a", collector = "out", emitter = "b" }
    current_source.IREF = ["gnd", "a"]
    response.rout = { looking_into = "out" }
    """,
    {f"Q{k}": {"gm": 0.04, "gpi": 0.4e-3, "go": 20e-6} for k in (1, 2, 3)},
)
EQUAL = '[[assumption]]\nname = "equal devices"\nequal = ["Q1", "Q2", "Q3"]'

GROUPS = (
    (COMMON_EMITTER, OF_COMMON_EMITTER),
    (DEGENERATED, OF_DEGENERATED),
    (FOLLOWER, OF_FOLLOWER),
    (WITH_CAPACITOR, OF_WITH_CAPACITOR),
    (CASCODE, OF_CASCODE),
)
ROWS = [(circuit, row) for circuit, rows in GROUPS for row in rows]


@pytest.mark.parametrize(("circuit", "row"), ROWS, ids=[str(row) for _, row in ROWS])
def test_claim(circuit: Circuit, row: Row) -> None:
    compare(circuit, row)


def test_wilson_mirror_of_equal_devices() -> None:
    """21: GM 4.2*; S7 8.26. rout ≈ beta·ro/2; the devices are equal, so what is taken to be 1 is 1, at no cost."""
    row = Row("21: GM 4.2*; S7 8.26", "rout.dc", "beta1*ro1/2", HOLDS, wilson_error, None)
    found = compare(WILSON, row, EQUAL)
    taken = [c for c in found.conditions if c.assumption]
    assert {c.assumption for c in taken} == {"equal devices"}
    assert all(c.at_bias == 1 and c.effect == 0 for c in taken)
    named = {c.shown.text() for c in found.conditions if not c.assumption}
    # (β² + 2β + 2)/(2(β + 1)) over β/2 is (β² + 2β + 2)/(β² + β): β + 2 is left over.
    assert {"gpi1/gm1", "2*gpi1**2/gm1**2"} <= named


def wilson_error(v: Values) -> float:
    """The mirror's nodal equations at DC solved in numbers, with 1 A into the output."""
    g = np.zeros((3, 3))  # a, b, out
    for base, collector, emitter, k in ((1, 0, None, 1), (1, 1, None, 2), (0, 2, 1, 3)):
        m, p, o = v[f"gm{k}"], v[f"gpi{k}"], v[f"go{k}"]
        for row, column, value in (
            (base, base, p), (base, emitter, -p), (emitter, base, -p), (emitter, emitter, p),
            (collector, collector, o), (collector, emitter, -o), (emitter, collector, -o), (emitter, emitter, o),
            (collector, base, m), (collector, emitter, -m), (emitter, base, -m), (emitter, emitter, m),
        ):  # fmt: skip
            if row is not None and column is not None:
                g[row, column] += value
    rout = np.linalg.solve(g, [0, 0, 1.0])[2]
    return float(v["gm1"] / v["gpi1"] / v["go1"] / 2 / rout - 1)
