"""Standard results in symbols for stages of one transistor, numbered as in the collection they are from.

SS Sedra & Smith; GM Gray, Hurst, Lewis & Meyer 5e; RF Razavi, Fundamentals; R2 Razavi, CMOS 2e; SCH Cathey.
A section or an equation's number with * is from memory.
"""

from __future__ import annotations

import sympy
from symbolic import assumed, coefficients, exact, expression, formula, parallel, s, same, stage_from, symbols

from symamp.exact.time_constants import time_constants

gm, gmb, gds = symbols("gm1 gmb1 gds1")
Rsig, Rs, RS, RD, RL, RF, CL = symbols("Rsig Rs RS RD RL RF CL")
cgs, cgd = symbols("cgs1 cgd1")
ro = 1 / gds


def test_1_common_source() -> None:
    """GM (7.33) for CL = 0; R2 6.2*."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "d", source = "gnd" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rsig = ["in", "g"]
        resistor.RL = ["d", "gnd"]
        capacitor.CL = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        """,
        M1="gm cgs cgd",
    )
    above, below = coefficients(exact(stage, "gain"))
    b1 = Rsig * (cgs + cgd * (1 + gm * RL)) + RL * (cgd + CL)
    b2 = Rsig * RL * (cgs * cgd + cgs * CL + cgd * CL)
    assert same(above, -gm * RL * (1 - s * cgd / gm))
    assert len(below) == 3
    assert same(below[1], b1)
    assert same(below[2], b2)


def test_2_common_source_input_admittance() -> None:
    """R2 6.1*: exact, and Miller's theorem as its limit for s → 0."""
    text = """
        mosfet.M1 = { gate = "g", drain = "d", source = "gnd" }
        voltage_source.VIN = ["g", "gnd"]
        resistor.RL = ["d", "gnd"]
        capacitor.CL = ["d", "gnd"]
        response.zin = { looking_into = "VIN" }
        response.zg = { looking_into = "g", without = ["VIN"] }
        [[assumption]]
        name = "Miller"
        miller = { part = "cgd1", from = "g", to = "d" }
        """
    stage = stage_from(text, M1="gm cgs cgd")
    admittance = s * cgs + s * cgd * (1 + gm * RL + s * RL * CL) / (1 + s * RL * (cgd + CL))
    assert same(1 / expression(exact(stage, "zin")), admittance)
    of_miller = 1 / expression(assumed(stage, "zin"))
    assert same(of_miller, s * (cgs + cgd * (1 + gm * RL)))
    assert same(1 / expression(assumed(stage, "zg")), 1 / expression(assumed(stage, "zin")))
    assert same(of_miller / s, sympy.limit(sympy.cancel(admittance / s), s, 0))


def test_3_common_source_with_drain_gate_resistor() -> None:
    """SCH 7.3."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "d", source = "gnd" }
        voltage_source.VIN = ["g", "gnd"]
        resistor.RF = ["g", "d"]
        resistor.RL = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        response.zin = { looking_into = "VIN" }
        """,
        M1="gm",
    )
    assert same(expression(exact(stage, "gain")), (1 - gm * RF) * RL / (RF + RL))
    assert same(expression(exact(stage, "zin")), (RF + RL) / (1 + gm * RL))


def test_4_degenerated_common_source() -> None:
    """R2 3.3.5*, GM 3.3.8*."""
    text = """
        mosfet.M1 = { gate = "g", drain = "d", source = "x" }
        voltage_source.VIN = ["g", "gnd"]
        resistor.RS = ["x", "gnd"]
        """
    loaded = """
        resistor.RD = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        response.rout = { looking_into = "d", without = ["RD"] }
        """
    shorted = """
        voltage_source.VOUT = ["d", "gnd"]
        response.current = { from = "VIN", to = "VOUT" }
        """
    stage = stage_from(text + loaded, M1="gm gds gmb")
    feedback = (gm + gmb) * ro * RS
    assert same(expression(exact(stage, "rout")), ro + RS + feedback)
    assert same(expression(exact(stage, "gain")), -gm * ro * RD / (RD + RS + ro + feedback))
    short = stage_from(text + shorted, M1="gm gds gmb")
    # The current into the drain runs from minus to plus inside VOUT.
    assert same(-expression(exact(short, "current")), gm * ro / (RS + (1 + (gm + gmb) * RS) * ro))


def test_5_degenerated_common_source_with_capacitors() -> None:
    """GM (7.122), by open-circuit time constants; ro = ∞."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "d", source = "x", body = "x" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rsig = ["in", "g"]
        resistor.RS = ["x", "gnd"]
        resistor.RL = ["d", "gnd"]
        capacitor.CL = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        """,
        M1="gm cgs cgd",
    )
    b1 = cgs * (Rsig + RS) / (1 + gm * RS) + cgd * (Rsig + RL + gm * Rsig * RL / (1 + gm * RS)) + CL * RL
    assert same(formula(exact(stage, "gain"), "b1"), b1)


def test_6_common_gate() -> None:
    """R2 3.5*."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "gnd", drain = "d", source = "x" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rs = ["in", "x"]
        resistor.RD = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        response.rin = { looking_into = "x", without = ["Rs", "VIN"] }
        response.rout = { looking_into = "d", without = ["RD"] }
        """,
        M1="gm gds gmb",
    )
    both = gm + gmb
    assert same(expression(exact(stage, "rin")), (RD + ro) / (1 + both * ro))
    expected = (both * ro + 1) * RD / (ro + both * ro * Rs + Rs + RD)
    assert same(expression(exact(stage, "gain")), expected)
    assert same(expression(exact(stage, "rout")), ro + Rs + both * ro * Rs)


def test_7_common_gate_poles_are_those_of_its_nodes() -> None:
    """GM (7.82); RF 11*; ro = ∞."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "gnd", drain = "d", source = "x", body = "x" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rs = ["in", "x"]
        resistor.RL = ["d", "gnd"]
        capacitor.CX = ["x", "gnd"]
        capacitor.CY = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        """,
        M1="gm",
    )
    CX, CY = symbols("CX CY")
    gain = exact(stage, "gain")
    at_dc = gm * RL / (1 + gm * Rs)
    poles = (1 + s * parallel(Rs, 1 / gm) * CX) * (1 + s * RL * CY)
    assert same(expression(gain), at_dc / poles)
    assert same(formula(gain, "dc"), at_dc)


def test_8_follower() -> None:
    """R2 3.4*."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "gnd", source = "out" }
        voltage_source.VIN = ["g", "gnd"]
        resistor.RL = ["out", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        response.rout = { looking_into = "out", without = ["RL"] }
        """,
        M1="gm gds gmb",
    )
    assert same(expression(exact(stage, "gain")), gm / (gm + gmb + 1 / ro + 1 / RL))
    assert same(expression(exact(stage, "rout")), 1 / (gm + gmb + 1 / ro))


FOLLOWER = """
    mosfet.M1 = { gate = "g", drain = "gnd", source = "out", body = "out" }
    voltage_source.VIN = ["in", "gnd"]
    resistor.Rsig = ["in", "g"]
    """


def test_9_follower_with_capacitors() -> None:
    """R2 6.3*."""
    loaded = """
        resistor.RL = ["out", "gnd"]
        capacitor.CL = ["out", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        """
    above, below = coefficients(exact(stage_from(FOLLOWER + loaded, M1="gm cgs cgd"), "gain"))
    g = gm + 1 / RL
    assert same(above, (gm + s * cgs) / g)
    assert len(below) == 3
    assert same(below[1], Rsig * cgd + (cgs + CL + Rsig * cgs / RL) / g)
    assert same(below[2], Rsig * (cgs * cgd + cgs * CL + cgd * CL) / g)


def test_10_follower_output_impedance() -> None:
    """GM (7.65-7.69), there approximate: the impedance, and both networks that have it."""
    stage = stage_from(FOLLOWER + 'response.zout = { looking_into = "out" }', M1="gm cgs")
    found = expression(exact(stage, "zout"))
    assert same(found, (1 + s * Rsig * cgs) / (gm + s * cgs))
    networks = stage_from(
        """
        resistor.RA = ["a", "b"]
        resistor.RB = ["b", "gnd"]
        inductor.LB = ["b", "gnd"]
        resistor.RC = ["c", "gnd"]
        resistor.RE = ["c", "e"]
        inductor.LE = ["e", "gnd"]
        response.series = { looking_into = "a" }
        response.shunt = { looking_into = "c" }
        """
    )
    RA, RB, LB, RC, RE, LE = symbols("RA RB LB RC RE LE")
    R2 = Rsig - 1 / gm
    series = expression(exact(networks, "series")).subs({RA: 1 / gm, RB: R2, LB: cgs / gm * R2})
    assert same(found, series)
    loop = gm * Rsig - 1
    shunt = expression(exact(networks, "shunt")).subs({RC: Rsig, RE: Rsig / loop, LE: cgs * Rsig**2 / loop})
    assert same(found, shunt)


def test_11_follower_input_impedance_has_a_negative_real_part() -> None:
    """R2 6.3*."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "gnd", source = "out", body = "out" }
        voltage_source.VIN = ["g", "gnd"]
        capacitor.CL = ["out", "gnd"]
        response.zin = { looking_into = "VIN" }
        """,
        M1="gm cgs",
    )
    found = expression(exact(stage, "zin"))
    assert same(found, 1 / (s * cgs) + (1 + gm / (s * cgs)) / (s * CL))
    omega = symbols("omega")
    assert same(sympy.re(sympy.expand(found.subs(s, sympy.I * omega))), -gm / (cgs * CL * omega**2))


def test_29_time_constants_add_up_to_b1() -> None:
    """Cochrun and Grabel 1973; with a loop of capacitors."""
    stage = stage_from(
        FOLLOWER
        + """
        resistor.RL = ["out", "gnd"]
        capacitor.CL = ["out", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        """,
        M1="gm cgs cgd",
    )
    found = {each.part: each.formula for each in time_constants(stage, stage.asked["gain"])}
    g = gm + 1 / RL
    resistances = {"cgs1": (1 + Rsig / RL) / g, "cgd1": Rsig, "CL": 1 / g}
    assert set(found) == set(resistances)
    for part, resistance in resistances.items():
        shape = found[part]
        assert shape is not None
        assert same(shape.sympy(frozenset()), resistance)
    total = sum(symbols(part) * resistance for part, resistance in resistances.items())
    assert same(formula(exact(stage, "gain"), "b1"), total)


def test_30_extra_element() -> None:
    """Middlebrook 1989: H = H0·(1 + Zn/Z)/(1 + Zd/Z) with Z = 1/(s·cgd), Zn = −1/gm."""
    text = """
        mosfet.M1 = { gate = "g", drain = "d", source = "gnd" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rsig = ["in", "g"]
        resistor.RL = ["d", "gnd"]
        capacitor.CL = ["d", "gnd"]
        response.gain = { from = "VIN", to = "d" }
        response.across = { looking_into = ["g", "d"] }
        """
    whole = stage_from(text, M1="gm cgs cgd")
    without = stage_from(text, M1="gm cgs")
    before, Zd = (expression(exact(without, name)) for name in ("gain", "across"))
    Z, Zn = 1 / (s * cgd), -1 / gm
    assert same(expression(exact(whole, "gain")), before * (1 + Zn / Z) / (1 + Zd / Z))


def test_same_tells_forms_apart() -> None:
    assert same(1 / (1 / RL + gm), RL / (1 + gm * RL))
    assert not same(1 / (1 / RL + gm), RL / (1 - gm * RL))
    assert not same(1 / (1 + s * RL * CL), 1 / (1 + s * RL * cgd))
