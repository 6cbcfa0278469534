"""Formulas: the grammar, its refusals with their carets, and the algebras that come with it."""

from __future__ import annotations

import math
import time
from contextlib import suppress
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.errors import ReadError
from symamp.formula import (
    Binary,
    Call,
    Name,
    Negate,
    Node,
    Number,
    Parallel,
    Pi,
    Power,
    dimension_of,
    dimension_of_unit,
    error_at,
    evaluate,
    names,
    parse,
    write,
)

VALUES = {"a": 2.0, "b": 3.0, "c": 5.0, "gm1": 4e-3, "ro1": 5e3, "RL": 5e3, "CL": 1e-12}
UNITS = {"a": "", "b": "", "c": "", "gm1": "S", "ro1": "ohm", "RL": "ohm", "CL": "F", "L1": "H"}


def number(value: int, unit: str = "") -> Number:
    return Number(Fraction(value), unit)


TREES: list[tuple[str, Node]] = [
    ("a + b*c", Binary("+", Name("a"), Binary("*", Name("b"), Name("c")))),
    ("a - b - c", Binary("-", Binary("-", Name("a"), Name("b")), Name("c"))),
    ("a/b/c", Binary("/", Binary("/", Name("a"), Name("b")), Name("c"))),
    ("-a^2", Negate(Power(Name("a"), Fraction(2)))),
    ("a**-1", Power(Name("a"), Fraction(-1))),
    ("a^2^3", Power(Name("a"), Fraction(8))),
    ("a**(1/2)", Power(Name("a"), Fraction(1, 2))),
    ("a*-b", Binary("*", Name("a"), Negate(Name("b")))),
    ("a || b || c", Parallel(Parallel(Name("a"), Name("b")), Name("c"))),
    ("gm1*(ro1||RL)", Binary("*", Name("gm1"), Parallel(Name("ro1"), Name("RL")))),
    ("sqrt(a) || abs(b)", Parallel(Call("sqrt", Name("a")), Call("abs", Name("b")))),
    ("2*pi", Binary("*", number(2), Pi())),
    ("5 kohm", number(5000, "ohm")),
    ("5k", number(5000)),
    ("10 pF", Number(Fraction(1, 10**11), "F")),
    ("1e-3", Number(Fraction(1, 1000))),
    ("2*s", Binary("*", number(2), Name("s"))),
    ("2 S", number(2, "S")),
]


@pytest.mark.parametrize(("text", "tree"), TREES)
def test_trees(text: str, tree: Node) -> None:
    assert parse(text) == tree


REFUSED = [
    ("a*b || c", 5, "reads two ways"),
    ("a || b*c", 7, "reads two ways"),
    ("a + b || c", 7, "reads two ways"),
    ("-a || b", 4, "reads two ways"),
    ("9**9**9**9", 5, "too large"),
    ("a**65", 2, "too large"),
    ("(a**9)**9", 7, "too high"),
    ("a ** gm1", 3, "no pure number"),
    ("2 gm1", 3, "no SI prefix"),
    ("4k7", 2, "no SI prefix"),
    ("a b", 3, "operator is missing"),
    ("a (b)", 1, "no function"),
    ("(a)(b)", 4, "operator is missing"),
    ("(a", 1, "not closed"),
    ("a)", 2, "not opened"),
    ("a*", 3, "ends too early"),
    ("a*/b", 3, "cannot stand here"),
    ("()", 2, "cannot stand here"),
    ("", 1, "empty"),
    ("  ", 1, "empty"),
    ("sqrt a", 6, "needs brackets"),
    ("foo(1)", 1, "no function"),
    ("a@b", 2, "no meaning"),
    ("a | b", 3, "no meaning"),
    ("a.b", 2, "no meaning"),
    ("1,5", 2, "no meaning"),
    ("é + 1", 1, "no name"),
    ("1e999999", 1, "power of ten"),
    ("__import__(os)", 1, "no function"),
    ("(" * 200, 66, "within one another"),
    ("-" * 200 + "a", 66, "within one another"),
]


@pytest.mark.parametrize(("text", "column", "words"), REFUSED)
def test_refusals_say_what_and_where(text: str, column: int, words: str) -> None:
    with pytest.raises(ReadError) as caught:
        parse(text)
    message, shown, caret = str(caught.value).rsplit("\n", 2)
    assert words in message
    if len(text) <= 76:
        assert shown == "    " + text
        assert caret == "    " + " " * (column - 1) + "^"
    else:
        assert caret.endswith("^")


def test_a_formula_must_be_text_and_of_some_length() -> None:
    with pytest.raises(ReadError, match="no formula"):
        parse(3)  # type: ignore[arg-type]
    with pytest.raises(ReadError, match="characters"):
        parse("a+" * 20_000 + "a")


def test_long_sums_need_no_recursion() -> None:
    text = " + ".join(["a"] * 4000)
    start = time.perf_counter()
    assert evaluate(parse(text), VALUES.__getitem__) == 8000
    assert write(parse(text)) == text
    assert time.perf_counter() - start < 2


def test_carets_in_long_formulas_stay_in_view() -> None:
    message, shown, caret = str(error_at("x" * 500 + "!" + "y" * 500, 501, "here")).split("\n")
    assert message == "here"
    assert shown[caret.index("^")] == "!"


def test_names_come_once_in_order() -> None:
    assert names(parse("b*a + sqrt(b)/pi - c")) == ["b", "a", "c"]
    node = parse("b*a")
    assert isinstance(node, Binary)
    assert isinstance(node.b, Name)
    assert node.b.column == 3


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("-gm1*(ro1||RL)", -10.0),
        ("1/(2*pi*(ro1 || RL)*CL)", 1 / (2 * math.pi * 2.5e3 * 1e-12)),
        ("sqrt(a**2 + abs(-b))", math.sqrt(7)),
        ("a - b - c", -6.0),
        ("1/(a - a)", math.inf),
        ("(a - a) || b", 0.0),
        ("10**60*10**60*10**60*10**60*10**60*10**60", math.inf),
    ],
)
def test_values(text: str, value: float) -> None:
    assert evaluate(parse(text), VALUES.__getitem__) == pytest.approx(value, rel=1e-14)


def test_what_has_no_real_value_is_nan() -> None:
    for text in ("sqrt(a - b)", "(a - b)**(1/2)", "(a - a)/(a - a)"):
        assert math.isnan(evaluate(parse(text), VALUES.__getitem__))


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("gm1*ro1", ""),
        ("gm1*(ro1 || RL)", ""),
        ("1/(2*pi*ro1*CL)", "Hz"),
        ("gm1 + 1/ro1", "S"),
        ("sqrt(L1/CL)", "ohm"),
        ("1/sqrt(L1*CL)", "Hz"),
        ("gm1**2", "S**2"),
        ("sqrt(gm1)", "S**(1/2)"),
        ("gm1*25 mV", "A"),
        ("5 kohm || ro1", "ohm"),
        ("gm1*L1", "s"),
    ],
)
def test_units(text: str, unit: str) -> None:
    assert dimension_of(parse(text), UNITS.__getitem__).unit == unit


def test_units_of_names() -> None:
    assert dimension_of_unit("F") == dimension_of_unit("S").times(dimension_of_unit("s"))
    assert dimension_of_unit("H") == dimension_of_unit("s").times(dimension_of_unit("ohm"))
    assert dimension_of_unit("Hz") == dimension_of_unit("s").to(Fraction(-1))


@pytest.mark.parametrize("text", ["gm1 + ro1", "a - gm1", "gm1*(ro1 || CL)", "2 + 1/CL"])
def test_unlike_units_do_not_add(text: str) -> None:
    with pytest.raises(ReadError, match="joins"):
        dimension_of(parse(text), UNITS.__getitem__)


def _trees() -> st.SearchStrategy[Node]:
    leaves = st.one_of(
        st.sampled_from("abc").map(Name),
        st.just(Pi()),
        st.builds(Number, st.fractions(0, 1000, max_denominator=40).filter(bool)),
    )

    def grow(inner: st.SearchStrategy[Node]) -> st.SearchStrategy[Node]:
        return st.one_of(
            st.builds(Binary, st.sampled_from("+-*/"), inner, inner),
            st.builds(Parallel, inner, inner),
            st.builds(Negate, inner),
            st.builds(Power, leaves, st.sampled_from([Fraction(2), Fraction(-1), Fraction(1, 2)])),
            st.builds(Power, st.builds(Negate, inner), st.just(Fraction(-1))),
            st.builds(Call, st.just("abs"), inner),
        )

    return st.recursive(leaves, grow, max_leaves=8)


@given(_trees())
def test_what_is_written_reads_back_to_the_same_value(tree: Node) -> None:
    again = parse(write(tree))
    before = evaluate(tree, VALUES.__getitem__)
    after = evaluate(again, VALUES.__getitem__)
    assert after == pytest.approx(before, rel=1e-6, abs=1e-9, nan_ok=True) or abs(before) > 1e12


@given(st.text(alphabet="ab12+-*/^|() .ekmS", max_size=25))
def test_no_text_raises_anything_but_a_read_error(text: str) -> None:
    node: Node = Pi()
    with suppress(ReadError):
        node = parse(text)
    assert write(parse(write(node))) == write(node)
