"""Formulas in the terminal: within the width, broken at signs, and still the formula."""

from typing import Any

import pytest
from flint import Ordering, fmpz_mpoly_ctx
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.exact.shape import QuadraticRoot, shape_of
from symamp.show.formulas import MAX_LINES, formula_lines, one_line, polynomial_lines

NAMES = ("gm1", "gm2", "gmb2", "gds1", "gds2", "RS", "CL")
RING = fmpz_mpoly_ctx.get((*NAMES, "s"), Ordering.lex)
GM1, GM2, GMB2, GDS1, GDS2, RS, CL, S = RING.gens()
ZERO, ONE = RING.constant(0), RING.constant(1)
CASCODE = shape_of(-GM1 * (GM2 + GMB2 + GDS2), GDS1 * GDS2)

exponents = st.tuples(*(st.sampled_from((0, 0, 1, 2)) for _ in NAMES), st.just(0))
sums = st.dictionaries(exponents, st.integers(-3, 9).filter(bool), min_size=1, max_size=6).map(RING.from_dict)
products = st.lists(sums, min_size=1, max_size=3).map(lambda each: each[0] * each[-1] ** 2)
widths = st.integers(8, 120)


def assert_within(lines: list[str], width: int) -> None:
    """A line wider than asked holds one term alone."""
    for line in lines:
        assert line == line.rstrip()
        body = line.strip().removeprefix("+ ").removeprefix("− ")
        assert len(line) <= width or " " not in body


def spoken(lines: list[str]) -> str:
    """The lines without blanks and bar, to be compared with the line that they break."""
    return "".join(line.replace(" ", "") for line in lines)


@settings(max_examples=100, deadline=None)
@given(products, products, widths, st.sampled_from(("", "gain", "a.rather.long.label")))
def test_fractions_keep_to_the_width(numerator: Any, denominator: Any, width: int, label: str) -> None:
    assert_within(formula_lines(shape_of(numerator, denominator), width, label=label), width)


@settings(max_examples=100, deadline=None)
@given(products, widths)
def test_broken_lines_hold_the_whole_formula(polynomial: Any, width: int) -> None:
    shape = shape_of(polynomial)
    lines = formula_lines(shape, width)
    assert_within(lines, width)
    assert len(lines) <= MAX_LINES + 2
    if not any("terms in all" in line for line in lines):
        assert spoken(lines) == one_line(shape).replace(" ", "")


@settings(max_examples=60, deadline=None)
@given(products, sums, widths)
def test_a_fraction_holds_both_halves(numerator: Any, denominator: Any, width: int) -> None:
    shape = shape_of(numerator, denominator)
    lines = formula_lines(shape, width)
    bars = [place for place, line in enumerate(lines) if "─" in line]
    if not bars or any("…" in line for line in lines):
        return
    above, below = spoken(lines[: bars[0]]), spoken(lines[bars[0] + 1 :])
    # A half is bracketed on one line where it is a sum or, below, a product.
    expected = one_line(shape).replace(" ", "").removeprefix("−")
    assert expected in {
        f"{top}/{bottom}" for top in (above, f"({above})") for bottom in (below, f"({below})")
    }


@settings(max_examples=60, deadline=None)
@given(sums, sums, sums, widths)
def test_quadratic_roots_keep_to_the_width(a: Any, b: Any, c: Any, width: int) -> None:
    # The letters' form needs "+ √(b² − 4·a·c)", which is one term.
    lines = formula_lines(QuadraticRoot.of(a, b, c, 1), width, label="p1")
    assert all("√" in line or len(line) <= width or " " not in line.strip(" +−") for line in lines)


@settings(max_examples=60, deadline=None)
@given(st.lists(sums | st.just(ZERO), max_size=4), widths)
def test_polynomials_keep_to_the_width(coefficients: list[Any], width: int) -> None:
    lines = polynomial_lines(coefficients, width, label="D(s)")
    assert_within([line.removeprefix("D(s) = ") if width < 16 else line for line in lines], width)


def test_a_fraction_is_stacked_on_its_bar() -> None:
    assert formula_lines(CASCODE, 80, label="gain") == [
        "         gm1·(gm2 + gmb2 + gds2)",
        "gain = − ───────────────────────",
        "                gds1·gds2",
    ]
    assert one_line(CASCODE) == "−gm1·(gm2 + gmb2 + gds2)/(gds1·gds2)"


def test_a_narrow_fraction_breaks_under_its_first_term() -> None:
    assert formula_lines(CASCODE, 22, label="gain") == [
        "gain =",
        "    gm1·(gm2 + gmb2",
        "         + gds2)",
        "  − ───────────────",
        "       gds1·gds2",
    ]


@pytest.mark.parametrize(
    ("numerator", "denominator", "lines"),
    [
        (ZERO, None, ["x = 0"]),
        (-ONE, RING.constant(2), ["x = −1/2"]),
        (-GM1 - GM2, None, ["x = −(gm1 + gm2)"]),
        (GM1 + GM2, None, ["x = gm1 + gm2"]),
        (GM1**2 * GM2**12, None, ["x = gm1²·gm2^12"]),
        (2 * (GM1 - GM2) ** 3, None, ["x = 2·(gm1 − gm2)³"]),
        (GM1, RING.constant(2), ["    gm1", "x = ───", "     2"]),
    ],
)
def test_small_formulas(numerator: Any, denominator: Any, lines: list[str]) -> None:
    assert formula_lines(shape_of(numerator, denominator), 40, label="x") == lines


def test_polynomials_in_s() -> None:
    coefficients = [GM1 + GM2, -GM1 * GM2, ZERO, (GM1 + GDS1) * GM2, ONE]
    assert polynomial_lines(coefficients, 80, label="D(s)") == [
        "D(s) = (gm1 + gm2) − gm1·gm2·s + gm2·(gm1 + gds1)·s³ + s⁴"
    ]
    assert polynomial_lines(coefficients, 30, label="D(s)") == [
        "D(s) = (gm1 + gm2)",
        "       − gm1·gm2·s",
        "       + gm2·(gm1 + gds1)·s³",
        "       + s⁴",
    ]
    assert polynomial_lines([shape_of(GM1, GDS1 * GM2), shape_of(GM1, GDS1)], 80, "w") == [
        "gm1/(gm2·gds1) + gm1·w/gds1"
    ]
    assert polynomial_lines([], 80) == ["0"]


def test_a_hopeless_formula_says_how_many_terms_it_has() -> None:
    ring = fmpz_mpoly_ctx.get([f"g{i}" for i in range(40)], Ordering.lex)
    gens = ring.gens()
    total = sum(gens[1:], gens[0])
    long = total * total * gens[1]  # 820 distinct products times a symbol: not factored
    lines = formula_lines(shape_of(long, gens[0]), 60, label="x")
    assert len(lines) <= MAX_LINES
    assert any("… 820 terms in all" in line for line in lines)
    assert_within([line for line in lines if "…" not in line], 60)
    alone = formula_lines(shape_of(long), 60)
    assert len(alone) == MAX_LINES
    assert alone[-1] == "… 820 terms in all"
    many = polynomial_lines([long, long], 60)
    assert len(many) <= MAX_LINES
    assert sum("820 terms" in line for line in many) == 2


def test_a_wide_quadratic_root_is_written_with_letters() -> None:
    root = QuadraticRoot.of(CL, GM2 + GDS2, GDS1, -1)
    assert formula_lines(root, 80, label="p1") == [
        "     −(gm2 + gds2) − √((gm2 + gds2)² − 4·CL·gds1)",
        "p1 = ────────────────────────────────────────────",
        "                         2·CL",
    ]
    assert formula_lines(root, 36, label="p1") == [
        "     −b − √(b² − 4·a·c)",
        "p1 = ──────────────────",
        "            2·a",
        "a = CL",
        "b = gm2 + gds2",
        "c = gds1",
    ]


def test_a_width_must_be_positive() -> None:
    with pytest.raises(ValueError, match="width=0"):
        formula_lines(CASCODE, 0)
    with pytest.raises(ValueError, match="width=-1"):
        polynomial_lines([GM1], -1)
