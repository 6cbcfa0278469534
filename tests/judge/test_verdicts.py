"""Verdicts over spans, tables, followers and proofs; equal and set; roots; what has no formula; zero; bounded time.

The truth beside each is worked out by hand at the corners or rows, or by dense sampling with closed forms in floats.
"""

from __future__ import annotations

import itertools
import math
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from judged import CASCODE, COMMON_SOURCE, RESONATOR, stage_of

from symamp.circuit.stage import Stage
from symamp.errors import InputError
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.verdict import Check, Judged

WORKED = "gain.dc = -gm1*gm2*ro1*ro2"
BOX = '\n[span]\ngm1 = ["2 mS", "8 mS"]\ngm2 = ["2 mS", "8 mS"]\ngds1 = "30 %"\ngds2 = { follows = "gds1" }\n'


def check(stage: Stage, claim: str, within: str = "10 %", *, prove: bool = False, points: int = 128) -> Check:
    return make_check(stage, claims=[claim_of(stage, claim, within)], prove=prove, points=points)


def judged(stage: Stage, claim: str, within: str = "10 %", *, prove: bool = False) -> Judged:
    return check(stage, claim, within, prove=prove).claims[0]


# Section 7's worked case, and the box of section 3 widened by gm2


def test_worst_of_a_box_is_at_the_corner_known_by_hand() -> None:
    """Error −(gmb2 + gds2)/(gm2 + gmb2 + gds2): worst at the least gm2 and the greatest gds2."""
    found = judged(stage_of(CASCODE, BOX), WORKED, "30 %")
    high, low = 0.24e-3 * 1.3, 0.24e-3 * 0.7
    worst = -(0.62e-3 + high) / (2e-3 + 0.62e-3 + high)
    best = -(0.62e-3 + low) / (8e-3 + 0.62e-3 + low)
    span = found.span
    assert span is not None
    assert (span.least, span.greatest) == (pytest.approx(worst, rel=1e-9), pytest.approx(best, rel=1e-9))
    assert span.where_least["gm2"] == pytest.approx(2e-3)
    assert span.where_least["gds1"] == pytest.approx(0.273e-3)
    assert found.verdict == "holds here"
    assert "−18.1 % at the bias point" in found.why
    assert "up to −31.8 % over the span" in found.why
    by_ratio = {c.ratio.text(): c for c in found.conditions}
    assert by_ratio["gmb2/gm2"].largest == pytest.approx(0.31, rel=1e-9)
    assert by_ratio["gds2/gm2"].largest == pytest.approx(high / 2e-3, rel=1e-9)


@pytest.mark.parametrize(
    ("within", "verdict"), [("32 %", "holds"), ("31.7 %", "holds here"), ("18 %", "fails")]
)
def test_verdicts_by_what_is_allowed(within: str, verdict: str) -> None:
    for prove in (False, True):
        assert judged(stage_of(CASCODE, BOX), WORKED, within, prove=prove).verdict == verdict


def test_proved_says_so_and_holds_dense_sampling() -> None:
    found = judged(stage_of(CASCODE, BOX), WORKED, "32 %", prove=True)
    assert found.span is not None
    assert found.span.proved
    assert "proved" in found.why
    gm2, factor = np.meshgrid(np.geomspace(2e-3, 8e-3, 200), np.linspace(0.7, 1.3, 200))
    gds2 = 0.24e-3 * factor
    error = -(0.62e-3 + gds2) / (gm2 + 0.62e-3 + gds2)
    low, high = found.span.bounds
    assert low <= error.min()
    assert error.max() <= high
    assert low == pytest.approx(error.min(), abs=2e-4)
    sampled = judged(stage_of(CASCODE, BOX), WORKED, "32 %")
    assert not sampled.span.proved
    assert "proved" not in sampled.why


def test_proof_of_a_pole_holds_dense_sampling() -> None:
    """p1 as 1/b1 (ro ignored nowhere): the quadratic of the common source solved on a grid."""
    load = "(RL || ro1)"
    claim = f"gain.p1.magnitude = 1/(RS*(cgs1 + cgd1*(1 + gm1*{load})) + {load}*(cgd1 + CL))"
    box = '\n[span]\ngm1 = ["1 mS", "10 mS"]\nCL = ["0.1 pF", "10 pF"]\n'
    found = judged(stage_of(COMMON_SOURCE, box), claim, "40 %", prove=True)
    gm, cl = np.meshgrid(np.geomspace(1e-3, 1e-2, 300), np.geomspace(1e-13, 1e-11, 300))
    r = 4e3 / (1 + 4e3 * 0.2e-3)
    one = 20e3 * (0.4e-12 + 0.1e-12 * (1 + gm * r)) + r * (0.1e-12 + cl)
    two = 20e3 * r * (0.4e-12 * 0.1e-12 + 0.5e-12 * cl)
    error = (one + np.sqrt(one**2 - 4 * two)) / 2 / one - 1
    assert found.span.least <= error.min() + 1e-9
    assert found.span.least == pytest.approx(error.min(), abs=1e-4)
    assert found.span.bounds is not None
    assert found.span.bounds[0] <= error.min() + 1e-12
    assert error.max() <= found.span.bounds[1] + 1e-12
    assert found.verdict == "holds"


def test_rows_of_a_table(tmp_path: Path) -> None:
    rows = [(3.9, 0.24), (2.0, 0.5), (8.0, 0.1), (5.0, 0.3)]
    text = "gm2 [mS],gds2 [mS]\n" + "".join(f"{a},{b}\n" for a, b in rows)
    (tmp_path / "corners.csv").write_text(text)
    stage = stage_of(CASCODE, '\n[span]\ntable = "corners.csv"\n', folder=tmp_path)
    whole = check(stage, WORKED, "20 %", prove=True)
    found = whole.claims[0]
    errors = [-(0.62 + b) / (a + 0.62 + b) for a, b in rows]
    assert found.span.least == pytest.approx(min(errors), rel=1e-9)
    assert found.span.greatest == pytest.approx(max(errors), rel=1e-9)
    assert found.span.where_least == {"row": 2}
    assert found.span.where_greatest == {"row": 3}
    assert whole.points == 4
    assert found.verdict == "holds here"
    assert check(stage, WORKED, "36 %").claims[0].verdict == "holds"


def test_followers_keep_their_ratio() -> None:
    """ro1 for ro2 in a span where gds2 follows gds1: the error stays what it is at the bias point."""
    box = '\n[span]\ngds1 = ["0.05 mS", "1 mS"]\ngds2 = { follows = "gds1" }\n'
    found = judged(stage_of(CASCODE, box), "gain.dc = -gm1*(gm2 + gmb2 + gds2)*ro1*ro1", "20 %")
    assert found.verdict == "wrong"
    assert found.span.least == pytest.approx(0.24 / 0.21 - 1, rel=1e-9)
    assert found.span.greatest == pytest.approx(0.24 / 0.21 - 1, rel=1e-9)


# Equal and set


def test_equal_with_its_own_error() -> None:
    """gm2 taken as gm1: listed with gm2/gm1 at the bias point, and the error that it makes in the exact gain."""
    made = '\n[[assumption]]\nname = "alike"\nequal = ["M1", "M2"]\n'
    found = judged(stage_of(CASCODE, made), "gain.dc = -gm1*gm1*ro1*ro2", "20 %")
    taken = {c.ratio.text(): c for c in found.conditions if c.assumption}
    assert set(taken) == {"gm2/gm1", "gds2/gds1"}
    assert {(c.assumption, c.target) for c in taken.values()} == {("alike", 1)}
    exact = 4.1 * (3.9 + 0.62 + 0.24) / (0.21 * 0.24)
    by_gm = 4.1 * (4.1 + 0.62 + 0.24) / (0.21 * 0.24) / exact - 1
    by_gds = 4.1 * (3.9 + 0.62 + 0.21) / (0.21 * 0.21) / exact - 1
    assert taken["gm2/gm1"].at_bias == pytest.approx(3.9 / 4.1)
    assert taken["gm2/gm1"].effect == pytest.approx(by_gm, rel=1e-9)
    assert taken["gds2/gds1"].at_bias == pytest.approx(0.24 / 0.21)
    assert taken["gds2/gds1"].effect == pytest.approx(by_gds, rel=1e-9)
    # the error is against the exact expression without the assumption
    assert found.error == pytest.approx(4.1 * 4.1 / (0.21 * 0.24) / exact - 1, rel=1e-9)
    assert {c.ratio.text() for c in found.conditions if not c.assumption} == {"gmb2/gm1", "gds1/gm1"}
    assert found.verdict == "holds"
    assert judged(stage_of(CASCODE), "gain.dc = -gm1*gm1*ro1*ro2", "20 %").verdict == "wrong"


def test_set_with_its_own_error() -> None:
    made = '\n[[assumption]]\nname = "body effect as a fraction"\nset = { gmb2 = "gm2/5" }\n'
    found = judged(stage_of(CASCODE, made), "gain.dc = -1.2*gm1*gm2*ro1*ro2", "20 %")
    (taken,) = [c for c in found.conditions if c.assumption]
    assert taken.ratio.text() == "5*gmb2/gm2"
    assert taken.at_bias == pytest.approx(5 * 0.62 / 3.9)
    whole = 3.9 + 0.62 + 0.24
    assert taken.effect == pytest.approx((3.9 * 1.2 + 0.24) / whole - 1, rel=1e-9)
    assert found.error == pytest.approx(3.9 * 1.2 / whole - 1, rel=1e-9)
    (left,) = [c for c in found.conditions if not c.assumption]
    assert left.at_bias == pytest.approx(0.24 / (1.2 * 3.9))
    assert found.verdict == "holds"


# Roots


def test_another_root_than_the_one_claimed_is_named() -> None:
    """−1/(RL·CL)-like figures that lie at p2: error and verdict against p2, which the answer names."""
    stage = stage_of(COMMON_SOURCE)
    r = 4e3 / 1.8
    one = 20e3 * (0.5e-12 + 0.1e-12 * 5e-3 * r) + r * 0.8e-12
    two = 20e3 * r * (0.4e-12 * 0.1e-12 + 0.5e-12 * 0.7e-12)
    p1, p2 = (-(one + s * math.sqrt(one**2 - 4 * two)) / (2 * two) for s in (-1, 1))
    claim = "gain.p1.hz = gm1/(2*pi*(cgs1 + CL))"
    found = judged(stage, claim, "50 %")
    claimed = 5e-3 / 1.1e-12
    assert abs(math.log(claimed / -p2)) < abs(math.log(claimed / -p1))
    assert found.root == "p2"
    assert found.error == pytest.approx(claimed / -p2 - 1, rel=1e-9)
    assert judged(stage, claim.replace("p1", "p2"), "50 %").root == ""


def test_complex_poles() -> None:
    """A real formula for a complex pole: the error is complex, `within` means the modulus, conditions are none."""
    stage = stage_of(RESONATOR.replace('"300 ohm"', '"30 ohm"'))
    r, L, C = 60.0, 10e-6, 1e-9
    pole = complex(-r / (2 * L), math.sqrt(1 / (L * C) - (r / (2 * L)) ** 2))
    found = judged(stage, "gain.p1 = -1/sqrt(L1*C1)")
    assert isinstance(found.error, complex)
    assert abs(found.error) == pytest.approx(abs(-1 / math.sqrt(L * C) / pole - 1), rel=1e-9)
    assert found.modulus
    assert found.verdict == "fails"
    assert any("no tacit conditions" in remark for remark in found.remarks)
    size = judged(stage, "gain.p1.magnitude = 1/sqrt(L1*C1)", "0.001 %")
    assert size.verdict == "holds"
    assert size.error == pytest.approx(0, abs=1e-12)
    in_hz = judged(stage, "gain.p1.hz = 1/(2*pi*sqrt(L1*C1))", "0.001 %")
    assert in_hz.verdict == "holds"
    rational = judged(stage, "gain.p1 = -(R1 + R2)/(2*L1)")
    assert abs(rational.error) == pytest.approx(abs(pole.real / pole - 1), rel=1e-9)
    part = judged(stage, "gain.p1.re = -(R1 + R2)/(2*L1)", "0.001 %")
    assert part.verdict == "holds"
    assert judged(stage, "gain.p1.im = 1/sqrt(L1*C1)").error == pytest.approx(1e7 / pole.imag - 1, rel=1e-9)


def test_a_root_that_does_not_exist() -> None:
    found = judged(stage_of(CASCODE), "gain.z1 = gm1/CL")
    assert found.verdict == "fails"
    assert found.exact is None
    assert found.error is None
    assert "z1" in found.why_not
    lost = judged(stage_of(CASCODE), "gain.p2 = -gm2/CL")
    assert lost.error is None or lost.root == "p1"


# Zero


BRIDGE = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "gnd"]
resistor.R3 = ["in", "b"]
resistor.R4 = ["b", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = ["a", "b"] }
bias = { R1 = 1e3, R2 = 2e3, R3 = 3e3, R4 = 6e3 }
"""


def test_exact_value_of_zero() -> None:
    """A bridge in balance, R2/(R1 + R2) − R4/(R3 + R4) = 0: a claim of 0 holds, any other is wrong."""
    zero = judged(stage_of(BRIDGE), "gain.dc = 0")
    assert (zero.verdict, zero.error, zero.exact) == ("holds", None, 0)
    assert "both are 0" in zero.why
    other = judged(stage_of(BRIDGE), "gain.dc = R2/(R1 + R2)")
    assert other.verdict == "wrong"
    assert "exact value is 0" in other.why
    assert other.error is None
    assert "exact value is 0" in other.why_not
    exact = judged(stage_of(BRIDGE), "gain.dc = R2/(R1 + R2) - R4/(R3 + R4)")
    assert exact.verdict == "holds"


def test_zero_at_the_bias_point_is_not_zero_over_the_span() -> None:
    found = judged(stage_of(BRIDGE, 'span = { R1 = "10 %" }\n'), "gain.dc = 0")
    assert found.verdict == "holds here"
    assert "both are 0 at the bias point" in found.why
    exact = judged(stage_of(BRIDGE, 'span = { R1 = "10 %" }\n'), "gain.dc = R2/(R1 + R2) - R4/(R3 + R4)")
    assert exact.verdict == "holds"


def test_claim_of_zero() -> None:
    found = judged(stage_of(CASCODE), "gain.dc = 0")
    assert found.verdict in ("fails", "wrong")
    assert found.error == -1
    away = judged(stage_of(CASCODE), "gain.dc = gm1*ro1 - gm1*ro1")
    assert away.error == -1


@pytest.mark.parametrize("formula", ["gm1/(gm1 - gm1)", "gm1*ro1/0", "1/(1 - 1)", "sqrt(-1)"])
def test_a_formula_without_a_value_at_the_bias_point(formula: str) -> None:
    found = judged(stage_of(CASCODE), f"gain.dc = {formula}")
    assert found.verdict in ("fails", "wrong")
    assert found.claimed is None
    assert found.error is None
    assert found.why_not


# Formulas that are no ratios, decibels


@pytest.mark.parametrize(
    ("formula", "conditions"),
    [
        ("-sqrt(gm1^2*ro1^2)*gm2*ro2", ["gmb2/gm2", "gds2/gm2"]),
        ("-abs(-gm1*gm2*ro1*ro2)", ["gmb2/gm2", "gds2/gm2"]),
        ("-pi*gm1*gm2*ro1*ro2/pi", ["gmb2/gm2", "gds2/gm2"]),
        ("-gm1*ro1*gm2*ro2*sqrt(4)/2", ["gmb2/gm2", "gds2/gm2"]),
        ("-ro1*ro2*gm1*sqrt(gm2*(gm2 + gmb2))", None),
    ],
)
def test_functions(formula: str, conditions: list[str] | None) -> None:
    found = judged(stage_of(CASCODE), f"gain.dc = {formula}", "20 %")
    if conditions is None:
        assert found.error == pytest.approx(math.sqrt(3.9 * 4.52) / 4.76 - 1, rel=1e-9)
        assert found.conditions == ()
        assert any("root" in remark for remark in found.remarks)
    else:
        assert [c.ratio.text() for c in found.conditions] == conditions


def test_pi_is_seen_as_a_factor() -> None:
    found = judged(stage_of(CASCODE), "gain.dc = -pi*gm1*gm2*ro1*ro2")
    assert found.verdict == "wrong"
    assert "too large by a factor of π" in found.why


@pytest.mark.parametrize(
    "formula", ["-2*gm1*sqrt(gm2^2 + 2*gm2*gmb2 + 2*gm2*gds2 + (gmb2 + gds2)^2)*ro1*ro2"]
)
def test_a_square_is_rooted(formula: str) -> None:
    found = judged(stage_of(CASCODE), f"gain.dc = {formula}")
    assert found.verdict == "wrong"
    assert "too large by a factor of 2" in found.why


def test_decibels() -> None:
    stage = stage_of(CASCODE, BOX)
    exact = 20 * math.log10(4.1 * 4.76 / (0.21 * 0.24))
    linear = judged(stage, "gain.dc.db = gm1*gm2*ro1*ro2", "3 dB", prove=True)
    assert linear.error == pytest.approx(20 * math.log10(3.9 / 4.76), rel=1e-9)
    assert linear.absolute
    assert linear.unit == "dB"
    assert [c.ratio.text() for c in linear.conditions] == ["gmb2/gm2", "gds2/gm2"]
    high = 0.24e-3 * 1.3
    assert linear.span.least == pytest.approx(20 * math.log10(2e-3 / (2.62e-3 + high)), abs=1e-3)
    assert linear.span.proved
    number = judged(stage_of(CASCODE), "gain.dc.db = 52 dB", "0.5 dB")
    assert number.error == pytest.approx(52 - exact, rel=1e-9)
    assert number.verdict == "holds"
    assert "dB" in number.why
    other = judged(stage_of(CASCODE), "gain.dc.db = 40 dB", "0.5 dB")
    assert other.verdict == "fails"
    negative = judged(stage_of(CASCODE), "gain.dc.db = -gm1*gm2*ro1*ro2", "3 dB")
    assert negative.error == pytest.approx(linear.error)  # in dB the sign is no matter


def test_degrees_at_dc() -> None:
    assert judged(stage_of(CASCODE), "gain.dc.deg = 180 deg", "1 deg").verdict == "holds"
    assert judged(stage_of(CASCODE), "gain.dc.deg = 0 deg", "1 deg").verdict == "fails"


# Bounded


@pytest.mark.parametrize(
    "formula",
    [
        "-gm1*ro1*((gm1 + gds1)/gm1)**64",
        "-gm1*ro1*((gm1 + gds1 + gm2 + gds2 + gmb2)/gm1)**64",
        "-gm1*ro1*(((gm1 + gds1)/gm1)**64/((gm1 + gds2)/gm1)**64)**64",
        "-gm1*ro1" + "*(1 + ro1/(ro1 + ro2 + 1/gm1 + 1/gm2))" * 40,
        "-gm1*ro1*" + "(ro1 || " * 30 + "ro2" + ")" * 30 + "/ro2",
    ],
)
def test_large_formulas_take_bounded_time(formula: str) -> None:
    start = time.monotonic()
    try:
        found = judged(stage_of(CASCODE), f"gain.dc = {formula}")
    except InputError:
        found = None
    assert time.monotonic() - start < 5
    if found is not None:
        assert found.verdict in ("fails", "wrong", "holds", "holds here")


def test_large_power_has_the_right_error() -> None:
    found = judged(stage_of(CASCODE), "gain.dc = -gm1*ro1*((gm1 + gds1)/gm1)**64", "10 %")
    by_hand = 4.1 / 0.21 * ((4.1 + 0.21) / 4.1) ** 64 / (4.1 * 4.76 / (0.21 * 0.24)) - 1
    assert found.error == pytest.approx(by_hand, rel=1e-9)


def test_corners_by_hand_of_two_claims_at_once() -> None:
    """Claims share the points; each has its own extremes, those of its corners where it is monotone."""
    stage = stage_of(CASCODE, BOX)
    claims = [claim_of(stage, text, "10 %") for text in (WORKED, "gain.dc = -gm1*(gm2 + gmb2)*ro1*ro2")]
    first, second = make_check(stage, claims=claims, prove=False, points=64).claims
    corners = list(itertools.product((2.0, 8.0), (0.24 * 0.7, 0.24 * 1.3)))
    one = [-(0.62 + g) / (m + 0.62 + g) for m, g in corners]
    two = [-g / (m + 0.62 + g) for m, g in corners]
    for found, by_hand in ((first, one), (second, two)):
        assert (found.span.least, found.span.greatest) == (
            pytest.approx(min(by_hand), rel=1e-9),
            pytest.approx(max(by_hand), rel=1e-9),
        )


def test_identity_over_a_span_needs_no_sampling() -> None:
    found = judged(stage_of(CASCODE, BOX), "gain.dc = -gm1*ro1*((gm2 + gmb2)*ro2 + 1)", "0.001 %")
    assert (found.verdict, found.why, found.error) == ("holds", "it is the exact expression", 0.0)


def test_nested_responses_are_judged_in_numbers_and_say_so() -> None:
    sys.path.insert(0, str(Path(__file__).parent.parent / "exact"))
    try:
        from big_stages import bipolar_opamp
    finally:
        sys.path.pop(0)
    stage = bipolar_opamp(with_rx=True)
    start = time.monotonic()
    found = judged(stage, "gain.dc = -gm16*RL")
    assert time.monotonic() - start < 30
    assert found.exact is not None
    assert found.error == pytest.approx(found.claimed / found.exact - 1, rel=1e-9)
    assert found.conditions == ()
    assert any("not written out" in remark for remark in found.remarks), found.remarks
