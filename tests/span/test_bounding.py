"""Proved ranges: known extremes, sampling in exact numbers, mpmath's interval arithmetic, and what stops a proof."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise
from math import inf, sqrt

import mpmath
import pytest
from flint import Ordering, arb, ctx, fmpq, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.builder import StageBuilder
from symamp.span import bounding
from symamp.span.bernstein import coefficients_over, degrees_of, halves, value_at
from symamp.span.bounding import (
    BITS,
    Limits,
    Proved,
    float_above,
    float_below,
    greatest_over,
    prove_error_range,
    prove_range,
)
from symamp.span.boxes import ProofBox
from symamp.span.monotone import exact_value, reduced, strict_sign, weak_sign

RING = fmpz_mpoly_ctx.get(("x", "y", "z", "s"), Ordering.lex)
X, Y, Z, _ = RING.gens()
ONE = RING.constant(1)


def holds(found: Proved, least: float, greatest: float, tolerance: float = 1e-4) -> None:
    """Assert that both true extremes lie within bounds that are no further apart than asked for."""
    assert found.finished
    assert found.why == ""
    for end, true in ((found.least, least), (found.greatest, greatest)):
        assert end.lower <= true + 1e-14 * abs(true)
        assert end.upper >= true - 1e-14 * abs(true)
        assert end.gap <= tolerance


def test_a_ratio_that_is_monotone_in_every_side_takes_one_box_an_end() -> None:
    box = ProofBox.between({"x": (1, 10), "y": (1, 10), "z": (1, 3)})
    found = prove_range((X * Y, X + Y + Z), box)
    holds(found, 1 / 5, 100 / 21)
    assert found.boxes == 2
    assert found.method == "proved: signs of derivatives"
    assert found.greatest.at == {"x": 10, "y": 10, "z": 1}
    assert found.least.at == {"x": 1, "y": 1, "z": 3}


def test_a_worst_case_inside_the_box() -> None:
    """x/(1 + x²) is greatest at 1; x over (x + y)² at x = y, where it is 1/(4y)."""
    found = prove_range((X, 1 + X * X), ProofBox.between({"x": (Fraction(1, 10), 10)}))
    holds(found, 10 / 101, 0.5)
    assert found.greatest.at is not None
    assert abs(found.greatest.at["x"] - 1) < 0.05
    box = ProofBox.between({"x": (Fraction(1, 10), 10), "y": (1, 3)})
    found = prove_range((X, (X + Y) ** 2), box)
    holds(found, 0.1 / 3.1**2, 0.25)


def test_the_box_of_a_cubic_with_both_extremes_inside() -> None:
    """x³ − 3x on [−3/2, 7/4]: 2 at −1, −2 at 1 (elementary calculus)."""
    box = ProofBox.between({"x": (Fraction(-3, 2), Fraction(7, 4))})
    holds(prove_range((X**3 - 3 * X, ONE), box, tolerance=1e-6), -2, 2, 1e-6)


def test_a_quadratic_form_and_its_eigenvalues() -> None:
    """(2x² + 2xy + 3y²)/(x² + y²) lies between the eigenvalues of [[2, 1], [1, 3]], (5 ± √5)/2 (linear algebra)."""
    box = ProofBox.between({"x": (-1, 1), "y": (1, 2)})
    found = prove_range((2 * X**2 + 2 * X * Y + 3 * Y**2, X**2 + Y**2), box)
    # The eigenvector of the least has x/y = −1.618, which no point of the box has; nearest is x = −1, y = 1.
    holds(found, 1.5, (5 + sqrt(5)) / 2)


def test_a_follower_is_not_independent() -> None:
    """With y = 2x the ratio x/y is 1/2 throughout; independent sides would give 1/4 to 4."""
    base = ProofBox.between({"x": (1, 4)})
    double = type(base.symbols["x"])(Fraction(2), (1,))
    found = prove_range((X, Y), ProofBox(base.sides, {**base.symbols, "y": double}))
    assert (found.least.lower, found.greatest.upper) == (0.5, 0.5)
    assert found.boxes == 2


def test_relative_tolerance() -> None:
    box = ProofBox.between({"x": (1, 1000), "y": (1, 1000)})
    found = prove_range((10**6 * X * Y, X**2 + Y**2 + 1), box, tolerance=0, relative=1e-3)
    assert found.finished
    assert 0 < found.greatest.gap <= 1e-3 * found.greatest.upper


def test_a_budget_that_does_not_do_still_encloses() -> None:
    box = ProofBox.between({"x": (-1, 1), "y": (-1, 1)})
    ratio = (X**2 * Y - Y**3 + X, 1 + (X - Y) ** 2 + X**2 * Y**2)
    full = prove_range(ratio, box, tolerance=1e-6)
    assert full.finished
    assert full.method == "proved: branch and bound by Bernstein coefficients in ball arithmetic"
    short = prove_range(ratio, box, tolerance=1e-6, budget=9)
    assert not short.finished
    assert "boxes were not enough" in short.why
    assert short.least.lower <= full.least.lower
    assert short.greatest.upper >= full.greatest.upper
    assert short.boxes <= 2 * 10
    late = prove_range(ratio, box, tolerance=1e-12, seconds=0.0)
    assert not late.finished
    assert "0 s were not enough" in late.why


@pytest.mark.parametrize(
    ("below", "sides"),
    [
        (X - Y, {"x": (0, 1), "y": (0, 1)}),
        (X, {"x": (0, 1), "y": (0, 1)}),
        (X, {"x": (-1, 1), "y": (0, 1)}),
        (X + Y - 1, {"x": (0, Fraction(2, 3)), "y": (0, Fraction(2, 3))}),
        (0 * X, {"x": (0, 1), "y": (0, 1)}),
    ],
)
def test_a_denominator_that_vanishes_has_no_bound(below: fmpz_mpoly, sides: dict) -> None:  # type: ignore[type-arg]
    found = prove_range((X * Y + 1, below), ProofBox.between(sides))
    assert not found.finished
    assert "denominator" in found.why
    assert (found.least.lower, found.greatest.upper) == (-inf, inf)


def test_a_denominator_whose_sign_only_pieces_settle() -> None:
    """1 + 9(x − y)² is ≥ 1, but some of its Bernstein coefficients over the unit square are negative."""
    box = ProofBox.between({"x": (0, 1), "y": (0, 1)})
    below = 1 + 9 * (X - Y) ** 2
    with ctx.workprec(BITS):
        assert strict_sign(below, box.domain) is None
    holds(prove_range((ONE, below), box), 0.1, 1)


def test_what_cancels_leaves_nothing_to_search() -> None:
    box = ProofBox.between({"x": (1, 10**6), "y": (1, 10**6)})
    found = prove_range(((X + Y) * (X - Y), (X + Y) * Y), box)
    holds(found, -1 + 1e-6, 1e6 - 1)
    assert found.boxes == 2


def test_a_symbol_without_a_value_says_so() -> None:
    found = prove_range((X, Z), ProofBox.between({"x": (1, 2)}))
    assert not found.finished
    assert found.why == "z has no value"


def test_no_sides_at_all() -> None:
    found = prove_range((X, X + Y), ProofBox.between({}, x=1, y=2))
    assert found.least.lower <= Fraction(1, 3) <= found.least.upper
    assert found.greatest.gap < 1e-15
    assert found.method == "proved: there is one value"


RATIOS = [
    ((X * Y - Z, X + Y * Z), {"x": (1, 2), "y": (1, 3), "z": (1, 2)}),
    ((X**2 - 2 * Y, 2 + X * Y**2), {"x": (-1, 2), "y": (0, 1)}),
    ((X**3 - X * Y, Y + X**2), {"x": (-2, 2), "y": (1, 2)}),
]


@pytest.mark.parametrize(("ratio", "sides"), RATIOS)
def test_against_the_interval_arithmetic_of_mpmath(ratio: tuple, sides: dict) -> None:  # type: ignore[type-arg]
    """The hull of mpmath.iv over a fine grid of pieces holds the true range, and comes near it as pieces shrink."""
    found = prove_range(ratio, ProofBox.between(sides))
    assert found.finished
    low, high = _by_mpmath(ratio, sides, 24 if len(sides) > 2 else 160)
    assert low <= found.least.upper
    assert high >= found.greatest.lower
    span = found.greatest.upper - found.least.lower
    assert found.least.lower - low < 0.1 * span
    assert high - found.greatest.upper < 0.1 * span


@pytest.mark.parametrize(("ratio", "sides"), RATIOS)
def test_an_error_is_multiplied_out_over_the_sides_alone(ratio: tuple, sides: dict) -> None:  # type: ignore[type-arg]
    """formula/exact − 1 is what prove_range makes of it multiplied out; the formula's ring is another."""
    exact = (X + 2 * Y + 7 * ONE, 1 + X**2 + Z**2)
    other = fmpz_mpoly_ctx.get(("z", "y", "x"), Ordering.lex)
    names = other.names()
    formula = tuple(
        other.from_dict(
            {tuple(dict(zip(RING.names(), m, strict=True))[n] for n in names): c for m, c in p.terms()}
        )
        for p in ratio
    )
    box = ProofBox.between({"z": (1, 1), **sides})
    found = prove_error_range(formula, exact, box)
    wanted = prove_range((ratio[0] * exact[1] - exact[0] * ratio[1], exact[0] * ratio[1]), box)
    assert found.finished
    assert wanted.finished
    for one, two in ((found.least, wanted.least), (found.greatest, wanted.greatest)):
        assert abs(one.lower - two.lower) <= 2e-4
        assert abs(one.upper - two.upper) <= 2e-4


def test_an_error_without_an_exact_value_or_with_too_many_terms_is_not_proved(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    box = ProofBox.between({"x": (1, 2)})
    assert (
        prove_error_range((X, ONE), (0 * X, ONE), box).why == "the exact value is 0, or the formula has none"
    )
    monkeypatch.setattr(bounding, "_MOST_PRODUCTS", 3)
    assert prove_error_range((1 + X, ONE), (X, 2 + X), box).why == "the error has too many terms"


def _by_mpmath(ratio: tuple, sides: dict, pieces: int) -> tuple[float, float]:  # type: ignore[type-arg]
    iv = mpmath.iv
    low, high = inf, -inf
    grids = []
    for first, last in sides.values():
        ends = [iv.mpf(first) + (iv.mpf(last) - first) * k / pieces for k in range(pieces + 1)]
        grids.append([iv.mpf([a.a, b.b]) for a, b in pairwise(ends)])
    names = list(sides)
    order = [names.index(n) if n in names else -1 for n in ("x", "y", "z")]

    def value(polynomial: fmpz_mpoly, at: tuple) -> object:  # type: ignore[type-arg]
        total = iv.mpf(0)
        for exponents, coefficient in polynomial.terms():
            term = iv.mpf(int(coefficient))
            for place, exponent in zip(order, exponents, strict=False):
                if exponent:
                    term *= at[place] ** int(exponent)
            total += term
        return total

    def visit(at: tuple) -> None:  # type: ignore[type-arg]
        nonlocal low, high
        if len(at) < len(grids):
            for piece in grids[len(at)]:
                visit((*at, piece))
            return
        found = value(ratio[0], at) / value(ratio[1], at)
        low, high = min(low, float(found.a)), max(high, float(found.b))

    visit(())
    return low, high


@pytest.mark.parametrize(("ratio", "sides"), RATIOS)
def test_nested_sums_prove_the_same(ratio: tuple, sides: dict) -> None:  # type: ignore[type-arg]
    box = ProofBox.between(sides)
    by_bernstein = prove_range(ratio, box, tolerance=1e-3)
    with ctx.workprec(BITS):
        above, below = reduced(*box.polynomials(ratio))
        for sign, end in ((1, by_bernstein.greatest), (-1, by_bernstein.least)):
            found = greatest_over(sign * above, below, box.domain, Limits(1e-3, coefficients=0))
            assert found.finished
            assert found.nested
            assert found.lower is not None
            assert found.upper is not None
            low, high = sorted((sign * float(found.lower), sign * float(found.upper)))
            assert low <= end.upper
            assert high >= end.lower


def test_bernstein_coefficients_hold_the_value_and_its_halves() -> None:
    box = ProofBox.between({"x": (1, 3), "y": (Fraction(1, 7), 2)})
    (p,) = box.polynomials([X**3 * Y - 2 * X * Y**2 + 5])
    degrees = degrees_of(p)
    part = Fraction(3, 8)
    with ctx.workprec(BITS):
        whole = coefficients_over(p, degrees, box.domain)
        for axis in (0, 1):
            low, high = box.domain[axis]
            middle = low + (high - low) * part
            for held, ends in zip(
                halves(whole, degrees, axis, part), ((low, middle), (middle, high)), strict=True
            ):
                domain = tuple(ends if i == axis else interval for i, interval in enumerate(box.domain))
                direct = coefficients_over(p, degrees, domain)
                assert all(a.overlaps(b) for a, b in zip(held, direct, strict=True))
        at = [low + (high - low) * part for low, high in box.domain]
        exact = exact_value(p, at)
        assert value_at(whole, degrees, (part, part)).contains(fmpq(exact.numerator, exact.denominator))


def test_an_exact_value_where_terms_merge_on_the_way() -> None:
    """With x = 1/2 put in, the term in y³ is gone: the value at y = 1/10 was ten times too large."""
    (p,) = ProofBox.between({"x": (0, 1), "y": (0, 1)}).polynomials([(2 * X - 1) * Y**3 + Y**2 + X])
    assert exact_value(p, [Fraction(1, 2), Fraction(1, 10)]) == Fraction(51, 100)
    found = prove_range(((2 * X - 1) * Y**3 + Y**2 + X, ONE), ProofBox.between({"x": (0, 1), "y": (0, 1)}))
    holds(found, 0, 3)


def test_signs_that_are_sure() -> None:
    box = ProofBox.between({"x": (0, 2), "y": (0, 2)})
    with ctx.workprec(BITS):
        signs = {
            name: weak_sign(p, box.domain)
            for name, p in (
                (name, box.polynomials([p])[0])
                for name, p in {
                    "sum": X + Y,
                    "square": (X - Y) ** 2,
                    "cube": (X - Y) ** 3,
                    "shifted": X * Y - 5,
                    "negative": -X * (X - Y) ** 2,
                    "zero": 0 * X,
                }.items()
            )
        }
        (touching,) = box.polynomials([X + Y])
        assert strict_sign(touching, box.domain) is None  # 0 at the corner
    assert signs == {"sum": 1, "square": 1, "cube": None, "shifted": -1, "negative": -1, "zero": 0}


def test_floats_are_rounded_outward() -> None:
    with ctx.workprec(BITS):
        third = arb(fmpq(1, 3))
        assert Fraction(float_below(third)) < Fraction(1, 3) < Fraction(float_above(third))
        assert float_below(arb(3)) == float_above(arb(3)) == 3.0


def test_the_precision_set_before_is_left_as_it_was() -> None:
    before = ctx.prec
    prove_range((X, 1 + X), ProofBox.between({"x": (1, 2)}))
    assert ctx.prec == before


def test_the_box_of_a_stage() -> None:
    """The gain of a common-source stage, −gm·RL/(1 + gds·RL): its extremes by hand."""
    build = StageBuilder("common source")
    build.mosfet("M1", gate="in", drain="out", source="gnd", gm="4 mS", gds="0.1 mS")
    build.resistor("RL", "out", "gnd", "5 kohm")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    build.span("gm1", "2 mS", "8 mS")
    build.span("ro1", "5 kohm", "50 kohm")
    ring = fmpz_mpoly_ctx.get(("gm1", "gds1", "RL", "s"), Ordering.lex)
    gm, gds, rl, _ = ring.gens()
    found = prove_range((-gm * rl, 1 + gds * rl), ProofBox.of(build.stage()))
    holds(found, -40 / 1.1, -10 / 2)
    assert found.least.at == {"gm1": Fraction(8, 1000), "ro1": 50000}


def test_factors_with_large_coefficients() -> None:
    """python-flint cannot sort factors whose coefficients pass 64 bits; then there are none, and no error."""
    big = 10**40
    polynomial = (big * X + (big + 1) * Y) * (big * X + (big + 7) * Y) * ((big + 3) * X + Y)
    found = prove_range((polynomial, polynomial + ONE), ProofBox.between({"x": (1, 2), "y": (1, 2)}))
    assert found.finished
    assert found.greatest.upper <= 1 + 1e-15
