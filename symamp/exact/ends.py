"""Exact: a nested response far below and far above its roots, where the graph's own sum may be all rounding.

A coefficient of s that vanishes identically, by products that cancel, leaves rounding noise in a sum over the
graph. While it is the lowest one the noise hides the response at low frequencies, and the highest one at high
frequencies: there the coefficients, from which it has been struck, know better.
"""

from __future__ import annotations

import numpy as np

from symamp.exact.graded import Coefficients, horner
from symamp.exact.minors import MinorGraph
from symamp.exact.skeleton import Skeleton

_CANCELLING = 4.0  # sum of magnitudes over magnitude of the sum, below which a sum of powers loses no digits
Range = tuple[int, int]


def ends_cancel(graph: MinorGraph, shape: Skeleton) -> bool:
    """Whether a lowest or highest power of s that products of the graph have is gone from their sum."""
    if min(shape.degrees) < 0:
        return False
    true = tuple(
        (shape.low + powers[0], degree) for powers, degree in zip(shape.powers, shape.degrees, strict=True)
    )
    return _ranges(graph) != true


def _ranges(graph: MinorGraph) -> tuple[Range, Range]:
    """Lowest and highest power of s among the products of numerator and denominator."""
    entries = [(min(t.s_power for t in entry), max(t.s_power for t in entry)) for entry in graph.entries]
    nodes: list[Range] = [(0, 0)]
    for edges in graph.edges[1:]:
        below = [(nodes[child], entries[entry]) for child, entry, _ in edges]
        nodes.append((min(n[0] + e[0] for n, e in below), max(n[1] + e[1] for n, e in below)))
    numerator, denominator = (
        (min(nodes[n][0] for _, n in side), max(nodes[n][1] for _, n in side))
        for side in (graph.numerator, graph.denominator)
    )
    return numerator, denominator


def with_sure_ends(found: np.ndarray, given: Coefficients, s: np.ndarray) -> np.ndarray:
    """`found`, shape (P,), replaced by the ratio of polynomials wherever their powers do not cancel at s."""
    sigma = s / given.omega
    with np.errstate(all="ignore"):
        sums = [horner(side, sigma) for side in (given.numerator, given.denominator)]
        sizes = [horner(np.abs(side), np.abs(sigma)) for side in (given.numerator, given.denominator)]
        ratio = sums[0] / sums[1]
        sure = np.isfinite(ratio)
        for total, size in zip(sums, sizes, strict=True):
            sure &= np.abs(size) <= _CANCELLING * np.abs(total)
    return np.where(sure, ratio, found)
