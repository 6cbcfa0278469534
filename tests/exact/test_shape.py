"""Shapes say what their polynomials say, in text, LaTeX and SymPy, and read as a designer writes."""

import ast
import operator
from fractions import Fraction
from typing import Any

import pytest
import sympy
from flint import Ordering, fmpz_mpoly_ctx
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.circuit.latex_names import latex_name
from symamp.exact.shape import (
    FACTOR_LIMIT,
    Factor,
    QuadraticRoot,
    Shape,
    polynomial_latex,
    polynomial_sympy,
    polynomial_text,
    shape_in_resistances,
    shape_of,
)

NAMES = ("gm1", "gm2", "gmb2", "gds1", "gds2", "R_load", "CL", "s")
RING = fmpz_mpoly_ctx.get(NAMES, Ordering.lex)
GM1, GM2, GMB2, GDS1, GDS2, RL, CL, S = RING.gens()
ZERO, ONE = RING.constant(0), RING.constant(1)

_OPERATORS = {
    ast.Add: operator.add,
    ast.Sub: operator.sub,
    ast.Mult: operator.mul,
    ast.Div: operator.truediv,
    ast.Pow: operator.pow,
}


def evaluated(text: str, values: dict[str, Any], root: Any = None) -> Any:
    """The value of a formula, by walking its syntax tree; anything but our grammar raises."""

    def walk(node: ast.expr) -> Any:
        if isinstance(node, ast.BinOp):
            return _OPERATORS[type(node.op)](walk(node.left), walk(node.right))
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub):
            return -walk(node.operand)
        if isinstance(node, ast.Constant) and type(node.value) is int:
            # Powers stay integers, all else is exact.
            return node.value if node in powers else Fraction(node.value)
        if isinstance(node, ast.Name):
            return values[node.id]
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "sqrt":
            return root(walk(node.args[0]))
        raise AssertionError(f"{ast.dump(node)} is not in the grammar")

    tree = ast.parse(text, mode="eval").body
    powers = {
        node.right for node in ast.walk(tree) if isinstance(node, ast.BinOp) and type(node.op) is ast.Pow
    }
    return walk(tree)


def value_of(polynomial: Any, values: dict[str, Any]) -> Any:
    """The polynomial's value term by term."""
    names = polynomial.context().names()
    total = 0
    for exponents, coefficient in zip(polynomial.monoms(), polynomial.coeffs(), strict=True):
        product = Fraction(int(coefficient))
        for name, exponent in zip(names, exponents, strict=True):
            product = product * values[name] ** int(exponent)
        total = total + product
    return total


monomials = st.tuples(*(st.sampled_from((0, 0, 0, 1, 2)) for _ in NAMES))
small_polynomials = st.dictionaries(monomials, st.integers(-4, 4), max_size=4).map(RING.from_dict)
products = st.lists(small_polynomials, min_size=1, max_size=3).map(
    lambda factors: factors[0] * (factors[1] if len(factors) > 1 else ONE) * (factors[-1])
)
nonzero = products.filter(lambda polynomial: not polynomial.is_zero())
positive = st.fractions(Fraction(1, 9), 9, max_denominator=9)
points = st.fixed_dictionaries(dict.fromkeys(NAMES, positive))
signed_weights = st.fixed_dictionaries({name: st.sampled_from((-3.0, 0.0, 0.5, 1.0, 7.0)) for name in NAMES})


@settings(max_examples=80, deadline=None)
@given(products, nonzero, points, st.none() | signed_weights)
def test_text_means_the_ratio(numerator: Any, denominator: Any, values: Any, weights: Any) -> None:
    below = value_of(denominator, values)
    if below == 0:
        return
    shape = shape_of(numerator, denominator, weights)
    assert evaluated(shape.text(), values) == value_of(numerator, values) / below


@settings(max_examples=80, deadline=None)
@given(products, nonzero, st.none() | signed_weights)
def test_no_sum_begins_with_a_minus(numerator: Any, denominator: Any, weights: Any) -> None:
    shape = shape_of(numerator, denominator, weights)
    for factor in (*shape.numerator, *shape.denominator):
        assert factor.power > 0
        if factor.is_sum:
            signs = [coefficient > 0 for coefficient, _ in factor.base]
            assert signs == sorted(signs, reverse=True)
            assert signs[0]


@settings(max_examples=40, deadline=None)
@given(products, nonzero)
def test_sympy_means_the_ratio(numerator: Any, denominator: Any) -> None:
    expected = polynomial_sympy(numerator) / polynomial_sympy(denominator)
    assert sympy.cancel(shape_of(numerator, denominator).sympy() - expected) == 0


@settings(max_examples=60, deadline=None)
@given(products, points)
def test_polynomial_text_means_the_polynomial(polynomial: Any, values: Any) -> None:
    assert evaluated(polynomial_text(polynomial), values) == value_of(polynomial, values)


@settings(max_examples=60, deadline=None)
@given(products, nonzero)
def test_latex_is_balanced(numerator: Any, denominator: Any) -> None:
    assert_balanced(shape_of(numerator, denominator).latex())
    assert_balanced(polynomial_latex(numerator))


def assert_balanced(latex: str) -> None:
    for opening, closing in ("{}", "()"):
        depth = 0
        for character in latex:
            depth += (character == opening) - (character == closing)
            assert depth >= 0
        assert depth == 0
    assert "**" not in latex
    assert "*" not in latex


@settings(max_examples=60, deadline=None)
@given(products, nonzero, points)
def test_resistances_mean_the_same(numerator: Any, denominator: Any, values: Any) -> None:
    below = value_of(denominator, values)
    if below == 0:
        return
    shape = shape_in_resistances(numerator, denominator, {"gds1": "ro1", "gds2": "ro2", "go7": "ro7"})
    text = shape.text()
    assert "gds" not in text
    renamed = {**values, "ro1": 1 / values["gds1"], "ro2": 1 / values["gds2"]}
    assert evaluated(text, renamed) == value_of(numerator, values) / below


def test_a_cascode_reads_as_a_designer_writes_it() -> None:
    numerator, denominator = -GM1 * (GM2 + GMB2 + GDS2), GDS1 * GDS2
    shape = shape_of(numerator, denominator)
    assert shape.text() == "-gm1*(gm2 + gmb2 + gds2)/(gds1*gds2)"
    assert shape.latex() == r"-\frac{g_{m1} (g_{m2} + g_{mb2} + g_{ds2})}{g_{ds1} g_{ds2}}"
    turned = shape_in_resistances(numerator, denominator, {"gds1": "ro1", "gds2": "ro2"})
    assert turned.text() == "-gm1*ro1*(1 + gm2*ro2 + gmb2*ro2)"


@pytest.mark.parametrize(
    ("numerator", "denominator", "text"),
    [
        (ZERO, GM1, "0"),
        (ONE, None, "1"),
        (-ONE, RING.constant(2), "-1/2"),
        (GM1, RING.constant(2), "gm1/2"),
        (GM1, GDS1, "gm1/gds1"),
        (GM1**2, GDS1**2, "gm1**2/gds1**2"),
        (GM1 + GM2, GDS1 + GDS2, "(gm1 + gm2)/(gds1 + gds2)"),
        (-GM1 - GM2, None, "-(gm1 + gm2)"),
        (GDS1 - GM1, GM2, "-(gm1 - gds1)/gm2"),
        (CL * S - GM1, GDS1, "-(gm1 - CL*s)/gds1"),
        (3 * (GM1 + GM2) ** 2, 2 * RL * (1 + GM1 * RL), "3*(gm1 + gm2)**2/(2*R_load*(1 + gm1*R_load))"),
    ],
)
def test_small_shapes(numerator: Any, denominator: Any, text: str) -> None:
    assert shape_of(numerator, denominator).text() == text


def test_order_of_terms_follows_the_context_unless_weights_are_given() -> None:
    total = GDS2 + GMB2 + GM2 + GM1
    assert shape_of(total).text() == "gm1 + gm2 + gmb2 + gds2"
    weights = {"gm1": 1.0, "gm2": 5.0, "gmb2": 9.0}
    assert shape_of(total, weights=weights).text() == "gmb2 + gm2 + gm1 + gds2"


def test_weights_settle_the_sign_in_front() -> None:
    difference = GM1 - GM2
    assert shape_of(difference, weights={"gm1": 1.0, "gm2": 2.0}).text() == "-(gm2 - gm1)"
    assert shape_of(difference, weights={"gm1": 2.0, "gm2": 1.0}).text() == "gm1 - gm2"
    assert shape_of(difference, weights={"gm1": 1.0, "gm2": 1.0}).text() == "gm1 - gm2"
    # A symbol that is negative at the bias point counts with its sign.
    assert shape_of(GM1 - GM2, weights={"gm1": -1.0, "gm2": 2.0}).text() == "-(gm2 - gm1)"
    assert shape_of(GM1 - GM2, weights={"gm1": 1.0, "gm2": -2.0}).text() == "gm1 - gm2"


def test_a_long_polynomial_is_not_factored_but_loses_its_common_monomial() -> None:
    names = [f"g{i}" for i in range(30)]
    gens = fmpz_mpoly_ctx.get(names, Ordering.lex).gens()
    one, other = sum(gens[1:], gens[0]), sum(gens[1:], 2 * gens[0])
    long = -6 * gens[0] * gens[3] ** 2 * one * other
    assert len(long) > FACTOR_LIMIT
    shape = shape_of(long)
    assert shape.coefficient == -6
    assert shape.numerator[:2] == (Factor("g0"), Factor("g3", 2))
    assert len(shape.numerator) == 3
    values = {name: Fraction(place + 1, 7) for place, name in enumerate(names)}
    assert evaluated(shape.text(), values) == value_of(long, values)


@settings(max_examples=60, deadline=None)
@given(nonzero, products, products, st.sampled_from((1, -1)))
def test_a_quadratic_root_solves_its_equation(a: Any, b: Any, c: Any, branch: int) -> None:
    values = {name: sympy.Integer(place + 2) / 3 for place, name in enumerate(NAMES)}
    whole = [sum_sympy_value(each, values) for each in (a, b, c)]
    if whole[0] == 0:
        return
    root = QuadraticRoot.of(a, b, c, branch)
    expected = (-whole[1] + branch * sympy.sqrt(whole[1] ** 2 - 4 * whole[0] * whole[2])) / (2 * whole[0])
    found = evaluated(root.text(), values, sympy.sqrt)
    assert sympy.simplify(found - expected) == 0
    symbols = {symbol: values[symbol.name] for symbol in root.sympy().free_symbols}
    assert sympy.simplify(root.sympy().subs(symbols) - expected) == 0
    assert_balanced(root.latex())


def sum_sympy_value(polynomial: Any, values: dict[str, Any]) -> Any:
    exact = value_of(polynomial, {name: Fraction(int(v.p), int(v.q)) for name, v in values.items()})
    return sympy.Rational(Fraction(exact).numerator, Fraction(exact).denominator)


def test_a_quadratic_root_reads_as_in_a_text_book() -> None:
    root = QuadraticRoot.of(GM1, GM2 + GDS2, GDS1, -1)
    assert root.text() == "(-(gm2 + gds2) - sqrt((gm2 + gds2)**2 - 4*gm1*gds1))/(2*gm1)"
    assert root.latex() == (
        r"\frac{-(g_{m2} + g_{ds2}) - \sqrt{(g_{m2} + g_{ds2})^2 - 4 g_{m1} g_{ds1}}}{2 g_{m1}}"
    )
    assert QuadraticRoot.of(GM1, ZERO, -GDS1, 1).text() == "sqrt(4*gm1*gds1)/(2*gm1)"


def test_what_has_no_meaning_is_refused() -> None:
    with pytest.raises(ZeroDivisionError):
        shape_of(GM1, ZERO)
    with pytest.raises(ZeroDivisionError):
        QuadraticRoot.of(ZERO, GM1, GM2, 1)
    with pytest.raises(ValueError, match="branch=2"):
        QuadraticRoot.of(GM1, GM1, GM2, 2)
    with pytest.raises(ValueError, match="ro1"):
        shape_in_resistances(GM1, GM2, {"gds1": "ro1", "gds2": "ro1"})


def test_products_gather_and_cancel_factors() -> None:
    product = shape_of(GM1 * (GM1 + GM2), GDS1) * shape_of(-GDS1 * GM1, 2 * (GM1 + GM2))
    assert product.text() == "-gm1**2/2"
    assert (product * Shape(Fraction(0))).text() == "0"


def test_sympy_symbols_are_positive_unless_they_may_be_negative() -> None:
    expression = shape_of(GM1 * S, GM2).sympy(frozenset({"gm2"}))
    natures = {symbol.name: symbol for symbol in expression.free_symbols}
    assert natures["gm1"].is_positive
    assert natures["gm2"].is_positive is None
    assert natures["gm2"].is_real
    assert natures["s"].is_real is None


@pytest.mark.parametrize(
    ("symbol", "latex"),
    [
        ("gm1", "g_{m1}"),
        ("gmb1", "g_{mb1}"),
        ("gds1", "g_{ds1}"),
        ("gds12", "g_{ds12}"),
        ("ro1", "r_{o1}"),
        ("go3", "g_{o3}"),
        ("cgd1", "C_{gd1}"),
        ("gm_tail", "g_{m,tail}"),
        ("gm_tail_a", r"g_{m,tail\_a}"),
        ("gpi3", r"g_{\pi 3}"),
        ("rpi3", r"r_{\pi 3}"),
        ("cpi3", r"C_{\pi 3}"),
        ("cmu3", r"C_{\mu 3}"),
        ("cpi_out", r"C_{\pi,out}"),
        ("rx3", "r_{x3}"),
        ("beta1", r"\beta_1"),
        ("beta_tail", r"\beta_{tail}"),
        ("gm", "g_m"),
        ("gds", "g_{ds}"),
        ("CL", "C_L"),
        ("RS", "R_S"),
        ("R1", "R_1"),
        ("R_1", "R_1"),
        ("R_load", "R_{load}"),
        ("Cload", "C_{load}"),
        ("cgdx", "c_{gdx}"),
        ("A%#", r"A_{\%\#}"),
        ("R", "R"),
        ("s", "s"),
    ],
)
def test_latex_names(symbol: str, latex: str) -> None:
    assert latex_name(symbol) == latex


@given(st.text(max_size=8))
def test_any_name_leaves_latex_whole(name: str) -> None:
    written = latex_name(name)
    for escaped in (r"\{", r"\}"):
        written = written.replace(escaped, "")
    assert written.count("{") == written.count("}")
    # Every special character stands behind a backslash.
    assert not any(
        character in "#$%&" and written[place - 1 : place] != "\\" for place, character in enumerate(written)
    )
