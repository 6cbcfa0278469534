"""The tape of numpy operations against polynomials worked out term by term."""

from __future__ import annotations

from fractions import Fraction
from math import prod

import numpy as np
import pytest
from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx
from hypothesis import given
from hypothesis import strategies as st

from symamp.exact.tape import BLOCK, Tape, term_dict

NAMES = ("x", "y", "z")
RING = fmpz_mpoly_ctx.get(NAMES, Ordering.lex)
X, Y, Z = RING.gens()

exponents = st.tuples(*(st.integers(0, 4) for _ in NAMES))
polynomials = st.dictionaries(exponents, st.integers(-99, 99).filter(bool), max_size=7).map(RING.from_dict)
values = st.integers(-50, 50).map(lambda k: k / 8)


def exact(polynomial: fmpz_mpoly, at: dict[str, float]) -> Fraction:
    return sum(
        (c * prod(Fraction(at[name]) ** e for name, e in m) for m, c in term_dict(polynomial).items()),
        Fraction(0),
    )


def size(polynomial: fmpz_mpoly, at: dict[str, float]) -> float:
    """The sum of the terms' magnitudes, which bounds what rounding can do."""
    return sum(abs(c) * prod(abs(at[n]) ** e for n, e in m) for m, c in term_dict(polynomial).items())


@given(st.lists(polynomials, min_size=1, max_size=4), st.data())
def test_a_tape_equals_the_sum_of_terms(given_polynomials: list[fmpz_mpoly], data: st.DataObject) -> None:
    points = data.draw(st.integers(1, 4))
    arrays = {name: np.array([data.draw(values) for _ in range(points)]) for name in NAMES}
    found = Tape(given_polynomials)(arrays, points)
    for polynomial, array in zip(given_polynomials, found, strict=True):
        assert array.shape == (points,)
        for k in range(points):
            at = {name: float(arrays[name][k]) for name in NAMES}
            # Nesting adds terms in another order; all partial sums stay below Π(1 + …) of the magnitudes.
            assert abs(array[k] - float(exact(polynomial, at))) <= 1e-13 * (1 + bound(polynomial, at))


def bound(polynomial: fmpz_mpoly, at: dict[str, float]) -> float:
    """Magnitudes of the terms of the factors, multiplied out: what the factored form can round."""
    if polynomial.is_zero():
        return 0.0
    content, factors = polynomial.factor()
    product = abs(float(int(content)))
    for factor, power in factors:
        product *= size(factor, at) ** int(power)
    return max(product, size(polynomial, at))


@given(polynomials)
def test_scalars_broadcast_and_only_symbols_that_occur_are_asked_for(polynomial: fmpz_mpoly) -> None:
    tape = Tape([polynomial])
    occurring = {name for monomial in term_dict(polynomial) for name, _ in monomial}
    assert set(tape.symbols) == occurring
    (found,) = tape(dict.fromkeys(occurring, 0.5), 3)
    assert found.shape == (3,)
    assert np.all(found == found[0])


def test_points_beyond_a_block_are_worked_out_as_those_within() -> None:
    points = 2 * BLOCK + 17
    x = np.linspace(1.0, 2.0, points)
    tape = Tape([X**2 * Y - 3 * Y + Z, X + Y, X + Y, RING.constant(7), RING.constant(0), X])
    found = tape({"x": x, "y": 0.25, "z": np.float64(-2.0)}, points)
    np.testing.assert_allclose(found[0], x**2 / 4 - 0.75 - 2, rtol=1e-12, atol=1e-12)
    np.testing.assert_array_equal(found[1], x + 0.25)
    np.testing.assert_array_equal(found[2], found[1])
    assert np.all(found[3] == 7.0)
    assert np.all(found[4] == 0.0)
    np.testing.assert_array_equal(found[5], x)
    found[5][0] = 99.0
    assert x[0] == 1.0  # what is given out is a copy


def test_a_polynomial_too_large_to_be_factored_is_nested_all_the_same() -> None:
    polynomial = (1 + X + Y + Z) ** 12  # 455 terms, above the limit of factoring
    assert len(polynomial) == 455
    at = {"x": 0.5, "y": 0.25, "z": 1.5}
    (found,) = Tape([polynomial])({n: np.array([v]) for n, v in at.items()}, 1)
    assert found[0] == pytest.approx(3.25**12, rel=1e-12)


def test_a_factored_polynomial_keeps_its_digits_where_terms_cancel() -> None:
    polynomial = (X - Y) * (X + Z)
    (found,) = Tape([polynomial])({"x": 1 + 1e-9, "y": 1.0, "z": 1.0}, 1)
    assert found[0] == ((1 + 1e-9) - 1.0) * ((1 + 1e-9) + 1.0)


def test_a_value_that_is_missing_is_a_key_error() -> None:
    with pytest.raises(KeyError, match="y"):
        Tape([X + Y])({"x": 1.0}, 1)


def test_terms_as_a_dictionary() -> None:
    assert term_dict(3 * X**2 * Z - Y + 5) == {(("x", 2), ("z", 1)): 3, (("y", 1),): -1, (): 5}
