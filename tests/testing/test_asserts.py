"""Assertions about formulas: they hold where they should, fail where they should, and say something useful."""

from __future__ import annotations

import re

import pytest
import sympy
from held_stages import CASCODE, COMMON_EMITTER, COMMON_SOURCE, common_source, stage_of
from hypothesis import given, settings
from hypothesis import strategies as st

import symamp
from symamp.errors import ReadError, StageError
from symamp.formula import Node, write
from symamp.formula_tree import Binary, Name, Number, Parallel
from symamp.testing import (
    assert_claim_holds,
    assert_derivation,
    assert_equal_expressions,
    bias_points,
)
from symamp.testing.searching import simplest

amplifier = common_source()
front = symamp.Stage(amplifier)
emitter = stage_of(COMMON_EMITTER)
equal_gm = stage_of(CASCODE)  # gm1 = gm2 at the bias point

# Text-book results for these stages: Gray, Hurst, Lewis and Meyer, "Analysis and Design of Analog Integrated
# Circuits", on single-transistor stages and the cascode (from memory).
TRUE = [
    (amplifier, "gain.dc", "-gm1*(ro1 || RL)"),
    (amplifier, "gain.dc", "-gm1/(gds1 + 1/RL)"),
    (amplifier, "gain", "-gm1*RL/(1 + gds1*RL + s*CL*RL)"),
    (amplifier, "gain.p1", "-1/((ro1 || RL)*CL)"),
    (amplifier, "gain.p1.hz", "1/(2*pi*(ro1 || RL)*CL)"),
    (amplifier, "gain.bandwidth", "1/(2*pi*(ro1 || RL)*CL)"),
    (amplifier, "gain.gain_bandwidth", "gm1/(2*pi*CL)"),
    (amplifier, "gain.b1", "(ro1 || RL)*CL"),
    (amplifier, "rout.dc", "ro1 || RL"),
    (amplifier, "rout", "1/(gds1 + 1/RL + s*CL)"),
    (amplifier, "gain.hf", 0),
    (emitter, "gain.dc", "-beta1*(ro1 || RC)/(RS + rpi1)"),
    (equal_gm, "gain.dc", "-gm1*(gm2 + gmb2 + gds2)/(gds1*gds2)"),
]  # fmt: skip

# Mistakes that people make, and what a failure must say.
FALSE = [
    (amplifier, "gain.dc", "gm1*(ro1 || RL)", "by hand is -1 times exact; the sign is wrong"),
    (amplifier, "gain.dc", "-2*gm1*(ro1 || RL)", "by hand is 2 times exact"),
    (amplifier, "gain.dc", "-gm1*RL", "by hand/exact - 1 = gds1*RL"),
    (amplifier, "gain.p1.hz", "1/((ro1 || RL)*CL)", "by hand is 2*pi times exact"),
    (amplifier, "gain.p1", "1/((ro1 || RL)*CL)", "by hand is -1 times exact; the sign is wrong"),
    (amplifier, "gain.dc", "ro1", "ro1 is in ohm, and gain.dc is a pure number"),
    (amplifier, "rout.dc", "gds1 + 1/RL", "is in S, and rout.dc is in ohm"),
    (amplifier, "gain", "-gm1*RL/(1 + gds1*RL + 2*s*CL*RL)", "at the bias point and 1 MHz:"),
    (amplifier, "gain.hf", "1", "by hand: 1"),
    (equal_gm, "gain.dc", "-gm1*(gm2 + gds2)/(gds1*gds2)", "by hand/exact - 1 = -gmb2/(gm2 + gmb2 + gds2)"),
]  # fmt: skip


@pytest.mark.parametrize(("stage", "about", "formula"), TRUE)
def test_a_right_derivation_passes(stage: object, about: str, formula: object) -> None:
    assert_derivation(stage, about, formula)


@pytest.mark.parametrize(("stage", "about", "formula", "words"), FALSE)
def test_a_wrong_derivation_says_by_what(stage: object, about: str, formula: str, words: str) -> None:
    with pytest.raises(AssertionError, match=re.escape(words)):
        assert_derivation(stage, about, formula)


def test_a_failure_in_full() -> None:
    with pytest.raises(AssertionError) as failure:
        assert_derivation(equal_gm, "gain.dc", "-gm1*gm2*ro1*ro2")
    assert str(failure.value) == (
        "gain.dc is not what was derived by hand\n"
        "by hand: -gm1*gm2*ro1*ro2\n"
        "exact:   -gm1*(gm2 + gmb2 + gds2)/(gds1*gds2)\n"
        "by hand/exact - 1 = -(gmb2 + gds2)/(gm2 + gmb2 + gds2)\n"
        "  leading term -gmb2/gm2\n"
        "at the bias point:\n"
        "  by hand: −320\n"
        "  exact:   −388"
    )


def test_where_the_bias_hides_the_mistake_one_symbol_is_changed() -> None:
    """gm1 = gm2 at the bias point: squares of the wrong one are right there."""
    with pytest.raises(AssertionError) as failure:
        assert_derivation(equal_gm, "gain.dc", "-gm2*(gm2 + gmb2 + gds2)/(gds1*gds2)")
    assert "by hand is gm2/gm1 times exact" in str(failure.value)
    (where,) = re.findall(r"at the bias point but for (.*):", str(failure.value))
    assert re.fullmatch(r"gm[12] = \S+ m?S \(the stage file has 4 mS\)", where)


def test_a_mistake_that_no_corner_of_the_span_shows_is_found_outside() -> None:
    span = '\n[span]\ngm1 = ["4 mS", "4 mS"]\n'
    with pytest.raises(AssertionError, match="the bias point but for gm"):
        assert_derivation(stage_of(CASCODE + span), "gain.dc", "-gm2*(gm2 + gmb2 + gds2)/(gds1*gds2)")


def test_a_stage_without_a_bias_will_do() -> None:
    stage = stage_of(COMMON_SOURCE)
    assert_derivation(stage, "gain.dc", "-gm1*(ro1 || RL)")
    with pytest.raises(AssertionError, match=r"at gm1 = .*S, gds1 = .*, RL = .*ohm, CL = "):
        assert_derivation(stage, "gain.dc", "-gm1*RL")


def test_a_stage_may_be_a_path_or_the_front() -> None:
    assert_derivation(front, "gain.dc", "-gm1*(ro1 || RL)")
    with pytest.raises(StageError, match=r"42 is no stage; pass symamp\.load"):
        assert_derivation(42, "gain.dc", "-gm1*RL")


@pytest.mark.parametrize(
    ("about", "words"),
    [
        ("gian.dc", "there is no response 'gian'; .*gain"),
        ("gain.phase_margin", "gain.phase_margin has no formula; assert_claim_holds"),
        ("gain.dcc", "there is no quantity 'dcc'"),
    ],
)
def test_what_cannot_be_asked_says_why(about: str, words: str) -> None:
    with pytest.raises((StageError, ReadError), match=words):
        assert_derivation(amplifier, about, "1")


def test_a_mistake_in_a_formula_is_a_mistake_of_the_test() -> None:
    with pytest.raises(ReadError, match=r"gm7.*gm1"):
        assert_derivation(amplifier, "gain.dc", "-gm7*RL")
    with pytest.raises(ReadError, match="joins S with ohm"):
        assert_derivation(amplifier, "gain.dc", "-gm1*RL/(gds1 + RL)")


# Two expressions


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ("ro1 || RL", "RL/(1 + gds1*RL)"),
        ("sqrt(gm1*gds1)", "gm1*sqrt(gds1/gm1)"),
        ("abs(-gm1)", "gm1"),
        ("pi*gm1/pi", "gm1"),
        ("2 mS + gm1", "gm1 + 2 mS"),
        ("s*CL + gds1", "gds1*(1 + s*CL*ro1)"),
        (front.response("gain").quantity("dc"), "-gm1*(ro1 || RL)"),
        (front.response("gain").quantity("dc").formula, front.response("gain").quantity("dc")),
        (front.response("gain").numerator[0], "-gm1*RL"),  # type: ignore[index]
        (sympy.sqrt(sympy.Symbol("gm1") * sympy.Symbol("gds1")), "sqrt(gm1*gds1)"),
        (2, "1 + 1"),
    ],
)
def test_equal_expressions_pass(first: object, second: object) -> None:
    assert_equal_expressions(amplifier, first, second)


@pytest.mark.parametrize(
    ("first", "second", "words"),
    [
        ("ro1", "RL", "first is 1/(gds1*RL) times second"),
        ("gm1 + gds1", "gm1", "first/second - 1 = gds1/gm1"),
        ("sqrt(gm1*gds1)", "sqrt(2*gm1*gds1)", "927.9 µS"),
        ("sqrt(gm1**2 + gds1**2)", "gm1", "first:  4.105 mS"),
        ("gm1", "1.000000001*gm1", "4.100000004 mS"),
        ("gm1", "RL", "gm1 is in S, and RL is in ohm"),
        ("0", "1", "first:  0"),
        ("1", "0", "second: 0"),
        (sympy.Symbol("gm1") ** 2, "gm1*gds1", "first is gm1/gds1 times second"),
        ("1/(gm1 - gm1)", "2/(gm1 - gm1)", "no bias point was found"),
        ("abs(gm1 - gds1)", "gm1 - gds1", "the bias point but for gm1 = 200 uS"),
    ],
)
def test_unlike_expressions_fail(first: object, second: object, words: str) -> None:
    with pytest.raises(AssertionError, match=re.escape(words)):
        assert_equal_expressions(amplifier, first, second)


@pytest.mark.parametrize("wrong", [sympy.sin(sympy.Symbol("gm1")), object(), True, None])
def test_what_is_no_expression_is_refused(wrong: object) -> None:
    with pytest.raises((ReadError, StageError), match=r"write a formula|nothing that a formula holds"):
        assert_equal_expressions(amplifier, wrong, "gm1")


leaves = st.sampled_from(["gm1", "gds1"]).map(Name)
trees = st.recursive(
    leaves,
    lambda below: (
        st.builds(Binary, st.just("+"), below, below)
        | st.builds(Parallel, below, below)
        | st.builds(lambda a: Binary("*", a, Number(2)), below)
    ),
    max_leaves=8,
)


@settings(max_examples=60, deadline=None)
@given(trees, trees)
def test_the_verdict_is_that_of_sympy(first: Node, second: Node) -> None:
    """Equality by SymPy's own simplification, from the same trees."""
    alike = sympy.simplify(by_sympy(first) - by_sympy(second)) == 0
    if alike:
        assert_equal_expressions(amplifier, first, second)
    else:
        with pytest.raises(AssertionError, match="at the bias point"):
            assert_equal_expressions(amplifier, write(first), second)


def by_sympy(node: Node) -> sympy.Expr:
    if isinstance(node, Name):
        return sympy.Symbol(node.text, positive=True)
    if isinstance(node, Number):
        return sympy.Integer(int(node.value))
    assert isinstance(node, Binary | Parallel)
    a, b = by_sympy(node.a), by_sympy(node.b)
    if isinstance(node, Parallel):
        return 1 / (1 / a + 1 / b)
    return a + b if node.op == "+" else a * b


# Claims


def test_a_claim_that_holds_passes() -> None:
    assert_claim_holds(front, "gain.dc", "-gm1*RL/(1 + gds1*RL)", within="0.1 %")
    assert_claim_holds(amplifier, "gain.p1.hz", "1/(2*pi*(ro1 || RL)*CL)")


def test_a_claim_that_fails_says_where_and_what_it_takes_to_be_small() -> None:
    with pytest.raises(AssertionError) as failure:
        assert_claim_holds(amplifier, "gain.dc", "-gm1*RL", within="30 %")
    text = str(failure.value)
    assert "holds here: +25.2 % at the bias point" in text
    assert "+120 %" in text  # gds1*RL = 1 mS · 1.2 kΩ at the corner
    assert "it takes to be small" in text
    assert "gds1·RL" in text
    assert "proved" in text


def test_a_claim_that_means_nothing_names_no_option_of_the_command() -> None:
    with pytest.raises(ReadError) as failure:
        assert_claim_holds(amplifier, "gain.dc", "-gm7*RL")
    assert "--claim" not in str(failure.value)
    assert "gm7" in str(failure.value)


def test_inside_a_hypothesis_test_too() -> None:
    """The search for a counterexample is our own, so it may run inside another one's."""

    @settings(max_examples=5, database=None)
    @given(bias_points(amplifier))
    def run(point: object) -> None:
        with pytest.raises(AssertionError, match="by hand is 2 times exact"):
            assert_derivation(amplifier, "gain.dc", "-2*gm1*(ro1 || RL)")

    run()


# The search


def test_the_search_takes_back_what_does_not_matter() -> None:
    found = simplest(
        lambda pick: [pick(range(20)) for _ in range(6)], lambda values: values[2] * values[4] >= 50
    )
    assert found is not None
    assert [k for k, value in enumerate(found) if value] == [2, 4]
    assert found[2] * found[4] < 60


def test_the_search_gives_up() -> None:
    assert simplest(lambda pick: pick(range(5)), lambda value: value > 7) is None


def test_the_search_minds_choices_that_hang_on_others() -> None:
    found = simplest(lambda pick: [pick(range(3)) for _ in range(pick((1, 2, 5)))], lambda v: sum(v) >= 9)
    assert found == [2, 2, 2, 2, 2] or (found is not None and sum(found) == 9)


# What the search and the comparison stand on


def test_latex_is_read_as_people_paste_it() -> None:
    assert_derivation(amplifier, "gain.dc", r"-g_{m1} (r_{o1} \parallel R_L)")
    assert_derivation(amplifier, "gain", r"-\frac{g_{m1} R_L}{1 + g_{ds1} R_L + s C_L R_L}")
    with pytest.raises(AssertionError, match="by hand is 2 times exact"):
        assert_derivation(amplifier, "gain.dc", r"-2 g_{m1} (r_{o1} \parallel R_L)")


def test_an_unknown_symbol_beside_s_is_pointed_at() -> None:
    with pytest.raises(ReadError, match=r"(?s)RX.*RL.*\^"):
        assert_derivation(amplifier, "gain", "-gm1*RX/(1 + s*CL*RL)")
