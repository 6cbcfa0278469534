"""Exact: a determinant as a sum over elements, each an outer product: A = Σ value · u·vᵀ.

What a part stamps into a nodal matrix is an outer product of small integer vectors: a conductance between two nodes
(e_a − e_b)(e_a − e_b)ᵀ, a transconductance (e_out+ − e_out−)(e_control+ − e_control−)ᵀ. By the Cauchy–Binet formula

    det A = Σ over sets T of n elements of  det(u's of T) · det(v's of T) · Π values of T,

and no two of these terms are products of the same elements, so nothing cancels: they are the trees that the current
graph and the voltage graph of a network have in common (Mayeda and Seshu, "Topological formulas for network
functions", 1957, from memory).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import gcd
from typing import Literal

from symamp.exact.minors import MinorGraph

Side = Literal["numerator", "denominator"]
Vector = tuple[tuple[int, int], ...]  # (coordinate, integer), coordinates ascending
Matrix = dict[tuple[int, int], Fraction]


@dataclass(frozen=True)
class Choice:
    """coefficient · symbol**power · s**s_power, one of the terms of an element's value; `symbol` None for a number."""

    coefficient: Fraction
    symbol: str | None
    power: int
    s_power: int


@dataclass(frozen=True)
class Element:
    """An outer product u·vᵀ whose value is the sum of `choices`: what stands in parallel is one element."""

    u: Vector
    v: Vector
    choices: tuple[Choice, ...]


@dataclass(frozen=True)
class Elements:
    """A square matrix of `size` rows as a sum of elements; `factor` times its determinant is a side of a response."""

    size: int
    items: tuple[Element, ...]
    factor: int = 1

    @property
    def symbols(self) -> tuple[str, ...]:
        """The symbols that the elements hold, in order of appearance."""
        names = {c.symbol: None for e in self.items for c in e.choices if c.symbol is not None}
        return tuple(names)


def elements_of(graph: MinorGraph, side: Side, rename: Mapping[str, str] | None = None) -> Elements:
    """The elements of the numerator's or the denominator's matrix.

    The side is a sum of minors of all rows; a last row that holds their factors makes it one determinant.
    `rename` makes symbols one with others.
    """
    place: dict[int, int] = {}
    for row in graph.entry_rows:
        place.setdefault(row, len(place))
    size = len(graph.levels) - 1
    columns = sorted(set(graph.entry_columns))
    column_of = {column: k for k, column in enumerate(columns)}
    parts: dict[tuple[str | None, int, int], Matrix] = {}
    for entry, row, column in zip(graph.entries, graph.entry_rows, graph.entry_columns, strict=True):
        for coefficient, symbol, power, s_power in entry:
            at = place[row], column_of[column]
            cells = parts.setdefault((symbol, power, s_power), {})
            cells[at] = cells.get(at, Fraction(0)) + coefficient
    whole = 1
    if len(columns) == size:
        whole = sum(f for f, _ in (graph.numerator if side == "numerator" else graph.denominator))
    else:
        border = parts.setdefault((None, 0, 0), {})
        for column, value in _border(graph, side).items():
            border[size, column_of[column]] = Fraction(value)
    found: dict[tuple[Vector, Vector], dict[tuple[str | None, int, int], Fraction]] = {}
    for (symbol, power, s_power), cells in parts.items():
        # Symbols are made one only now: the matrix of each by itself is the outer product of its stamp.
        key = (rename or {}).get(symbol, symbol) if symbol is not None else None, power, s_power
        for factor, u, v in _by_lines(cells) if symbol is None else _outer_products(cells):
            choices = found.setdefault((u, v), {})
            choices[key] = choices.get(key, Fraction(0)) + factor
    return Elements(len(columns), tuple(_elements(found)), whole)


def _elements(
    found: Mapping[tuple[Vector, Vector], Mapping[tuple[str | None, int, int], Fraction]],
) -> Iterable[Element]:
    for (u, v), choices in found.items():
        left = tuple(Choice(coefficient, *key) for key, coefficient in choices.items() if coefficient)
        if left:
            yield Element(u, v, left)


def up_to(elements: Elements, highest: int) -> Elements:
    """Without what stands with a higher power of s than `highest`: what the coefficients up to there hold."""
    items = [(e.u, e.v, tuple(c for c in e.choices if c.s_power <= highest)) for e in elements.items]
    return Elements(elements.size, tuple(Element(*item) for item in items if item[2]), elements.factor)


def split_by_order(elements: Elements, limits: Mapping[str, int]) -> tuple[Elements, list[int]]:
    """Elements whose choices are all of one power of t, and these powers; `limits` gives those of the symbols."""
    items, orders = [], []
    for element in elements.items:
        by_order: dict[int, list[Choice]] = {}
        for choice in element.choices:
            by_order.setdefault(limits.get(choice.symbol or "", 0) * choice.power, []).append(choice)
        for order, choices in by_order.items():
            items.append(Element(element.u, element.v, tuple(choices)))
            orders.append(order)
    return Elements(elements.size, tuple(items), elements.factor), orders


def _border(graph: MinorGraph, side: Side) -> dict[int, int]:
    """The last row: entry c times its cofactor is the factor of the minor that leaves column c out."""
    columns = set(graph.entry_columns)
    ordered = sorted(columns)
    size = len(ordered) - 1
    row: dict[int, int] = {}
    for factor, node in graph.numerator if side == "numerator" else graph.denominator:
        (left_out,) = columns - _columns_of(graph, node)
        sign = -1 if (size + ordered.index(left_out)) & 1 else 1
        row[left_out] = row.get(left_out, 0) + sign * factor
    return row


def _columns_of(graph: MinorGraph, node: int) -> set[int]:
    found = set()
    while node:
        child, entry, _ = graph.edges[node][0]
        found.add(graph.entry_columns[entry])
        node = child
    return found


def _by_lines(cells: Matrix) -> Iterable[tuple[Fraction, Vector, Vector]]:
    """Numbers, which may stand anywhere: a whole row or column at a time, the fullest first."""
    left = {at: value for at, value in cells.items() if value}
    while left:
        lines: dict[tuple[int, int], list[tuple[int, int]]] = {}
        for at in left:
            for axis in (0, 1):
                lines.setdefault((axis, at[axis]), []).append(at)
        (axis, line), places = max(lines.items(), key=lambda item: (len(item[1]), -item[0][0], -item[0][1]))
        coefficient, along = _primitive({at[1 - axis]: left.pop(at) for at in places})
        yield (coefficient, ((line, 1),), along) if axis == 0 else (coefficient, along, ((line, 1),))


def _outer_products(cells: Matrix) -> Iterable[tuple[Fraction, Vector, Vector]]:
    """A matrix as a sum of as many outer products as its rank is, by elimination."""
    left = {at: value for at, value in cells.items() if value}
    while left:
        row, column = min(left)
        pivot = left[row, column]
        down = {r: value for (r, c), value in left.items() if c == column}
        along = {c: value for (r, c), value in left.items() if r == row}
        factor_u, u = _primitive(down)
        factor_v, v = _primitive(along)
        yield factor_u * factor_v / pivot, u, v
        for r, a in down.items():
            for c, b in along.items():
                rest = left.pop((r, c), Fraction(0)) - a * b / pivot
                if rest:
                    left[r, c] = rest


def _primitive(vector: Mapping[int, Fraction]) -> tuple[Fraction, Vector]:
    """factor · a vector of integers with nothing common whose first is positive."""
    ordered = sorted(vector.items())
    scale = 1
    for _, value in ordered:
        scale = scale * value.denominator // gcd(scale, value.denominator)
    whole = [int(value * scale) for _, value in ordered]
    common = gcd(*whole) * (-1 if whole[0] < 0 else 1)
    return Fraction(common, scale), tuple((k, w // common) for (k, _), w in zip(ordered, whole, strict=True))


__all__ = ["Choice", "Element", "Elements", "Side", "elements_of", "split_by_order", "up_to"]
