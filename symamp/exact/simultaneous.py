"""Exact: simultaneous iteration on all roots of many polynomials (Aberth), and the checks of found roots.

Slower than eigenvalues, but right however far apart the roots lie: it starts from the radii of the Newton
polygon (Bini, Numerical Algorithms 13, 1996), so that a root at 1 is not lost beside one at 1e18.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Reals = NDArray[np.float64]
Complexes = NDArray[np.complex128]

_EPS = float(np.finfo(float).eps)
_ROUNDS = 80


def newton_steps(c: Reals, z: Complexes, count: int) -> Complexes:
    """`count` Newton steps on roots z, shape (k, P), of the polynomials c; no wild or undefined ones.

    A conjugate pair stays an exact pair, and a real root real.
    """
    for _ in range(count):
        step = newton_correction(c, z)[0]
        z = np.where(np.abs(step) < 1e-2 * np.abs(z), z - step, z)
    return z


def newton_correction(c: Reals, z: Complexes) -> tuple[Complexes, NDArray[np.bool_]]:
    """p(z)/p'(z), and where |p(z)| is no more than rounding.

    Beyond the unit circle the reversed polynomial is taken at 1/z, so that no power overflows.
    """
    degree = c.shape[0] - 1
    outside = np.abs(z) > 1
    w = np.where(outside, 1 / z, z)
    value = np.where(outside, c[0], c[-1]).astype(complex)
    slope = np.zeros_like(value)
    size, bound = np.abs(w), np.abs(value)
    for k in range(1, degree + 1):
        slope = slope * w + value
        term = np.where(outside, c[k], c[degree - k])
        value = value * w + term
        bound = bound * size + np.abs(term)
    step = np.where(outside, value / (w * (degree * value - w * slope)), value / slope)
    step = np.where(value == 0, 0, step)
    return step, np.abs(value) <= 2 * degree * _EPS * bound


def unsettled(c: Reals, z: Complexes) -> NDArray[np.bool_]:
    """Where, shape (P,), some root still moves, or the product of the roots misses c0/ck: one is lost."""
    step, rounding = newton_correction(c, z)
    still = rounding | (np.abs(step) <= 1e-11 * np.abs(z))
    product = np.log(np.abs(z)).sum(axis=0)
    wanted = np.log(np.abs(c[0])) - np.log(np.abs(c[-1]))
    return ~(still.all(axis=0) & (np.abs(product - wanted) < 1e-6))


def simultaneous_roots(c: Reals) -> Complexes:
    """All roots by Aberth's iteration from the Newton polygon, shape (k, P), conjugate pairs side by side."""
    z = _starts(c)
    moving = np.ones(c.shape[1], dtype=bool)
    for _ in range(_ROUNDS):
        at = np.flatnonzero(moving)
        step = _aberth_step(c[:, at], z[:, at])
        z[:, at] -= step
        moving[at] = (np.abs(step) > 1e-14 * np.abs(z[:, at])).any(axis=0)
        if not moving.any():
            break
    return newton_steps(c, paired(z), 2)


def _aberth_step(c: Reals, z: Complexes) -> Complexes:
    """Newton's step with the pull of all other roots taken out; none where only rounding is left."""
    step, rounding = newton_correction(c, z)
    pull = np.zeros_like(z)
    for k in range(z.shape[0]):
        gap = z - z[k]
        gap[gap == 0] = np.inf  # a root does not pull on itself
        pull += 1 / gap
    step = step / (1 - step * pull)
    return np.where(rounding | ~np.isfinite(step), 0, step)


def _starts(c: Reals) -> Complexes:
    """Start values: on each edge i..j of the Newton polygon j − i of them, of magnitude |ci/cj|^(1/(j−i))."""
    degree, points = c.shape[0] - 1, c.shape[1]
    level = np.log(np.abs(c))
    begin, end = np.zeros(points, dtype=int), np.zeros(points, dtype=int)
    every = np.arange(points)
    out = np.empty((degree, points), dtype=complex)
    for k in range(degree):
        fresh = end == k
        begin = np.where(fresh, k, begin)
        end = np.where(fresh, _next_corner(level, k), end)
        width = end - begin
        radius = np.exp((level[begin, every] - level[end, every]) / width)
        angle = 2 * np.pi * (k - begin) / width + 0.7 + 0.3 * begin
        out[k] = radius * np.exp(1j * angle)
    return out


def _next_corner(level: Reals, k: int) -> NDArray[np.intp]:
    """The next corner after k of the upper convex hull of the points (i, log|ci|); the farthest of equals."""
    slopes = (level[k + 1 :] - level[k]) / np.arange(1, level.shape[0] - k)[:, None]
    last = slopes.shape[0] - 1
    corner: NDArray[np.intp] = k + 1 + last - slopes[::-1].argmax(axis=0)
    return corner


def paired(z: Complexes) -> Complexes:
    """Roots of real polynomials made exact conjugates: each with the nearest to its mirror image, or real."""
    out = z.copy()
    free = np.ones(z.shape, dtype=bool)
    every = np.arange(z.shape[1])
    order = np.argsort(-np.abs(z.imag), axis=0, kind="stable")  # surely complex ones choose first
    placed = np.zeros(z.shape[1], dtype=int)
    for k in range(z.shape[0]):
        row = order[k]
        here = free[row, every]
        chosen = z[row, every]
        gap = np.where(free, np.abs(z - chosen.conj()), np.inf)
        mate = gap.argmin(axis=0)
        free[row[here], every[here]] = False
        free[mate[here], every[here]] = False
        single = here & (mate == row)
        pair = here & (mate != row)
        out[placed[single], every[single]] = chosen.real[single]
        upper = 0.5 * (chosen + z[mate, every].conj())
        upper = upper.real + 1j * np.abs(upper.imag)
        out[placed[pair], every[pair]] = upper[pair]
        out[placed[pair] + 1, every[pair]] = upper.conj()[pair]
        placed = placed + np.where(pair, 2, np.where(single, 1, 0))
    return out


def sorted_by_magnitude(z: Complexes) -> Complexes:
    """By increasing magnitude, stable, so that pairs side by side stay so; the upper one of a pair first."""
    order = np.argsort(np.abs(z), axis=0, kind="stable")
    out = np.take_along_axis(z, order, axis=0)
    for k in range(out.shape[0] - 1):
        swap = (out[k].imag < 0) & (out[k] == out[k + 1].conj())
        out[k : k + 2, swap] = out[k : k + 2, swap][::-1]
    return out
