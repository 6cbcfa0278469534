"""Expanded and nested forms: the same response either way, in floating point and exactly."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
import sympy
from hypothesis import HealthCheck, assume, given, settings
from networks import RESPONSE, stages

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.cofactors import Ratio, entry_symbols, ratio_of
from symamp.exact.derive import derive, form_of, nested_of
from symamp.exact.forms import (
    EXPAND_LIMIT,
    Coefficients,
    Expanded,
    Nested,
    raw_polynomials,
    write_out,
)
from symamp.exact.modular import vanishes
from symamp.exact.polys import coefficients_of_s, lowest_terms
from symamp.exact.system import build_system


def cascode(**asked: object) -> Stage:
    build = StageBuilder("cascode")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS", cgd="9 fF")
    build.mosfet("M2", gate="gnd", drain="out", source="x", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS")
    build.capacitor("CL", "out", "gnd", "3.3 pF")
    build.capacitor("CX", "x", "gnd", "40 fF")
    build.resistor("RL", "out", "gnd", "20 kohm")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", **(asked or {"source": "VIN", "to": "out"}))  # type: ignore[arg-type]
    return build.stage()


def ratio(stage: Stage, name: str = "gain") -> Ratio:
    asked = stage.asked[name]
    return ratio_of(build_system(stage, asked.without), asked)


def at(given: Coefficients, s: np.ndarray) -> np.ndarray:
    sigma = s / given.omega
    top, bottom = (
        sum(row * sigma**k for k, row in enumerate(side)) for side in (given.numerator, given.denominator)
    )
    return np.asarray(top / bottom)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.filter_too_much])
@given(stages(most_nodes=4, most_parts=5))
def test_the_expanded_form_is_the_graph_in_lowest_terms(stage: Stage) -> None:
    asked = stage.asked[RESPONSE]
    try:
        form = derive(stage, asked).form
    except StageError:
        assume(False)
    assume(isinstance(form, Expanded))
    assert isinstance(form, Expanded)
    numerator, denominator = raw_polynomials(ratio(stage, RESPONSE), stage.symbols)
    assert sum(len(p) for p in (numerator, denominator)) <= sum(ratio(stage, RESPONSE).graph.count_terms())
    top, bottom = lowest_terms(numerator, denominator)
    assert form.numerator == coefficients_of_s(top)
    assert form.denominator == coefficients_of_s(bottom)
    assert top * denominator == bottom * numerator
    assert top.gcd(bottom) == 1
    assert form.symbols <= set(entry_symbols(ratio(stage, RESPONSE).graph))


@settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.filter_too_much])
@given(stages(most_nodes=3, most_parts=4))
def test_the_expanded_form_equals_sympy_s_determinants(stage: Stage) -> None:
    """det(A) and the determinant of A bordered by drive and output, by SymPy, from the entries alone."""
    asked = stage.asked[RESPONSE]
    try:
        form = derive(stage, asked).form
    except StageError:
        assume(False)
    assume(isinstance(form, Expanded) and asked.to is not None and asked.over is None)
    assert isinstance(form, Expanded)  # for the type checker, as is the next
    assert asked.to is not None
    system = build_system(stage, asked.without)
    symbols = {name: sympy.Symbol(name, nonzero=True) for name in system.symbols}
    s = sympy.Symbol("s")
    size = system.size
    assume(size <= 7)
    matrix = sympy.zeros(size, size)
    for i, row in enumerate(system.rows):
        for column, entry in row.items():
            matrix[i, column] = sum(
                c * (symbols[x] ** p if x else 1) * s**s_power for c, x, p, s_power in entry
            )
    drive = sympy.zeros(size, 1)
    for label, weight in asked.drive.items():
        exact = sympy.Rational(weight.numerator, weight.denominator)
        if label in system.branch:
            drive[system.branch[label]] += exact
            continue
        for node, sign in zip(system.sources[label], (-1, 1), strict=True):
            if node in system.node:
                drive[system.node[node]] += sign * exact
    border = sympy.zeros(1, size + 1)
    for node, sign in zip(asked.to, (1, -1), strict=True):
        if node in system.node:
            border[system.node[node]] += sign
    bordered = matrix.row_join(drive).col_join(border)
    top, bottom = -bordered.det(method="berkowitz"), matrix.det(method="berkowitz")
    ours = [
        sum(expression(c, symbols) * s**k for k, c in enumerate(side))
        for side in (form.numerator, form.denominator)
    ]
    assert sympy.expand(top * ours[1] - bottom * ours[0]) == 0


def expression(polynomial: object, symbols: dict[str, sympy.Symbol]) -> sympy.Expr:
    names = polynomial.context().names()  # type: ignore[attr-defined]
    return sympy.Add(
        *(
            int(c) * sympy.Mul(*(symbols[n] ** int(e) for n, e in zip(names, exponents, strict=True) if e))
            for exponents, c in polynomial.terms()  # type: ignore[attr-defined]
        )
    )


def test_both_forms_give_the_same_numbers_at_many_bias_points() -> None:
    stage = cascode()
    expanded, nested = write_out(ratio(stage), stage.symbols), nested_of(stage, ratio(stage))
    points = 2500  # more than two blocks
    draw = np.random.default_rng(4)
    values = {name: float(stage.bias[name]) * 10 ** draw.uniform(-1, 1, points) for name in stage.symbols} | {
        "CL": float(stage.bias["CL"])
    }
    for s in (1j * 1e6, 1j * 1e9, 3e8 + 1e9j):
        a, b = at(expanded.coefficients(values, points), s), at(nested.coefficients(values, points), s)
        np.testing.assert_allclose(a, b, rtol=1e-10)
        np.testing.assert_allclose(nested.at(np.full(points, s), values), a, rtol=1e-10)


def test_exact_coefficients_of_both_forms_are_one_ratio() -> None:
    stage = cascode()
    expanded, nested = write_out(ratio(stage), stage.symbols), nested_of(stage, ratio(stage))
    (a, b), (c, d) = (form.exact_coefficients(stage.bias) for form in (expanded, nested))
    assert a * d == b * c
    assert c.gcd(d) == 1


def test_dc_of_the_cascode_by_hand() -> None:
    stage = cascode()
    numerator, denominator = derive(stage, stage.asked["gain"]).form.exact_coefficients(stage.bias)
    v = stage.bias
    gmt = v["gm2"] + v["gmb2"] + v["gds2"]
    gl = 1 / v["RL"]
    by_hand = -v["gm1"] * gmt / (v["gds1"] * (v["gds2"] + gl) + gl * gmt)
    assert Fraction(str(numerator[0] / denominator[0])) == by_hand


def test_a_weight_of_a_third_scales_both_forms() -> None:
    stage = cascode()
    third = replace(stage.asked["gain"], drive={"VIN": Fraction(1, 3)})
    whole = ratio(stage)
    part = ratio_of(build_system(stage), third)
    for form, scaled in (
        (write_out(whole, stage.symbols), write_out(part, stage.symbols)),
        (nested_of(stage, whole), nested_of(stage, part)),
    ):
        (a, b), (c, d) = form.exact_coefficients(stage.bias), scaled.exact_coefficients(stage.bias)
        assert a * d == 3 * b * c


def test_the_form_follows_the_count_of_terms() -> None:
    stage = cascode()
    small = ratio(stage)
    assert sum(small.graph.count_terms()) < EXPAND_LIMIT
    assert isinstance(form_of(stage, small), Expanded)
    nested = nested_of(stage, small)
    assert nested.terms == sum(small.graph.count_terms())
    assert nested.reactive == {"cgd1", "CL", "CX"}
    assert nested.plain


def test_terms_of_an_expanded_form_are_those_written_out() -> None:
    stage = cascode()
    form = write_out(ratio(stage), stage.symbols)
    assert form.terms == sum(len(c) for c in (*form.numerator, *form.denominator))
    assert form.symbols == set(stage.symbols)


def test_a_computed_symbol_takes_its_value_from_the_others() -> None:
    stage = cascode()
    nested = nested_of(stage, ratio(stage))
    bound = replace(nested, computed=(("gm2", lambda values: 2 * values["gm1"]),))
    values = {**stage.bias, "gm2": 2 * stage.bias["gm1"]}
    assert bound.exact_coefficients(stage.bias) == nested.exact_coefficients(values)
    floats = {name: float(v) for name, v in stage.bias.items()}
    s = np.array([2e9j])
    replaced = {**floats, "gm2": 2 * floats["gm1"]}
    np.testing.assert_array_equal(bound.at(s, floats), nested.at(s, replaced))


def test_powers_of_s_that_are_not_kept_are_gone() -> None:
    stage = cascode()
    nested = nested_of(stage, ratio(stage))
    kept = replace(nested, keep=(frozenset({0}), frozenset({0, 1})))
    assert not kept.plain
    numerator, denominator = kept.exact_coefficients(stage.bias)
    assert (numerator.degree(), denominator.degree()) == (0, 1)
    floats = {name: float(v) for name, v in stage.bias.items()}
    given_rows = kept.coefficients(floats, 1)
    assert (given_rows.numerator.shape, given_rows.denominator.shape) == ((1, 1), (2, 1))
    s = np.array([1j * 1e8])
    exact = complex(float(numerator[0])) / (float(denominator[0]) + float(denominator[1]) * s)
    np.testing.assert_allclose(at(given_rows, s), exact, rtol=1e-12)


@pytest.mark.parametrize(
    ("asked", "expected"),
    [
        ({"source": "VIN", "to": "out"}, (False, False)),
        ({"source": "VIN", "to": "lone"}, (True, False)),
        ({"source": "VIN", "to": "out", "over": "lone"}, (False, True)),
    ],
)
def test_what_vanishes_identically_is_seen(asked: dict[str, str], expected: tuple[bool, bool]) -> None:
    build = StageBuilder("lone node")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("R1", "in", "out")
    build.resistor("R2", "out", "gnd")
    build.resistor("R3", "lone", "gnd")
    build.response("r", **asked)  # type: ignore[arg-type]
    assert vanishes(ratio(build.stage(), "r").graph) == expected


def test_coefficients_neither_vanish_nor_burst() -> None:
    """A long ladder of small capacitances: its leading coefficient is some 1e-900 in SI units."""
    build = StageBuilder("ladder")
    build.voltage_source("VIN", "n0", "gnd")
    for k in range(1, 81):
        build.resistor(f"R{k}", f"n{k - 1}", f"n{k}", "1 kohm")
        build.capacitor(f"C{k}", f"n{k}", "gnd", "10 fF")
    build.response("r", source="VIN", to="n80")
    stage = build.stage()
    form = derive(stage, stage.asked["r"]).form
    assert isinstance(form, Nested)
    given_rows = form.coefficients({name: float(v) for name, v in stage.bias.items()}, 1)
    assert np.all(np.isfinite(given_rows.denominator))
    assert np.all(given_rows.denominator[:, 0] != 0)


def floating(kind: str) -> Stage:
    """A current source in a net of resistors or capacitors that hangs on ground by one part of another kind.

    At one end of the frequencies no current flows to ground, so that a coefficient of the response vanishes
    though products of the graph have its power of s.
    """
    build = StageBuilder("floating net")
    build.current_source("I1", "a", "d")
    for k, pair in enumerate(("ab", "bc", "cd", "ac", "bd"), start=1):
        if kind == "resistor":
            build.resistor(f"X{k}", *pair, value=(970.0, 330.0, 1400.0, 6700.0, 210.0)[k - 1])
        else:
            build.capacitor(f"X{k}", *pair, value=(97e-15, 33e-15, 140e-15, 670e-15, 21e-15)[k - 1])
    build.resistor("RL", "a", "gnd", 10e3)
    if kind == "resistor":
        build.capacitor("CD", "d", "gnd", 1e-12)
    else:
        build.resistor("RD", "d", "gnd", 1e3)
    build.response("gain", source="I1", to="a")
    return build.stage()


@pytest.mark.parametrize("kind", ["resistor", "capacitor"])
def test_a_coefficient_that_cancels_leaves_no_noise_at_the_ends_of_frequency(kind: str) -> None:
    stage = floating(kind)
    exact = derive(stage, stage.asked["gain"])
    nested = replace(exact, form=nested_of(stage, ratio(stage)))
    assert nested.form.ends_cancel  # type: ignore[union-attr]
    hz = np.logspace(-9, 24, 67)
    np.testing.assert_allclose(nested.at(hz), exact.at(hz), rtol=1e-12)
    many = {"RL": np.full(hz.size, 10e3)}
    np.testing.assert_allclose(nested.at(hz, many), exact.at(hz, many), rtol=1e-12)


def test_powers_that_the_structure_lacks_do_not_count_as_cancelled() -> None:
    stage = cascode()
    assert not nested_of(stage, ratio(stage)).ends_cancel
    build = StageBuilder("coupled")
    build.voltage_source("VIN", "in", "gnd")
    build.capacitor("CC", "in", "out", "1 uF")
    build.resistor("RL", "out", "gnd", "1 kohm")
    build.response("gain", source="VIN", to="out")
    coupled = build.stage()
    assert not nested_of(coupled, ratio(coupled)).ends_cancel


@pytest.mark.parametrize("turns", [1.0, 2.0])
@pytest.mark.parametrize("across", ["resistor", "capacitor"])
def test_a_hidden_mode_may_sit_at_zero_or_at_infinity(across: str, turns: float) -> None:
    """A part that bridges a transformer of ratio 1 carries nothing: the hidden mode's root leaves for an end."""
    build = StageBuilder("hidden mode")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("R1", "in", "out", "10 kohm")
    build.capacitor("C1", "in", "out", "1 pF")
    build.resistor("RL", "out", "gnd", "3 kohm")
    build.capacitor("CL", "out", "gnd", "2 pF")
    build.transformer("T1", primary=("x", "gnd"), secondary=("y", "gnd"), value=turns)
    build.resistor("RB", *(("x", "y") if across == "resistor" else ("x", "gnd")), "1 kohm")
    build.capacitor("CB", *(("x", "y") if across == "capacitor" else ("x", "gnd")), "4 pF")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    exact = derive(stage, stage.asked["gain"])
    nested = nested_of(stage, ratio(stage))
    assert nested.skeleton.common == 1
    given_rows = nested.coefficients(exact.bias_values, 1)
    for hz in (0.0, 1e6, 1e8, 1e10):
        assert at(given_rows, np.array(2j * np.pi * hz)) == pytest.approx(exact.at(hz), rel=1e-10)
