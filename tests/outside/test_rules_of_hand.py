"""Rules of thumb of single stages, as claims: degeneration, cascodes, body effect, Miller's theorem, mirror doublets.

From the collection of closed forms, whose numbers stand beside each; "hand targets" and the range of gmb/gm are common
practice there, (mem) marks what it recalls from memory. What is expected is worked out in floats from the closed form.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.frontier import make_frontiers
from symamp.judge.verdict import Judged


def stage_of(text: str) -> Stage:
    return parse_stage(text.encode(), file=None, folder=Path())


def judged(stage: Stage, claim: str, within: str = "10 %") -> Judged:
    claims = [claim_of(stage, claim, within)]
    return make_check(stage, claims=claims, prove=False, points=16).claims[0]


def degenerated(gm_re: float, *, go: float = 0.0) -> Stage:
    """A transistor of 40 mS with beta = 200 and RE = gm_re/gm in its emitter, driven by a source of no resistance."""
    re = gm_re / 40e-3
    given = f"gm = 40e-3, gpi = 0.2e-3, go = {go!r}" if go else "gm = 40e-3, gpi = 0.2e-3"
    return stage_of(
        f"""
        bjt.Q1 = {{ base = "in", collector = "out", emitter = "e" }}
        resistor.RE = ["e", "gnd"]
        resistor.RC = ["out", "gnd"]
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        bias = {{ Q1 = {{ {given} }}, RE = {re!r}, RC = 5e3 }}
        """
    )


@pytest.mark.parametrize("gm_re", [1, 5, 9, 10.1, 20, 33, 100])
def test_degeneration_of_ten_for_ten_percent(gm_re: float) -> None:
    """ "gm·RE > 10 for A = −RC/RE within 10 %": with ideal drive it is too large by 1/(gm·RE) + 1/beta."""
    found = judged(degenerated(gm_re), "gain.dc = -RC/RE", "10.5 %")
    assert found.error == pytest.approx(1 / gm_re + 1 / 200, rel=1e-9)
    assert found.verdict == ("holds" if gm_re > 10 else "fails")
    assert {c.ratio.text() for c in found.conditions} == {"1/(gm1*RE)", "gpi1/gm1"}
    (limits,) = make_frontiers(degenerated(gm_re), [found.claim])
    by_ratio = {limit.ratio.text(): limit for limit in limits.limits}
    assert by_ratio["1/(gm1*RE)"].limit == pytest.approx(0.105 - 1 / 200, rel=1e-9)  # gm·RE ≥ 10


@pytest.mark.parametrize("intrinsic", [10, 20, 25, 50])
def test_cascode_resistance_exceeds_gm_ro_squared(intrinsic: float) -> None:
    """Rout = 2ro + gm·ro² of equal devices "exceeds gm·ro² by 2/(gm·ro)": 8 % at gm·ro = 25 (CAS12)."""
    gm = 2e-3
    stage = stage_of(
        f"""
        mosfet.M1 = {{ gate = "gnd", drain = "x", source = "gnd" }}
        mosfet.M2 = {{ gate = "gnd", drain = "out", source = "x", body = "x" }}
        response.rout = {{ looking_into = "out" }}
        [bias]
        M1 = {{ gm = {gm}, gds = {gm / intrinsic!r} }}
        M2 = {{ gm = {gm}, gds = {gm / intrinsic!r} }}
        """
    )
    found = judged(stage, "rout.dc = gm2*ro1*ro2")
    assert 1 / (1 + found.error) - 1 == pytest.approx(2 / intrinsic, rel=1e-9)
    assert found.verdict == ("holds" if intrinsic > 18 else "fails")  # −2/(gm·ro + 2) within 10 % from 18 on
    assert {c.ratio.text() for c in found.conditions} == {"gds1/gm2", "gds2/gm2"}


@pytest.mark.parametrize("fraction", [0.1, 0.2, 0.25, 0.3])
def test_body_effect_costs_its_fraction_in_a_follower(fraction: float) -> None:
    """ "gmb/gm = 0.1-0.3 ... costs about that fraction in gain and Rout": exactly, of claims without gmb."""
    stage = stage_of(
        f"""
        mosfet.M1 = {{ gate = "in", drain = "gnd", source = "out" }}
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        response.rout = {{ looking_into = "out" }}
        [bias]
        M1 = {{ gm = 2e-3, gmb = {2e-3 * fraction!r}, gds = 1e-9 }}
        """
    )
    for claim in ("gain.dc = 1", "rout.dc = 1/gm1"):
        found = judged(stage, claim)
        assert found.error == pytest.approx(fraction, rel=1e-4)
        assert found.verdict == ("holds" if fraction < 0.1 - 1e-6 else "fails")


def common_source(rs: float, rl: float, cl: float) -> Stage:
    """gm = 5 mS, cgs = 0.4 pF, cgd = 0.1 pF."""
    return stage_of(
        f"""
        mosfet.M1 = {{ gate = "g", drain = "out", source = "gnd" }}
        resistor.RS = ["in", "g"]
        resistor.RL = ["out", "gnd"]
        capacitor.CL = ["out", "gnd"]
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        bias = {{ M1 = {{ gm = 5e-3, cgs = 0.4e-12, cgd = 0.1e-12 }}, RS = {rs!r}, RL = {rl!r}, CL = {cl!r} }}
        """
    )


def coefficients(rs: float, rl: float, cl: float) -> tuple[float, float, float]:
    """Miller's input time constant, b1, b2 by hand (GM (7.33))."""
    miller = rs * (0.4e-12 + 0.1e-12 * (1 + 5e-3 * rl))
    rest = rl * (0.1e-12 + cl)
    return miller, miller + rest, rs * rl * (0.4e-12 * 0.1e-12 + 0.5e-12 * cl)


MILLER = "1/(2*pi*RS*(cgs1 + cgd1*(1 + gm1*RL)))"


@pytest.mark.parametrize(
    ("rs", "rl", "cl", "trusted"),
    [
        (20e3, 4e3, 1e-15, True),  # RL(cgd + CL) is below 5 % of b1, RS·gm = 100
        (100e3, 10e3, 0.1e-12, True),
        (20e3, 4e3, 3e-12, False),  # a load that is not small
        (2e3, 4e3, 0.3e-12, False),  # a drive of low resistance
    ],
)
def test_trust_in_miller(rs: float, rl: float, cl: float, trusted: bool) -> None:
    """ "Input-node Miller is within ~5 % when RL(Cgd+CL) < ~5 % of b1 and Rsig·gm >> 1 ... else 20-60 % off"."""
    miller, one, two = coefficients(rs, rl, cl)
    assert (rl * (0.1e-12 + cl) < 0.05 * one and rs * 5e-3 > 50) == trusted
    stage = common_source(rs, rl, cl)
    pole = judged(stage, f"gain.p1.hz = {MILLER}", "5 %")
    exact = (one - math.sqrt(one**2 - 4 * two)) / (2 * two)
    assert pole.error == pytest.approx(1 / (miller * exact) - 1, rel=1e-8)
    assert pole.verdict == ("holds" if trusted else "fails")
    band = judged(stage, f"gain.bandwidth = {MILLER}", "5 %")
    assert band.verdict == pole.verdict
    if not trusted:
        assert abs(band.error) > 0.2


def test_the_pole_of_the_output_node_is_no_p2_once_poles_split() -> None:
    """ "The output Miller pole is always wrong as p2 once poles split (CS9, CE9: 2x and 14x low)": at least twice."""
    rs, rl, cl = 20e3, 4e3, 0.7e-12
    _, one, two = coefficients(rs, rl, cl)
    exact = (one + math.sqrt(one**2 - 4 * two)) / (2 * two)
    found = judged(common_source(rs, rl, cl), "gain.p2.magnitude = 1/(RL*(cgd1 + CL))", "50 %")
    assert found.error == pytest.approx(1 / (rl * 0.8e-12) / exact - 1, rel=1e-8)
    assert found.error < -0.5
    assert found.verdict == "fails"


@pytest.mark.parametrize(("over", "loss"), [(math.sqrt(2), 19.5), (0.1, 2.8)])
def test_mirror_doublet(over: float, loss: float) -> None:
    """Pole p and zero 2p: the phase lost is atan(f/p) − atan(f/2p), "at most 19.5 deg at f = 1.41 fp; 2.8 at fp/10"."""
    hz = 1e6
    r = 1 / (2 * math.pi * hz * 1e-9)
    # R1 = R2 makes a response with its zero at twice its pole: (R2 + 1/sC) over (R1 + R2 + 1/sC)
    stage = stage_of(
        f"""
        resistor.R1 = ["in", "out"]
        resistor.R2 = ["out", "a"]
        capacitor.C1 = ["a", "gnd"]
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        bias = {{ R1 = {r / 2!r}, R2 = {r / 2!r}, C1 = 1e-9 }}
        """
    )
    assert judged(stage, "gain.z1 = -1/(R2*C1)", "0.001 %").verdict == "holds"
    half = judged(stage, "gain.p1 = -1/(2*R2*C1)", "0.001 %")
    assert half.verdict == "wrong"  # right only while R1 and R2, two symbols, are equal
    assert half.why == "R1 and R2 would have to be equal, and R1/R2 is 1"
    found = judged(stage, f"gain.at({over * hz:.6f} Hz).deg = -{loss} deg", "0.1 deg")
    assert found.verdict == "holds"
    assert found.exact == pytest.approx(-math.degrees(math.atan(over) - math.atan(over / 2)), abs=1e-4)
