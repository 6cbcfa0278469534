"""Room `span`: polynomials over a box by their Bernstein coefficients, in ball arithmetic.

A polynomial over a box lies between the least and the greatest of its Bernstein coefficients, and takes those at the
corners itself: G. T. Cargo and O. Shisha, "The Bernstein form of a polynomial", J. Res. NBS 70B, 1966. A ratio of
two, the lower one positive, lies between the least and greatest ratio of their coefficients: A. Narkawicz,
J. Garloff, A. P. Smith and C. A. Muñoz, "Bounding the range of a rational function over a box", Reliable Computing
17, 2012. A box is split by de Casteljau's algorithm. (Sources from memory.)

Coefficients lie flat in a list, the last axis fastest, each a ball that holds the true one.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import lru_cache
from itertools import pairwise, product
from math import comb, prod

from flint import arb, fmpq, fmpz_mpoly

from symamp.span.boxes import Interval

Coefficients = list[arb]


def ball(value: Fraction) -> arb:
    """The ball around an exact number, at the working precision."""
    return arb(fmpq(value.numerator, value.denominator))


def degrees_of(*polynomials: fmpz_mpoly) -> tuple[int, ...]:
    """The greatest degree in each generator among the polynomials."""
    return tuple(
        max(0, *(int(d) for d in each)) for each in zip(*(p.degrees() for p in polynomials), strict=True)
    )


def size_of(degrees: Sequence[int]) -> int:
    """How many Bernstein coefficients polynomials of these degrees have."""
    return prod(degree + 1 for degree in degrees)


def coefficients_over(
    polynomial: fmpz_mpoly, degrees: Sequence[int], domain: Sequence[Interval]
) -> Coefficients:
    """The Bernstein coefficients of these degrees over the box `domain`, which lies where no coordinate is negative."""
    strides = [size_of(degrees[i + 1 :]) for i in range(len(degrees))]
    flat: Coefficients = [arb(0)] * size_of(degrees)
    for exponents, coefficient in polynomial.terms():
        place = sum(int(e) * stride for e, stride in zip(exponents, strides, strict=False))
        flat[place] = arb(coefficient)
    # The last axis is worked out and put first, until all have had their turn.
    for axis in reversed(range(len(degrees))):
        if degrees[axis]:
            flat = _last_to_first(flat, _from_powers(degrees[axis], *domain[axis]))
    return flat


def _last_to_first(flat: Coefficients, matrix: Sequence[Sequence[arb]]) -> Coefficients:
    """New entries along the last axis, each the sum of the old ones with a row of the matrix as weights, the first 1.

    In what is returned this axis is the first.
    """
    count = len(matrix)
    rows = [flat[k::count] for k in range(count)]
    mixed: Coefficients = []
    for weights in matrix:
        total = rows[0]
        for weight, row in zip(weights[1:], rows[1:], strict=True):
            if not weight.is_zero():
                total = [known + weight * value for known, value in zip(total, row, strict=True)]
        mixed += total
    return mixed


@lru_cache(maxsize=4096)
def _polar(degree: int, low: Fraction, high: Fraction) -> tuple[tuple[Fraction, ...], ...]:
    """Entry [j][k]: the j-th Bernstein coefficient of x**k, its polar form at low (degree − j times) and high (j)."""
    rows = []
    for j in range(degree + 1):
        symmetric = [Fraction(1)]
        for end in (low,) * (degree - j) + (high,) * j:
            grown = [*symmetric, Fraction(0)]
            for k, value in enumerate(symmetric):
                grown[k + 1] += end * value
            symmetric = grown
        rows.append(tuple(value / comb(degree, k) for k, value in enumerate(symmetric)))
    return tuple(rows)


def _from_powers(degree: int, low: Fraction, high: Fraction) -> list[list[arb]]:
    return [[ball(value) for value in row] for row in _polar(degree, low, high)]


def halves(
    flat: Coefficients, degrees: Sequence[int], axis: int, part: Fraction
) -> tuple[Coefficients, Coefficients]:
    """The coefficients over both pieces of a box that is split along an axis, at this part of its width."""
    near, far = ball(1 - part), ball(part)
    first, second = list(flat), list(flat)
    for places in _lines(degrees, axis):
        rows = [flat[place] for place in places]
        last = len(rows) - 1
        for k in range(last):
            rows = [
                [near * a + far * b for a, b in zip(one, other, strict=True)] for one, other in pairwise(rows)
            ]
            first[places[k + 1]] = rows[0]
            second[places[last - k - 1]] = rows[-1]
    return first, second


def _lines(degrees: Sequence[int], axis: int) -> list[list[slice]]:
    """The flat list in as few parts as possible, each as the slices of all indices along an axis."""
    count, inner = degrees[axis] + 1, size_of(degrees[axis + 1 :])
    outer = size_of(degrees[:axis])
    block = count * inner
    if inner >= outer:
        starts = range(0, outer * block, block)
        return [[slice(s + k * inner, s + (k + 1) * inner) for k in range(count)] for s in starts]
    return [[slice(k * inner + i, None, block) for k in range(count)] for i in range(inner)]


def value_at(flat: Coefficients, degrees: Sequence[int], parts: Sequence[Fraction]) -> arb:
    """The value at a point, given by the part of the width along each axis."""
    for degree, part in zip(degrees, parts, strict=True):
        near, far = ball(1 - part), ball(part)
        inner = len(flat) // (degree + 1)
        rows = [flat[k * inner : (k + 1) * inner] for k in range(degree + 1)]
        while len(rows) > 1:
            rows = [
                [near * a + far * b for a, b in zip(one, other, strict=True)] for one, other in pairwise(rows)
            ]
        flat = rows[0]
    return flat[0]


@lru_cache(maxsize=8)
def corners(degrees: tuple[int, ...]) -> tuple[tuple[int, tuple[int, ...]], ...]:
    """Where the values at the corners stand, each with its corner: 0 or 1 an axis, 0 along axes of degree 0."""
    strides = [size_of(degrees[i + 1 :]) for i in range(len(degrees))]
    ends = product(*((0, 1) if degree else (0,) for degree in degrees))
    return tuple(
        (sum(e * d * s for e, d, s in zip(corner, degrees, strides, strict=True)), corner) for corner in ends
    )


def index_at(place: int, degrees: Sequence[int]) -> tuple[int, ...]:
    """The index along each axis of a flat place."""
    index = []
    for degree in reversed(degrees):
        place, here = divmod(place, degree + 1)
        index.append(here)
    return tuple(reversed(index))
