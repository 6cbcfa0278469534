"""Standard results in symbols for the two-stage op amp, numbered as in the collection they are from.

GM Gray, Hurst, Lewis & Meyer 5e; AH Allen & Holberg. A section or an equation's number with * is from memory.
"""

from __future__ import annotations

from symbolic import assumed, coefficients, exact, formula, s, same, stage_from, symbols

gm1, gm2 = symbols("gm1 gm2")
R1, R2, Rz, C1, C2, CC = symbols("R1 R2 Rz C1 C2 CC")

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
MILLER = 'capacitor.CC = ["x", "out"]\n'
NULLING = 'capacitor.CC = ["z", "out"]\nresistor.Rz = ["x", "z"]\n'
DEVICES = {"M1": "gm", "M2": "gm"}

at_dc = gm1 * R1 * gm2 * R2
b1 = R1 * (C1 + CC) + R2 * (C2 + CC) + gm2 * R1 * R2 * CC
b2 = R1 * R2 * (C1 * C2 + C1 * CC + C2 * CC)


def assumption(name: str, line: str) -> str:
    return f'[[assumption]]\nname = "{name}"\n{line}\n'


SECOND_STAGE_HAS_GAIN = assumption(
    "the second stage has gain",
    'small = ["1"]\nagainst = ["gm2*R1", "gm2*R2"]',
)
SPLIT = assumption(
    "C1, C2 are below the Miller capacitance",
    'small = ["C1", "C2"]\nagainst = ["gm2*R1*CC", "gm2*R2*CC"]',
)
FAR_APART = assumption("poles far apart", "poles_far_apart = true")


def test_26_miller_compensation() -> None:
    """GM 9.4; AH 6.2*."""
    gain = exact(stage_from(TWO_STAGES + MILLER, **DEVICES), "gain")
    above, below = coefficients(gain)
    assert same(above, at_dc * (1 - s * CC / gm2))
    assert same(formula(gain, "z1"), gm2 / CC)
    assert len(below) == 3
    assert same(below[1], b1)
    assert same(below[2], b2)
    text = TWO_STAGES + MILLER + SECOND_STAGE_HAS_GAIN + SPLIT + FAR_APART
    split = assumed(stage_from(text, **DEVICES), "gain")
    assert same(formula(split, "p1"), -1 / (gm2 * R1 * R2 * CC))
    assert same(formula(split, "p2"), -gm2 * CC / (C1 * C2 + CC * (C1 + C2)))


def test_27_nulling_resistor() -> None:
    """GM 9.4; AH 6.2-6.3*."""
    gain = exact(stage_from(TWO_STAGES + NULLING, **DEVICES), "gain")
    above, below = coefficients(gain)
    assert same(above, at_dc * (1 - s * CC * (1 / gm2 - Rz)))
    assert len(below) == 4
    assert same(below[1], b1 + Rz * CC)
    assert same(below[2], b2 + Rz * CC * (R1 * C1 + R2 * C2))
    assert same(below[3], R1 * R2 * Rz * C1 * C2 * CC)


def test_27_third_pole() -> None:
    """p3 is near −1/(Rz·C1) where Rz and C1 are small."""
    small = assumption("Rz is small", 'small = ["Rz"]\nagainst = ["R1", "R2"]')
    small += assumption("C1 is small", 'small = ["C1"]\nagainst = ["C2", "CC"]')
    gain = assumed(stage_from(TWO_STAGES + NULLING + small + FAR_APART, **DEVICES), "gain")
    assert same(formula(gain, "p3"), -1 / (Rz * C1))


def test_27_zero_at_infinity() -> None:
    """Rz = 1/gm2."""
    made = assumption("the zero is away", 'set = { Rz = "1/gm2" }')
    gain = assumed(stage_from(TWO_STAGES + NULLING + made, **DEVICES), "gain")
    above, _ = coefficients(gain)
    assert same(above, at_dc)


def test_27_zero_on_the_second_pole() -> None:
    """Rz = (CL + CC)/(gm2·CC) with C1 = 0 puts the zero at −gm2/CL."""
    made = assumption("no C1", 'neglect = ["C1"]')
    made += assumption("zero on p2", 'set = { Rz = "(C2 + CC)/(gm2*CC)" }')
    text = TWO_STAGES + NULLING + made + SECOND_STAGE_HAS_GAIN + SPLIT + FAR_APART
    gain = assumed(stage_from(text, **DEVICES), "gain")
    assert same(formula(gain, "z1"), -gm2 / C2)
    assert same(formula(gain, "p2"), -gm2 / C2)


def test_28_buffer_in_series_with_the_miller_capacitor() -> None:
    """GM 9.4*; AH 6.2*."""
    buffered = """
        vcvs.EB = { out = ["z", "gnd"], control = ["out", "gnd"] }
        capacitor.CC = ["x", "z"]
        """
    unity = assumption("its gain is one", 'set = { EB = "1" }')
    above, below = coefficients(assumed(stage_from(TWO_STAGES + buffered + unity, **DEVICES), "gain"))
    assert same(above, at_dc)  # no zero
    assert len(below) == 3
    assert same(below[2], R1 * R2 * C2 * (C1 + CC))
