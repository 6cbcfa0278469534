"""The minor graph over polynomials in σ = s/omega, and in t where symbols go to a limit as x·t or x/t.

Values are arrays of shape (powers of σ, powers of t, points); only two levels of the graph are kept at a time.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from flint import Ordering, fmpq, fmpq_mpoly_ctx, fmpq_poly, nmod_poly

from symamp.exact.minors import MinorGraph
from symamp.exact.modular import PRIME

# An entry as {(power of σ, power of t): number or array over points}.
Powers = dict[tuple[int, int], Any]


@dataclass(frozen=True)
class Coefficients:
    """Coefficients of σ = s/omega, ascending, at P points: `numerator` (n+1, P) and `denominator` (m+1, P)."""

    numerator: np.ndarray
    denominator: np.ndarray
    omega: float = 1.0


def horner(coefficients: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Polynomials with coefficients (k, P) or (k, 1), ascending, at complex sigma (P,)."""
    total = np.zeros(sigma.shape, dtype=complex)
    for row in coefficients[::-1]:
        total = total * sigma + row
    return total


def row_shifts(graph: MinorGraph, limits: Mapping[str, int]) -> dict[int, int]:
    """For each matrix row the power of t that clears its negative ones; numerator and denominator share it."""
    shifts: dict[int, int] = {}
    for entry, row in zip(graph.entries, graph.entry_rows, strict=True):
        for term in entry:
            t = limits.get(term.symbol, 0) * term.power if term.symbol else 0
            shifts[row] = max(shifts.get(row, 0), -t)
    return shifts


def scaled_entries(
    graph: MinorGraph, values: Mapping[str, Any], omega: float, limits: Mapping[str, int]
) -> list[Powers]:
    """Each entry by powers of σ and t, its row divided by the row's largest at the first point."""
    shifts = row_shifts(graph, limits)
    raw: list[Powers] = []
    scale: dict[int, float] = {}
    for entry, row in zip(graph.entries, graph.entry_rows, strict=True):
        powers: Powers = {}
        for coefficient, symbol, power, s_power in entry:
            value: Any = float(coefficient)
            t = shifts[row]
            if symbol is not None:
                value = value * values[symbol] if power > 0 else value / values[symbol]
                t += limits.get(symbol, 0) * power
            value = value * omega if s_power else value
            key = (s_power, t)
            powers[key] = value if key not in powers else powers[key] + value
        raw.append(powers)
        for value in powers.values():
            scale[row] = max(scale.get(row, 0.0), float(np.abs(np.ravel(value)[0])))
    return [
        {key: value / (scale[row] or 1.0) for key, value in powers.items()}
        for powers, row in zip(raw, graph.entry_rows, strict=True)
    ]


def walk_in_powers(
    graph: MinorGraph, entries: Sequence[Powers], points: int, valuation: tuple[int, int]
) -> tuple[np.ndarray, np.ndarray]:
    """Coefficients of σ of numerator and denominator, each at its power of t: two arrays (k, points)."""
    values: dict[int, np.ndarray] = {0: np.ones((1, 1, points))}
    bounds = [*graph.levels, len(graph.edges)]
    highest = max(valuation)
    for k in range(1, len(graph.levels)):
        current = {}
        for node in range(bounds[k], bounds[k + 1]):
            current[node] = _node(graph.edges[node], entries, values, points, highest)
        values = current
    return (
        _sum(graph.numerator, values, points, valuation[0]),
        _sum(graph.denominator, values, points, valuation[1]),
    )


def _node(
    edges: Any, entries: Sequence[Powers], values: dict[int, np.ndarray], points: int, highest: int
) -> np.ndarray:
    rows = max(values[c].shape[0] + max(s for s, _ in entries[e]) for c, e, _ in edges)
    layers = min(highest + 1, max(values[c].shape[1] + max(t for _, t in entries[e]) for c, e, _ in edges))
    total = np.zeros((rows, layers, points))
    for child, entry, sign in edges:
        below = values[child]
        for (s, t), value in entries[entry].items():
            depth = min(below.shape[1], layers - t)
            if depth > 0:
                product = (value if sign > 0 else -value) * below[:, :depth]
                total[s : s + below.shape[0], t : t + depth] += product
    return total


def _sum(parts: Any, values: dict[int, np.ndarray], points: int, layer: int) -> np.ndarray:
    rows = max((values[node].shape[0] for _, node in parts), default=1)
    total = np.zeros((rows, points))
    for factor, node in parts:
        if layer < values[node].shape[1]:
            total[: values[node].shape[0]] += factor * values[node][:, layer]
    return total


def exact_in_limit(
    graph: MinorGraph, values: Mapping[str, Fraction], limits: Mapping[str, int], valuation: tuple[int, int]
) -> tuple[fmpq_poly, fmpq_poly]:
    """The same in rational numbers at one bias point: polynomials in s."""
    shifts = row_shifts(graph, limits)
    context = fmpq_mpoly_ctx.get(("s", "t"), Ordering.lex)
    entries = []
    for entry, row in zip(graph.entries, graph.entry_rows, strict=True):
        terms: dict[tuple[int, ...], Any] = {}
        for coefficient, symbol, power, s_power in entry:
            t = shifts[row] + (limits.get(symbol, 0) * power if symbol else 0)
            value = coefficient * (values[symbol] ** power if symbol else Fraction(1))
            terms[s_power, t] = terms.get((s_power, t), fmpq(0)) + fmpq(value.numerator, value.denominator)
        entries.append(context.from_dict(terms))
    both = graph.walk(entries, context.constant(1), context.constant(0))
    found = []
    for polynomial, layer in zip(both, valuation, strict=True):
        by_s = {int(s): c for (s, t), c in polynomial.to_dict().items() if int(t) == layer}
        found.append(fmpq_poly([by_s.get(k, fmpq(0)) for k in range(max(by_s, default=0) + 1)]))
    return found[0], found[1]


def leading_residues(
    graph: MinorGraph, values: Mapping[str, int], s: int, limits: Mapping[str, int]
) -> tuple[tuple[int, int], tuple[int, int]]:
    """(lowest power of t, its coefficient) of numerator and denominator at given values modulo PRIME.

    The power is −1 where all of it vanishes. At random values the power is the identity's but with a
    probability of some degree/2^61 (Schwartz 1980, Zippel 1979).
    """
    shifts = row_shifts(graph, limits)
    entries = []
    for entry, row in zip(graph.entries, graph.entry_rows, strict=True):
        terms: dict[int, int] = {}
        for coefficient, symbol, power, s_power in entry:
            value = coefficient * (s if s_power else 1)
            t = shifts[row]
            if symbol is not None:
                value *= values[symbol] if power > 0 else pow(values[symbol], -1, PRIME)
                t += limits.get(symbol, 0) * power
            terms[t] = (terms.get(t, 0) + value) % PRIME
        entries.append(nmod_poly([terms.get(k, 0) for k in range(max(terms) + 1)], PRIME))
    both = graph.walk(entries, nmod_poly([1], PRIME), nmod_poly([0], PRIME))
    return _lowest(both[0]), _lowest(both[1])


def _lowest(polynomial: nmod_poly) -> tuple[int, int]:
    for power in range(polynomial.degree() + 1):
        if int(polynomial[power]):
            return power, int(polynomial[power])
    return -1, 0
