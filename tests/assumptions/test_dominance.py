"""Dominance: against a brute-force reference, by hand, and its account of what it drops."""

from __future__ import annotations

from fractions import Fraction
from time import perf_counter

import assumed_stages as stages
import numpy as np
import pytest
from flint import Ordering, fmpz_mpoly_ctx
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from symamp.assumptions import cone, generated
from symamp.assumptions.apply import Approximator
from symamp.assumptions.dominance import Terms, pool
from symamp.assumptions.merge import Contradiction
from symamp.assumptions.read import read_assumptions
from symamp.assumptions.record import Pair
from symamp.circuit.builder import StageBuilder
from symamp.exact.shape import polynomial_text

RING = fmpz_mpoly_ctx.get(("a", "b", "c", "d", "s"), Ordering.lex)
NAMES = ("a", "b", "c", "d", "e")  # e is in no polynomial: it only passes a vector on

monomials = st.tuples(*[st.integers(0, 2)] * 4)
powers = st.dictionaries(st.sampled_from(NAMES), st.integers(-2, 2).map(Fraction), max_size=2)
pairs = st.lists(st.builds(lambda x, y: Pair(x, y, "it"), powers, powers), min_size=1, max_size=4)


def reference(terms: list[tuple[int, ...]], vectors: list[dict[str, Fraction]]) -> set[int]:
    """The terms that stay: those whose difference to no other is a non-negative sum, each by a linear programme."""
    matrix = np.array([[float(v.get(name, 0)) for name in NAMES] for v in vectors]).T

    def falls(a: tuple[int, ...], b: tuple[int, ...]) -> bool:
        difference = np.array([x - y for x, y in zip(a, b, strict=True)] + [0.0])
        return linprog(np.ones(matrix.shape[1]), A_eq=matrix, b_eq=difference, method="highs").status == 0

    return {i for i, a in enumerate(terms) if not any(falls(a, b) for j, b in enumerate(terms) if i != j)}


@given(st.lists(monomials, min_size=1, max_size=9, unique=True), pairs)
@settings(max_examples=150, deadline=None)
def test_against_linear_programming(terms, drawn):
    try:
        dominance = pool(drawn)
    except Contradiction:
        return
    if dominance is None:
        assert not any(pair.difference for pair in drawn)
        return
    polynomial = RING.from_dict({(*exponents, 0): k + 1 for k, exponents in enumerate(terms)})
    table = Terms(polynomial)
    place = [terms.index(tuple(int(x) for x in m[:4])) for m in table.monomials]
    falls_to = dominance.judge(table)
    stays = {place[i] for i, to in enumerate(falls_to) if to == i}
    vectors = [pair.difference for pair in drawn if pair.difference]
    assert stays == reference(terms, vectors)
    for i, to in enumerate(falls_to):
        assert falls_to[to] == to, "a term falls to one that stays"
        if to != i:
            assert reference([terms[place[i]], terms[place[to]]], vectors) == {1}


@given(st.lists(monomials, min_size=2, max_size=9, unique=True), pairs, st.randoms())
@settings(max_examples=80, deadline=None)
def test_order_of_pairs_and_numeric_factors_do_not_matter(terms, drawn, random):
    try:
        dominance = pool(drawn)
    except Contradiction:
        return
    mixed = drawn[:]
    random.shuffle(mixed)
    other = pool(mixed)
    if dominance is None or other is None:
        assert dominance is other
        return
    judged = []
    for found, factor in ((dominance, 1), (other, -7)):
        table = Terms(RING.from_dict({(*e, 0): factor * (k + 1) for k, e in enumerate(terms)}))
        judged.append({table.monomials[to] for to in found.judge(table)})
    assert judged[0] == judged[1]


@given(pairs)
@settings(max_examples=150, deadline=None)
def test_a_contradiction_is_a_sum_of_zero(drawn):
    vectors = [pair.difference for pair in drawn if pair.difference]
    if not vectors:
        assert pool(drawn) is None
        return
    matrix = np.array([[float(v.get(name, 0)) for name in NAMES] for v in vectors]).T
    rows = np.vstack([matrix, np.ones(len(vectors))])
    zero = linprog(np.ones(len(vectors)), A_eq=rows, b_eq=[0] * len(NAMES) + [1], method="highs").status == 0
    if zero:
        with pytest.raises(Contradiction):
            pool(drawn)
    else:
        assert pool(drawn) is not None


# By hand, on stages


def dominated(b: StageBuilder, name: str = "gain", **assumption):
    made = stages.under(b, name, **assumption)
    assert made.response is not None
    return made


def test_the_gain_of_a_cascode():
    made = dominated(stages.cascode(), small="gds", against="gm")
    assert made.response.quantity("dc").text == "-gm1*(gm2 + gmb2)/(gds1*gds2)"


def test_body_effect_too():
    b = stages.cascode()
    b.assume("no body effect", small="gmb", against="gm")
    made = dominated(b, small="gds", against="gm")
    assert made.response.quantity("dc").text == "-gm1*gm2/(gds1*gds2)"
    b0, b1, _ = (set(text.split(" + ")) for text in stages.texts(made.response, "denominator"))
    assert (b0, b1) == ({"gds1*gds2"}, {"gm2*CL", "gds2*cgs2", "gds2*cdb1"})


def test_a_product_stays_where_nothing_outweighs_it():
    """gds1·gds2 of the cascode has nothing above it; in the node between, gm2 outweighs gds1 and gds2."""
    made = dominated(stages.cascode(), "rout", small="gds", against="gm")
    assert made.response.quantity("dc").text == "(gm2 + gmb2)/(gds1*gds2)"


def test_terms_of_which_nothing_was_said_stay():
    b = StageBuilder("two ways to ground")
    b.current_source("IIN", "gnd", "x")
    b.mosfet("M1", gate="gnd", drain="gnd", source="x", body="x", gm="1 mS", gds="10 uS")
    b.resistor("R1", "x", "gnd", "1 kohm")
    b.response("z", looking_into="x")
    made = dominated(b, "z", small="gds", against="gm")
    assert made.response.quantity("dc").text == "R1/(1 + gm1*R1)"


def test_one_against_a_product():
    b = stages.follower()
    made = dominated(b, small="1", against="gm1*RS")
    assert made.response.quantity("dc").text == "gm1/(gm1 + gmb1 + gds1)"


def test_a_ratio_against_an_alias():
    """RS small against ro1 is RS·gds1 small against 1."""
    made = dominated(stages.follower(), small="RS", against="ro1")
    assert made.response.quantity("dc").text == "gm1*RS/(1 + gm1*RS + gmb1*RS)"


def test_a_quotient_says_the_same_as_a_product():
    one = dominated(stages.follower(), small="1/gm1", against="RS")
    other = dominated(stages.follower(), small="1", against="gm1*RS")
    assert stages.same(one.response, other.response)


def test_bare_aliases_go_device_by_device():
    one = dominated(stages.cascode(), small="1/gm", against="ro")
    other = dominated(stages.cascode(), small="gds", against="gm")
    by_device = dominated(stages.cascode(), small=["gds1", "gds2"], against=["gm1", "gm2"])
    assert stages.same(one.response, by_device.response)
    assert stages.same(other.response, by_device.response)


def test_vectors_pool_through_a_symbol_that_the_response_lacks():
    """gds1 ≪ gm5 and gm5 ≪ gm1, where M5 stands elsewhere: gds1 ≪ gm1."""
    b = stages.common_source()
    b.mosfet("M5", gate="far", drain="far", source="gnd", gm="1 mS", gds="1 uS")
    b.response("far", looking_into="far")
    b.assume("one", small="1/RL", against="gm5")
    b.assume("two", small="gm5", against="gm1")
    stage = b.stage()
    engine = Approximator(stages.exact(stage, "zin"))
    made = read_assumptions(stage)
    alone = [engine.under([a]) for a in made]
    both = engine.under(made)
    assert [len(a.dropped) for a in alone] == [0, 0]
    assert both.dropped
    direct = dominated(stages.common_source(), "zin", small="1", against="gm1*RL")
    assert stages.same(both.response, direct.response)


def test_renaming_moves_vectors_and_leaves_out_those_that_vanish():
    b = stages.cascode()
    b.assume("same", equal=["M1", "M2"])
    made = dominated(b, small=["gds1", "gm2"], against=["gm1"])
    assert made.response.quantity("dc").text == "-gm1*(gm1 + gmb2)/gds1**2"
    assert any("'it' compares something with itself" in remark for remark in made.remarks)


def test_a_parameter_that_no_device_has_is_a_remark():
    made = dominated(stages.common_source(), small="gmb", against="gm")
    assert made.remarks == ("no device of this stage has gmb: gmb has no effect",)
    assert not made.dropped


# The account


def test_dropped_terms_name_what_outweighs_them():
    made = dominated(stages.cascode(), small="gds", against="gm")
    records = {(d.coefficient, d.term): (d.against, d.ratio) for d in made.dropped}
    assert records["numerator s^0", "-gm1*gds2"][0] == "-gm1*gm2"
    assert records["numerator s^0", "-gm1*gds2"][1] == pytest.approx(0.24 / 3.9)
    assert ("denominator s^0", "gds1*gds2") not in records
    against, ratio = records["denominator s^1", "gds1*CL"]
    assert against == "gm2*CL"
    assert ratio == pytest.approx(0.21 / 3.9)
    gone = {(d.coefficient, d.term) for d in made.dropped}
    kept = {
        (f"{where} s^{power}", text)
        for where in ("numerator", "denominator")
        for power, coefficient in enumerate(getattr(made.response.form, where))
        for text in polynomial_text(coefficient).replace(" - ", " + -").split(" + ")
    }
    assert not gone & kept


def test_terms_that_stay_can_be_asked_for():
    made = dominated(stages.cascode(), small="gds", against="gm")
    kept = {(k.coefficient, k.term) for k in made.kept if k.coefficient == "denominator s^0"}
    assert kept == {("denominator s^0", "gds1*gds2")}
    gone = {(d.coefficient, d.term) for d in made.dropped}
    assert not gone & {(k.coefficient, k.term) for k in made.kept}
    # Each dropped term names one that stays.
    assert {(d.coefficient, d.against) for d in made.dropped} <= {(k.coefficient, k.term) for k in made.kept}


def test_ratio_is_none_without_bias():
    b = StageBuilder("no bias")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="out", source="x", body="x")
    b.resistor("RS", "x", "gnd")
    b.resistor("RL", "out", "gnd")
    b.response("gain", source="VIN", to="out")
    made = dominated(b, small="gds", against="gm")
    assert made.dropped
    assert all(d.ratio is None for d in made.dropped)
    assert made.warnings == ()


def test_kept_terms_that_nearly_cancel_are_a_warning():
    """The stages' gains all but cancel at the output: gm1·R1·gm3 against gm2; the gds terms then matter."""
    b = StageBuilder("two ways that cancel")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="x", source="gnd", gm="1 mS", gds="1 uS")
    b.resistor("R1", "x", "gnd", "1 kohm")
    b.mosfet("M3", gate="x", drain="out", source="gnd", gm="1 mS", gds="1 uS")
    b.mosfet("M2", gate="in", drain="out", source="gnd", gm="0.98 mS", gds="1 uS")
    b.resistor("R2", "out", "gnd", "1 kohm")
    b.response("gain", source="VIN", to="out")
    made = dominated(b, small="gds", against=["gm", "1/R1", "1/R2"])
    assert len(made.warnings) == 1
    assert "kept terms of the numerator s^0 nearly cancel" in made.warnings[0]
    assert "the dropped term -gm2*gds1*R1*R2 may matter" in made.warnings[0]


def test_no_warning_where_nothing_was_dropped_or_terms_do_not_cancel():
    made = dominated(stages.cascode(), small="gds", against="gm")
    assert made.warnings == ()


def test_a_nested_response_of_too_many_terms_gives_words_and_no_number(monkeypatch):
    monkeypatch.setattr(generated, "TERM_LIMIT", 1)
    b = stages.cascode()
    b.assume("it", small="gds", against="gm")
    stage = b.stage()
    made = Approximator(stages.exact(stage, nested=True)).under(read_assumptions(stage))
    assert made.response is None
    assert "product terms that are not written out" in made.why


def test_large_coefficients_are_judged_quickly():
    """A sum over all products of eight conductances in pairs: 2^8 terms in one group, of which one stays."""
    names = tuple(f"{kind}{k}" for k in range(1, 9) for kind in ("gm", "gds"))
    context = fmpz_mpoly_ctx.get((*names, "s"), Ordering.lex)
    product = context.constant(1)
    for k in range(0, 16, 2):
        product *= context.gens()[k] + context.gens()[k + 1]
    found = pool(
        [
            Pair({f"gds{i}": Fraction(1)}, {f"gm{k}": Fraction(1)}, "it")
            for i in range(1, 9)
            for k in range(1, 9)
        ]
    )
    table = Terms(product)
    falls_to = found.judge(table)
    assert len(table) == 256
    assert {polynomial_text(table.only([i])) for i, to in enumerate(falls_to) if to == i} == {
        "*".join(f"gm{k}" for k in range(1, 9))
    }


def test_too_many_tiers_are_words(monkeypatch):
    monkeypatch.setattr(cone, "_RAY_LIMIT", 1)
    b = stages.cascode()
    b.assume("it", small="gds", against="gm")
    stage = b.stage()
    made = Approximator(stages.exact(stage)).under(read_assumptions(stage))
    assert made.response is None
    assert "too many pairs" in made.why


def test_all_sets_of_twelve_assumptions_take_seconds():
    b = stages.cascode()
    for name, asked in {
        "1": {"small": "gds", "against": "gm"},
        "2": {"small": "gmb", "against": "gm"},
        "3": {"neglect": "gmb"},
        "4": {"equal": ["M1", "M2"]},
        "5": {"neglect": "cdb"},
        "6": {"small": "cgs", "against": "CL"},
        "7": {"small": "1", "against": "gm1*ro2"},
        "8": {"set_": {"gm2": "gm1"}},
        "9": {"neglect": "gds1"},
        "10": {"open_": "CL"},
        "11": {"poles_far_apart": True},
        "12": {"dominant_pole": True},
    }.items():
        b.assume(name, **asked)
    stage = b.stage()
    made = read_assumptions(stage)
    engine = Approximator(stages.exact(stage))
    start = perf_counter()
    found = [engine.under([a for k, a in enumerate(made) if mask >> k & 1]) for mask in range(1 << 12)]
    assert perf_counter() - start < 10
    assert all(f.response is not None or f.why for f in found)
    # Sets that come to the same share one response, and so its figures.
    assert len({id(f.response) for f in found}) < 2000
