"""Roots of many polynomials at once, against mpmath at 50 digits."""

from __future__ import annotations

import time

import mpmath
import numpy as np

from symamp.exact.roots import roots

from .record import Row, Sizes, median_seconds, shown

_SPREAD = 1e9  # the largest root over the smallest


def batches(sizes: Sizes) -> list[Row]:
    """Degrees 2 to 8, roots spread over nine decades, real ones and pairs."""
    return [_degree(degree, sizes) for degree in (2, 3, 4, 6, 8)]


def _degree(degree: int, sizes: Sizes) -> Row:
    coefficients = _polynomials(degree, sizes.points)
    ours = median_seconds(lambda: roots(coefficients), max(1, sizes.runs // 3)) / sizes.points
    some = coefficients[:, : sizes.polynomials]
    found = roots(some)
    start = time.perf_counter()
    exact = [_by_mpmath(column) for column in some.T]
    theirs = (time.perf_counter() - start) / len(exact)
    worst = max(_off(mine, true) for mine, true in zip(found.T, exact, strict=True))
    return Row(
        f"roots in batches, degree {degree}, spread to 1e9, against mpmath at 50 digits",
        "right to 1e-9",
        f"off by {worst:.1e}; {shown(ours)} against {shown(theirs)} a polynomial",
        worst / 1e-9,
        worst <= 1e-9,
        worst,
        1e-9,
    )


def _polynomials(degree: int, count: int) -> np.ndarray:
    """Polynomials ascending (degree + 1, count) whose roots' magnitudes are drawn from 1e3 … 1e12 rad/s.

    Smallest and largest are set to the ends. Up to two pairs of neighbours become complex pairs of Q up to 10.
    """
    draw = np.random.default_rng(degree)
    size = np.sort(1e3 * _SPREAD ** draw.uniform(0, 1, (degree, count)), axis=0)
    size[0], size[-1] = 1e3, 1e3 * _SPREAD
    found = np.empty((degree, count), dtype=complex)
    found[:] = -size
    found[-1] *= np.where(draw.uniform(size=count) < 0.3, -1, 1)  # now and then in the right half plane
    for k in range(1, degree - 2, 2):
        paired = draw.uniform(size=count) < 0.5
        angle = np.pi - np.arccos(0.5 / draw.uniform(0.6, 10, count))
        pair = size[k] * np.exp(1j * angle)
        found[k], found[k + 1] = (
            np.where(paired, pair, found[k]),
            np.where(paired, pair.conj(), found[k + 1]),
        )
    total = np.ones((1, count), dtype=complex)
    for root in found:
        grown = np.zeros((total.shape[0] + 1, count), dtype=complex)
        grown[1:] += total
        grown[:-1] -= root * total
        total = grown
    return np.ascontiguousarray(total.real)


def _by_mpmath(ascending: np.ndarray) -> list[complex]:
    """Roots of the very same coefficients."""
    degree = ascending.size - 1
    with mpmath.workdps(50):
        # In s over the geometric mean of the roots, so that the iteration starts near them.
        centre = mpmath.root(abs(mpmath.mpf(ascending[0]) / mpmath.mpf(ascending[-1])), degree)
        scaled = [mpmath.mpf(float(c)) * centre**k for k, c in enumerate(ascending)][::-1]
        found = mpmath.polyroots(scaled, maxsteps=500, extraprec=400)
        return [complex(root * centre) for root in found]


def _off(mine: np.ndarray, exact: list[complex]) -> float:
    """The largest relative error, each exact root against the nearest that is left."""
    left = list(mine)
    worst = 0.0
    for root in exact:
        nearest = min(left, key=lambda other, root=root: abs(other - root))  # type: ignore[misc]
        left.remove(nearest)
        worst = max(worst, abs(nearest / root - 1))
    return worst
