"""Frontiers: closed forms by hand, limits with the others at the bias point, what has none and why.

For a ratio r left over below, the error is r: it reaches w at r = w. For one above, −r/(1 + r): at r = w/(1 − w).
"""

from __future__ import annotations

import cmath

import pytest
from judged import CASCODE, COMMON_SOURCE, stage_of

from symamp.judge.claim_reading import claim_of
from symamp.judge.frontier import NOT_ALONE, OTHERS_EXCEED, ClaimFrontier, Limit, make_frontiers


def frontier(text: str, claim: str, within: str = "10 %") -> ClaimFrontier:
    stage = stage_of(text)
    (found,) = make_frontiers(stage, [claim_of(stage, claim, within)])
    return found


def limits(text: str, claim: str, within: str = "10 %") -> dict[str, Limit]:
    return {limit.ratio.text(): limit for limit in frontier(text, claim, within).limits}


@pytest.mark.parametrize(
    ("within", "least"), [("5 %", "19"), ("10 %", "9"), ("1 %", "99"), ("20 %", "4"), ("50 %", "1")]
)
def test_the_worked_case_alone(within: str, least: str) -> None:
    """−gm1·gm2·ro1·ro2 within 5 %: gm2/gds2 ≥ 19, gm2/gmb2 ≥ 19."""
    found = limits(CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", within)
    assert found["gds2/gm2"].formula == f"gm2/gds2 >= {least}"
    assert found["gmb2/gm2"].formula == f"gm2/gmb2 >= {least}"
    assert found["gds2/gm2"].least == float(least)
    assert found["gds2/gm2"].alone == pytest.approx(1 / float(least), rel=1e-12)


def test_with_the_others_at_the_bias_point() -> None:
    """−(a + b)/(1 + a + b) = −w at a = w/(1 − w) − b, where b alone keeps within w; else there is none."""
    at = {"gmb2/gm2": 0.62 / 3.9, "gds2/gm2": 0.24 / 3.9}
    found = limits(CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", "25 %")
    for ratio, other in (("gmb2/gm2", "gds2/gm2"), ("gds2/gm2", "gmb2/gm2")):
        assert found[ratio].at_bias == pytest.approx(at[ratio])
        assert found[ratio].limit == pytest.approx(1 / 3 - at[other], rel=1e-9)
        assert found[ratio].margin == pytest.approx((1 / 3 - at[other]) / at[ratio], rel=1e-9)
        assert found[ratio].why == ""
    narrow = limits(CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", "10 %")
    assert narrow["gds2/gm2"].limit is None
    assert narrow["gds2/gm2"].why == OTHERS_EXCEED  # gmb2/gm2 makes −13.7 % alone
    assert narrow["gmb2/gm2"].limit == pytest.approx(1 / 9 - at["gds2/gm2"], rel=1e-9)


def test_most_harmful_first() -> None:
    found = frontier(CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", "25 %")
    assert [limit.ratio.text() for limit in found.limits] == ["gmb2/gm2", "gds2/gm2"]


def test_left_over_below() -> None:
    """p1 as −1/(gm2·ro1·ro2·CL) is too large by the sum of its ratios: each reaches 10 % at 1/10."""
    found = limits(CASCODE, "gain.p1 = -1/(gm2*ro1*ro2*CL)", "10 %")
    assert {limit.formula for limit in found.values()} == {
        "gm2/gmb2 >= 10",
        "gm2/gds2 >= 10",
        "gm2/gds1 >= 10",
    }


def test_several_terms_in_common() -> None:
    """gds2/(gm2 + gmb2) at 1/19, written of the ratio turned over."""
    found = limits(CASCODE, "gain.dc = -gm1*(gm2 + gmb2)*ro1*ro2", "5 %")
    (limit,) = found.values()
    assert limit.alone == pytest.approx(1 / 19)
    assert limit.limit == pytest.approx(1 / 19)
    assert limit.formula is not None
    assert limit.formula.endswith(">= 19")
    assert {"gm2", "gmb2", "gds2"} <= set(
        limit.formula.replace("(", " ").replace(")", " ").replace("/", " ").split()
    )


def test_a_bound_of_a_hundred_percent_and_more() -> None:
    """A claim that is too small never is so by 100 %."""
    for within in ("100 %", "200 %"):
        found = limits(CASCODE, "gain.dc = -gm1*gm2*ro1*ro2", within)
        for limit in found.values():
            assert limit.alone is None
            assert "however large" in limit.why_alone
            assert limit.formula is None
            assert limit.limit is None


def test_a_ratio_with_a_minus_sign() -> None:
    """z1 of a common source with RZ in series with its feedback capacitor, as gm/C: −gm·RZ is left over below."""
    text = """
vccs.G1 = { out = ["out", "gnd"], control = ["a", "gnd"] }
resistor.RZ = ["a", "z"]
capacitor.CF = ["z", "out"]
resistor.RL = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
resistor.RS = ["in", "a"]
response.gain = { from = "VIN", to = "out" }
bias = { G1 = "1 mS", RZ = "50 ohm", CF = "1 pF", RL = "10 kohm", RS = "1 kohm" }
"""
    (limit,) = frontier(text, "gain.z1 = G1/CF", "10 %").limits
    assert limit.at_bias == pytest.approx(-0.05)  # z1 = G1/(CF(1 − G1·RZ)): the claim is low by G1·RZ
    assert limit.limit == pytest.approx(-0.1)
    assert limit.margin == pytest.approx(2)


def test_decibels() -> None:
    """1 dB low is a ratio of 10^(1/20): r = 10^(1/20) − 1 alone."""
    found = limits(CASCODE, "gain.dc.db = gm1*gm2*ro1*ro2", "1 dB")
    assert found["gds2/gm2"].alone == pytest.approx(10**0.05 - 1, rel=1e-9)


@pytest.mark.parametrize(
    ("claim", "words"),
    [
        ("gain.dc = -gm1*gm2*ro1", "the claim is wrong: the formula is in S"),
        ("gain.dc = gm1*gm2*ro1*ro2", "the claim is wrong: its sign is wrong"),
        ("gain.dc = -2*gm1*gm2*ro1*ro2", "factor of 2"),
        ("gain.dc = -gm1*(gm2 + gmb2 + gds2)*ro1*ro2", "nothing is left over"),
        ("gain.dc = -sqrt(gm1*gm2)*ro1*(gm2 + gmb2)*ro2", "root"),
    ],
)
def test_claims_without_a_frontier(claim: str, words: str) -> None:
    found = frontier(CASCODE, claim)
    assert found.limits == ()
    assert words in found.why


def test_a_band_of_several_poles_has_no_limits_of_its_own() -> None:
    """Its conditions are those of |p1|/2π, and the error is no function of them alone."""
    found = frontier(
        COMMON_SOURCE, "gain.bandwidth = 1/(2*pi*RS*(cgs1 + cgd1*(1 + gm1*(RL || ro1))))", "20 %"
    )
    assert found.limits
    for limit in found.limits:
        assert limit.limit is limit.alone is limit.formula is None
        assert limit.why == limit.why_alone == limit.why_formula == NOT_ALONE


def test_roots_of_a_quadratic() -> None:
    """p1 as −1/b1 leaves the terms of b2/b1² over, each of which may be w(1 − w) alone."""
    load = "(RL || ro1)"
    claim = f"gain.p1 = -1/(RS*(cgs1 + cgd1*(1 + gm1*{load})) + {load}*(cgd1 + CL))"
    found = frontier(COMMON_SOURCE, claim, "10 %")
    assert found.limits
    rest = {limit.ratio.text(): limit.at_bias for limit in found.limits}
    total = sum(rest.values())
    for limit in found.limits:
        assert limit.alone == pytest.approx(0.09, rel=1e-9)
        others = total - limit.at_bias
        if others < 0.09:
            assert limit.limit == pytest.approx(0.09 - others, rel=1e-9)
    r = 4e3 / 1.8
    one = 20e3 * (0.5e-12 + 0.1e-12 * 5e-3 * r) + r * 0.8e-12
    two = 20e3 * r * (0.4e-12 * 0.1e-12 + 0.5e-12 * 0.7e-12)
    assert total == pytest.approx(two / one**2, rel=1e-9)


# Two coupled RC sections: D = 1 + s·b1 + s²·b2. With p1 as −1/b1 and r = b2/b1², y = F/E is (1 + √(1 − 4r))/2.
LADDER = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "out"]
capacitor.C1 = ["a", "gnd"]
capacitor.C2 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { R1 = 1e3, R2 = 2e3, C1 = 1e-9, C2 = 1e-9 }
"""
ONE_OVER_B1 = "gain.p1 = -1/(R1*C1 + R1*C2 + R2*C2)"


@pytest.mark.parametrize(
    ("within", "ratio"),
    [
        (10, 0.09),  # w(1 − w) while the pole is real
        (40, 0.24),
        (49, 0.2499),
        (
            60,
            0.36,
        ),  # beyond r = 1/4 it is complex, and |y − 1| = √r: not 0.24, where y = 0.4 is the other pole's
        (90, 0.81),
        (120, 1.44),
    ],
)
def test_a_root_is_followed_where_it_becomes_complex(within: int, ratio: float) -> None:
    (limit,) = frontier(LADDER, ONE_OVER_B1, f"{within} %").limits
    assert limit.alone == pytest.approx(ratio, rel=1e-9)
    assert limit.limit == pytest.approx(ratio, rel=1e-9)
    if within < 50:
        assert limit.formula is not None
        assert limit.formula.endswith(f">= {1 / ratio:.4g}")
    else:
        assert limit.formula is None
        assert limit.why_formula == "the root is complex where its error reaches its bound"
    # the roots of 1 − x + r·x² by hand, the first pole's being the smaller x, the upper of a pair
    x = (1 - cmath.sqrt(1 - 4 * ratio)) / (2 * ratio)
    assert abs(1 / x - 1) == pytest.approx(within / 100, rel=1e-9)


DIVIDER = """
resistor.RA = ["in", "out"]
resistor.RB = ["out", "gnd"]
resistor.RC = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { RA = 1e3, RB = 300, RC = 1e3 }
"""


@pytest.mark.parametrize("within", [20, 50, 99, 100, 101, 150, 333, 400, 500])
def test_bounds_beyond_a_hundred_percent_with_the_others_there(within: int) -> None:
    """1 is too large by RA/RB + RA/RC = 10/3 + 1: one may be w less the other, if that is anything."""
    found = limits(DIVIDER, "gain.dc = 1", f"{within} %")
    w = within / 100
    for ratio, other in (("RA/RB", 1.0), ("RA/RC", 10 / 3)):
        assert found[ratio].alone == pytest.approx(w)
        if w - other > 1e-9:
            assert found[ratio].limit == pytest.approx(w - other, rel=1e-6)
            assert found[ratio].why == ""
        else:
            assert found[ratio].limit is None
            assert found[ratio].why == OTHERS_EXCEED


@pytest.mark.parametrize("within", [10, 99, 100, 150])
def test_a_claim_that_is_low_by_more_than_all_of_it(within: int) -> None:
    """z1 = G1/(CF(1 − G1·RZ)) as G1/CF is off by −G1·RZ: at 150 % the zero has changed sides."""
    text = """
vccs.G1 = { out = ["out", "gnd"], control = ["a", "gnd"] }
resistor.RZ = ["a", "z"]
capacitor.CF = ["z", "out"]
resistor.RL = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
resistor.RS = ["in", "a"]
response.gain = { from = "VIN", to = "out" }
bias = { G1 = "1 mS", RZ = "50 ohm", CF = "1 pF", RL = "10 kohm", RS = "1 kohm" }
"""
    (limit,) = frontier(text, "gain.z1 = G1/CF", f"{within} %").limits
    assert limit.limit == pytest.approx(-within / 100, rel=1e-9)
    assert limit.alone == pytest.approx(-within / 100, rel=1e-9)


def test_an_error_that_no_value_changes_has_no_frontier() -> None:
    """Equal sections: p1 is (3 − √5)/2 of 1/RC whatever R and C, and 1/3 is low by 12.7 %."""
    alike = (
        LADDER.replace("2e3", "1e3") + 'assumption = [{ name = "alike", set = { R2 = "R1", C2 = "C1" } }]\n'
    )
    found = frontier(alike, "gain.p1 = -1/(3*R1*C1)", "20 %")
    assert found.limits == ()
    assert found.why == "its error is the same whatever the values"
