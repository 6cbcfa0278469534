"""Exact: the diagram of a determinant's product terms, in which no two paths cancel.

Elements (`largest_elements`) are taken one after another, each in or out. What was taken matters to what is to come
only by the space that its u's span, and its v's, among the rows and columns that elements yet to come still touch:
both in reduced echelon form settle a node of the diagram, and paths that meet in one are continued once. A path from
the top to the end is a set of n elements, with det(u's)·det(v's) as its number. For networks of conductances this is
the diagram of spanning trees by the partitions of a frontier (Sekine, Imai, Tani, "Computing the Tutte polynomial of
a graph of moderate size", ISAAC 1995), here for two matroids at once and in signed integers.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass
from fractions import Fraction

from symamp.errors import TooLargeError
from symamp.exact.largest_elements import Element, Elements, Vector

NODE_LIMIT = 400_000
Row = Vector  # a row in echelon form: its first coordinate is the pivot, and stands with 1
Space = tuple[Row, ...]  # rows by ascending pivot
Step = tuple[Space, Fraction | int]
_Link = tuple[int, int | Fraction] | None


@dataclass(frozen=True)
class ProductDiagram:
    """Nodes in an order in which each comes after those it leads to; node 0 is the end, the last one the top.

    `out[k]` is (node, factor) where the element of node k is left out and `taken[k]` where it is taken, None where
    that leads nowhere; `element[k]` is its place in `items`. All is to be multiplied by `factor`.
    """

    items: tuple[Element, ...]
    element: tuple[int, ...]
    out: tuple[tuple[int, int | Fraction] | None, ...]
    taken: tuple[tuple[int, int | Fraction] | None, ...]
    factor: Fraction

    @property
    def top(self) -> int:
        """The node at which every path starts."""
        return len(self.element) - 1

    def count(self) -> int:
        """How many sets of elements there are: products, where each element has one choice."""
        values = [1] + [0] * self.top
        for node in range(1, self.top + 1):
            out, taken = self.out[node], self.taken[node]
            here = values[out[0]] if out else 0
            if taken:
                here += values[taken[0]] * len(self.items[self.element[node]].choices)
            values[node] = here
        return values[self.top] if self.factor else 0


def diagram_of(elements: Elements, forced: Collection[int] = ()) -> ProductDiagram:
    """The diagram of a determinant. Elements at the places in `forced` are in every product.

    TooLargeError past NODE_LIMIT nodes.
    """
    order = element_order(elements)
    closing = [_closing(elements, order, axis) for axis in (0, 1)]
    if any(len(place) < elements.size for place, _ in closing):
        return nothing(elements.items)  # an empty row or column
    vectors = [
        (_renumbered(elements.items[k].u, closing[0][0]), _renumbered(elements.items[k].v, closing[1][0]))
        for k in order
    ]
    ends = [(closing[0][1][i], closing[1][1][i]) for i in range(len(order))]
    must = [k in set(forced) for k in order]
    levels = _levels(vectors, ends, must)
    sign = _parity(closing[0][0]) * _parity(closing[1][0])
    return _joined(elements, order, levels, sign)


# The order of elements


def element_order(elements: Elements) -> list[int]:
    """An order that keeps few rows and columns open: lines are closed one after another, the cheapest next."""
    touching: dict[tuple[int, int], list[int]] = {}
    lines_of: list[list[tuple[int, int]]] = []
    for k, element in enumerate(elements.items):
        lines = [(0, r) for r, _ in element.u] + [(1, c) for c, _ in element.v]
        lines_of.append(lines)
        for line in lines:
            touching.setdefault(line, []).append(k)
    best: list[int] = []
    least: float | None = None
    for start in sorted(touching, key=lambda line: (len(touching[line]), line)):
        order, cost = _order_from(start, touching, lines_of, least)
        if order and (least is None or cost < least):
            best, least = order, cost
    return best


def _order_from(
    start: tuple[int, int],
    touching: dict[tuple[int, int], list[int]],
    lines_of: list[list[tuple[int, int]]],
    least: float | None,
) -> tuple[list[int], float]:
    left = {line: len(ks) for line, ks in touching.items()}
    opened: set[tuple[int, int]] = set()
    done: set[int] = set()
    order: list[int] = []
    cost = 0.0
    line: tuple[int, int] | None = start
    while line is not None:
        fresh = [k for k in touching[line] if k not in done]
        # Of the elements that close this line, those first that open the least.
        while fresh:
            k = min(fresh, key=lambda k: (sum(1 for x in lines_of[k] if x not in opened and left[x] > 1), k))
            fresh.remove(k)
            done.add(k)
            order.append(k)
            for x in lines_of[k]:
                left[x] -= 1
                if left[x]:
                    opened.add(x)
                else:
                    opened.discard(x)
            cost += 2.0 ** len(opened)
            if least is not None and cost >= least:
                return [], cost
        near = {x for x in opened if left[x]} or {x for x in left if left[x]}
        line = min(near, key=lambda x: _opening(x, touching, lines_of, done, opened, left), default=None)
    return order, cost


def _opening(
    line: tuple[int, int],
    touching: dict[tuple[int, int], list[int]],
    lines_of: list[list[tuple[int, int]]],
    done: set[int],
    opened: set[tuple[int, int]],
    left: dict[tuple[int, int], int],
) -> tuple[int, int, tuple[int, int]]:
    """How many lines are open once this one is closed, against now; and how many elements that takes."""
    uses: dict[tuple[int, int], int] = {}
    fresh = [k for k in touching[line] if k not in done]
    for k in fresh:
        for x in lines_of[k]:
            uses[x] = uses.get(x, 0) + 1
    closed = sum(1 for x, count in uses.items() if count == left[x] and x in opened)
    new = sum(1 for x, count in uses.items() if x not in opened and count < left[x])
    return new - closed, len(fresh), line


def _closing(elements: Elements, order: Sequence[int], axis: int) -> tuple[dict[int, int], list[int]]:
    """The place of each coordinate in the order in which they close, and how many close at each element."""
    last: dict[int, int] = {}
    for i, k in enumerate(order):
        for coordinate, _ in (elements.items[k].u, elements.items[k].v)[axis]:
            last[coordinate] = i
    ordered = sorted(last, key=lambda c: (last[c], c))
    ends = [0] * len(order)
    for i in last.values():
        ends[i] += 1
    return {c: k for k, c in enumerate(ordered)}, ends


def _renumbered(vector: Vector, place: dict[int, int]) -> Vector:
    return tuple(sorted((place[c], value) for c, value in vector))


def _parity(place: dict[int, int]) -> int:
    """The sign of the permutation that takes coordinates to their places."""
    seen: set[int] = set()
    sign = 1
    for start in place:
        length, k = 0, start
        while k not in seen:
            seen.add(k)
            k = place[k]
            length += 1
        if length and not length & 1:
            sign = -sign
    return sign


# Spaces


def added(space: Space, vector: Vector) -> Step | None:
    """The space with one more vector, and the factor between the two wedge products; None where it is in it."""
    rest = dict(vector)
    for row in space:
        factor = rest.get(row[0][0])
        if factor:
            for c, value in row:
                new = rest.get(c, 0) - factor * value
                if new:
                    rest[c] = new
                else:
                    del rest[c]
    if not rest:
        return None
    pivot = min(rest)
    lead = rest[pivot]
    if lead == 1:
        fresh = tuple(sorted(rest.items()))
    elif lead == -1:
        fresh = tuple((c, -value) for c, value in sorted(rest.items()))
    else:
        fresh = tuple((c, _whole(Fraction(value) / lead)) for c, value in sorted(rest.items()))
    before, after = [], []
    for row in space:
        if row[0][0] < pivot:
            before.append(_cleared(row, pivot, fresh))
        else:
            after.append(row)
    return (*before, fresh, *after), (-lead if len(after) & 1 else lead)


def _cleared(row: Row, pivot: int, fresh: Row) -> Row:
    factor = next((value for c, value in row if c == pivot), 0)
    if not factor:
        return row
    cells = dict(row)
    for c, value in fresh:
        new = cells.get(c, 0) - factor * value
        if new:
            cells[c] = _whole(new)
        else:
            del cells[c]
    return tuple(sorted(cells.items()))


def _whole(value: Fraction | int) -> int:
    """A whole number as an int, so that equal spaces are the same tuples; other fractions as they are."""
    return int(value) if value == int(value) else value  # type: ignore[return-value]


# Levels


_Key = tuple[Space, Space]
_Edge = tuple[_Key, int | Fraction]
_Level = dict[_Key, tuple[_Edge | None, _Edge | None]]


def _levels(
    vectors: Sequence[tuple[Vector, Vector]], ends: Sequence[tuple[int, int]], must: Sequence[bool]
) -> list[_Level]:
    """From above: for each element the spaces before it, each with where it leads when left out and when taken."""
    levels: list[_Level] = []
    current: dict[_Key, None] = {((), ()): None}
    closed = [0, 0]
    total = 0
    for (u, v), ending, forced in zip(vectors, ends, must, strict=True):
        level: _Level = {}
        following: dict[_Key, None] = {}
        grown: tuple[dict[Space, Step | None], dict[Space, Step | None]] = ({}, {})
        for key in current:
            out = None if forced else _closed_both(key, closed, ending)
            taken: _Edge | None = None
            steps = []
            for space, vector, known in zip(key, (u, v), grown, strict=True):
                if space not in known:
                    known[space] = added(space, vector)
                steps.append(known[space])
            if steps[0] is not None and steps[1] is not None:
                reached = _closed_both((steps[0][0], steps[1][0]), closed, ending)
                if reached is not None:
                    taken = reached, _whole(steps[0][1] * steps[1][1])
                    following[reached] = None
            if out is not None:
                following[out] = None
            if out is not None or taken is not None:
                level[key] = (None if out is None else (out, 1)), taken
        closed = [c + e for c, e in zip(closed, ending, strict=True)]
        levels.append(level)
        current = following
        total += len(level)
        if total > NODE_LIMIT:
            raise TooLargeError(
                f"the product terms of this response take a diagram of more than {NODE_LIMIT:,} nodes: "
                "take the parts that do not matter away first"
            )
    return levels


def _closed_both(key: _Key, closed: Sequence[int], ending: tuple[int, int]) -> _Key | None:
    found = []
    for space, first, count in zip(key, closed, ending, strict=True):
        if len(space) < count or any(space[i][0][0] != first + i for i in range(count)):
            return None  # nothing that is left can reach this row or column any more
        found.append(space[count:])
    return found[0], found[1]


def _joined(elements: Elements, order: Sequence[int], levels: list[_Level], sign: int) -> ProductDiagram:
    """Nodes from below, those alone that lead to the end.

    One whose element cannot be taken is a node all the same: whoever lets an element's value grow without bound must
    find there that nothing is left.
    """
    known: dict[_Key, tuple[int, int | Fraction]] = {((), ()): (0, 1)}
    element: list[int] = [0]
    outs: list[_Link] = [None]
    takens: list[_Link] = [None]
    for k, level in zip(reversed(order), reversed(levels), strict=True):
        here: dict[_Key, tuple[int, int | Fraction]] = {}
        for key, (out, taken) in level.items():
            ends: list[_Link] = []
            for edge in (out, taken):
                if edge is None or edge[0] not in known:
                    ends.append(None)
                else:
                    node, factor = known[edge[0]]
                    ends.append((node, factor * edge[1]))
            if ends[0] is None and ends[1] is None:
                continue
            element.append(k)
            outs.append(ends[0])
            takens.append(ends[1])
            here[key] = len(element) - 1, 1
        known = here
    if ((), ()) not in known:
        return nothing(elements.items)
    top, factor = known[(), ()]
    assert top == len(element) - 1
    whole = Fraction(factor) * sign * elements.factor
    return ProductDiagram(elements.items, tuple(element), tuple(outs), tuple(takens), whole)


def of_order(diagram: ProductDiagram, orders: Sequence[int], order: int) -> ProductDiagram:
    """Those products alone whose elements' `orders`, one for each of the diagram's items, add up to `order`."""
    if not diagram.factor:
        return diagram
    wanted: list[set[int]] = [set() for _ in diagram.element]
    wanted[diagram.top].add(order)
    for node in range(diagram.top, 0, -1):
        out, taken = diagram.out[node], diagram.taken[node]
        if out is not None:
            wanted[out[0]] |= wanted[node]
        if taken is not None:
            wanted[taken[0]] |= {t - orders[diagram.element[node]] for t in wanted[node]}
    known = {(0, 0): 0} if 0 in wanted[0] else {}
    element: list[int] = [0]
    outs: list[_Link] = [None]
    takens: list[_Link] = [None]
    for node in range(1, diagram.top + 1):
        k = diagram.element[node]
        for t in sorted(wanted[node]):
            ends: list[_Link] = [
                (known[edge[0], below], edge[1]) if edge is not None and (edge[0], below) in known else None
                for edge, below in ((diagram.out[node], t), (diagram.taken[node], t - orders[k]))
            ]
            if ends[0] is not None or ends[1] is not None:
                known[node, t] = len(element)
                element.append(k)
                outs.append(ends[0])
                takens.append(ends[1])
    if (diagram.top, order) not in known:
        return nothing(diagram.items)
    return ProductDiagram(diagram.items, tuple(element), tuple(outs), tuple(takens), diagram.factor)


def nothing(items: tuple[Element, ...] = ()) -> ProductDiagram:
    """The diagram without a product: zero."""
    return ProductDiagram(items, (0,), (None,), (None,), Fraction(0))
