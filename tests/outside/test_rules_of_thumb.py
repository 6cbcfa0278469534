"""Rules of thumb with their numbers, as claims and frontiers: two real poles, phase margin, dropped terms.

The table "Two real poles p2 = k·p1, no zeros" is computed in the collection from the standard rule (Gray, Hurst, Lewis
& Meyer 5e, 7.3.1), as are its phase margins; "drop a term when its ratio exceeds 10" is common practice.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.frontier import ClaimFrontier, make_frontiers
from symamp.judge.verdict import Judged

KS = (1, 2, 4, 5, 8, 10, 20, 50, 100)
P1 = 1e6  # rad/s


def two_sections(k: float) -> Stage:
    """Two RC sections with a unity buffer between: p1 = −1/(R1·C1), p2 = −1/(R2·C2) = k·p1."""
    return parse_stage(
        f"""
        resistor.R1 = ["in", "a"]
        resistor.R2 = ["b", "out"]
        capacitor.C1 = ["a", "gnd"]
        capacitor.C2 = ["out", "gnd"]
        vcvs.E1 = {{ out = ["b", "gnd"], control = ["a", "gnd"] }}
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        bias = {{ R1 = 1e3, C1 = {1e-3 / P1!r}, R2 = 1e3, C2 = {1e-3 / P1 / k!r}, E1 = 1 }}
        """.encode(),
        file=None,
        folder=Path(),
    )


def judged(stage: Stage, claim: str, within: str = "10 %") -> Judged:
    claims = [claim_of(stage, claim, within)]
    return make_check(stage, claims=claims, prove=False, points=16).claims[0]


def frontier(stage: Stage, claim: str, within: str) -> ClaimFrontier:
    return make_frontiers(stage, [claim_of(stage, claim, within)])[0]


B1, B2 = "(R1*C1 + R2*C2)", "(R1*C1*R2*C2)"
# Claim -> percent as printed, and to how many of a percent it is rounded.
PRINTED = {
    "gain.bandwidth = 1/(2*pi*R1*C1)": ("+55", "+19", "+5.8", "+3.8", "+1.5", "+1.0", "+0.2", "0", "0"),
    f"gain.bandwidth = 1/(2*pi*{B1})": (
        "-22", "-20", "-15", "-13.5", "-9.8", "-8.2", "-4.5", "-1.9", "-1.0",
    ),
    f"gain.p1 = -1/{B1}": ("-50", "-33", "-20", "-17", "-11", "-9.1", "-4.8", "-2.0", "-1.0"),
    f"gain.p2 = -{B1}/{B2}": ("+100", "+50", "+25", "+20", "+12.5", "+10", "+5", "+2", "+1"),
    "gain.bandwidth = 1/(2*pi*sqrt((R1*C1)^2 + (R2*C2)^2))": ("+9.9", "+6.8", "+2.6", "+1.8", "+0.7", "+0.5"),
}  # fmt: skip


def half_of_last(printed: str) -> float:
    """Half a unit of the last digit of a printed number."""
    return 0.5 * 10.0 ** -len(printed.partition(".")[2])


# What the table has rounded up at exactly half: e.g. −2.0 is −1.96; none lies outside by more than its last half.
@pytest.mark.parametrize(
    ("claim", "k", "printed"),
    [
        (claim, k, text)
        for claim, row in PRINTED.items()
        for k, text in zip(KS if len(row) == len(KS) else (1, 2, 4, 5, 8, 10), row, strict=True)
    ],
)
def test_table_of_two_real_poles(claim: str, k: int, printed: str) -> None:
    found = judged(two_sections(k), claim)
    assert found.error is not None
    assert 100 * found.error == pytest.approx(float(printed), abs=half_of_last(printed) + 1e-6)


@pytest.mark.parametrize("k", [1.0, *KS[1:], 1.3, 37.0])
def test_errors_of_the_poles_are_closed(k: float) -> None:
    """−1/(1 + k) and 1/k exactly; at k = 1 the roots are double, and half the digits are lost."""
    stage = two_sections(k)
    near = {"rel": 1e-9} if k > 1 else {"abs": 1e-7}
    assert judged(stage, f"gain.p1 = -1/{B1}").error == pytest.approx(-1 / (1 + k), **near)
    assert judged(stage, f"gain.p2 = -{B1}/{B2}").error == pytest.approx(1 / k, **near)


def test_n_equal_poles() -> None:
    """ω = p·√(√2 − 1) = 0.644·p of two; 1/b1 then reads 22 % low (GM 7.3.3)."""
    stage = two_sections(1)
    right = judged(stage, "gain.bandwidth = sqrt(sqrt(2) - 1)/(2*pi*R1*C1)", "0.001 %")
    assert right.verdict == "holds"
    assert abs(right.error) < 1e-9
    low = judged(stage, "gain.bandwidth = 1/(4*pi*R1*C1)")
    assert low.error == pytest.approx(0.5 / math.sqrt(math.sqrt(2) - 1) - 1, rel=1e-9)


@pytest.mark.parametrize("k", [2, 9, 30])
def test_frontier_of_the_dominant_pole(k: float) -> None:
    """p1 as 1/b1 leaves R2·C2/(R1·C1) = 1/k over: −1/(1 + k) is −10 % at k = 9."""
    (limit,) = frontier(two_sections(k), f"gain.p1 = -1/{B1}", "10 %").limits
    assert limit.at_bias == pytest.approx(1 / k, rel=1e-12)
    assert limit.alone == pytest.approx(1 / 9, rel=1e-12)
    assert limit.limit == pytest.approx(1 / 9, rel=1e-12)
    assert limit.formula == "R1*C1/(R2*C2) >= 9"


@pytest.mark.parametrize(
    ("within", "k"), [("20 %", 4), ("10 %", 9), ("1 %", 99), ("33.333333333333336 %", 2)]
)
def test_frontier_put_back(within: str, k: float) -> None:
    """C2 moved until its ratio is at the frontier gives a stage whose error is `within`, poles solved anew."""
    (limit,) = frontier(two_sections(1000), f"gain.p1 = -1/{B1}", within).limits
    assert limit.limit == pytest.approx(1 / k, rel=1e-8)
    moved = judged(two_sections(1 / limit.limit), f"gain.p1 = -1/{B1}", within)
    assert abs(moved.error) == pytest.approx(float(within.split()[0]) / 100, abs=1e-6)


def ladder(c2: float) -> Stage:
    """The two sections with no buffer: b1 = R1·C1 + R1·C2 + R2·C2, b2 = R1·C1·R2·C2, and the poles are no ratios."""
    return parse_stage(
        f"""
        resistor.R1 = ["in", "a"]
        resistor.R2 = ["a", "out"]
        capacitor.C1 = ["a", "gnd"]
        capacitor.C2 = ["out", "gnd"]
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        bias = {{ R1 = 1e3, C1 = 1e-9, R2 = 2e3, C2 = {c2!r} }}
        """.encode(),
        file=None,
        folder=Path(),
    )


@pytest.mark.parametrize("within", [1, 5, 10])
def test_frontier_of_coupled_sections_put_back(within: int) -> None:
    """p1 as 1/b1 leaves b2/b1² over, which may be w(1 − w): 1 − x + r·x² = 0 at x = 1/(1 − w)."""
    claim = "gain.p1 = -1/(R1*C1 + R1*C2 + R2*C2)"
    (limit,) = frontier(ladder(1e-9), claim, f"{within} %").limits
    w = within / 100
    assert limit.limit == pytest.approx(w * (1 - w), rel=1e-9)

    def ratio(c2: float) -> float:
        return 1e-6 * 2e3 * c2 / (1e-6 + 3e3 * c2) ** 2

    low, high = 1e-15, 1e-10
    for _ in range(200):
        middle = math.sqrt(low * high)
        low, high = (middle, high) if ratio(middle) < limit.limit else (low, middle)
    one, two = 1e-6 + 3e3 * low, 1e-6 * 2e3 * low
    smaller = 2 / (one + math.sqrt(one**2 - 4 * two))
    assert 1 / one / smaller - 1 == pytest.approx(-w, abs=1e-9)  # the quadratic by hand
    assert judged(ladder(low), claim, f"{within} %").error == pytest.approx(-w, abs=1e-6)


def test_dominant_pole_is_the_larger_time_constant() -> None:
    """p1 as 1/(R1·C1) is exact, and as 1/(R2·C2) it is the other pole, which the answer names."""
    stage = two_sections(10)
    assert judged(stage, "gain.p1 = -1/(R1*C1)").verdict == "holds"
    other = judged(stage, "gain.p1 = -1/(R2*C2)")
    assert other.root == "p2"


def with_margin(r: float, z: float = 0.0) -> Stage:
    """An integrator gm1/(s·CC) after which one pole at p2 = r·GB follows, and a right half plane zero at z·GB.

    A load R1 of the integrator of 1 Gohm makes p1 = GB/10⁶.
    """
    gm, cc = 1e-3, 1e-12
    gb = gm / cc
    r2 = 1e3
    zero = (
        'capacitor.CZ = ["b", "out"]\nvccs.G2 = { out = ["out", "gnd"], control = ["b", "gnd"] }\n'
        if z
        else ""
    )
    if z:  # second stage as a common source: gm2 = G2, zero at G2/CZ, pole at 1/(R2·(CZ + C2))
        second = zero + 'resistor.R2 = ["out", "gnd"]\ncapacitor.C2 = ["out", "gnd"]\n'
        g2, cz = 1 / r2, 1 / r2 / (z * gb)
        values = f"G2 = {g2!r}, R2 = {r2}, CZ = {cz!r}, C2 = {1 / (r2 * r * gb) - cz!r}"
    else:
        second = 'resistor.R2 = ["b", "out"]\ncapacitor.C2 = ["out", "gnd"]\n'
        values = f"R2 = {r2}, C2 = {1 / (r2 * r * gb)!r}"
    return parse_stage(
        f"""
vccs.G1 = {{ out = ["gnd", "a"], control = ["in", "gnd"] }}
resistor.R1 = ["a", "gnd"]
capacitor.CC = ["a", "gnd"]
vcvs.E1 = {{ out = ["b", "gnd"], control = ["a", "gnd"] }}
voltage_source.VIN = ["in", "gnd"]
{second}
response.gain = {{ from = "VIN", to = "out" }}
bias = {{ G1 = {gm}, R1 = 1e9, CC = {cc}, E1 = {-1 if z else 1}, {values} }}
""".encode(),
        file=None,
        folder=Path(),
    )


MARGINS = ((1, 45, 51.8), (1.73, 60, 62.8), (2, 63.4, 65.5), (2.2, 65.6, 67.3), (3, 71.6, 72.4))


@pytest.mark.parametrize(("r", "naive", "true"), MARGINS)
def test_phase_margin_against_the_naive_one(r: float, naive: float, true: float) -> None:
    """90° − atan(1/r) is low, for |T| = 1 moves below GB; both as printed."""
    assert 90 - math.degrees(math.atan(1 / r)) == pytest.approx(naive, abs=0.06)
    found = judged(with_margin(r), f"gain.phase_margin = {naive} deg", "1 deg")
    assert found.exact == pytest.approx(true, abs=0.06)
    assert found.error == pytest.approx(naive - true, abs=0.12)
    assert found.verdict == ("holds" if r > 2.5 else "fails")


def test_phase_margin_with_a_zero_at_ten_times_gb() -> None:
    """p2 ≥ 2.2·GB and z ≥ 10·GB for 60° (AH, from memory): 59.8° naive, 62.0° true.

    The 62.0° counts the zero's phase and not its magnitude; with both it is 61.9°, by
    ω²(1 + ω²/2.2²) = 1 + ω²/10² in units of GB.
    """
    naive = 90 - math.degrees(math.atan(1 / 2.2)) - math.degrees(math.atan(0.1))
    assert naive == pytest.approx(59.8, abs=0.06)
    found = judged(with_margin(2.2, 10), "gain.phase_margin = 60 deg", "2.5 deg")
    u = (-0.99 + math.sqrt(0.99**2 + 4 / 2.2**2)) * 2.2**2 / 2
    by_hand = 90 - math.degrees(math.atan(math.sqrt(u) / 2.2) + math.atan(math.sqrt(u) / 10))
    assert found.exact == pytest.approx(by_hand, abs=1e-3)
    assert found.exact == pytest.approx(62.0, abs=0.12)
    assert found.verdict == "holds"


def divider(ratio: float) -> Stage:
    """1/(1 + RA/RB) with RA/RB = `ratio`."""
    return parse_stage(
        f"""
        resistor.RA = ["in", "out"]
        resistor.RB = ["out", "gnd"]
        voltage_source.VIN = ["in", "gnd"]
        response.gain = {{ from = "VIN", to = "out" }}
        response.zin = {{ looking_into = "VIN" }}
        bias = {{ RA = {1e3 * ratio!r}, RB = 1e3 }}
        """.encode(),
        file=None,
        folder=Path(),
    )


@pytest.mark.parametrize("n", [1, 5, 9, 10, 19, 100])
def test_dropping_a_term_one_over_n(n: float) -> None:
    """A dropped term of 1/n costs 1/n where it was below and 1/(1 + n) where above ("drop a term when ratio > 10")."""
    stage = divider(1 / n)
    assert judged(stage, "gain.dc = 1").error == pytest.approx(1 / n, rel=1e-12)
    assert judged(stage, "zin.dc = RB").error == pytest.approx(-1 / (1 + n), rel=1e-12)


@pytest.mark.parametrize(
    ("within", "below", "above"), [("10 %", "10", "9"), ("5 %", "20", "19"), ("1 %", "100", "99")]
)
def test_frontier_of_one_over_one_plus_k(within: str, below: str, above: str) -> None:
    """1/n ≤ w gives n ≥ 1/w, 1/(1 + n) ≤ w gives n ≥ 1/w − 1: in closed form, whole numbers."""
    stage = divider(0.01)
    assert [limit.formula for limit in frontier(stage, "gain.dc = 1", within).limits] == [f"RB/RA >= {below}"]
    assert [limit.formula for limit in frontier(stage, "zin.dc = RB", within).limits] == [f"RB/RA >= {above}"]
