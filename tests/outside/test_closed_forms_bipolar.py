"""Standard results in symbols for bipolar stages, numbered as in the collection they are from.

SS Sedra & Smith; S7 Sedra & Smith 7e; GM Gray, Hurst, Lewis & Meyer 5e; RF Razavi, Fundamentals. A section
or an equation's number with * is from memory.
"""

from __future__ import annotations

from symbolic import assumed, coefficients, exact, expression, formula, parallel, s, same, stage_from, symbols

gm, gpi, go, cpi, cmu = symbols("gm1 gpi1 go1 cpi1 cmu1")
Rs, RB, RC, RE, RL = symbols("Rs RB RC RE RL")
rpi, ro, beta = 1 / gpi, 1 / go, gm / gpi


def test_17_common_emitter() -> None:
    """GM (7.29)."""
    stage = stage_from(
        """
        bjt.Q1 = { base = "b", collector = "c", emitter = "gnd" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rs = ["in", "b"]
        resistor.RL = ["c", "gnd"]
        response.gain = { from = "VIN", to = "c" }
        """,
        Q1="gm gpi cpi cmu",
    )
    gain = exact(stage, "gain")
    _, below = coefficients(gain)
    R = parallel(Rs, rpi)
    assert len(below) == 3
    assert same(below[1], R * (cpi + cmu * (1 + gm * RL)) + RL * cmu)
    assert same(below[2], R * RL * cpi * cmu)
    assert same(formula(gain, "z1"), gm / cmu)


DEGENERATED = """
    bjt.Q1 = { base = "b", collector = "c", emitter = "e" }
    resistor.RE = ["e", "gnd"]
    """


def test_18_degenerated_common_emitter() -> None:
    """GM 3.3.8*; SS 5*."""
    driven = """
        voltage_source.VIN = ["b", "gnd"]
        resistor.RC = ["c", "gnd"]
        response.gain = { from = "VIN", to = "c" }
        response.rin = { looking_into = "VIN" }
        """
    stage = stage_from(DEGENERATED + driven, Q1="gm gpi")  # ro = ∞
    rin = rpi + (1 + beta) * RE
    assert same(expression(exact(stage, "rin")), rin)
    assert same(expression(exact(stage, "gain")), -beta * RC / rin)
    at_rest = """
        resistor.RB = ["b", "gnd"]
        response.rout = { looking_into = "c" }
        """
    found = expression(exact(stage_from(DEGENERATED + at_rest, Q1="gm gpi go"), "rout"))
    assert same(found, ro * (1 + beta * RE / (RB + rpi + RE)) + parallel(RE, rpi + RB))


def test_19_emitter_follower() -> None:
    """GM (7.47-7.53)."""
    text = """
        bjt.Q1 = { base = "b", collector = "gnd", emitter = "e" }
        resistor.RB = ["b", "gnd"]
        resistor.RE = ["e", "gnd"]
        response.rin = { looking_into = "b", without = ["RB"] }
        response.rout = { looking_into = "e", without = ["RE"] }
        """
    stage = stage_from(text, Q1="gm gpi go")
    assert same(expression(exact(stage, "rin")), rpi + (1 + beta) * parallel(RE, ro))
    assert same(expression(exact(stage, "rout")), parallel(ro, (rpi + RB) / (1 + beta)))


def test_19_emitter_follower_with_one_capacitor() -> None:
    """GM (7.47-7.53), ro = ∞."""
    stage = stage_from(
        """
        bjt.Q1 = { base = "b", collector = "gnd", emitter = "e" }
        voltage_source.VIN = ["in", "gnd"]
        resistor.Rs = ["in", "b"]
        resistor.RL = ["e", "gnd"]
        response.gain = { from = "VIN", to = "e" }
        """,
        Q1="gm gpi cpi",
    )
    gain = exact(stage, "gain")
    assert same(formula(gain, "p1"), -1 / (cpi * parallel(rpi, (Rs + RL) / (1 + gm * RL))))
    assert same(formula(gain, "z1"), -(gm + 1 / rpi) / cpi)


def test_20_common_base_input_resistance() -> None:
    """RF 9*."""
    stage = stage_from(
        """
        bjt.Q1 = { base = "gnd", collector = "c", emitter = "e" }
        resistor.RC = ["c", "gnd"]
        response.rin = { looking_into = "e" }
        """,
        Q1="gm gpi go",
    )
    assert same(expression(exact(stage, "rin")), parallel(rpi, (ro + RC) / (1 + gm * ro)))


def test_20_bipolar_cascode_output_resistance() -> None:
    """RF 9*."""
    stage = stage_from(
        """
        bjt.Q1 = { base = "in", collector = "x", emitter = "gnd" }
        bjt.Q2 = { base = "gnd", collector = "out", emitter = "x" }
        voltage_source.VIN = ["in", "gnd"]
        response.rout = { looking_into = "out" }
        """,
        Q1="gm gpi go",
        Q2="gm gpi go",
    )
    gm2, gpi2, go2 = symbols("gm2 gpi2 go2")
    below = parallel(ro, 1 / gpi2)
    assert same(expression(exact(stage, "rout")), (1 + gm2 * below) / go2 + below)


WILSON = """
    bjt.Q1 = { base = "b", collector = "a", emitter = "gnd" }
    bjt.Q2 = { base = "b", collector = "b", emitter = "gnd" }
    bjt.Q3 = { base = "a", collector = "out", emitter = "b" }
    current_source.IREF = ["gnd", "a"]
    response.rout = { looking_into = "out" }
    [[assumption]]
    name = "equal devices"
    equal = ["Q1", "Q2", "Q3"]
    [[assumption]]
    name = "high intrinsic gain"
    small = ["go"]
    against = ["gm", "gpi"]
    """


def test_21_bipolar_wilson_mirror() -> None:
    """GM 4.2*; S7 8.26. Equal devices, gm·ro → ∞."""
    devices = {"Q1": "gm gpi go", "Q2": "gm gpi go", "Q3": "gm gpi go"}
    found = expression(assumed(stage_from(WILSON, **devices), "rout"))
    assert same(found / ro, (beta**2 + 2 * beta + 2) / (2 * (beta + 1)))
    with_large_beta = (
        WILSON
        + """
        [[assumption]]
        name = "high beta"
        small = ["gpi"]
        against = ["gm"]
        """
    )
    assert same(expression(assumed(stage_from(with_large_beta, **devices), "rout")) / ro, beta / 2)


def test_s_is_the_frequency_of_these_forms() -> None:
    """No closed form here would notice an `s` of another kind: the follower's gain holds it."""
    stage = stage_from(
        """
        bjt.Q1 = { base = "b", collector = "gnd", emitter = "e" }
        voltage_source.VIN = ["b", "gnd"]
        resistor.RL = ["e", "gnd"]
        response.gain = { from = "VIN", to = "e" }
        """,
        Q1="gm gpi cpi",
    )
    through = gm + gpi + s * cpi
    assert same(expression(exact(stage, "gain")), through / (through + 1 / RL))
