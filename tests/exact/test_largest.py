"""Dominant terms of nested responses: against polynomials written out by another route, and exact determinants."""

from __future__ import annotations

import random
import time
from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from functools import cache
from itertools import pairwise
from math import log

import numpy as np
import pytest
from big_stages import bipolar_opamp, folded_cascode, ladder
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from networks import RESPONSE, stages

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import Nested
from symamp.exact.graded import leading_residues
from symamp.exact.largest import Dominant, coefficient_terms, dominant_terms
from symamp.exact.largest_diagram import diagram_of
from symamp.exact.largest_elements import Side, elements_of
from symamp.exact.largest_terms import Monomial
from symamp.exact.skeleton import random_values
from symamp.exact.system import build_system

SIDES: tuple[Side, Side] = ("numerator", "denominator")
Terms = dict[Monomial, int]


def nested(stage: Stage, name: str) -> Nested:
    return nested_of(stage, ratio_of(build_system(stage, stage.asked[name].without), stage.asked[name]))


@cache
def large(name: str) -> tuple[Stage, Nested]:
    stage = {
        "folded cascode": folded_cascode,
        "op amp": lambda: bipolar_opamp(with_rx=False),
        "op amp with rx": lambda: bipolar_opamp(with_rx=True),
    }[name]()
    return stage, nested(stage, "gain")


def floats(stage: Stage) -> dict[str, float]:
    return {name: float(value) for name, value in stage.bias.items()}


def written(form: Nested, side: Side, rename: Mapping[str, str] | None = None) -> dict[int, Terms]:
    """The side by its powers of s, written out term by term from the graph with dictionaries: an independent route."""

    def times(p: dict, q: dict) -> dict:
        product: dict = {}
        for (s, a), x in p.items():
            for (t, b), y in q.items():
                powers = dict(a)
                for name, power in b:
                    powers[name] = powers.get(name, 0) + power
                key = s + t, tuple(sorted((n, e) for n, e in powers.items() if e))
                product[key] = product.get(key, 0) + x * y
        return product

    def plus(p: dict, q: dict, factor: int) -> dict:
        total = dict(p)
        for key, value in q.items():
            total[key] = total.get(key, 0) + factor * value
        return {key: value for key, value in total.items() if value}

    entries = []
    for entry in form.graph.entries:
        cells: dict = {}
        for coefficient, symbol, power, s in entry:
            name = (rename or {}).get(symbol, symbol) if symbol else None
            key = s, ((name, power),) if name else ()
            cells[key] = cells.get(key, 0) + coefficient
        entries.append(cells)
    minors: list[dict] = [{(0, ()): 1}]
    for edges in form.graph.edges[1:]:
        total: dict = {}
        for child, place, sign in edges:
            total = plus(total, times(entries[place], minors[child]), sign)
        minors.append(total)
    whole: dict = {}
    for factor, node in getattr(form.graph, side):
        whole = plus(whole, minors[node], factor)
    found: dict[int, Terms] = {}
    for (s, monomial), value in whole.items():
        found.setdefault(s, {})[monomial] = value
    return found


def size(monomial: Monomial, coefficient: int, values: Mapping[str, float]) -> float:
    return log(abs(coefficient)) + sum(power * log(abs(values[name])) for name, power in monomial)


def check_all_terms(stage: Stage, form: Nested, rename: Mapping[str, str] | None = None) -> int:
    """All terms of all coefficients are generated, each once, in order, and with the right bounds; how many."""
    values = floats(stage)
    count = 0
    for side in SIDES:
        expected = written(form, side, rename)
        for power in range(max(expected, default=0) + 2):
            wanted = expected.get(power + form.skeleton.low, {})
            found = dominant_terms(form, side, power, values, rest=-1.0, limit=10_000, rename=rename)
            assert dict(found.terms) == wanted
            assert found.complete
            assert found.left == 0
            sizes = [size(*term, values) for term in found.terms]
            assert all(a >= b - 1e-9 for a, b in pairwise(sizes))
            count += len(wanted)
    return count


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=4, most_parts=6))
def test_random_networks_of_all_parts_give_all_terms_of_the_written_out_polynomials(stage: Stage) -> None:
    form = nested(stage, RESPONSE)
    assume(min(form.skeleton.degrees) >= 0 and form.terms < 20_000)
    check_all_terms(stage, form)


@settings(max_examples=25, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=4, most_parts=4, kinds=("mosfet", "bjt", "resistor", "capacitor")))
def test_symbols_made_one_are_added_up(stage: Stage) -> None:
    form = nested(stage, RESPONSE)
    assume(min(form.skeleton.degrees) >= 0 and form.terms < 20_000)
    first: dict[str, str] = {}
    rename = {}
    for name, symbol in stage.symbols.items():
        leader = first.setdefault(symbol.nature + str(symbol.parameter.name), name)
        if leader != name:
            rename[name] = leader
    check_all_terms(stage, form, rename)


@settings(max_examples=40, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=4, most_parts=5), st.randoms(use_true_random=False))
def test_where_symbols_go_to_a_limit_the_leading_terms_alone_are_generated(
    stage: Stage, draw: random.Random
) -> None:
    form = nested(stage, RESPONSE)
    assume(min(form.skeleton.degrees) >= 0 and form.terms < 20_000)
    names = sorted(form.symbols)
    limits = {name: draw.choice((1, -1)) for name in draw.sample(names, min(3, len(names)))}
    (low_n, _), (low_d, _) = leading_residues(form.graph, random_values(form, 3), 1234567, limits)
    assume(min(low_n, low_d) >= 0)
    limited = replace(form, limits=limits, valuation=(low_n, low_d))
    for side in SIDES:
        expected = written(form, side)
        orders = {
            monomial: sum(limits.get(name, 0) * power for name, power in monomial)
            for terms in expected.values()
            for monomial in terms
        }
        least = min(orders.values())
        for power in range(max(expected) + 1 - limited.skeleton.low):
            terms = expected.get(power + limited.skeleton.low, {})
            wanted = {monomial: c for monomial, c in terms.items() if orders[monomial] == least}
            found = dominant_terms(limited, side, power, floats(stage), rest=-1.0, limit=10_000)
            assert dict(found.terms) == wanted


def test_what_cancels_once_devices_match_is_not_generated() -> None:
    """A bridge of equal resistors is balanced: its output is zero, and no term of it is left."""
    build = StageBuilder("bridge")
    build.voltage_source("VIN", "in", "gnd")
    for label, ends, ohms in (
        ("R1", ("in", "a"), 1),
        ("R2", ("a", "gnd"), 2),
        ("R3", ("in", "b"), 1),
        ("R4", ("b", "gnd"), 2),
    ):
        build.resistor(label, *ends, f"{ohms} kohm")
    build.resistor("R5", "a", "b", "3 kohm")
    build.response("off", source="VIN", to=("a", "b"))
    stage = build.stage()
    form = nested(stage, "off")
    alone = dominant_terms(form, "numerator", 0, floats(stage), rest=0.0, limit=10)
    assert len(alone.terms) == 2  # G1·G4 − G2·G3, by hand
    matched = dominant_terms(
        form, "numerator", 0, floats(stage), rest=0.0, limit=10, rename={"R3": "R1", "R4": "R2"}
    )
    assert matched.terms == ()


def test_terms_of_a_cascode_are_those_by_hand() -> None:
    """Gain −gm1(gm2 + gmb2 + gds2) over gds1·gds2, the numerator's terms by size (design text, section 7)."""
    build = StageBuilder("cascode")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS")
    build.mosfet(
        "M2", gate="gnd", drain="out", source="x", body="gnd", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS"
    )
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    form = nested(stage, "gain")
    above = dominant_terms(form, "numerator", 0, floats(stage), rest=0.0, limit=10)
    below = dominant_terms(form, "denominator", 0, floats(stage), rest=0.0, limit=10)
    names = [tuple(name for name, _ in monomial) for monomial, _ in above.terms]
    assert names == [("gm1", "gm2"), ("gm1", "gmb2"), ("gds2", "gm1")]
    assert [tuple(name for name, _ in monomial) for monomial, _ in below.terms] == [("gds1", "gds2")]
    signs = {coefficient * below.terms[0][1] for _, coefficient in above.terms}
    assert signs == {-1}


def check_bound(found: Dominant, stage: Stage, exact: Fraction) -> None:
    """What is kept, added up in rational numbers, is within what is said of the exact value."""
    kept = Fraction(0)
    for monomial, coefficient in found.terms:
        product = Fraction(coefficient)
        for name, power in monomial:
            product *= stage.bias[name] ** power
        kept += product
    rest = abs(float(kept / exact - 1))
    assert rest == pytest.approx(found.rest, rel=1e-6, abs=1e-9)
    assert rest <= found.left * (1 + 1e-6) + 1e-9
    # float(Fraction) of numbers as small as 1e-60 is exact enough.
    assert found.total == pytest.approx(float(exact), rel=1e-9, abs=0)
    assert found.kept == pytest.approx(float(kept), rel=1e-9, abs=0)


@pytest.mark.parametrize("name", ["folded cascode", "op amp", "op amp with rx"])
@pytest.mark.parametrize("power", [0, 1, 2])
def test_large_stages_keep_what_is_promised(name: str, power: int) -> None:
    stage, form = large(name)
    bare = Nested(form.graph, Fraction(1), form.terms)
    exact = bare.exact_coefficients(stage.bias)
    for side, polynomial in zip(SIDES, exact, strict=True):
        found = dominant_terms(form, side, power, floats(stage), rest=0.1, limit=3000)
        coefficient = polynomial[power + form.skeleton.low]
        check_bound(found, stage, Fraction(int(coefficient.p), int(coefficient.q)))
        assert found.left <= 0.1 or len(found.terms) > 2900
        sizes = [size(*term, floats(stage)) for term in found.terms]
        assert sizes == sorted(sizes, reverse=True)


def test_what_is_left_counts_magnitudes_and_not_their_difference() -> None:
    """The common-mode gain is a small difference of large terms: few terms may hit it, and must not look settled."""
    stage, _ = large("op amp")
    form = nested(stage, "common")
    terms = coefficient_terms(form, "numerator", 0, floats(stage))
    assert terms.magnitudes - terms.total > log(3)
    found = dominant_terms(form, "numerator", 0, floats(stage), rest=0.1, limit=50)
    assert not found.complete
    assert found.left > 1
    assert found.left >= found.rest


def test_the_diagram_counts_true_products_and_stays_small() -> None:
    """Raw products of the minor graph, where a conductance is stamped four times, are 60 times as many."""
    stage, form = large("op amp")
    counts = []
    for side in SIDES:
        diagram = diagram_of(elements_of(form.graph, side))
        assert diagram.top < 5000
        counts.append(diagram.count())
    assert sum(counts) < form.terms / 50
    terms = coefficient_terms(form, "denominator", 0, floats(stage))
    assert terms.diagram.count() < 1e12 < 1e19 < form.terms
    # All but a few products have one sign: their magnitudes add up to hardly more than they do.
    assert terms.magnitudes - terms.total < 0.01


def test_a_ladder_counts_its_spanning_trees() -> None:
    """A ladder with n sections has the Fibonacci number F(2n) of spanning trees of its graph (common knowledge of
    resistive ladders; the terms of its determinant are those trees)."""
    for sections in (3, 6, 12):
        form = nested(ladder(sections + 1), "transfer")
        fibonacci = [0, 1]
        while len(fibonacci) <= 2 * sections + 1:
            fibonacci.append(fibonacci[-1] + fibonacci[-2])
        # The driven node is held: sections in series, each with its capacitor to ground.
        assert diagram_of(elements_of(form.graph, "denominator")).count() == fibonacci[2 * sections + 1]


def test_products_too_small_for_floats_are_generated_all_the_same() -> None:
    stage = ladder(150)
    form = nested(stage, "transfer")
    found = dominant_terms(form, "denominator", 0, floats(stage), rest=0.0, limit=5)
    assert found.complete
    assert len(found.terms) == 1
    assert found.rest == pytest.approx(0, abs=1e-9)
    assert found.total == 0.0  # 1e-447 S^149 is below what a float holds, and is not used


def test_twenty_thousand_terms_of_the_op_amp_take_seconds() -> None:
    stage, form = large("op amp")
    start = time.perf_counter()
    found = dominant_terms(form, "denominator", 0, floats(stage), rest=0.0, limit=20_000)
    assert time.perf_counter() - start < 30  # 2 s on a quiet machine
    assert len(found.terms) == 20_000
    assert found.left < 0.02


def test_negative_and_zero_values_are_taken_as_they_come() -> None:
    build = StageBuilder("signs")
    build.voltage_source("VIN", "in", "gnd")
    build.vccs("A1", out=("out", "gnd"), control=("in", "gnd"), value=-2e-3)
    build.vccs("A2", out=("out", "gnd"), control=("in", "gnd"), value=0)
    build.resistor("R1", "out", "gnd", "1 kohm")
    build.resistor("R2", "in", "out", "10 kohm")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    form = nested(stage, "gain")
    found = dominant_terms(form, "numerator", 0, floats(stage), rest=0.0, limit=10)
    assert [monomial for monomial, _ in found.terms] == [(("A1", 1),), (("R2", -1),)]
    assert np.isclose(abs(found.kept), 2e-3 + 1e-4)
