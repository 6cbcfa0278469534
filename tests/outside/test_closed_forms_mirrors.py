"""Standard results in symbols for mirrors and differential pairs, numbered as in their collection.

SS Sedra & Smith; GM Gray, Hurst, Lewis & Meyer 5e; R2 Razavi, CMOS 2e. A section or an equation's number
with * is from memory.
"""

from __future__ import annotations

from symbolic import assumed, exact, expression, formula, parallel, same, stage_from, symbols

FOUR = {"M1": "gm gds", "M2": "gm gds", "M3": "gm gds", "M4": "gm gds"}
gn, gp, gdsn, gdsp = symbols("gm1 gm3 gds1 gds3")
ron, rop = 1 / gdsn, 1 / gdsp
RSS, CM = symbols("RSS CM")


def test_21_mos_wilson_mirror() -> None:
    """GM 4.2*."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "b", drain = "a", source = "gnd" }
        mosfet.M2 = { gate = "b", drain = "b", source = "gnd" }
        mosfet.M3 = { gate = "a", drain = "out", source = "b", body = "b" }
        resistor.Rref = ["a", "gnd"]
        response.rout = { looking_into = "out" }
        """,
        M1="gm gds",
        M2="gm gds",
        M3="gm gds",
    )
    gm1, gm2, gm3, gds1, gds2, gds3, Rref = symbols("gm1 gm2 gm3 gds1 gds2 gds3 Rref")
    Rb = parallel(1 / gm2, 1 / gds2)
    loop = 1 + gm3 / gds3 * (1 + gm1 * parallel(1 / gds1, Rref))
    assert same(expression(exact(stage, "rout")), 1 / gds3 + Rb * loop)


def test_22_cascode_mirror() -> None:
    """R2 5.2*. The reference is ideal, so that no gate moves."""
    stage = stage_from(
        """
        mosfet.M1 = { gate = "a", drain = "a", source = "gnd" }
        mosfet.M3 = { gate = "c", drain = "c", source = "a", body = "a" }
        mosfet.M2 = { gate = "a", drain = "x", source = "gnd" }
        mosfet.M4 = { gate = "c", drain = "out", source = "x", body = "x" }
        current_source.IREF = ["gnd", "c"]
        response.rout = { looking_into = "out" }
        response.diode = { looking_into = "a", without = ["M3", "M4", "IREF"] }
        """,
        **FOUR,
    )
    gm1, gm4, gds1, gds2, gds4 = symbols("gm1 gm4 gds1 gds2 gds4")
    ro2, ro4 = 1 / gds2, 1 / gds4
    assert same(expression(exact(stage, "rout")), ro2 + ro4 + gm4 * ro2 * ro4)
    assert same(expression(exact(stage, "diode")), 1 / (gm1 + gds1))


# M1, M2 the pair with sources at t; M3 the mirror's diode at m, M4 its output.
PAIR = """
    mosfet.M1 = { gate = "p", drain = "m", source = "t", body = "t" }
    mosfet.M2 = { gate = "n", drain = "out", source = "t", body = "t" }
    mosfet.M3 = { gate = "m", drain = "m", source = "gnd" }
    mosfet.M4 = { gate = "m", drain = "out", source = "gnd" }
    voltage_source.VP = ["p", "gnd"]
    voltage_source.VN = ["n", "gnd"]
    """
EQUAL = """
    [[assumption]]
    name = "the pair is one"
    equal = ["M1", "M2"]
    [[assumption]]
    name = "the mirror is one"
    equal = ["M3", "M4"]
    """
DIFFERENTIAL = 'response.gain = { from = { VP = 0.5, VN = -0.5 }, to = "out" }\n'
COMMON = 'response.gain = { from = { VP = 1, VN = 1 }, to = "out" }\n'
IDEAL_TAIL = 'current_source.ITAIL = ["t", "gnd"]\n'
TAIL = 'resistor.RSS = ["t", "gnd"]\n'


def test_23_pair_with_mirror() -> None:
    """R2 5.3*, there the form without the small terms. The tail is ideal."""
    text = PAIR + IDEAL_TAIL + DIFFERENTIAL + 'response.zout = { looking_into = "out" }\n' + EQUAL
    stage = stage_from(text, **FOUR)
    both = parallel(ron, rop)
    assert same(expression(assumed(stage, "gain")), gn * both * (2 * gp * rop + 1) / (2 * (gp * rop + 1)))
    assert same(expression(assumed(stage, "zout")), both * (1 + rop / (2 * ron * (1 + gp * rop))))
    small = """
        [[assumption]]
        name = "high intrinsic gain"
        small = ["gds"]
        against = ["gm"]
        """
    plain = stage_from(text + small, **FOUR)
    assert same(expression(assumed(plain, "gain")), gn * both)
    assert same(expression(assumed(plain, "zout")), both)


def test_24_common_mode_gain() -> None:
    """SS 7.5*."""
    text = PAIR + TAIL + COMMON + EQUAL
    stage = stage_from(text, **FOUR)
    below = (1 + gp * rop) * (2 * RSS * (1 + gn * ron) + ron) + rop
    assert same(expression(assumed(stage, "gain")), -gn * ron * rop / below)
    without_gds = (
        text
        + """
        [[assumption]]
        name = "no output conductance"
        neglect = ["gds"]
        """
    )
    ideal = stage_from(without_gds, **FOUR)
    assert same(expression(assumed(ideal, "gain")), -gn / (gp * (1 + 2 * gn * RSS)))
    stiff = (
        without_gds
        + """
        [[assumption]]
        name = "the tail is stiff"
        small = ["1"]
        against = ["gm1*RSS"]
        """
    )
    assert same(expression(assumed(stage_from(stiff, **FOUR), "gain")), -1 / (2 * gp * RSS))


def test_25_mirror_doublet() -> None:
    """GM (7.134), ro = ∞: the pair's current into a short."""
    shorted = """
        voltage_source.VOUT = ["out", "gnd"]
        capacitor.CM = ["m", "gnd"]
        response.gain = { from = { VP = 0.5, VN = -0.5 }, to = "VOUT" }
        """
    text = PAIR + IDEAL_TAIL + shorted + EQUAL
    current = assumed(stage_from(text, M1="gm", M2="gm", M3="gm", M4="gm"), "gain")
    assert same(formula(current, "dc"), gn)
    assert same(formula(current, "p1"), -gp / CM)
    assert same(formula(current, "z1"), -2 * gp / CM)
