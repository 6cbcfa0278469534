"""Frontiers: closed forms by hand, limits with the others at the bias point, what has none and why.

For a ratio r left over below, the error is r: it reaches w at r = w. For one above, −r/(1 + r): at r = w/(1 − w).
"""

from __future__ import annotations

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
