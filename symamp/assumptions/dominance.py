"""Dominance: "x small against y", as a statement about the terms of one coefficient.

A pair gives the vector exponents(x) − exponents(y). Term A falls to term B of the same coefficient when A − B is
a non-zero sum of such vectors with non-negative factors. Terms that fall to none stay, whatever their numbers.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm
from typing import NamedTuple

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.cone import Cone, Vector, cone_of
from symamp.assumptions.merge import contradiction
from symamp.assumptions.record import Pair

_SAFE = 1 << 40
_BLOCK = 4_000_000  # comparisons of terms held at once


class Fall(NamedTuple):
    """A dropped term and the one it fell to: exponents of the coefficient's generators and numeric factors."""

    term: tuple[int, ...]
    factor: int
    against: tuple[int, ...]
    against_factor: int


@dataclass(frozen=True)
class Dominance:
    """Pooled vectors, ready to be put to coefficients."""

    symbols: tuple[str, ...]
    cone: Cone

    def judge(self, polynomial: fmpz_mpoly) -> tuple[fmpz_mpoly, list[Fall]]:
        """The terms that stay, and each dropped one with a term that stays and that it fell to."""
        if len(polynomial) < 2:
            return polynomial, []
        terms = [(tuple(map(int, e)), int(c)) for e, c in polynomial.terms()]
        exponents = np.array([e for e, _ in terms])
        place = {name: i for i, name in enumerate(polynomial.context().names())}
        # A symbol that the coefficient's ring lacks has exponent 0 in every term, and only passes a vector on.
        columns = [(i, place[name]) for i, name in enumerate(self.symbols) if name in place]
        own, there = [i for i, _ in columns], [k for _, k in columns]
        planes = _values(exponents[:, there], self.cone.planes, own)
        faces = _values(exponents[:, there], self.cone.faces, own)
        same = np.hstack([np.delete(exponents, there, axis=1), planes])
        falls: dict[int, int] = {}
        for group in _groups(same):
            falls.update(_fallen(group, faces[group]))
        if not falls:
            return polynomial, []
        kept = {e: c for i, (e, c) in enumerate(terms) if i not in falls}
        records = [Fall(*terms[i], *terms[j]) for i, j in falls.items()]
        return polynomial.context().from_dict(kept), records


def _values(exponents: np.ndarray, forms: Sequence[Vector], own: Sequence[int]) -> np.ndarray:
    """Each linear form on each term: (terms, forms)."""
    matrix = np.array([[form[i] for i in own] for form in forms], dtype=object).reshape(len(forms), len(own))
    # Machine integers, unless a cone of many steps has grown coefficients that they could not add up.
    small = not matrix.size or max(map(abs, matrix.flat)) < _SAFE
    return np.asarray(exponents @ matrix.T.astype(np.int64 if small else object))


def _groups(rows: np.ndarray) -> list[np.ndarray]:
    """Indices of equal rows, for each set of two or more."""
    _, inverse, counts = np.unique(rows, axis=0, return_inverse=True, return_counts=True)
    order = np.argsort(inverse.ravel(), kind="stable")
    ends = np.cumsum(counts)
    return [order[end - count : end] for end, count in zip(ends, counts, strict=True) if count > 1]


def _fallen(group: np.ndarray, values: np.ndarray) -> dict[int, int]:
    """Of terms that differ by the cone's span alone: {term that falls: a term that stays and that it falls to}."""
    size, faces = values.shape
    step = max(1, _BLOCK // (size * max(faces, 1)))
    above = np.empty((size, size), dtype=bool)
    for start in range(0, size, step):
        above[start : start + step] = (values[start : start + step, None, :] >= values[None, :, :]).all(axis=2)
    np.fill_diagonal(above, False)
    stays = ~above.any(axis=1)
    first = (above & stays).argmax(axis=1)
    return {int(group[i]): int(group[first[i]]) for i in np.flatnonzero(~stays)}


def idle(pairs: Sequence[Pair]) -> tuple[str, ...]:
    """The assumptions of which a vector comes out zero."""
    return tuple(dict.fromkeys(pair.assumption for pair in pairs if not pair.difference))


def pool(pairs: Sequence[Pair]) -> Dominance | None:
    """Pool the vectors of all dominance assumptions; None where none is left.

    Raises Contradiction naming assumptions whose vectors can add up to zero.
    """
    live = [(pair, difference) for pair in pairs if (difference := pair.difference)]
    if not live:
        return None
    symbols = tuple(sorted({name for _, difference in live for name in difference}))
    sources: dict[Vector, str] = {}
    for pair, difference in live:
        sources.setdefault(_integers(difference, symbols), pair.assumption)
    vectors = sorted(sources)
    cone = cone_of(vectors)
    if cone.undoing:
        undoing = {vectors[i] for i in cone.undoing}
        found = (p.assumption for p, d in live if _integers(d, symbols) in undoing)
        raise contradiction(
            found,
            "together they take a ratio and its inverse to be small",
            "keep the one that holds at your bias point, or limit each to its responses with for = [...]",
        )
    return Dominance(symbols, cone)


def _integers(difference: Mapping[str, Fraction], symbols: Sequence[str]) -> Vector:
    factor = lcm(*(Fraction(power).denominator for power in difference.values()))
    return tuple(int(difference.get(name, Fraction(0)) * factor) for name in symbols)
