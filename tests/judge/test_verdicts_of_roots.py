"""Verdicts on roots and bands: half planes and faces, roots at 0, claims of nothing, signed symbols, order of things.

The truth beside each is the closed form by hand.
"""

from __future__ import annotations

import itertools
import math

import pytest
from judged import CASCODE, COMMON_SOURCE, stage_of

from symamp.circuit.stage import Stage
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.verdict import Judged


def judged(stage: Stage, claim: str, within: str = "10 %") -> Judged:
    return make_check(stage, claims=[claim_of(stage, claim, within)], prove=False, points=64).claims[0]


# One node with a conductance of 1/R1 + 1/R2 − G1 in all: its pole (G1 − 1/R1 − 1/R2)/C1 lies to the right at G1 = 5 mS.
RIGHT = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "gnd"]
capacitor.C1 = ["a", "gnd"]
vccs.G1 = { out = ["gnd", "a"], control = ["a", "gnd"] }
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "a" }
bias = { R1 = 1e3, R2 = 1e3, C1 = 1e-9, G1 = 5e-3 }
"""
LEFT = "the pole lies in the left half plane, so s is negative"
FIRST = "1/(RS*(cgs1 + cgd1*(1 + gm1*RL)))"


@pytest.mark.parametrize(
    ("text", "claim", "words"),
    [
        (COMMON_SOURCE, f"gain.p1 = {FIRST}", f"{LEFT}; .magnitude may be meant"),
        (COMMON_SOURCE, f"gain.p1.magnitude = -{FIRST}", ".magnitude is of the size of the pole, and positive"),
        (COMMON_SOURCE, f"gain.p1.hz = -{FIRST}/(2*pi)", ".hz is of the size of the pole, and positive"),
        (COMMON_SOURCE, "gain.z1 = -gm1/cgd1", "the zero lies in the right half plane, so s is positive"),
        (COMMON_SOURCE, "gain.z1.hz = -gm1/(2*pi*cgd1)", ".hz is of the size of the zero, and positive"),
        (RIGHT, "gain.p1 = -G1/C1", "the pole lies in the right half plane, so s is positive"),
        (RIGHT, "gain.p1.magnitude = -G1/C1", ".magnitude is of the size of the pole, and positive"),
    ],
)  # fmt: skip
def test_a_wrong_sign_says_which_is_right(text: str, claim: str, words: str) -> None:
    found = judged(stage_of(text), claim)
    assert found.verdict == "wrong"
    assert found.why == f"its sign is wrong: {words}"


def test_a_pole_in_the_right_half_plane() -> None:
    """G1/C1 leaves −1/(G1·R1) and −1/(G1·R2) over: too large by 5/3 − 1."""
    for about in ("p1", "p1.magnitude"):
        found = judged(stage_of(RIGHT), f"gain.{about} = G1/C1", "70 %")
        assert found.error == pytest.approx(5 / 3 - 1, rel=1e-12)
        assert found.verdict == "holds"
        assert sorted(c.at_bias for c in found.conditions) == pytest.approx([-0.2, -0.2])


# An integrator with a pole and a zero: −, N = 1 + s·R2·C2, D = s(C1 + C2 + s·R2·C1·C2).
INTEGRATOR = """
vccs.G1 = { out = ["gnd", "a"], control = ["in", "gnd"] }
capacitor.C1 = ["a", "gnd"]
capacitor.C2 = ["a", "b"]
resistor.R2 = ["b", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "a" }
bias = { G1 = 1e-3, C1 = 1e-12, C2 = 10e-12, R2 = 1e3 }
"""


@pytest.mark.parametrize(
    ("claim", "verdict", "error", "root"),
    [
        ("p1 = 0", "holds", None, ""),
        ("p2 = 0", "fails", -1, ""),
        ("p1 = -1/(R2*C1)", "holds", 1 / 1.1 - 1, "p2"),  # a root at 0 is no partner of one elsewhere
        ("p2 = -1/(R2*C1)", "holds", 1 / 1.1 - 1, ""),
        ("p2 = -1/(R2*C2)", "fails", 0.1 / 1.1 - 1, ""),
        ("z1 = -1/(R2*C2)", "holds", 0, ""),
        ("a0 = G1/C2", "holds", 0.1, ""),
        ("b1 = 1", "holds", 0, ""),
        ("b0 = 0", "holds", None, ""),
        ("b2 = R2*C1", "holds", 0.1, ""),
        ("dc = G1*R2", "fails", None, ""),
        ("bandwidth = 1/(2*pi*R2*C1)", "fails", None, ""),
    ],
)
def test_a_pole_at_zero(claim: str, verdict: str, error: float | None, root: str) -> None:
    found = judged(stage_of(INTEGRATOR), f"gain.{claim}", "10.1 %")
    assert found.verdict == verdict, found.why
    assert found.root == root
    if error is None:
        assert found.error is None
        assert found.why_not
    else:
        assert found.error == pytest.approx(error, rel=1e-9, abs=1e-12)


@pytest.mark.parametrize("about", ["a1", "b5", "a3", "hf"])
def test_nothing_is_nothing_in_every_unit(about: str) -> None:
    """A plain 0 has no unit that could be wrong; 0 in another unit has."""
    assert judged(stage_of(CASCODE), f"gain.{about} = 0").verdict == "holds"
    assert judged(stage_of(CASCODE), "gain.b1 = 0").verdict == "fails"
    assert judged(stage_of(CASCODE), "gain.b1 = 0 S").verdict == "wrong"
    assert judged(stage_of(CASCODE), "gain.b1 = 1").verdict == "wrong"


SIGNED = """
vcvs.E1 = { out = ["b", "gnd"], control = ["in", "gnd"] }
resistor.R1 = ["b", "out"]
resistor.R2 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { E1 = -5, R1 = 100, R2 = 10e3 }
"""


@pytest.mark.parametrize(
    ("about", "formula", "verdict", "sign"),
    [
        ("dc", "E1", "holds", 1),
        ("dc", "-E1", "wrong", -1),
        ("dc.magnitude", "-E1", "holds", 1),
        ("dc.magnitude", "E1", "wrong", -1),
        ("dc.magnitude", "abs(E1)", "holds", 1),
        ("dc", "-abs(E1)", "holds", 1),
        ("dc", "-sqrt(E1^2)", "holds", 1),  # sqrt(25), and not E1
        ("dc", "sqrt(E1^2)", "wrong", -1),
        ("dc.magnitude", "sqrt(E1*E1)", "holds", 1),
    ],
)
def test_symbols_that_are_negative(about: str, formula: str, verdict: str, sign: int) -> None:
    """E1·R2/(R1 + R2) with E1 = −5: E1 is too large by R1/R2 = 1 %."""
    found = judged(stage_of(SIGNED), f"gain.{about} = {formula}")
    assert found.verdict == verdict, found.why
    assert found.error == pytest.approx(sign * 1.01 - 1, rel=1e-9)
    if verdict == "wrong":
        assert "sign" in found.why


# A slow pole and zero that all but cancel before the pole that sets the band.
DOUBLET = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "b"]
capacitor.C1 = ["b", "gnd"]
vcvs.E1 = { out = ["c", "gnd"], control = ["a", "gnd"] }
resistor.R3 = ["c", "out"]
capacitor.C3 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { R1 = 10, R2 = 1e3, C1 = 1e-6, E1 = 1, R3 = 1e3, C3 = 1e-10 }
"""


def test_a_band_that_p1_does_not_set() -> None:
    """H = (1 + s·R2·C1)/((1 + s(R1 + R2)C1)(1 + s·R3·C3)): its band is near 1/(2π·R3·C3), 2 % above."""
    found = judged(stage_of(DOUBLET), "gain.bandwidth = 1/(2*pi*R3*C3)", "5 %")
    # Far above the doublet |H|² = (100/101)²/(1 + (ω·R3·C3)²) is 1/2 at ω·R3·C3 = √(2(100/101)² − 1).
    assert found.error == pytest.approx(1 / math.sqrt(2 * (1 / 1.01) ** 2 - 1) - 1, rel=1e-4)
    assert found.verdict == "holds"
    assert found.conditions == ()


def two_alike(formula: str, within: str) -> Judged:
    """Two sections with the same time constant, their symbols apart."""
    text = """
    resistor.R1 = ["in", "a"]
    resistor.R2 = ["b", "out"]
    capacitor.C1 = ["a", "gnd"]
    capacitor.C2 = ["out", "gnd"]
    vcvs.E1 = { out = ["b", "gnd"], control = ["a", "gnd"] }
    voltage_source.VIN = ["in", "gnd"]
    response.gain = { from = "VIN", to = "out" }
    bias = { R1 = 1e3, C1 = 1e-9, R2 = 1e3, C2 = 1e-9, E1 = 1 }
    """
    return judged(stage_of(text), f"gain.bandwidth = {formula}", within)


def test_a_band_with_a_number_in_it() -> None:
    """0.644·p for two equal poles (Gray, Hurst, Lewis & Meyer 7.3.3): right, though no limit of |p1|/2π."""
    exact = math.sqrt(math.sqrt(2) - 1)
    right = two_alike("0.644/(2*pi*R1*C1)", "1 %")
    assert right.error == pytest.approx(0.644 / exact - 1, rel=1e-6)
    assert right.verdict == "holds"
    assert two_alike("1.288/(2*pi*R1*C1)", "1 %").verdict != "holds"


CLAIMS = (
    ("gain.dc = -gm1*gm2*ro1*ro2", "10 %"),
    ("gain.p1.hz = 1/(2*pi*gm2*ro1*ro2*CL)", "30 %"),
    ("gain.dc = -gm1*ro1", "10 %"),
    ("gain.gain_bandwidth = gm1/(2*pi*CL)", "10 %"),
    ("mid.dc = -gm1/gm2", "50 %"),
)
PARTS = (
    '[mosfet]\nM1 = { gate = "in",  drain = "x",   source = "gnd" }\n'
    'M2 = { gate = "gnd", drain = "out", source = "x" }\n',
    '[capacitor]\nCL = ["out", "gnd"]\n',
    '[voltage_source]\nVIN = ["in", "gnd"]\n',
)  # fmt: skip
REST = CASCODE[CASCODE.index("[response]") :] + '\n[span]\ngm2 = ["2 mS", "8 mS"]\ngds1 = "30 %"\n'


def verdicts(stage: Stage, order: tuple[int, ...]) -> dict[int, tuple]:
    made = make_check(stage, claims=[claim_of(stage, *CLAIMS[n]) for n in order], prove=False, points=64)
    return {
        n: (
            found.verdict,
            pytest.approx(found.error, rel=1e-12),
            {c.ratio.text(): pytest.approx(c.effect, rel=1e-9) for c in found.conditions},
            pytest.approx((found.span.least, found.span.greatest), rel=1e-9),
        )
        for n, found in zip(order, made.claims, strict=True)
    }


def test_no_verdict_depends_on_the_order_of_claims() -> None:
    stage = stage_of(*PARTS, REST)
    first = verdicts(stage, (0, 1, 2, 3, 4))
    for order in ((4, 3, 2, 1, 0), (2, 0, 4, 1, 3)):
        assert _as_found(verdicts(stage, order)) == first


def test_no_verdict_depends_on_the_order_of_parts() -> None:
    first = verdicts(stage_of(*PARTS, REST), (0, 1, 2, 3, 4))
    for order in itertools.permutations(PARTS):
        assert _as_found(verdicts(stage_of(*order, REST), (0, 1, 2, 3, 4))) == first
    swapped = PARTS[0].splitlines()
    turned = "\n".join([swapped[0], swapped[2], swapped[1], ""])
    assert _as_found(verdicts(stage_of(turned, *PARTS[1:], REST), (0, 1, 2, 3, 4))) == first


def _as_found(found: dict[int, tuple]) -> dict[int, tuple]:
    """What was approximate, as plain numbers, to be compared with what is approximate."""
    plain = {}
    for n, (verdict, error, effects, span) in found.items():
        plain[n] = verdict, error.expected, {k: v.expected for k, v in effects.items()}, span.expected
    return plain


@pytest.mark.parametrize(
    ("claim", "words"),
    [
        ("gain.p1 = 477 kHz", "the number is in Hz, and the quantity is in rad/s; .hz may be meant"),
        (
            "gain.p1.magnitude = --477 kHz",
            "the number is in Hz, and the quantity is in rad/s; .hz may be meant",
        ),
        ("gain.p1.hz = 3 Mrad/s", "the number is in rad/s, and the quantity is in Hz; divide it by 2*pi"),
        ("gain.bandwidth = 3 Mrad/s", "the number is in rad/s, and the quantity is in Hz; divide it by 2*pi"),
    ],
)
def test_a_number_in_hz_is_no_root_in_radians(claim: str, words: str) -> None:
    """One dimension, two units: 477 kHz for a pole at 3 Mrad/s once counted as 0.477 Mrad/s."""
    found = judged(stage_of(RIGHT), claim)
    assert (found.verdict, found.why) == ("wrong", words)


def test_two_pi_times_a_number_in_hz_is_one_in_radians() -> None:
    """(5 − 1 − 1) mS/1 nF is 3 Mrad/s, which is 477.46 kHz."""
    found = judged(stage_of(RIGHT), "gain.p1 = 2*pi*477 kHz")
    assert found.verdict == "holds"
    assert found.error == pytest.approx(477 / 477.4648 - 1, rel=1e-3)
