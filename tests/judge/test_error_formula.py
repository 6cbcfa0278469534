"""Errors as formulas: equal to the numeric errors wherever the symbols stand, with the largest terms leading."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from judged import CASCODE, COMMON_SOURCE, NO_BODY, SMALL_GDS, stage_of

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.derive import derive
from symamp.exact.response import Response
from symamp.formula import parse
from symamp.judge.error_formula import ErrorFormula, error_formula

ONE_POLE = '\n[[assumption]]\nname = "one pole"\ndominant_pole = true\n'
APART = '\n[[assumption]]\nname = "apart"\npoles_far_apart = true\n'
NO_GATE = '\n[[assumption]]\nname = "no gate capacitance"\nneglect = ["cgs", "cgd"]\n'


def both(stage: Stage) -> tuple[Response, Response]:
    exact = derive(stage, stage.asked["gain"])
    approximate = Approximator(exact).under(read_assumptions(stage)).response
    assert approximate is not None
    return exact, approximate


def found(stage: Stage, quantity: str) -> ErrorFormula:
    formula = error_formula(*both(stage), parse_quantity(quantity))
    assert formula is not None
    return formula


CASES = [
    (CASCODE, (SMALL_GDS, NO_BODY), "dc"),
    (CASCODE, (SMALL_GDS, NO_BODY), "p1"),
    (CASCODE, (SMALL_GDS,), "b1"),
    (COMMON_SOURCE, (SMALL_GDS,), "dc"),
    (COMMON_SOURCE, (SMALL_GDS, NO_GATE), "a0"),
    (COMMON_SOURCE, (SMALL_GDS, ONE_POLE), "z1"),
    (COMMON_SOURCE, (NO_BODY, SMALL_GDS), "b2"),
]
VALUE = st.floats(-2, 2).map(lambda x: 10.0**x)


@pytest.mark.parametrize(("text", "assumptions", "quantity"), CASES)
@settings(max_examples=12, deadline=None)
@given(st.data())
def test_the_formula_is_the_numeric_error_at_any_point(
    text: str, assumptions: tuple[str, ...], quantity: str, data: st.DataObject
) -> None:
    stage = stage_of(text, *assumptions)
    exact, approximate = both(stage)
    formula = error_formula(exact, approximate, parse_quantity(quantity))
    assert formula is not None
    values = {name: float(v) * data.draw(VALUE) for name, v in stage.bias.items()}
    asked = parse_quantity(quantity)
    e, a = (
        ((asked.name == "z" and r.zero_figures(values, 1)) or r.figures(values, 1)).value(asked)[0]
        for r in (exact, approximate)
    )
    shown = formula.shape.sympy()
    number = float(shown.subs({x: values[str(x)] for x in shown.free_symbols}))
    assert number == pytest.approx(((a - e) / e).real, rel=1e-6, abs=1e-9)


def test_the_leading_term_is_the_largest_over_the_largest_at_the_bias_point() -> None:
    formula = found(stage_of(CASCODE, SMALL_GDS, NO_BODY), "dc")
    assert formula.leading is not None
    assert formula.leading.text() == "-gmb2/gm2"
    lighter = CASCODE.replace('"0.62 mS"', '"0.1 mS"')
    formula = found(stage_of(lighter, SMALL_GDS, NO_BODY), "dc")
    assert formula.leading is not None
    assert formula.leading.text() == "-gds2/gm2"


def test_no_error_is_the_formula_zero_without_a_leading_term() -> None:
    formula = found(stage_of(CASCODE.replace('to = "out"', 'to = "x"'), NO_BODY), "dc")
    assert formula.shape.text() == "0"
    assert formula.leading is None


def test_of_a_pole_the_formula_is_against_its_partner() -> None:
    # Without CL the pole at the source node, p2, is the only one left, as p1 of the approximate response.
    two = CASCODE.replace('gmb = "0.62 mS"', 'gmb = "0.62 mS", csb = "60 fF"')
    unloaded = '\n[[assumption]]\nname = "no load"\nneglect = ["CL"]\n'
    far = '\n[[assumption]]\nname = "apart"\npoles_far_apart = true\n'
    loaded = two.replace("[capacitor]", '[resistor]\nRL = ["out", "gnd"]\n\n[capacitor]').replace(
        'CL = "3.3 pF"', 'CL = "3.3 pF"\nRL = "2 kohm"'
    )
    stage = stage_of(loaded, unloaded, far)
    exact, approximate = both(stage)
    assert error_formula(exact, approximate, parse_quantity("p1")) is None  # lost
    assert error_formula(exact, approximate, parse_quantity("p2")) is None  # a square root, not rational


def test_the_bandwidth_of_one_pole_has_the_error_of_its_pole() -> None:
    stage = stage_of(CASCODE, SMALL_GDS, NO_BODY)
    assert found(stage, "bandwidth").shape.text() == found(stage, "p1").shape.text()


@pytest.mark.parametrize("quantity", ["bandwidth", "unity_gain_frequency", "dc.db", "p1.hz", "phase_margin"])
def test_what_is_not_rational_has_no_formula(quantity: str) -> None:
    exact, approximate = both(stage_of(COMMON_SOURCE, SMALL_GDS))
    assert error_formula(exact, approximate, parse_quantity(quantity)) is None


def test_the_formula_reads_back_in_the_grammar_of_stage_files() -> None:
    for text, assumptions, quantity in CASES:
        formula = found(stage_of(text, *assumptions), quantity)
        parse(formula.shape.text())
        if formula.leading is not None:
            parse(formula.leading.text())


def test_poles_far_apart_has_a_formula_where_the_exact_pole_has_none() -> None:
    exact, approximate = both(stage_of(COMMON_SOURCE, APART))
    assert approximate.quantity("p1").formula is not None
    assert error_formula(exact, approximate, parse_quantity("p1")) is None
