"""The minor graph: a stage's determinants by shared minors.

A determinant is expanded along its last row, and so is each minor; a minor is settled by how many rows it has
and by the set of its columns, and is worked out once. Rows are taken in an order that keeps few columns open
(touched by rows taken and by rows to come), for those alone make the sets differ. Shi and Tan, "Canonical
symbolic analysis of large analog circuits with determinant decision diagrams", IEEE Trans. CAD 19, 2000, is
the same idea.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import comb
from typing import Any

from symamp.errors import TooLargeError
from symamp.exact.system import Entry

EDGE_LIMIT = 4_000_000
_ALL_STARTS = 60  # up to this size every row is tried as the first


@dataclass(frozen=True)
class MinorGraph:
    """Minors as nodes, in an order in which each comes after those it is made of; node 0 is the number 1.

    `edges[v]` lists (child, entry, sign): the minor v is the sum of sign · entries[entry] · child. `levels`
    holds, for each row count, the first node of that level; `entry_rows` and `entry_columns` the matrix row and
    column of each entry. Rows stand in the order in which `entry_rows` first names them, and that settles signs.
    `numerator` and `denominator` are sums of (integer, node).
    """

    entries: tuple[Entry, ...]
    entry_rows: tuple[int, ...]
    edges: tuple[tuple[tuple[int, int, int], ...], ...]
    levels: tuple[int, ...]
    numerator: tuple[tuple[int, int], ...]
    denominator: tuple[tuple[int, int], ...]
    entry_columns: tuple[int, ...] = ()

    @property
    def minors(self) -> int:
        """How many minors there are."""
        return len(self.edges) - 1

    def walk(
        self,
        entry_values: Sequence[Any],
        one: Any,
        zero: Any,
        before: Callable[[Any, Any], None] | None = None,
    ) -> tuple[Any, Any]:
        """Numerator and denominator over any ring whose elements know +, − and ·.

        `entry_values[i]` is the value of `entries[i]`: integers, polynomials, balls, numpy arrays over points.
        `before` is told of each product, entry and minor, before it is worked out.
        """
        values: list[Any] = [one]
        for edges in self.edges[1:]:
            total: Any = None
            for child, entry, sign in edges:
                if before is not None:
                    before(entry_values[entry], values[child])
                product = entry_values[entry] * values[child]
                if total is None:
                    total = product if sign > 0 else -product
                else:
                    total = total + product if sign > 0 else total - product
            values.append(total)

        def summed(parts: tuple[tuple[int, int], ...]) -> Any:
            return sum((values[node] * factor for factor, node in parts), start=zero)

        return summed(self.numerator), summed(self.denominator)

    def count_terms(self) -> tuple[int, int]:
        """Product terms of numerator and denominator before any cancel, without writing them out."""
        values = [1]
        sizes = [len(entry) for entry in self.entries]
        for edges in self.edges[1:]:
            values.append(sum(sizes[entry] * values[child] for child, entry, _ in edges))
        return (
            sum(values[node] for _, node in self.numerator),
            sum(values[node] for _, node in self.denominator),
        )


def minor_graph(
    rows: Sequence[dict[int, Entry]],
    numerator: Sequence[tuple[int, int]],
    denominator: Sequence[tuple[int, int]],
) -> MinorGraph:
    """The graph of minors of `rows` for two sums of (integer, set of columns as a bit mask).

    Every set has as many columns as there are rows. Raises TooLargeError past EDGE_LIMIT edges.
    """
    masks = [sum(1 << column for column in row) for row in rows]
    order = row_order(masks)
    ordered = [rows[i] for i in order]
    first_row = _first_rows([masks[i] for i in order])
    targets = {mask for _, mask in (*numerator, *denominator)}
    down = _reach(ordered, first_row, targets)
    return _number(ordered, order, down, numerator, denominator)


def row_order(masks: Sequence[int]) -> list[int]:
    """An order of the rows with few open columns: greedy from each start, the cheapest by estimate."""
    count = len(masks)
    starts = list(range(count))
    if count > _ALL_STARTS:
        starts = sorted(starts, key=lambda i: masks[i].bit_count())[:12]
    best: list[int] = []
    least: int | None = None
    for start in starts:
        order, cost = _greedy(masks, start, least)
        if order and (least is None or cost < least):
            best, least = order, cost
    return best


def _greedy(masks: Sequence[int], start: int, least: int | None) -> tuple[list[int], int]:
    """One greedy order, and the sum of its possible column sets; ([], …) as soon as it costs more than `least`."""
    remaining = [0] * (max((m.bit_length() for m in masks), default=0))
    for mask in masks:
        for column in _bits(mask):
            remaining[column] += 1
    left = set(range(len(masks)))
    order: list[int] = []
    touched = closed = cost = 0
    row = start
    while True:
        order.append(row)
        left.discard(row)
        touched |= masks[row]
        for column in _bits(masks[row]):
            remaining[column] -= 1
            if remaining[column] == 0:
                closed |= 1 << column
        opened = (touched & ~closed).bit_count()
        need = len(order) - closed.bit_count()
        cost += comb(opened, need) if 0 <= need <= opened else 1
        if least is not None and cost >= least:
            return [], cost
        if not left:
            return order, cost
        row = min(left, key=lambda i: _open_after(masks[i], touched, closed, remaining, i))


def _open_after(
    mask: int, touched: int, closed: int, remaining: list[int], index: int
) -> tuple[int, int, int]:
    closing = sum(1 for column in _bits(mask) if remaining[column] == 1)
    fresh = (mask & ~touched).bit_count()
    return (fresh - closing, fresh, index)


def _bits(mask: int) -> list[int]:
    found = []
    while mask:
        low = mask & -mask
        found.append(low.bit_length() - 1)
        mask ^= low
    return found


def _first_rows(masks: Sequence[int]) -> dict[int, int]:
    first: dict[int, int] = {}
    for position, mask in enumerate(masks, start=1):
        for column in _bits(mask):
            first.setdefault(column, position)
    return first


_Edges = list[tuple[int, int, int]]  # (child's column set, column, sign)


def _reach(
    rows: Sequence[dict[int, Entry]], first_row: dict[int, int], targets: set[int]
) -> list[dict[int, _Edges]]:
    """For each row count, the column sets that the targets need, each with its edges downward."""
    levels: list[dict[int, _Edges]] = [{} for _ in range(len(rows) + 1)]
    levels[-1] = {mask: [] for mask in targets}
    total = 0
    for k in range(len(rows), 0, -1):
        columns = sorted(rows[k - 1])
        must = sum(1 << column for column in columns if first_row[column] == k)
        below = levels[k - 1]
        for mask, edges in levels[k].items():
            forced = mask & must
            if forced and forced & (forced - 1):
                continue  # two columns that no earlier row can take: the minor is zero
            for column in columns:
                bit = 1 << column
                if not mask & bit or (forced and bit != forced):
                    continue
                place = (mask & (bit - 1)).bit_count()
                child = mask ^ bit
                below.setdefault(child, [])
                edges.append((child, column, -1 if (k - 1 + place) & 1 else 1))
            total += len(edges)
        if total > EDGE_LIMIT:
            raise TooLargeError(
                f"the minor graph of this network would pass {EDGE_LIMIT:,} edges: "
                "it is too densely connected for an exact form; take parts off with without = [...]"
            )
    return levels


def _number(
    rows: Sequence[dict[int, Entry]],
    order: Sequence[int],
    levels: list[dict[int, _Edges]],
    numerator: Sequence[tuple[int, int]],
    denominator: Sequence[tuple[int, int]],
) -> MinorGraph:
    """Number the minors from below, leaving out those that are zero by structure."""
    entries: list[Entry] = []
    entry_rows: list[int] = []
    entry_columns: list[int] = []
    all_edges: list[tuple[tuple[int, int, int], ...]] = [()]
    starts = [0]
    known = {0: 0} if 0 in levels[0] else {}
    for k in range(1, len(rows) + 1):
        entry_of = {column: len(entries) + i for i, column in enumerate(rows[k - 1])}
        entries.extend(rows[k - 1].values())
        entry_rows.extend([order[k - 1]] * len(rows[k - 1]))
        entry_columns.extend(rows[k - 1])
        starts.append(len(all_edges))
        numbered: dict[int, int] = {}
        for mask, edges in levels[k].items():
            kept = tuple((known[c], entry_of[column], sign) for c, column, sign in edges if c in known)
            if kept:
                numbered[mask] = len(all_edges)
                all_edges.append(kept)
        known = numbered
    return MinorGraph(
        tuple(entries),
        tuple(entry_rows),
        tuple(all_edges),
        tuple(starts),
        tuple((factor, known[mask]) for factor, mask in numerator if mask in known),
        tuple((factor, known[mask]) for factor, mask in denominator if mask in known),
        tuple(entry_columns),
    )
