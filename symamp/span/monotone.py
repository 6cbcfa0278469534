"""Room `span`: signs of polynomials over a box, and the sides in which a ratio of them is monotone.

The sign of ∂(N/D)/∂x is that of N'D − ND', multiplied out exactly. Where it is sure over the whole box, the side is
fixed at the end at which the ratio is greatest, and what is left has a variable less.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from flint import fmpz, fmpz_mpoly

from symamp.span.bernstein import coefficients_over, degrees_of, size_of
from symamp.span.boxes import Interval

_FACTOR_LIMIT = 300  # terms above which a polynomial is not factored in search of its sign
_BERNSTEIN_LIMIT = 20_000  # Bernstein coefficients above which a sign is not sought through them
_LITTLE_LIMIT = 1000  # the same for derivatives of a ratio that is within that limit itself
_PRODUCT_LIMIT = 1_000_000  # products of terms above which a derivative is not multiplied out
_GCD_LIMIT = 4_000_000  # the same for a greatest common divisor


@dataclass(frozen=True)
class Face:
    """A ratio on the face of a box on which it is greatest: where sides are fixed, and what is left of it."""

    above: fmpz_mpoly
    below: fmpz_mpoly
    fixed: Mapping[int, Fraction]


def weak_sign(
    polynomial: fmpz_mpoly, domain: Sequence[Interval], limit: int = _BERNSTEIN_LIMIT
) -> int | None:
    """+1 where the polynomial is ≥ 0 over the whole box for sure, −1 where it is ≤ 0, 0 where it is zero.

    Up to `limit` Bernstein coefficients are worked out for it.
    """
    if polynomial.is_zero():
        return 0
    if sign := _sign_of_terms(polynomial):
        return sign
    found = factored(polynomial)
    if found is None:
        return _sign_by_bernstein(polynomial, domain, limit)
    total = 1 if found[0] > 0 else -1
    for factor, power in found[1]:
        if power % 2 == 0:
            continue
        sign = _sign_of_terms(factor) or _sign_by_bernstein(factor, domain, limit) or 0
        if not sign:
            return None
        total *= sign
    return total


def strict_sign(polynomial: fmpz_mpoly, domain: Sequence[Interval]) -> int | None:
    """+1 where the polynomial is > 0 over the whole box for sure, −1 where it is < 0."""
    if (sign := _sign_of_terms(polynomial)) and exact_value(polynomial, [low for low, _ in domain]):
        return sign
    found = factored(polynomial)
    if found is None:
        return _sign_by_bernstein(polynomial, domain)
    total = 1 if found[0] > 0 else -1
    for factor, power in found[1]:
        here = _strict_sign_of_factor(factor, domain)
        if here is None:
            return None
        total *= here**power
    return total


def factored(polynomial: fmpz_mpoly) -> tuple[fmpz, list[tuple[fmpz_mpoly, int]]] | None:
    """Content and factors with their powers, None where that is too much work."""
    if not 1 < len(polynomial) <= _FACTOR_LIMIT:
        return None
    try:
        content, factors = polynomial.factor()
    except OverflowError:
        # python-flint sorts factors, and cannot where those of one power have large coefficients.
        try:
            content, factors = polynomial.factor_squarefree()
        except OverflowError:
            return None
    return content, [(factor, int(power)) for factor, power in factors]


def _strict_sign_of_factor(factor: fmpz_mpoly, domain: Sequence[Interval]) -> int | None:
    sign = _sign_of_terms(factor)
    if sign and exact_value(factor, [low for low, _ in domain]):
        return sign
    return _sign_by_bernstein(factor, domain)


def _sign_of_terms(polynomial: fmpz_mpoly) -> int:
    """+1 or −1 where all terms have that sign, for no coordinate is negative; else 0."""
    coefficients = polynomial.coeffs()
    positive = bool(coefficients) and coefficients[0] > 0
    return 0 if any((c > 0) != positive for c in coefficients) else (1 if positive else -1)


def _sign_by_bernstein(
    polynomial: fmpz_mpoly, domain: Sequence[Interval], limit: int = _BERNSTEIN_LIMIT
) -> int | None:
    """The strict sign of all Bernstein coefficients."""
    degrees = degrees_of(polynomial)
    if polynomial.is_zero() or size_of(degrees) > limit:
        return None
    coefficients = coefficients_over(polynomial, degrees, domain)
    if all(c > 0 for c in coefficients):
        return 1
    return -1 if all(c < 0 for c in coefficients) else None


def exact_value(polynomial: fmpz_mpoly, at: Sequence[Fraction]) -> Fraction:
    """The value at a point, without rounding."""
    scale, tables = 1, []
    for value, degree in zip(at, degrees_of(polynomial), strict=False):
        above, below = value.numerator, value.denominator
        tables.append([above**e * below ** (degree - e) for e in range(degree + 1)])
        scale *= below**degree
    total = 0
    for exponents, coefficient in polynomial.terms():
        term = int(coefficient)
        for table, exponent in zip(tables, exponents, strict=False):
            term *= table[int(exponent)]
        total += term
    return Fraction(total, scale)


def put(polynomials: Sequence[fmpz_mpoly], i: int, value: Fraction) -> tuple[fmpz_mpoly, ...]:
    """The polynomials with a number in the place of generator i, all of them times one positive factor."""
    top = degrees_of(*polynomials)[i]
    if not top:
        return tuple(polynomials)
    above, below = value.numerator, value.denominator
    weights = [above**e * below ** (top - e) for e in range(top + 1)]
    found = []
    for polynomial in polynomials:
        terms: dict[tuple[int, ...], int] = {}
        for exponents, coefficient in polynomial.terms():
            e = int(exponents[i])
            place = (*exponents[:i], 0, *exponents[i + 1 :])
            terms[place] = terms.get(place, 0) + int(coefficient) * weights[e]
        found.append(polynomial.context().from_dict(terms))
    return tuple(found)


def put_all(polynomials: Sequence[fmpz_mpoly], values: Mapping[int, Fraction]) -> tuple[fmpz_mpoly, ...]:
    """The same with numbers in the places of several generators."""
    for i, value in values.items():
        polynomials = put(polynomials, i, value)
    return tuple(polynomials)


def reduced(above: fmpz_mpoly, below: fmpz_mpoly) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """The same ratio in lowest terms, as far as that is little work."""
    if above.is_zero() or len(above) * len(below) > _GCD_LIMIT:
        return above, below
    common = above.gcd(below)
    return above / common, below / common


def face_of_greatest(
    above: fmpz_mpoly, below: fmpz_mpoly, domain: Sequence[Interval], sides: Sequence[int]
) -> Face:
    """The face on which above/below is greatest, as far as signs of derivatives tell; `below` has a sure sign.

    `sides` are the generators that vary; the others of the domain are degenerate.
    """
    fixed: dict[int, Fraction] = {}
    left = list(sides)
    while True:
        found = {i: end for i in left if (end := _best_end(above, below, i, domain)) is not None}
        if not found:
            return Face(above, below, fixed)
        above, below = reduced(*put_all((above, below), found))
        fixed |= found
        left = [i for i in left if i not in found]


def _best_end(above: fmpz_mpoly, below: fmpz_mpoly, i: int, domain: Sequence[Interval]) -> Fraction | None:
    """The end of side i at which above/below is greatest wherever the other sides stand, None if that is not sure."""
    rising, falling = above.derivative(i), below.derivative(i)
    if len(rising) * len(below) + len(above) * len(falling) > _PRODUCT_LIMIT:
        return None
    # A ratio that is soon bounded itself is not worth much work on its derivatives.
    little = size_of(degrees_of(above, below)) <= _BERNSTEIN_LIMIT
    limit = _LITTLE_LIMIT if little else _BERNSTEIN_LIMIT
    sign = weak_sign(rising * below - above * falling, domain, limit)
    if sign is None:
        return None
    return domain[i][1] if sign > 0 else domain[i][0]
