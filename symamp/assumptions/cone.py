"""Cones of exponent vectors: is a difference of two terms a non-negative sum of given vectors?

The question is asked of many pairs of terms, so the cone is turned once from its generators into inequalities
(Motzkin, Raiffa, Thompson, Thrall, "The double description method", 1953), in integers throughout.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from math import gcd

import numpy as np

from symamp.errors import TooLargeError

Vector = tuple[int, ...]
Sources = Mapping[Vector, frozenset[str]]
_RAY_LIMIT = 3_000
_BLOCK = 1 << 21
_VECTOR_LIMIT = 20_000


@dataclass(frozen=True)
class Cone:
    """All non-negative sums of the generators: v lies in it when f·v ≥ 0 for `faces` and = 0 for `planes`."""

    faces: tuple[Vector, ...]
    planes: tuple[Vector, ...]


def without_columns(vectors: Sources, columns: Iterable[int]) -> dict[Vector, frozenset[str]]:
    """Generators of the part of their cone where these coordinates are 0, each with what it was made of.

    Where a sum of the vectors is zero and all columns go, the zero vector is left. The elimination is that of
    Fourier (1826) and Motzkin (1936). Raises TooLargeError.
    """
    left = dict(vectors)
    waiting = set(columns)
    while waiting:
        column = min(waiting, key=lambda k: (_work(left, k), k))
        waiting.discard(column)
        left = _eliminated(left, column)
        if len(left) > _VECTOR_LIMIT:
            raise _too_large()
    return left


def cone_of(generators: Sequence[Vector]) -> Cone:
    """The cone of integer vectors, none of them zero. Raises TooLargeError.

    Vectors that share no coordinate with others, even by way of third ones, are turned by themselves.
    """
    size = len(generators[0])
    faces: list[Vector] = []
    planes: list[Vector] = []
    apart = _components(generators)
    for columns, own in apart:
        dual = _Dual(len(columns), len(own))
        for index, generator in enumerate(own):
            dual.cut(index, np.array([generator[k] for k in columns], dtype=object))
        faces += [_spread(row, columns, size) for row in dual.rays]
        planes += [_spread(row, columns, size) for row in dual.lines]
    used = {k for columns, _ in apart for k in columns}
    planes += [tuple(int(i == k) for i in range(size)) for k in range(size) if k not in used]
    return Cone(tuple(sorted(faces)), tuple(sorted(planes)))


def _components(generators: Sequence[Vector]) -> list[tuple[list[int], list[Vector]]]:
    """Groups of vectors that are joined by coordinates, each with its coordinates."""
    groups: list[tuple[set[int], list[Vector]]] = []
    for generator in generators:
        columns, own = {k for k, x in enumerate(generator) if x}, [generator]
        apart = []
        for group in groups:
            if columns & group[0]:
                columns, own = columns | group[0], group[1] + own
            else:
                apart.append(group)
        groups = [*apart, (columns, own)]
    return [(sorted(columns), own) for columns, own in groups]


def _spread(row: np.ndarray, columns: Sequence[int], size: int) -> Vector:
    place = dict(zip(columns, (int(x) for x in row), strict=True))
    return tuple(place.get(k, 0) for k in range(size))


def _work(vectors: Iterable[Vector], column: int) -> int:
    above = sum(1 for v in vectors if v[column] > 0)
    below = sum(1 for v in vectors if v[column] < 0)
    return above * below - above - below


def _eliminated(vectors: Sources, column: int) -> dict[Vector, frozenset[str]]:
    """The vectors without the coordinate, and the sums of two that cancel it."""
    found = {v: names for v, names in vectors.items() if not v[column]}
    above = [(v, names) for v, names in vectors.items() if v[column] > 0]
    below = [(v, names) for v, names in vectors.items() if v[column] < 0]
    for up, up_names in above:
        for down, down_names in below:
            a, b = up[column], -down[column]
            vector = _reduced(tuple(b * x + a * y for x, y in zip(up, down, strict=True)))
            names = up_names | down_names
            if vector not in found or len(names) < len(found[vector]):
                found[vector] = names
    return found


class _Dual:
    """The cone of all f with f·g ≥ 0 for the generators so far: lines (both ways) and extreme rays.

    `tight[r, g]` says that ray r is zero on generator g.
    """

    def __init__(self, size: int, generators: int) -> None:
        self.size = size
        self.lines = np.array([[int(i == k) for k in range(size)] for i in range(size)], dtype=object)
        self.rays = np.empty((0, size), dtype=object)
        self.tight = np.empty((0, generators), dtype=bool)

    def cut(self, index: int, generator: np.ndarray) -> None:
        """Add the inequality f·generator ≥ 0."""
        along = self.lines @ generator
        crossing = np.flatnonzero(along)
        if crossing.size:
            self._cut_line(index, generator, int(crossing[0]))
        else:
            self._cut_rays(index, self.rays @ generator)
        if len(self.rays) > _RAY_LIMIT:
            raise _too_large()

    def _cut_line(self, index: int, generator: np.ndarray, place: int) -> None:
        """One line becomes a ray; all others move along it into the generator's plane."""
        pivot = self.lines[place]
        if pivot @ generator < 0:
            pivot = -pivot
        self.rays = np.vstack([_moved(self.rays, pivot, generator), pivot])
        self.lines = _moved(np.delete(self.lines, place, axis=0), pivot, generator)
        self.tight = np.vstack([self.tight, np.arange(self.tight.shape[1]) < index])
        self.tight[:-1, index] = True

    def _cut_rays(self, index: int, value: np.ndarray) -> None:
        """Rays on the wrong side go; where an edge joins one of them to one on the right side, a ray is new."""
        self.tight[:, index] = value == 0
        ups, downs = np.flatnonzero(value > 0), np.flatnonzero(value < 0)
        if not downs.size:
            return
        new, new_tight = [], []
        for up, down in self._neighbours(ups, downs, index):
            ray = value[up] * self.rays[down] - value[down] * self.rays[up]
            new.append(_reduced(tuple(ray)))
            new_tight.append(self.tight[up] & self.tight[down])
            new_tight[-1][index] = True
        kept = value >= 0
        rows = np.array(new, dtype=object).reshape(-1, self.size)
        self.rays = np.vstack([self.rays[kept], rows])
        self.tight = np.vstack(
            [self.tight[kept], np.array(new_tight, dtype=bool).reshape(-1, self.tight.shape[1])]
        )

    def _neighbours(self, ups: np.ndarray, downs: np.ndarray, index: int) -> list[tuple[int, int]]:
        """Pairs of rays joined by an edge: no third ray is zero on all generators on which both are."""
        tight = self.tight[:, :index]
        small = tight.astype(np.float32)
        shared_count = small[ups] @ small[downs].T
        # An edge lies in as many planes as the pointed part has dimensions, less two.
        enough = np.argwhere(shared_count >= self.size - len(self.lines) - 2)
        found: list[tuple[int, int]] = []
        step = max(1, _BLOCK // max(1, len(small)))
        for start in range(0, len(enough), step):
            rows, columns = enough[start : start + step].T
            shared = small[ups[rows]] * small[downs[columns]]
            on_all = (small @ shared.T >= shared_count[rows, columns]).sum(axis=0)
            pairs = zip(ups[rows[on_all == 2]], downs[columns[on_all == 2]], strict=True)
            found.extend((int(up), int(down)) for up, down in pairs)
        return found


def _moved(rows: np.ndarray, pivot: np.ndarray, generator: np.ndarray) -> np.ndarray:
    """Each row moved along the pivot until it lies in the generator's plane."""
    step = pivot @ generator
    moved = [_reduced(tuple(step * row - (row @ generator) * pivot)) for row in rows]
    return np.array(moved, dtype=object).reshape(-1, len(pivot))


def _reduced(vector: Vector) -> Vector:
    common = gcd(*vector)
    return tuple(x // common for x in vector) if common > 1 else vector


def _too_large() -> TooLargeError:
    return TooLargeError("the dominance assumptions name too many pairs to be judged together; split them")
