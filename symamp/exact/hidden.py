"""Exact: poles and zeros that cancel whatever the values, divided out of coefficients at many points.

The minor graph's numerator and denominator share the modes of what the response does not see; written-out
polynomials are brought to lowest terms, and these here are not.
"""

from __future__ import annotations

import numpy as np

from symamp.exact.roots import roots
from symamp.exact.skeleton import Skeleton


def without_hidden(
    numerator: np.ndarray, denominator: np.ndarray, shape: Skeleton
) -> tuple[np.ndarray, np.ndarray]:
    """Both without what they share, shapes (n + 1, P) and (m + 1, P): s^low, then a factor of degree `common`."""
    above, below = (
        c[shape.low : max(degree, shape.low) + 1]
        for c, degree in zip((numerator, denominator), shape.degrees, strict=True)
    )
    if not shape.common:
        return above, below
    shared = _shared_roots(roots(above), roots(below), shape.common)
    factor = _product(shared)
    return _quotient(above, factor), _quotient(below, factor)


def _shared_roots(zeros: np.ndarray, poles: np.ndarray, count: int) -> np.ndarray:
    """The `count` zeros that lie nearest a pole, each to one of its own: (count, P)."""
    return np.take_along_axis(zeros, nearest_pairs(zeros, poles, count)[0], axis=0)


def nearest_pairs(zeros: np.ndarray, poles: np.ndarray, count: int) -> tuple[np.ndarray, np.ndarray]:
    """The `count` zeros and poles that lie nearest one another, as places in both: (count, P) each."""
    with np.errstate(all="ignore"):
        distance = np.abs(zeros[:, None] - poles[None]) / (np.abs(zeros[:, None]) + np.abs(poles[None]))
    distance = np.where(np.isnan(distance), np.inf, distance)
    # Both at 0, or both gone to infinity (nan), as a point's values may have it: a pair as near as can be.
    both = [test(zeros)[:, None] & test(poles)[None] for test in (np.isnan, lambda root: root == 0)]
    distance = np.where(both[0] | both[1], 0.0, distance)
    every = np.arange(zeros.shape[1])
    found = np.empty((2, count, zeros.shape[1]), dtype=np.intp)
    for k in range(count):
        flat = distance.reshape(-1, zeros.shape[1]).argmin(axis=0)
        zero, pole = np.divmod(flat, poles.shape[0])
        found[:, k] = zero, pole
        distance[zero, :, every] = np.inf
        distance[:, pole, every] = np.inf
    return found[0], found[1]


def _product(shared: np.ndarray) -> np.ndarray:
    """Coefficients of Π (s − r)/max(|r|, 1), ascending: (count + 1, P); real, for roots come in conjugate pairs.

    Where the values of a point take a root to 0 its factor is s, and where they take it to infinity (nan) 1.
    """
    total = np.ones((1, shared.shape[1]), dtype=complex)
    for root in shared:
        gone = ~np.isfinite(root)
        size = np.where(gone, 1.0, np.maximum(np.abs(root), 1.0))
        longer = np.zeros((total.shape[0] + 1, total.shape[1]), dtype=complex)
        longer[:-1] -= np.where(gone, -1.0, root) / size * total
        longer[1:] += np.where(gone, 0.0, 1 / size) * total
        total = longer
    return np.asarray(total.real)


def _quotient(polynomial: np.ndarray, factor: np.ndarray) -> np.ndarray:
    """polynomial/factor, point by point, by least squares in which each coefficient has the same weight."""
    rows, points = polynomial.shape
    columns = rows - factor.shape[0] + 1
    matrix = np.zeros((points, rows, columns))
    for k in range(columns):
        matrix[:, k : k + factor.shape[0], k] = factor.T
    size = np.abs(polynomial.T)
    weight = 1 / np.where(size > 0, size, size.max(axis=1, keepdims=True))
    matrix = matrix * weight[:, :, None]
    scale = np.linalg.norm(matrix, axis=1, keepdims=True)
    q, r = np.linalg.qr(matrix / scale)
    right = np.einsum("pij,pi->pj", q, polynomial.T * weight)
    return np.asarray((np.linalg.solve(r, right[:, :, None])[:, :, 0] / scale[:, 0]).T)
