"""Exact: the roots of many real polynomials at once, one polynomial for each bias point.

Degrees 1 to 3 have methods of their own, since a span asks for them ten thousand at a time; higher degrees
take the eigenvalues of companion matrices, and what those do not settle goes to
`symamp.exact.simultaneous`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from symamp.exact.simultaneous import (
    Complexes,
    Reals,
    newton_steps,
    simultaneous_roots,
    sorted_by_magnitude,
    unsettled,
)

_CHUNK = 2048  # companion matrices held in memory at a time
_SAFE = 1e120  # a product of two coefficients in [1/_SAFE, _SAFE] neither overflows nor loses its error term
_SPLIT = 134217729.0  # 2**27 + 1


def roots(coefficients: NDArray[np.floating]) -> Complexes:
    """Roots of polynomials with real coefficients, ascending, shape (k + 1, P); returns shape (k, P).

    Per point the roots stand by increasing magnitude, of a conjugate pair the upper one first; a real root
    has an imaginary part of exactly 0 and pairs are exact conjugates. Where leading coefficients are
    exactly 0 the roots at infinity come last, as nan; exactly zero trailing coefficients give roots of
    exactly 0. Points with a coefficient that is not finite, or with none that is not 0, come out as nan
    throughout.
    """
    c = np.asarray(coefficients, dtype=float)
    degree, points = c.shape[0] - 1, c.shape[1]
    if degree < 1 or points == 0:
        return np.empty((max(degree, 0), points), dtype=complex)
    with np.errstate(all="ignore"):
        whole = c[0].all() and c[-1].all() and bool(np.isfinite(c.sum()) or np.isfinite(c).all())
        return _proper(c) if whole else _by_pattern(c)


def _by_pattern(c: Reals) -> Complexes:
    """Roots where leading or trailing coefficients are 0: points of one pattern are solved together."""
    degree, points = c.shape[0] - 1, c.shape[1]
    out = np.full((degree, points), complex(np.nan, np.nan))
    present = c != 0
    low = present.argmax(axis=0)
    high = degree - present[::-1].argmax(axis=0)
    usable = present.any(axis=0) & np.isfinite(c).all(axis=0)
    pattern = np.where(usable, low * (degree + 1) + high, -1)
    for code in np.unique(pattern[usable]):
        first, last = divmod(int(code), degree + 1)
        here = np.flatnonzero(pattern == code)
        out[:first, here] = 0
        if last > first:
            out[first:last, here] = _proper(c[first : last + 1, here])
    return out


def _proper(c: Reals) -> Complexes:
    """Roots where no leading or trailing coefficient is 0."""
    degree = c.shape[0] - 1
    if degree == 1:
        return (-c[:1] / c[1:]).astype(complex)
    if degree == 2 and _within_safe_range(c):
        return _quadratic(*c)
    scaled, exponent = _centred(c)
    found = _SOLVERS.get(degree, _by_eigenvalues)(scaled)
    found.real = np.ldexp(found.real, exponent)
    found.imag = np.ldexp(found.imag, exponent)
    return found


def _within_safe_range(c: Reals) -> bool:
    size = np.abs(c)
    ends = size[::2]
    return bool(ends.min() > 1 / _SAFE and size.max() < _SAFE)


def _centred(c: Reals) -> tuple[Reals, NDArray[np.intp]]:
    """The polynomial in t = s/2**exponent, its roots' geometric mean near 1, its constant term near 1.

    Powers of two only, so no coefficient is rounded unless it underflows.
    """
    degree = c.shape[0] - 1
    lowest = np.frexp(c[0])[1]
    exponent = np.rint((lowest - np.frexp(c[-1])[1]) / degree).astype(np.intp)
    powers = np.arange(degree + 1)[:, None] * exponent - lowest
    return np.ldexp(c, powers), exponent


def _quadratic(c: Reals, b: Reals, a: Reals) -> Complexes:
    """Roots of c + b·s + a·s², with a and c not 0; the larger one without cancellation, the other from c."""
    square, product = b * b, 4 * a * c
    discriminant = square - product
    close = np.abs(discriminant) < 1e-4 * square
    if close.any():
        at = np.flatnonzero(close)
        discriminant[at] = _discriminant(c[at], b[at], a[at])
    out = np.zeros((2, b.size), dtype=complex)
    complex_pair = discriminant < 0
    root = np.sqrt(np.abs(discriminant))
    if not complex_pair.all():
        q = -0.5 * (b + np.copysign(root, b))
        out.real[0] = c / q
        out.real[1] = q / a
    if complex_pair.any():
        real, imaginary = 0.0 - 0.5 * b / a, 0.5 * root / np.abs(a)
        np.copyto(out.real, real, where=complex_pair)
        np.copyto(out.imag[0], imaginary, where=complex_pair)
        np.copyto(out.imag[1], -imaginary, where=complex_pair)
    return out


def _discriminant(c: Reals, b: Reals, a: Reals) -> Reals:
    """b² − 4ac with the rounding errors of both products put back (Dekker 1971; Kahan, quadratics, 2004)."""
    square, square_error = _exact_product(b, b)
    product, product_error = _exact_product(4 * a, c)
    return (square - product) + (square_error - product_error)


def _exact_product(x: Reals, y: Reals) -> tuple[Reals, Reals]:
    """The rounded product and its rounding error (Veltkamp's split, Dekker's product)."""
    x_high = _SPLIT * x - (_SPLIT * x - x)
    y_high = _SPLIT * y - (_SPLIT * y - y)
    x_low, y_low = x - x_high, y - y_high
    product = x * y
    return product, ((x_high * y_high - product) + x_high * y_low + x_low * y_high) + x_low * y_low


def _cubic(coefficients: Reals) -> Complexes:
    """Roots of d + c·s + b·s² + a·s³: an outermost real root by Newton, then the quadratic that is left.

    The start beyond the root, from which Newton is monotone, and the choice of the deflation that loses
    nothing are those of Kahan, To Solve a Real Cubic Equation (1986). Points that do not settle take
    eigenvalues.
    """
    d, c, b, a = coefficients
    x, settled = _outermost_root(d, c, b, a)
    linear = a * x + b
    constant = linear * x + c
    from_below = np.abs(a * x * x) > np.abs(d / x)
    constant = np.where(from_below, -d / x, constant)
    linear = np.where(from_below, (constant - c) / x, linear)
    pair = _quadratic(constant, linear, a)
    out = _insert(pair, x)
    bad = ~settled | ~np.isfinite(out).all(axis=0)
    if bad.any():
        out[:, bad] = _by_eigenvalues(coefficients[:, bad])
    return out


def _outermost_root(d: Reals, c: Reals, b: Reals, a: Reals) -> tuple[Reals, NDArray[np.bool_]]:
    """The real root on the far side of the inflection, and where Newton has settled on it."""
    x = -b / (3 * a)
    value, slope = _value_and_slope(d, c, b, a, x)
    height, dip = value / a, -slope / a
    reach = np.cbrt(np.abs(height))
    reach = np.where(dip > 0, 1.324718 * np.maximum(reach, np.sqrt(np.abs(dip))), reach)
    x = x - np.copysign(reach, height)
    settled = np.zeros(x.shape, dtype=bool)
    for _ in range(24):
        value, slope = _value_and_slope(d, c, b, a, x)
        step = value / slope
        step[value == 0] = 0
        x = x - step
        settled = np.abs(step) <= 1e-12 * np.abs(x)
        if np.count_nonzero(settled) >= 0.99 * x.size:
            break
    value, slope = _value_and_slope(d, c, b, a, x)
    step = value / slope
    return np.where(np.abs(step) < 1e-3 * np.abs(x), x - step, x), settled


def _value_and_slope(d: Reals, c: Reals, b: Reals, a: Reals, x: Reals) -> tuple[Reals, Reals]:
    first = a * x
    second = first + b
    third = second * x + c
    return third * x + d, (first + second) * x + third


def _insert(pair: Complexes, x: Reals) -> Complexes:
    """The real root x in its place by magnitude before, between or after the two sorted roots of `pair`."""
    size = np.abs(x)
    inner, outer = np.abs(pair[0]), np.abs(pair[1])
    first, last = size <= inner, size >= outer
    out = np.empty((3, x.size), dtype=complex)
    out[0] = np.where(first, x, pair[0])
    out[1] = np.where(first, pair[0], np.where(last, pair[1], x))
    out[2] = np.where(last & ~first, x, pair[1])
    return out


def _by_eigenvalues(c: Reals) -> Complexes:
    """Eigenvalues of companion matrices, sharpened by Newton; the unsettled by simultaneous iteration."""
    pieces = [c[:, k : k + _CHUNK] for k in range(0, c.shape[1], _CHUNK)]
    out = np.concatenate([_eigenvalues(piece) for piece in pieces], axis=1)
    out = newton_steps(c, out, 2)
    bad = np.flatnonzero(unsettled(c, out))
    if bad.size:
        again = simultaneous_roots(c[:, bad])
        better = ~unsettled(c[:, bad], again)
        out[:, bad[better]] = again[:, better]
    return sorted_by_magnitude(out)


def _eigenvalues(c: Reals) -> Complexes:
    """Eigenvalues of the companion matrices, shape (k, P); LAPACK balances them and keeps pairs together."""
    degree, points = c.shape[0] - 1, c.shape[1]
    matrix = np.zeros((points, degree, degree))
    matrix[:, 0, :] = (-c[-2::-1] / c[-1]).T
    matrix[:, np.arange(1, degree), np.arange(degree - 1)] = 1
    if not np.isfinite(matrix).all():
        return np.full((degree, points), complex(np.nan, np.nan))
    return np.ascontiguousarray(np.linalg.eigvals(matrix).T).astype(complex)


_SOLVERS = {2: lambda c: _quadratic(*c), 3: _cubic}
