"""Dominance: "x small against y", as a statement about the terms of one coefficient.

A pair gives the vector exponents(x) − exponents(y). Term A falls to term B of the same coefficient when A − B is
a non-zero sum of such vectors with non-negative factors. Terms that fall to none stay, whatever their numbers.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from math import lcm

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.cone import Cone, Sources, Vector, cone_of, without_columns
from symamp.assumptions.merge import contradiction
from symamp.assumptions.record import Pair
from symamp.exact.polys import held

_SAFE = 1 << 40
_SMALL_POWER = 1 << 15


class Terms:
    """The terms of a polynomial as arrays, made once for all the cones that it is put to."""

    def __init__(self, polynomial: fmpz_mpoly) -> None:
        self.polynomial = polynomial
        self.factors = polynomial.coeffs()
        width = polynomial.context().nvars()
        # A ledger keeps the terms of hundreds of forms, so they are kept small.
        kind = np.int16 if max(map(int, polynomial.degrees()), default=0) < _SMALL_POWER else np.int64
        self.exponents = np.array(polynomial.monoms(), dtype=kind).reshape(-1, width)
        self.place = {name: i for i, name in enumerate(polynomial.context().names())}
        self.held = held(polynomial)

    def __len__(self) -> int:
        return len(self.factors)

    @property
    def monomials(self) -> list[tuple[int, ...]]:
        """The exponents of each term."""
        return [tuple(row) for row in self.exponents.tolist()]

    def only(self, rows: Iterable[int]) -> fmpz_mpoly:
        """The polynomial of these terms alone."""
        chosen = np.fromiter(rows, dtype=np.intp)
        exponents = self.exponents[chosen].tolist()
        terms = {tuple(row): self.factors[i] for row, i in zip(exponents, chosen, strict=True)}
        return self.polynomial.context().from_dict(terms)


class Dominance:
    """Pooled vectors, ready to be put to coefficients. `vectors` are exponents of `symbols`."""

    def __init__(self, symbols: tuple[str, ...], vectors: Sources) -> None:
        self.symbols = symbols
        self._vectors = vectors
        self._cones: dict[tuple[str, ...], tuple[tuple[str, ...], Cone | None]] = {}

    def judge(self, terms: Terms) -> np.ndarray:
        """For each term the index of a term that stays and that it falls to, or its own where it stays."""
        own = np.arange(len(terms))
        if len(terms) < 2:
            return own
        symbols, cone = self._cone_among(terms)
        if cone is None:
            return own
        columns = [terms.place[name] for name in symbols]
        named, rest = terms.exponents[:, columns], np.delete(terms.exponents, columns, axis=1)
        falls_to = _falls(_labels(np.hstack([rest, _values(named, cone.planes)])), _values(named, cone.faces))
        while True:  # on to a term that stays: falling is transitive, and never runs in a ring
            further = falls_to[falls_to]
            if np.array_equal(further, falls_to):
                return falls_to
            falls_to = further

    def _cone_among(self, terms: Terms) -> tuple[tuple[str, ...], Cone | None]:
        """The cone among the symbols that a coefficient holds: one that it lacks only passes a vector on."""
        there = tuple(name for name in self.symbols if name in terms.held)
        if there not in self._cones:
            absent = [i for i, name in enumerate(self.symbols) if name not in terms.held]
            kept = [i for i, name in enumerate(self.symbols) if name in terms.held]
            vectors = [tuple(v[i] for i in kept) for v in without_columns(self._vectors, absent)]
            moving = [name for i, name in enumerate(there) if any(v[i] for v in vectors)]
            places = [there.index(name) for name in moving]
            generators = sorted({tuple(v[i] for i in places) for v in vectors})
            self._cones[there] = (tuple(moving), cone_of(generators) if generators else None)
        return self._cones[there]


def _values(exponents: np.ndarray, forms: Sequence[Vector]) -> np.ndarray:
    """Each linear form on each term: (terms, forms)."""
    matrix = np.array(forms, dtype=object).reshape(len(forms), exponents.shape[1])
    # Machine integers, unless a cone of many steps has grown coefficients that they could not add up.
    small = not matrix.size or max(map(abs, matrix.flat)) < _SAFE
    return np.asarray(exponents @ matrix.T.astype(np.int64 if small else object))


def _labels(rows: np.ndarray) -> np.ndarray:
    """A number for each row, the same for equal rows."""
    if rows.dtype != object:
        mixed = rows @ np.random.default_rng(0).integers(1, 1 << 62, rows.shape[1])  # modulo 2**64
        _, first, labels = np.unique(mixed, return_index=True, return_inverse=True)
        if np.array_equal(rows[first[labels]], rows):  # no two different rows were mixed to one number
            return labels.ravel()
    return np.unique(rows, axis=0, return_inverse=True)[1].ravel()


def _falls(labels: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """For each term one of the same label below it in all faces, or itself.

    Terms of a label stand in a row; each is compared with the one k places on, for all of them at once.
    """
    order = np.argsort(labels, kind="stable")
    labels, faces = labels[order], faces[order]
    falls_to = np.arange(len(order))
    for k in range(1, int(np.bincount(labels).max())):
        first = np.flatnonzero(labels[:-k] == labels[k:])
        above, below = faces[first], faces[first + k]
        down = first[(above >= below).all(axis=1)]
        falls_to[down] = down + k
        up = first[(below >= above).all(axis=1)]
        falls_to[up + k] = np.where(falls_to[up + k] == up + k, up, falls_to[up + k])
    back = np.empty_like(order)
    back[order] = order[falls_to]
    return back


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
    vectors: dict[Vector, frozenset[str]] = {}
    for pair, difference in live:
        vectors.setdefault(_integers(difference, symbols), frozenset([pair.assumption]))
    rings = without_columns(vectors, range(len(symbols)))
    if rings:
        (names,) = rings.values()
        listed = [pair.assumption for pair, _ in live if pair.assumption in names]
        raise contradiction(
            listed,
            "together they take a ratio and its inverse to be small",
            "keep the one that holds at your bias point, or limit each to its responses with for = [...]",
        )
    return Dominance(symbols, vectors)


def _integers(difference: Mapping[str, Fraction], symbols: Sequence[str]) -> Vector:
    factor = lcm(*(Fraction(power).denominator for power in difference.values()))
    return tuple(int(difference.get(name, Fraction(0)) * factor) for name in symbols)
