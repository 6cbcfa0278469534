"""Cones of exponent vectors: is a difference of two terms a non-negative sum of given vectors?

The question is asked of many pairs of terms, so the cone is turned once from its generators into inequalities
(Motzkin, Raiffa, Thompson, Thrall, "The double description method", 1953), in integers throughout.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import gcd

from symamp.errors import TooLargeError

Vector = tuple[int, ...]
_RAY_LIMIT = 20_000


@dataclass(frozen=True)
class Cone:
    """All non-negative sums of the generators: v lies in it when f·v ≥ 0 for `faces` and = 0 for `planes`."""

    faces: tuple[Vector, ...]
    planes: tuple[Vector, ...]
    undoing: tuple[int, ...]  # generators that others can undo: their sum with some of those is zero


def cone_of(generators: Sequence[Vector]) -> Cone:
    """The cone of integer vectors, none of them zero."""
    size = len(generators[0])
    lines: list[Vector] = [tuple(int(i == j) for j in range(size)) for i in range(size)]
    rays: list[Vector] = []
    done: list[Vector] = []
    for generator in generators:
        lines, rays = _cut(lines, rays, generator, done)
        done.append(generator)
    middle = [sum(ray[i] for ray in rays) for i in range(size)]
    undoing = tuple(i for i, g in enumerate(generators) if not _dot(middle, g))
    return Cone(tuple(rays), tuple(lines), undoing)


def _cut(
    lines: list[Vector], rays: list[Vector], generator: Vector, done: Sequence[Vector]
) -> tuple[list[Vector], list[Vector]]:
    """Add the inequality f·generator ≥ 0 to the cone of f spanned by lines (both ways) and rays."""
    for i, line in enumerate(lines):
        along = _dot(line, generator)
        if along:
            pivot = line if along > 0 else tuple(-x for x in line)
            step = abs(along)
            others = [_eliminated(x, pivot, generator, step) for j, x in enumerate(lines) if j != i]
            return others, [*(_eliminated(x, pivot, generator, step) for x in rays), _reduced(pivot)]
    return lines, _cut_rays(rays, generator, done)


def _cut_rays(rays: list[Vector], generator: Vector, done: Sequence[Vector]) -> list[Vector]:
    value = {ray: _dot(ray, generator) for ray in rays}
    kept = [ray for ray in rays if value[ray] >= 0]
    ups = [ray for ray in rays if value[ray] > 0]
    downs = [ray for ray in rays if value[ray] < 0]
    if not downs:
        return rays
    tight = {ray: frozenset(i for i, g in enumerate(done) if not _dot(ray, g)) for ray in rays}
    for up in ups:
        for down in downs:
            shared = tight[up] & tight[down]
            if any(shared <= tight[other] for other in rays if other is not up and other is not down):
                continue  # not neighbours: their sum is no extreme ray
            kept.append(
                _reduced(tuple(value[up] * d - value[down] * u for u, d in zip(up, down, strict=True)))
            )
    if len(kept) > _RAY_LIMIT:
        raise TooLargeError("the dominance assumptions name too many pairs to be judged together; split them")
    return kept


def _eliminated(vector: Vector, pivot: Vector, generator: Vector, step: int) -> Vector:
    """The vector moved along the pivot until it lies in the generator's plane."""
    along = _dot(vector, generator)
    return _reduced(tuple(step * v - along * p for v, p in zip(vector, pivot, strict=True)))


def _dot(a: Sequence[int], b: Sequence[int]) -> int:
    return sum(x * y for x, y in zip(a, b, strict=True))


def _reduced(vector: Vector) -> Vector:
    common = gcd(*vector)
    return tuple(x // common for x in vector) if common > 1 else vector
