"""Proofs against what is meant to break them: no value of the ratio ever lies outside its enclosure."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import pairwise
from math import inf, isfinite, sqrt

import pytest
from flint import Ordering, ctx, fmpq, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.span.bounding import BITS, Limits, Proved, greatest_over, prove_range
from symamp.span.boxes import NoProof, Product, ProofBox
from symamp.span.monotone import reduced

NAMES = ("a", "b", "c", "d")
RING = fmpz_mpoly_ctx.get((*NAMES, "s"), Ordering.lex)
A, B, C, D, _ = RING.gens()
ONE = RING.constant(1)
Point = dict[str, Fraction]


def value(polynomial: fmpz_mpoly, at: Point) -> Fraction:
    """Term by term, in exact numbers."""
    exact = [fmpq(at[name].numerator, at[name].denominator) for name in NAMES if name in at]
    total = fmpq(0)
    for exponents, coefficient in polynomial.terms():
        term = fmpq(coefficient)
        for base, exponent in zip(exact, exponents, strict=False):
            if exponent:
                term *= base**exponent
        total += term
    return Fraction(int(total.p), int(total.q))


def random_polynomial(draw: random.Random, sides: int, terms: int) -> fmpz_mpoly:
    """Degrees to 3 in each side, coefficients of both signs."""
    rows = {}
    for _ in range(terms):
        exponents = tuple(draw.randint(0, 3) if i < sides else 0 for i in range(5))
        rows[exponents] = draw.choice((-1, 1)) * draw.randint(1, 9)
    return RING.from_dict(rows)


def random_side(draw: random.Random) -> tuple[Fraction, Fraction]:
    """One point, an interval anywhere (through zero, below zero, from zero), or some decades."""
    kind = draw.random()
    low = Fraction(draw.randint(-9, 9), draw.randint(1, 5))
    if kind < 0.15:
        return low, low
    if kind < 0.5:
        return low, low + Fraction(draw.randint(1, 9), draw.randint(1, 5))
    low = Fraction(draw.randint(1, 9), 10 ** draw.randint(0, 4))
    return low, low * draw.choice((2, 3, 10, 1000, 10**6))


def random_point(draw: random.Random, box: ProofBox) -> Point:
    """Corners and faces are as likely as the inside; wide sides by size."""
    at = {}
    for side in box.sides:
        part = Fraction(draw.choice((0, 1, draw.randint(0, 1024) / 1024, draw.randint(0, 1024) / 1024)))
        if side.low > 0 and draw.random() < 0.5:
            value_ = Fraction(float(side.low) * float(side.high / side.low) ** float(part))
            at[side.name] = min(side.high, max(side.low, value_))
        else:
            at[side.name] = side.low + (side.high - side.low) * part
    return at


def hold(found: Proved, above: fmpz_mpoly, below: fmpz_mpoly, box: ProofBox, points: list[Point]) -> None:
    """Assert that no value lies outside, and that the witnesses have the values that are said to be reached."""
    for at in points:
        symbols = box.symbol_values(at)
        under = value(below, symbols)
        if not under:
            continue
        here = value(above, symbols) / under
        assert found.least.lower == -inf or Fraction(found.least.lower) <= here
        assert found.greatest.upper == inf or here <= Fraction(found.greatest.upper)
    for end, reached in ((found.least, found.least.upper), (found.greatest, found.greatest.lower)):
        assert end.lower <= end.upper
        if end.at is None or not isfinite(reached):
            continue
        for side in box.sides:
            assert side.low <= end.at[side.name] <= side.high
        symbols = box.symbol_values(end.at)
        if value(below, symbols):
            here = value(above, symbols) / value(below, symbols)
            assert float(here) == pytest.approx(reached, rel=1e-12, abs=1e-300)


@pytest.mark.parametrize("part", range(10))
def test_a_thousand_random_ratios(part: int) -> None:
    """A hundred each; 200 random points of each box in exact numbers."""
    finished = 0
    for number in range(100):
        draw = random.Random(1000 * part + number)
        sides = draw.randint(1, 4)
        above = random_polynomial(draw, sides, draw.randint(1, 8))
        below = random_polynomial(draw, sides, draw.randint(1, 6))
        if draw.random() < 0.5:
            below = below * below + 1
        box = ProofBox.between(
            {name: random_side(draw) for name in NAMES[:sides]}, **dict.fromkeys(NAMES[sides:], 0)
        )
        found = prove_range((above, below), box, relative=1e-3, budget=60)
        hold(found, above, below, box, [random_point(draw, box) for _ in range(200)])
        finished += found.finished
    assert finished > 60  # the others have denominators that vanish, or want more boxes


def test_random_ratios_by_nested_sums() -> None:
    for number in range(60):
        draw = random.Random(number)
        sides = draw.randint(1, 3)
        above = random_polynomial(draw, sides, draw.randint(1, 8))
        below = random_polynomial(draw, sides, draw.randint(1, 4)) ** 2 + 1
        box = ProofBox.between(
            {name: random_side(draw) for name in NAMES[:sides]}, **dict.fromkeys(NAMES[sides:], 0)
        )
        points = [random_point(draw, box) for _ in range(200)]
        with ctx.workprec(BITS):
            n, d = reduced(*box.polynomials((above, below)))
            for sign in (1, -1):
                limits = Limits(0, 1e-3, 60, coefficients=0)
                found = greatest_over(sign * n, d, box.domain, limits)
                for at in points:
                    symbols = box.symbol_values(at)
                    here = sign * value(above, symbols) / value(below, symbols)
                    assert found.upper is None or not found.upper < float(here) - 1e-12 * abs(float(here))


@pytest.mark.parametrize("sharpness", [10**2, 10**4, 10**6])
@pytest.mark.parametrize("offset", [Fraction(0), Fraction(1, 3)])
def test_a_narrow_ridge(sharpness: int, offset: Fraction) -> None:
    """1/(1 + K(x − y − o)²) is 1 along a line and next to nothing elsewhere: sampling would miss it."""
    box = ProofBox.between({"a": (0, 1), "b": (0, 1)})
    n, d = offset.numerator, offset.denominator
    below = d * d + sharpness * (d * A - d * B - n) ** 2
    found = prove_range((d * d * ONE, below), box, tolerance=1e-3, budget=400)
    assert found.greatest.lower <= 1 <= found.greatest.upper
    at = {"a": Fraction(1, 2) + offset / 2, "b": Fraction(1, 2) - offset / 2}
    hold(found, d * d * ONE, below, box, [at, {"a": Fraction(1), "b": Fraction(0)}])
    if not found.finished:
        assert "not enough" in found.why


def test_a_needle_inside_the_box() -> None:
    """A peak of width 1e-3 at an odd place, of height 1."""
    box = ProofBox.between({"a": (0, 1), "b": (0, 1)})
    below = 1 + 10**6 * ((7 * A - 2) ** 2 + (11 * B - 8) ** 2)
    found = prove_range((ONE, below), box, tolerance=1e-3)
    assert found.finished
    assert found.greatest.lower <= 1 <= found.greatest.upper
    assert found.greatest.gap <= 1e-3
    assert found.greatest.at is not None
    assert abs(found.greatest.at["a"] - Fraction(2, 7)) < Fraction(1, 1000)


def test_a_needle_that_points_down_into_the_denominator() -> None:
    """The denominator comes down to 1e-9 at one point inside, and never to 0."""
    box = ProofBox.between({"a": (0, 1), "b": (1, 2)})
    below = 1 + 10**9 * (3 * A - 1) ** 2
    found = prove_range((10**9 * B, below), box, tolerance=0, relative=1e-3)
    assert found.finished
    assert found.greatest.lower <= 2e9 <= found.greatest.upper


def test_terms_that_cancel_to_the_last_digits() -> None:
    """(a + 10⁻³⁰ b) − a, scaled up: doubles would see nothing but their own rounding."""
    box = ProofBox.between({"a": (1, 2), "b": (1, 2)})
    above = (10**30 * A + B) ** 2 - 10**60 * A**2 - 2 * 10**30 * A * B
    found = prove_range((above, A), box)
    assert found.finished
    assert found.least.lower == 0.5
    assert found.greatest.upper == 4.0


def test_sums_that_nearly_cancel_over_six_decades() -> None:
    """(a − b)/(a + b) with sides from 10⁻³ to 10³: its ends are ±(1 − 2·10⁻⁶/(1 + 10⁻⁶))."""
    sides = {"a": (Fraction(1, 1000), 1000), "b": (Fraction(1, 1000), 1000)}
    found = prove_range((A - B, A + B), ProofBox.between(sides), tolerance=1e-12)
    true = Fraction(10**6 - 1, 10**6 + 1)
    assert found.finished
    assert Fraction(found.greatest.lower) <= true <= Fraction(found.greatest.upper)
    assert Fraction(found.least.lower) <= -true <= Fraction(found.least.upper)


def test_an_optimum_inside_over_six_decades() -> None:
    """ab/((a + b)² + ab·10⁻⁶): the greatest value lies along a = b, three decades from any end of the sides."""
    sides = {"a": (Fraction(1, 1000), 1000), "b": (1, 1)}
    above, below = 10**6 * A * B, 10**6 * (A + B) ** 2 + A * B
    found = prove_range((above, below), ProofBox.between(sides), tolerance=1e-9)
    assert found.finished
    assert Fraction(found.greatest.lower) <= Fraction(10**6, 4 * 10**6 + 1) <= Fraction(found.greatest.upper)


def test_a_gain_through_zero() -> None:
    """A controlled source of gain −2 … 3 in a loop: 1/(1 + k²) has its greatest value inside, at 0."""
    found = prove_range((ONE, 1 + A**2), ProofBox.between({"a": (-2, 3)}), tolerance=1e-9)
    assert found.finished
    assert found.greatest.lower <= 1 <= found.greatest.upper
    assert found.least.lower <= 0.1 <= found.least.upper


def test_a_loop_gain_of_one_within_the_side_has_no_bound() -> None:
    found = prove_range((A, 1 - A * B), ProofBox.between({"a": (Fraction(1, 2), 2), "b": (1, 1)}))
    assert not found.finished
    assert "vanishes" in found.why


def test_followers_of_followers() -> None:
    """b = 2a and c = a·b: (b·c)/(a³) is 4 throughout, and a + b + c no larger than at the end."""
    base = ProofBox.between({"a": (1, 3)})
    box = ProofBox(
        base.sides,
        {
            **base.symbols,
            "b": Product(Fraction(2), (1,)),
            "c": Product(Fraction(2), (2,)),
            "d": Product(Fraction(1), (-1,)),
        },
    )
    found = prove_range((B * C, A**3), box)
    assert (found.least.lower, found.greatest.upper) == (4.0, 4.0)
    found = prove_range((A + B + C + D, ONE), box)
    draw = random.Random(3)
    hold(found, A + B + C + D, ONE, box, [random_point(draw, box) for _ in range(100)])
    assert found.finished
    assert found.greatest.upper == pytest.approx(27 + 1 / 3)


def test_all_sides_degenerate() -> None:
    box = ProofBox.between({"a": (2, 2), "b": (-3, -3)})
    found = prove_range((A * B, A - B), box)
    assert found.finished
    assert found.least.lower <= Fraction(-6, 5) <= found.greatest.upper
    assert found.greatest.gap < 1e-15


def test_a_bound_at_the_threshold_is_not_called_strict() -> None:
    """A polynomial that is exactly 0 at its greatest: neither above nor below the threshold."""
    box = ProofBox.between({"a": (0, 2), "b": (0, 2)})
    (p,) = box.polynomials([-((A - 1) ** 2) - B])
    with ctx.workprec(BITS):
        found = greatest_over(
            p, p.context().constant(1), box.domain, Limits(boxes=500), threshold=Fraction(0)
        )
    assert found.upper is not None
    assert not found.upper < 0
    assert not (found.lower is not None and found.lower > 0)


def test_many_pieces_hold_within_bounds_at_every_budget() -> None:
    """Whatever the budget, the enclosure holds what a larger one finds."""
    box = ProofBox.between({"a": (-1, 1), "b": (-1, 1), "c": (Fraction(1, 10), 10)})
    ratio = (A**2 * B - B**3 * C + A, C + (A - B) ** 2 + A**2 * B**2)
    ends = [prove_range(ratio, box, tolerance=1e-5, budget=budget) for budget in (1, 2, 5, 20, 100, 5000)]
    for rough, fine in pairwise(ends):
        assert rough.greatest.upper >= fine.greatest.upper - 1e-15
        assert rough.greatest.lower <= fine.greatest.upper
        assert rough.least.lower <= fine.least.lower + 1e-15
    assert ends[-1].finished


def test_no_proof_is_an_answer_and_no_error() -> None:
    with pytest.raises(NoProof):
        greatest_over(A, 0 * A, ((Fraction(0), Fraction(1)),) * 5, Limits())


def test_values_beyond_the_range_of_doubles() -> None:
    """Sides of 400 decades: bounds are infinite where no double holds them, and right where one does."""
    huge = Fraction(10) ** 200
    box = ProofBox.between({"a": (1 / huge, huge), "b": (1 / huge, huge)})
    found = prove_range((A**3 * B - A * B**2 + ONE, A + B), box, relative=1e-3, budget=50)
    assert found.greatest.lower > 1e300
    assert found.greatest.upper == inf
    # Nearly a³ − a·b at b = 10²⁰⁰, whose least value is −2/(3√3)·b^(3/2) (elementary calculus).
    assert found.finished
    assert found.least.lower <= -2e300 / (3 * sqrt(3)) <= found.least.upper
    found = prove_range((A * B, A * B + 1), box)
    assert found.finished
    assert found.least.lower >= 0
    assert found.greatest.upper <= 1 + 1e-15
