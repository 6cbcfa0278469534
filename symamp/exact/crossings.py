"""Exact: magnitude against frequency without a grid, as polynomials in x = ω².

N(jω) = E(x) + jω·O(x), so that |N(jω)|² = E² + x·O² is a polynomial in x, and the frequencies at which |H|²
= |N|²/|D|² passes a level, is largest, or has a phase of 0 or 180° are roots of polynomials in x. All
arrays are coefficients ascending, shape (k + 1, P), one column for each bias point.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from symamp.exact.roots import roots

Reals = NDArray[np.float64]
Flags = NDArray[np.bool_]

_NOISE = 16 * float(np.finfo(float).eps)  # sums smaller than this against their terms are rounding
_SURE = 40  # coefficients of numerator and denominator together, up to which squares keep their digits
_NEAR = 0.1  # how near to 0 the logarithm of a level must lie at a frequency that is said to reach it


@dataclass(frozen=True)
class Centred:
    """H(s) = gain · num(t)/den(t) with t = s/unit: the lowest coefficients near 1, the poles about 1.

    `unit` (rad/s) and `gain` are powers of two, shape (P,), so nothing is rounded and squares do not
    overflow.
    """

    num: Reals
    den: Reals
    unit: Reals
    gain: Reals


def without_common_s(num: Reals, den: Reals) -> tuple[Reals, Reals]:
    """Both with their common powers of s cancelled, point by point."""
    while num.shape[0] and den.shape[0]:
        both = (num[0] == 0) & (den[0] == 0) & (num != 0).any(axis=0) & (den != 0).any(axis=0)
        if not both.any():
            break
        num = np.where(both, np.roll(num, -1, axis=0), num)
        den = np.where(both, np.roll(den, -1, axis=0), den)
    return num, den


def ends(c: Reals) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Per point the lowest and the highest power whose coefficient is not 0 (0 and −1 where all are)."""
    degree, points = c.shape[0] - 1, c.shape[1]
    if c[0].all() and c[-1].all():
        return np.zeros(points, dtype=np.intp), np.full(points, degree, dtype=np.intp)
    present = c != 0
    empty = ~present.any(axis=0)
    low = present.argmax(axis=0)
    high = degree - present[::-1].argmax(axis=0)
    return np.where(empty, 0, low), np.where(empty, -1, high)


def centred(num: Reals, den: Reals) -> Centred:
    """The response in units of the geometric mean of its poles (without poles, of its zeros)."""
    every = np.arange(num.shape[1])
    (n_low, n_high), (d_low, d_high) = ends(num), ends(den)
    n_first, d_first = (_exponent(c[low, every]) for c, low in ((num, n_low), (den, d_low)))
    by_zeros = (n_first - _exponent(num[n_high, every])) / np.maximum(n_high - n_low, 1)
    by_poles = (d_first - _exponent(den[d_high, every])) / np.maximum(d_high - d_low, 1)
    power = np.rint(np.where(d_high > d_low, by_poles, by_zeros)).astype(np.intp)
    n_first, d_first = n_first + n_low * power, d_first + d_low * power
    return Centred(
        np.ldexp(num, np.arange(num.shape[0])[:, None] * power - n_first),
        np.ldexp(den, np.arange(den.shape[0])[:, None] * power - d_first),
        np.ldexp(1.0, power),
        np.ldexp(1.0, n_first - d_first),
    )


def _exponent(c: Reals) -> NDArray[np.intp]:
    return np.frexp(c)[1].astype(np.intp)


def multiply(left: Reals, right: Reals) -> Reals:
    """The product of two polynomials, point by point."""
    out = np.zeros((max(left.shape[0] + right.shape[0] - 1, 0), left.shape[1]))
    for k, row in enumerate(left):
        out[k : k + right.shape[0]] += row * right
    return out


def add(left: Reals, right: Reals) -> Reals:
    """The sum of two polynomials, point by point."""
    if left.shape[0] < right.shape[0]:
        left, right = right, left
    out = left.copy()
    out[: right.shape[0]] += right
    return out


def evaluate(c: Reals, x: Reals) -> Reals:
    """The polynomial's value at x, shape (P,) or (K, P)."""
    value = np.zeros_like(x) if not c.shape[0] else c[-1] + np.zeros_like(x)
    for row in c[-2::-1]:
        value = value * x + row
    return value


def derivative(c: Reals) -> Reals:
    """The derivative by the polynomial's variable."""
    return c[1:] * np.arange(1, c.shape[0])[:, None]


def even_and_odd(c: Reals) -> tuple[Reals, Reals]:
    """E and O of C(jω) = E(x) + jω·O(x); O may have no rows."""
    signs = np.where(np.arange(c.shape[0]) % 4 < 2, 1.0, -1.0)[:, None]
    signed = c * signs
    return signed[0::2], signed[1::2]


def squared_magnitude(c: Reals) -> Reals:
    """|C(jω)|² as a polynomial in x: c_k² + 2·Σ (−1)^d c_(k−d)·c_(k+d)."""
    out = c * c
    for k in range(c.shape[0]):
        for d in range(1, min(k, c.shape[0] - 1 - k) + 1):
            out[k] += (2.0 if d % 2 == 0 else -2.0) * c[k - d] * c[k + d]
    return out


def squared_magnitude_at(c: Reals, x: Reals) -> Reals:
    """|C(jω)|² at x, from C itself: no cancellation beyond C's own."""
    even, odd = (evaluate(part, x) for part in even_and_odd(c))
    return even * even + x * odd * odd


def positive_roots(c: Reals) -> Reals:
    """The positive real roots, ascending, nan between them where other roots stood; shape (k, P)."""
    found = roots(c)
    positive = (found.imag == 0) & (found.real > 0)
    return np.where(positive, found.real, np.nan)


def level_polynomial(n_squared: Reals, d_squared: Reals, weight: Reals) -> Reals:
    """weight·|N|² − |D|² in x; coefficients that are rounding of a difference are made 0."""
    above = weight * n_squared
    difference = add(above, -d_squared)
    difference[np.abs(difference) < _NOISE * add(np.abs(above), np.abs(d_squared))] = 0
    return difference


def slope_polynomial(num: Reals, den: Reals) -> Reals:
    """The numerator of d|H|²/dx, |N|²' |D|² − |N|² |D|²'; coefficients that are rounding are made 0."""
    above, below = squared_magnitude(num), squared_magnitude(den)
    sizes = (squared_magnitude_terms(num), squared_magnitude_terms(den))
    rows = above.shape[0] + below.shape[0] - 2
    out, size = np.zeros((max(rows, 1), num.shape[1])), np.zeros((max(rows, 1), num.shape[1]))
    for i in range(above.shape[0]):
        for j in range(below.shape[0]):
            if i != j:
                out[i + j - 1] += (i - j) * above[i] * below[j]
                size[i + j - 1] += abs(i - j) * sizes[0][i] * sizes[1][j]
    out[np.abs(out) < _NOISE * size] = 0
    return out


def squared_magnitude_terms(c: Reals) -> Reals:
    """The sums of the sizes of the terms of `squared_magnitude`, against which its rounding is judged."""
    size = np.abs(c)
    out = size * size
    for k in range(c.shape[0]):
        for d in range(1, min(k, c.shape[0] - 1 - k) + 1):
            out[k] += 2 * size[k - d] * size[k + d]
    return out


def imaginary_polynomial(num: Reals, den: Reals) -> Reals:
    """Im(N·conj D)/ω in x, whose roots are where H(jω) is real; coefficients that are rounding are made 0."""
    (n_even, n_odd), (d_even, d_odd) = even_and_odd(num), even_and_odd(den)
    out = add(multiply(n_odd, d_even), -multiply(n_even, d_odd))
    sizes = [np.abs(part) for part in (n_odd, d_even, n_even, d_odd)]
    size = add(multiply(sizes[0], sizes[1]), multiply(sizes[2], sizes[3]))
    out[np.abs(out) < _NOISE * size] = 0
    return out


def falls(c: Reals, x: Reals) -> Flags:
    """Where the polynomial falls as x grows through its roots x, shape (K, P)."""
    return evaluate(derivative(c), x) < 0


def first(x: Reals, wanted: Flags) -> Reals:
    """Per point the first of x, shape (K, P), that is wanted; nan where none is."""
    if not x.shape[0]:
        return np.full(x.shape[1], np.nan)
    row = wanted.argmax(axis=0)
    every = np.arange(x.shape[1])
    return np.where(wanted[row, every], x[row, every], np.nan)


def sharpened(response: Centred, weight: Reals, x: Reals, steps: int = 2) -> Reals:
    """Newton on ln(weight·|N|²/|D|²) over ln x; no step over 1 % (a level that is only touched)."""
    for _ in range(steps):
        above, above_slope = _squared_and_slope(response.num, x)
        below, below_slope = _squared_and_slope(response.den, x)
        step = np.log(weight * above / below) / (x * (above_slope / above - below_slope / below))
        x = np.where(np.abs(step) < 1e-2, x * (1 - step), x)
    return x


def _squared_and_slope(c: Reals, x: Reals) -> tuple[Reals, Reals]:
    """|C(jω)|² and its derivative by x."""
    even, odd = even_and_odd(c)
    e, o = evaluate(even, x), evaluate(odd, x)
    slope = 2 * e * evaluate(derivative(even), x) + o * o
    if odd.shape[0]:
        slope = slope + 2 * x * o * evaluate(derivative(odd), x)
    return e * e + x * o * o, slope


def confirmed(response: Centred, weight: Reals, x: Reals) -> Reals:
    """x, shape (K, P), with nan for those at which weight·|N|²/|D|² is nowhere near 1.

    Squared magnitudes of high degree are sums that cancel, and what is left can be a root that is none.
    """
    if response.num.shape[0] + response.den.shape[0] <= _SURE:
        return x
    level = np.log(weight) + 2 * (_log_magnitude(response.num, x) - _log_magnitude(response.den, x))
    return np.where(np.abs(level) < _NEAR, x, np.nan)


def _log_magnitude(c: Reals, x: Reals) -> Reals:
    """ln |C(jω)|; above ω = 1 by the reversed polynomial at 1/(jω), so that no power overflows."""
    omega = np.sqrt(x)
    outside = omega > 1
    point = np.where(outside, -1j / omega, 1j * omega)
    degree = c.shape[0] - 1
    value = np.zeros(x.shape, dtype=complex)
    for k in range(degree + 1):
        value = value * point + np.where(outside, c[k], c[degree - k])
    return np.log(np.abs(value)) + np.where(outside, degree * np.log(omega), 0.0)
