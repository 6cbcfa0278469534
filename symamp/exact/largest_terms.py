"""Exact: product terms of one coefficient of s, the largest first.

The k-th largest product from a node of the diagram is the k-th best of those by its two edges, each of which is an
element's choice times the r-th largest product from the node below; every node keeps a heap of what may come next,
and asks below only when it must (Jiménez and Marzal, "Computing the K shortest paths: a new algorithm and an
experimental comparison", Workshop on Algorithm Engineering 1999, on the logarithms of the factors).

Why not on the minor graph itself: in a nodal determinant each conductance is stamped four times, and nearly all large
raw products cancel. For the denominator of an op amp of 20 transistors at DC the magnitudes of the raw products add up
to 18,500 times their sum, and the first 300,000 of them hold 70 true terms. The diagram has one path for each true
product: as many are had from its first 70, and the magnitudes of all add up to 1.0035 times their sum.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from math import exp, inf, log
from typing import Any, NamedTuple

from symamp.exact.largest_diagram import ProductDiagram
from symamp.exact.largest_elements import Choice
from symamp.exact.largest_sums import choice_value

Monomial = tuple[tuple[str, int], ...]  # (symbol, exponent), by name
Key = tuple[int, int]  # node, power of s
SAME = 1e-9  # logarithms nearer than this are one magnitude


class Product(NamedTuple):
    """coefficient · monomial, and the logarithm of its magnitude."""

    monomial: Monomial
    coefficient: Fraction
    log: float


class _Way(NamedTuple):
    """One way on from a node: to `below`, by a choice (None where the element is left out) and a factor."""

    below: Key
    choice: Choice | None
    factor: int | Fraction
    log: float


@dataclass
class _Stream:
    """Products from a node, largest first: `found` (logarithm, way, rank below); what may come next is in `heap`."""

    ways: list[_Way]
    found: list[tuple[float, int, int]] = field(default_factory=list)
    heap: list[tuple[float, int, int]] = field(default_factory=list)
    asked: list[tuple[int, int]] = field(default_factory=list)  # (way, rank) to be looked up before going on


class LargestProducts:
    """The products of s**power in order of magnitude, by rank; worked out as they are asked for."""

    def __init__(self, diagram: ProductDiagram, power: int, values: Mapping[str, Any]) -> None:
        self._diagram = diagram
        self._choices: list[list[tuple[Choice, int | Fraction, float]]] = [
            [
                (c, _number(c.coefficient), log(abs(size)))
                for c in e.choices
                if (size := float(choice_value(c, values)))
            ]
            for e in diagram.items
        ]
        self._streams: dict[Key, _Stream] = {}
        self._top = diagram.top, power

    def product(self, rank: int) -> Product | None:
        """The product of that rank, 0 the largest; None where there are no more."""
        if not self._diagram.factor or not self._fill(self._top, rank):
            return None
        coefficient = _number(self._diagram.factor)
        powers: dict[str, int] = {}
        size = log(abs(coefficient)) + (self._streams[self._top].found[rank][0] if self._top[0] else 0.0)
        key = self._top
        while key[0]:
            stream = self._streams[key]
            _, way, rank = stream.found[rank]
            key, choice, factor, _ = stream.ways[way]
            coefficient *= factor
            if choice is not None and choice.symbol is not None:
                powers[choice.symbol] = powers.get(choice.symbol, 0) + choice.power
        return Product(tuple(sorted((n, p) for n, p in powers.items() if p)), Fraction(coefficient), size)

    def __iter__(self) -> Iterator[Product]:
        rank = 0
        while (found := self.product(rank)) is not None:
            yield found
            rank += 1

    def _fill(self, key: Key, rank: int) -> bool:
        """Work out the products of a node up to this rank; False where there are not so many."""
        if key[0] == 0:
            return key == (0, 0) and rank == 0
        stack = [(key, rank)]
        while stack:
            here, wanted = stack[-1]
            stream = self._stream(here)
            if len(stream.found) > wanted:
                stack.pop()
                continue
            needed = self._look_up(stream)
            if needed is not None:
                stack.append(needed)
            elif stream.heap:
                size, way, below = heapq.heappop(stream.heap)
                stream.found.append((-size, way, below))
                stream.asked.append((way, below + 1))
            else:
                stack.pop()
        return len(self._streams[key].found) > rank

    def _look_up(self, stream: _Stream) -> tuple[Key, int] | None:
        """Bring what was asked for from below into the heap; or say what has to be worked out there first."""
        while stream.asked:
            way, rank = stream.asked[-1]
            below = stream.ways[way].below
            if below[0] == 0:
                size = 0.0 if below == (0, 0) and rank == 0 else None
            else:
                under = self._stream(below)
                if len(under.found) <= rank and (under.heap or under.asked):
                    return below, rank
                size = under.found[rank][0] if len(under.found) > rank else None
            stream.asked.pop()
            if size is not None:
                heapq.heappush(stream.heap, (-(size + stream.ways[way].log), way, rank))
        return None

    def _stream(self, key: Key) -> _Stream:
        if key not in self._streams:
            ways = list(self._ways(key))
            self._streams[key] = _Stream(ways, asked=[(way, 0) for way in range(len(ways))])
        return self._streams[key]

    def _ways(self, key: Key) -> Iterator[_Way]:
        node, s = key
        out, taken = self._diagram.out[node], self._diagram.taken[node]
        if out is not None:
            yield _Way((out[0], s), None, out[1], log(abs(float(out[1]))))
        if taken is not None:
            for choice, coefficient, size in self._choices[self._diagram.element[node]]:
                if s >= choice.s_power:
                    below = taken[0], s - choice.s_power
                    yield _Way(below, choice, taken[1] * coefficient, log(abs(float(taken[1]))) + size)


def _number(value: Fraction) -> Fraction | int:
    """An integer as such: products of integers are quicker by far."""
    return value.numerator if value.denominator == 1 else value


class Gathering:
    """Products of the same monomial added up; what cancels is left out.

    A monomial is settled once no product as large as `least` times it can follow: that is the least numeric factor
    which a product may have. Several equal products may add up to more than one monomial that came before.
    """

    def __init__(self, values: Mapping[str, Any], least: float) -> None:
        self._log = {name: log(abs(float(value))) for name, value in values.items() if value}
        self._floor = log(least)
        self._waiting: dict[Monomial, Fraction] = {}
        self._gross: dict[Monomial, Fraction] = {}
        self._sizes: list[tuple[float, Monomial]] = []

    def add(self, product: Product) -> None:
        """One more product, no larger than those before."""
        monomial = product.monomial
        if monomial not in self._waiting:
            self._waiting[monomial] = self._gross[monomial] = Fraction(0)
            heapq.heappush(self._sizes, (-sum(p * self._log[name] for name, p in monomial), monomial))
        self._waiting[monomial] += product.coefficient
        self._gross[monomial] += abs(product.coefficient)

    def settled(self, following: float) -> Iterator[Product]:
        """The monomials that no product of this magnitude (its logarithm) or less can change."""
        while self._sizes and -self._sizes[0][0] + self._floor > following + SAME:
            size, monomial = heapq.heappop(self._sizes)
            coefficient = self._waiting.pop(monomial)
            del self._gross[monomial]
            if coefficient:
                yield Product(monomial, coefficient, -size + log(abs(coefficient)))

    def __len__(self) -> int:
        """How many monomials are not settled yet."""
        return len(self._sizes)

    def lowest(self) -> float:
        """The least magnitude (its logarithm) of a monomial that is not settled yet; infinite where there is none."""
        return -max((size for size, _ in self._sizes), default=-inf)

    def unsettled(self) -> list[float]:
        """The logarithms of the magnitudes of what was added to monomials that are not settled yet."""
        return [-size + log(self._gross[monomial]) for size, monomial in self._sizes]


def combined(products: Iterable[Product], gathering: Gathering) -> Iterator[Product]:
    """All products, those of the same monomial added up, by magnitude."""
    for product in products:
        yield from gathering.settled(product.log)
        gathering.add(product)
    yield from gathering.settled(-inf)


def least_factor(diagram: ProductDiagram) -> float:
    """A bound from below on the magnitude of any product's numeric factor: 1 where all that is stamped is whole."""
    # det(u's)·det(v's) is a whole number, and so at least 1.
    logs = [min(0.0, *(log(abs(c.coefficient)) for c in e.choices)) for e in diagram.items if e.choices]
    return exp(sum(logs))
