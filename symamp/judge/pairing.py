"""Which approximate root is the partner of which exact one: the least sum of |Log(a/e)| over all pairings."""

from __future__ import annotations

from itertools import permutations

import numpy as np

_ENUMERATE = 130  # pairings up to which all are tried at once
_TIE = 1e-9  # a difference of costs that counts as none
_NEVER = 1e6  # the cost of a pairing of a root at 0 with one elsewhere: such two are no partners


def partners(exact: np.ndarray, approximate: np.ndarray) -> np.ndarray:
    """For each exact root (m, P) its partner among the approximate ones (q, P): (m, P), nan where it is lost.

    Both come sorted by magnitude, nan last where there are fewer. Roots at 0 pair first.
    """
    m, points = exact.shape
    if m == 0 or approximate.shape[0] == 0 or points == 0:
        return np.full((m, points), complex(np.nan, np.nan))
    plain = _in_order(exact, approximate)
    if plain.all():
        return approximate
    result = np.full((m, points), complex(np.nan, np.nan))
    if plain.any():
        result[:, plain] = approximate[:, plain]
    rest = np.flatnonzero(~plain)
    if rest.size:
        result[:, rest] = _least_cost(exact[:, rest], approximate[:, rest])
    return result


def left_over(exact: np.ndarray, approximate: np.ndarray) -> tuple[list[complex], list[complex]]:
    """Lost and new roots at one point: exact ones without partner, and approximate ones that are none's."""
    e, a = exact.reshape(-1, 1), approximate.reshape(-1, 1)
    found = partners(e, a)[:, 0]
    lost = [complex(x) for x, y in zip(e[:, 0], found, strict=True) if np.isnan(y) and not np.isnan(x)]
    taken = [complex(y) for y in found if not np.isnan(y)]
    new = []
    for root in (complex(x) for x in a[:, 0] if not np.isnan(x)):
        if root in taken:
            taken.remove(root)
        else:
            new.append(root)
    return lost, new


def _in_order(exact: np.ndarray, approximate: np.ndarray) -> np.ndarray:
    """Points at which sorted order is the best pairing: as many of each, all real and in the left half plane.

    On a line, sorted order minimises the sum of distances; log magnitudes of such roots lie on one.
    """
    if exact.shape[0] != approximate.shape[0]:
        return np.zeros(exact.shape[1], dtype=bool)
    left = (exact.imag == 0) & (exact.real < 0) & (approximate.imag == 0) & (approximate.real < 0)
    return np.asarray(left.all(axis=0))


def _costs(exact: np.ndarray, approximate: np.ndarray) -> np.ndarray:
    """|Log(a/e)| as (m, q, P); 0 for two roots at 0, _NEVER where only one is, nan where one is none."""
    with np.errstate(all="ignore"):
        ratio = approximate[None, :, :] / exact[:, None, :]
        cost = np.abs(np.log(ratio))
    zero_e, zero_a = (exact == 0)[:, None, :], (approximate == 0)[None, :, :]
    cost = np.where(zero_e & zero_a, 0.0, np.where(zero_e | zero_a, _NEVER, cost))
    missing = np.isnan(exact)[:, None, :] | np.isnan(approximate)[None, :, :]
    # A root that is none may be paired at no cost with any: the pairing of the others decides.
    return np.where(missing, _NEVER * 10, cost)


def _least_cost(exact: np.ndarray, approximate: np.ndarray) -> np.ndarray:
    m, q = exact.shape[0], approximate.shape[0]
    cost = _costs(exact, approximate)
    choices = _pairings(m, q)
    picked = _by_enumeration(cost, choices) if choices is not None else _by_assignment(cost)
    every = np.arange(exact.shape[1])
    result = np.full(exact.shape, complex(np.nan, np.nan))
    for i in range(m):
        j = picked[i]
        has = j >= 0
        value = np.where(has, approximate[np.maximum(j, 0), every], np.nan)
        fits = has & (cost[i, np.maximum(j, 0), every] < _NEVER)
        result[i] = np.where(fits, value, complex(np.nan, np.nan))
    return result


def _pairings(m: int, q: int) -> list[tuple[int, ...]] | None:
    """All ways to give each of m roots one of q (−1 for none), or None where there are too many."""
    large, small = max(m, q), min(m, q)
    count = 1
    for k in range(small):
        count *= large - k
    if count > _ENUMERATE:
        return None
    if m <= q:
        return list(permutations(range(q), m))
    ways = []
    for rows in permutations(range(m), q):
        way = [-1] * m
        for column, row in enumerate(rows):
            way[row] = column
        ways.append(tuple(way))
    return ways


def _by_enumeration(cost: np.ndarray, ways: list[tuple[int, ...]]) -> np.ndarray:
    points = cost.shape[2]
    best = np.full(points, np.inf)
    picked = np.full((cost.shape[0], points), -1)
    for way in ways:
        total = sum(cost[i, j] for i, j in enumerate(way) if j >= 0)
        better = total < best * (1 - 1e-12)
        best = np.where(better, total, best)
        for i, j in enumerate(way):
            picked[i] = np.where(better, j, picked[i])
    return picked


def _by_assignment(cost: np.ndarray) -> np.ndarray:
    """Point by point; Kuhn 1955, as scipy does it."""
    from scipy.optimize import linear_sum_assignment  # heavy, and only many roots need it

    picked = np.full((cost.shape[0], cost.shape[2]), -1)
    # Where several pairings cost the same (two roots that both move one way, past one another), order is kept.
    order = _TIE * np.subtract.outer(np.arange(cost.shape[0]), np.arange(cost.shape[1])) ** 2
    for p in range(cost.shape[2]):
        rows, columns = linear_sum_assignment(cost[:, :, p] + order)
        picked[rows, p] = columns
    return picked
