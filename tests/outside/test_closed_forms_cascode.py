"""Standard results in symbols for cascodes, numbered as in the collection they are from.

GM Gray, Hurst, Lewis & Meyer 5e; RF Razavi, Fundamentals; R2 Razavi, CMOS 2e. A section or an equation's
number with * is from memory.
"""

from __future__ import annotations

from symbolic import coefficients, exact, expression, formula, parallel, s, same, stage_from, symbols

gm1, gm2, gmb2, gds1, gds2 = symbols("gm1 gm2 gmb2 gds1 gds2")
ro1, ro2 = 1 / gds1, 1 / gds2
CL = symbols("CL")

PAIR = """
    mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
    mosfet.M2 = { gate = "gnd", drain = "out", source = "x" }
    voltage_source.VIN = ["in", "gnd"]
    """
INTO_A_SHORT = """
    voltage_source.VOUT = ["out", "gnd"]
    response.current = { from = "VIN", to = "VOUT" }
    """
OUTPUT = """
    response.gain = { from = "VIN", to = "out" }
    response.rout = { looking_into = "out" }
    """


def test_12_cascode() -> None:
    """GM 3.4*; R2 3.6*. The load is an ideal current source."""
    stage = stage_from(PAIR + OUTPUT, M1="gm gds", M2="gm gds gmb")
    both = gm2 + gmb2
    assert same(expression(exact(stage, "rout")), ro1 + ro2 + both * ro1 * ro2)
    assert same(expression(exact(stage, "gain")), -gm1 * ro1 * (both * ro2 + 1))
    short = stage_from(PAIR + INTO_A_SHORT, M1="gm gds", M2="gm gds gmb")
    expected = gm1 * (1 - 1 / (1 + both * ro1 + ro1 / ro2))
    assert same(-expression(exact(short, "current")), expected)


def test_13_cascode_with_capacitors() -> None:
    """GM (9.52)."""
    loaded = """
        mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
        mosfet.M2 = { gate = "gnd", drain = "out", source = "x", body = "x" }
        voltage_source.VIN = ["in", "gnd"]
        capacitor.CP = ["x", "gnd"]
        capacitor.CL = ["out", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        """
    gain = exact(stage_from(loaded, M1="gm gds", M2="gm gds"), "gain")
    CP = symbols("CP")
    above, below = coefficients(gain)
    assert same(above, -gm1 * ro1 * (gm2 * ro2 + 1))  # no zero
    assert len(below) == 3
    assert same(below[1], ro2 * CL + ro1 * (CP + CL) + gm2 * ro1 * ro2 * CL)
    assert same(below[2], ro1 * ro2 * CP * CL)


def test_14_cascode_with_source_resistance() -> None:
    """GM 7.3.4; RF 11*; ro = ∞."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "g", drain = "x", source = "gnd" }
        mosfet.M2 = { gate = "gnd", drain = "out", source = "x", body = "x" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rsig = ["in", "g"]
        resistor.RL = ["out", "gnd"]
        capacitor.CX = ["x", "gnd"]
        capacitor.CL = ["out", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        """,
        M1="gm cgs cgd",
        M2="gm",
    )
    Rsig, RL, CX, cgs1, cgd1 = symbols("Rsig RL CX cgs1 cgd1")
    gain = exact(stage, "gain")
    above, below = coefficients(gain)
    b1 = Rsig * (cgs1 + cgd1 * (1 + gm1 / gm2)) + (CX + cgd1) / gm2 + RL * CL
    assert same(below[1], b1)
    assert same(above, -gm1 * RL * (1 - s * cgd1 / gm1))
    assert same(formula(gain, "z1"), gm1 / cgd1)


def test_15_gain_boosted_cascode() -> None:
    """GM 3.4.3*: an ideal booster of gain AB."""
    boosted = """
        mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
        mosfet.M2 = { gate = "g2", drain = "out", source = "x" }
        vcvs.AB = { out = ["g2", "gnd"], control = ["gnd", "x"] }
        voltage_source.VIN = ["in", "gnd"]
        """
    stage = stage_from(boosted + OUTPUT, M1="gm gds", M2="gm gds gmb")
    gain_of_booster = next(
        each for each in expression(exact(stage, "rout")).free_symbols if each.name == "AB"
    )
    both = (gain_of_booster + 1) * gm2 + gmb2
    assert same(expression(exact(stage, "rout")), ro1 + ro2 + both * ro1 * ro2)
    short = stage_from(boosted + INTO_A_SHORT, M1="gm gds", M2="gm gds gmb")
    expected = gm1 * (1 - 1 / (1 + both * ro1 + ro1 / ro2))
    assert same(-expression(exact(short, "current")), expected)


def test_15_regulated_cascode() -> None:
    """GM 3.4.3*: the booster is a common-source stage."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "in", drain = "x", source = "gnd" }
        mosfet.M2 = { gate = "g2", drain = "out", source = "x", body = "x" }
        mosfet.M3 = { gate = "x", drain = "g2", source = "gnd" }
        voltage_source.VIN = ["in", "gnd"]
        response.rout = { looking_into = "out" }
        """,
        M1="gm gds",
        M2="gm gds",
        M3="gm gds",
    )
    gm3, gds3 = symbols("gm3 gds3")
    expected = ro1 + ro2 + gm2 * (1 + gm3 / gds3) * ro1 * ro2
    assert same(expression(exact(stage, "rout")), expected)


def test_16_folded_cascode() -> None:
    """GM 6.6*. M1 drives, M2 is the current source at the fold, M3 the cascode, M4 and M5 the load."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "in", drain = "f", source = "gnd" }
        mosfet.M2 = { gate = "gnd", drain = "f", source = "gnd" }
        mosfet.M3 = { gate = "gnd", drain = "out", source = "f", body = "f" }
        mosfet.M4 = { gate = "gnd", drain = "out", source = "y", body = "y" }
        mosfet.M5 = { gate = "gnd", drain = "y", source = "gnd" }
        voltage_source.VIN = ["in", "gnd"]
        response.gain = { from = "VIN", to = "out" }
        response.rout = { looking_into = "out" }
        """,
        M1="gm gds",
        M2="gm gds",
        M3="gm gds",
        M4="gm gds",
        M5="gm gds",
    )
    gmc, gml, gdsc, gdsl, gdslb = symbols("gm3 gm4 gds3 gds4 gds5")
    Rp, roc, rol, rolb = parallel(ro1, ro2), 1 / gdsc, 1 / gdsl, 1 / gdslb
    rout = parallel(roc + Rp + gmc * roc * Rp, rol + rolb + gml * rol * rolb)
    assert same(expression(exact(stage, "rout")), rout)
    transfer = gm1 * Rp * (1 + gmc * roc) / (roc + Rp + gmc * roc * Rp)
    assert same(expression(exact(stage, "gain")), -transfer * rout)
