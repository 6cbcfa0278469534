"""Integer polynomials: splitting, inverses, and ratios in lowest terms."""

from __future__ import annotations

from fractions import Fraction
from math import gcd

import pytest
from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx
from hypothesis import assume, given
from hypothesis import strategies as st

from symamp.circuit.builder import StageBuilder
from symamp.exact.polys import (
    by_power,
    coefficients_of_s,
    from_coefficients,
    held,
    into_ring,
    inverted,
    least_exponents,
    lowest_terms,
    ring_of,
)

NAMES = ("x", "y", "z", "s")
RING = fmpz_mpoly_ctx.get(NAMES, Ordering.lex)

exponents = st.tuples(*(st.integers(0, 3) for _ in NAMES))
polynomials = st.dictionaries(exponents, st.integers(-9, 9).filter(bool), max_size=5).map(RING.from_dict)
nonzero = polynomials.filter(lambda p: not p.is_zero())
points = st.fixed_dictionaries({name: st.fractions(-4, 4, max_denominator=5).filter(bool) for name in NAMES})


def value(polynomial: fmpz_mpoly, at: dict[str, Fraction]) -> Fraction:
    total = Fraction(0)
    for monomial, coefficient in polynomial.terms():
        product = Fraction(int(coefficient))
        for name, exponent in zip(NAMES, monomial, strict=True):
            product *= at[name] ** int(exponent)
        total += product
    return total


def content(polynomial: fmpz_mpoly) -> int:
    return gcd(*(int(c) for c in polynomial.coeffs()))


@given(polynomials, nonzero, nonzero)
def test_lowest_terms_keep_the_ratio_and_leave_nothing_common(
    top: fmpz_mpoly, bottom: fmpz_mpoly, common: fmpz_mpoly
) -> None:
    numerator, denominator = lowest_terms(top * common, bottom * common)
    assert numerator * bottom == denominator * top
    assert numerator.gcd(denominator) == 1
    if not numerator.is_zero():
        assert gcd(content(numerator), content(denominator)) == 1


@given(nonzero, nonzero)
def test_lowest_terms_are_the_same_however_the_ratio_is_written(top: fmpz_mpoly, bottom: fmpz_mpoly) -> None:
    assert lowest_terms(top, bottom) == lowest_terms(-6 * top, -6 * bottom)
    assert lowest_terms(*lowest_terms(top, bottom)) == lowest_terms(top, bottom)


@given(nonzero, nonzero)
def test_most_terms_of_the_lowest_coefficient_of_the_denominator_are_positive(
    top: fmpz_mpoly, bottom: fmpz_mpoly
) -> None:
    _, denominator = lowest_terms(top, bottom)
    lowest = next(c for c in coefficients_of_s(denominator) if not c.is_zero())
    signs = [1 if c > 0 else -1 for c in lowest.coeffs()]
    assert sum(signs) > 0 or (sum(signs) == 0 and signs[0] > 0)


def test_a_factor_in_one_symbol_is_found() -> None:
    x, y, z, s = RING.gens()
    numerator, denominator = lowest_terms((x + y * s) * (z + 1) * 6, (x + y * s) * (z - 1) * 4)
    assert (numerator, denominator) in ((3 * z + 3, 2 * z - 2), (-3 * z - 3, 2 - 2 * z))


def test_zero_over_something_and_something_over_zero() -> None:
    x = RING.gen(0)
    assert lowest_terms(RING.constant(0), x) == (RING.constant(0), RING.constant(1))
    with pytest.raises(ZeroDivisionError):
        lowest_terms(x, RING.constant(0))


@given(polynomials)
def test_coefficients_of_s_put_together_again(polynomial: fmpz_mpoly) -> None:
    coefficients = coefficients_of_s(polynomial)
    assert from_coefficients(coefficients) == polynomial
    assert all(c.degrees()[3] <= 0 for c in coefficients)
    assert len(coefficients) == max(polynomial.degrees()[3], 0) + 1


@given(polynomials, st.integers(0, 3))
def test_powers_of_any_generator_put_together_again(polynomial: fmpz_mpoly, index: int) -> None:
    parts = by_power(polynomial, index)
    generator = RING.gen(index)
    assert sum((part * generator**power for power, part in parts.items()), RING.constant(0)) == polynomial
    assert all(part.degrees()[index] <= 0 for part in parts.values())


@given(nonzero, nonzero, st.sets(st.sampled_from(("x", "y"))), points)
def test_inverted_symbols_stand_for_their_inverse(
    top: fmpz_mpoly, bottom: fmpz_mpoly, names: set[str], at: dict[str, Fraction]
) -> None:
    numerator, denominator = inverted(top, bottom, names)
    inverse = {name: 1 / at[name] if name in names else at[name] for name in NAMES}
    assume(value(bottom, at))
    assert value(numerator, inverse) / value(denominator, inverse) == value(top, at) / value(bottom, at)


@given(st.lists(polynomials, max_size=3), st.tuples(*(st.integers(0, 2) for _ in NAMES)))
def test_least_exponents_are_those_of_the_common_monomial(
    some: list[fmpz_mpoly], shift: tuple[int, ...]
) -> None:
    monomials = [tuple(map(int, e)) for polynomial in some for e in polynomial.monoms()]
    by_hand = [min(e[k] for e in monomials) for k in range(len(NAMES))] if monomials else []
    assert least_exponents(some) == by_hand
    by_monomial = [polynomial * RING.from_dict({shift: 1}) for polynomial in some]
    assert least_exponents(by_monomial) == [a + b for a, b in zip(by_hand, shift, strict=False)]


@given(polynomials)
def test_another_ring_holds_the_same_polynomial(polynomial: fmpz_mpoly) -> None:
    larger = fmpz_mpoly_ctx.get(("w", "z", "x", "y", "s"), Ordering.lex)
    moved = into_ring(polynomial, larger)
    assert moved.context() is larger
    assert held(moved) == held(polynomial)
    assert into_ring(moved, RING) == polynomial
    assert into_ring(polynomial, RING) is polynomial


def test_a_ring_that_lacks_a_generator_is_refused() -> None:
    smaller = fmpz_mpoly_ctx.get(("x", "s"), Ordering.lex)
    with pytest.raises(KeyError, match="y"):
        into_ring(RING.gen(0) + RING.gen(1), smaller)
    assert into_ring(RING.gen(0) + RING.gen(3), smaller) == smaller.gen(0) + smaller.gen(1)
    assert held(RING.gen(0), RING.gen(1) * RING.gen(3), RING.constant(0)) == {"x", "y"}


def test_the_ring_has_symbols_in_the_order_of_formulas_and_s_last() -> None:
    build = StageBuilder("order")
    build.capacitor("CL", "d", "gnd")
    build.resistor("RL", "d", "gnd")
    build.mosfet("M1", gate="g", drain="d", source="gnd", body="b", gm=1, gds=1, gmb=1)
    build.voltage_source("VB", "b", "gnd")
    build.voltage_source("VIN", "g", "gnd")
    build.response("gain", source="VIN", to="d")
    symbols = build.stage().symbols
    assert ring_of(symbols, symbols).names() == ("gm1", "gmb1", "gds1", "RL", "CL", "s")
    assert ring_of(symbols, ("CL", "gm1", "CL"), ("t",)).names() == ("gm1", "CL", "t", "s")
