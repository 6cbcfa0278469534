"""Exact: the nodal matrices behind a minor graph, as pencils G + s·C at many bias points, brought to one size.

The roots of a side are where its matrix is singular: generalised eigenvalues of (G, −C). The side that is bordered by
drive and output is one determinant too, of the matrix with one more row.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from symamp.exact.minors import MinorGraph
from symamp.exact.system import Entry, Term

Reals = NDArray[np.float64]
Side = Literal["numerator", "denominator"]
_ROUNDS = 6  # of evening out rows and columns; each halves what is left of the logarithms' spread


@dataclass(frozen=True)
class Pencil:
    """A square matrix of entries; its determinant is a side of a response but for a factor without s.

    `cells` are (row, column, entry). What stands alone in its row or column without s is struck out with the other.
    """

    size: int
    cells: tuple[tuple[int, int, Entry], ...]

    def matrices(self, values: Mapping[str, Any], points: int) -> tuple[Reals, Reals]:
        """G and C at `points` bias points: (points, size, size) each."""
        found = np.zeros((2, points, self.size, self.size))
        for row, column, entry in self.cells:
            for coefficient, symbol, power, s_power in entry:
                value: Any = float(coefficient)
                if symbol is not None:
                    value = value * values[symbol] if power > 0 else value / values[symbol]
                found[s_power, :, row, column] += value
        return found[0], found[1]


def pencil_of(graph: MinorGraph, side: Side) -> Pencil:
    """The matrix of which a side of the graph is the determinant."""
    parts = graph.numerator if side == "numerator" else graph.denominator
    sets = [(factor, _columns(graph, node)) for factor, node in parts]
    every = sorted(set().union(*(columns for _, columns in sets)))
    place = {column: k for k, column in enumerate(every)}
    order = {row: k for k, row in enumerate(dict.fromkeys(graph.entry_rows))}
    cells = {
        (order[row], place[column]): entry
        for row, column, entry in zip(graph.entry_rows, graph.entry_columns, graph.entries, strict=True)
        if column in place
    }
    size = len(order)
    if len(every) > size:  # the sum is the matrix's expansion along one more row
        for factor, columns in sets:
            (left_out,) = set(every) - columns
            sign = -1 if (size + place[left_out]) & 1 else 1
            cells[size, place[left_out]] = (Term(factor * sign, None, 0, 0),)
        size += 1
    return _struck(size, cells)


def _columns(graph: MinorGraph, node: int) -> frozenset[int]:
    """The columns of a minor: those of the entries on any way down from it."""
    found = []
    while graph.edges[node]:
        node, entry, _ = graph.edges[node][0]
        found.append(graph.entry_columns[entry])
    return frozenset(found)


def _struck(size: int, cells: dict[tuple[int, int], Entry]) -> Pencil:
    """Without the rows and columns of entries that stand alone and hold no s: each is but a factor."""
    left = dict(cells)
    while True:
        lines: dict[tuple[int, int], list[tuple[int, int]]] = {}
        for cell in left:
            for way in (0, 1):
                lines.setdefault((way, cell[way]), []).append(cell)
        alone = next(
            (c[0] for c in lines.values() if len(c) == 1 and not any(t.s_power for t in left[c[0]])), None
        )
        if alone is None:
            break
        left = {(r, c): entry for (r, c), entry in left.items() if r != alone[0] and c != alone[1]}
        size -= 1
    rows = {row: k for k, row in enumerate(sorted({row for row, _ in left}))}
    columns = {column: k for k, column in enumerate(sorted({column for _, column in left}))}
    return Pencil(size, tuple((rows[r], columns[c], entry) for (r, c), entry in left.items()))


def evened(g: Reals, c: Reals, omega: Reals) -> tuple[Reals, Reals]:
    """G and ω·C with rows and columns scaled so that the largest of each line is near 1, point by point.

    By powers of two, so that nothing is rounded. Rows and columns are taken in turn at the square roots of their
    largest entries (Ruiz, "A scaling algorithm to equilibrate both rows and columns norms in matrices", RAL 2001).
    """
    c = c * omega[:, None, None]
    for _ in range(_ROUNDS):
        size = np.maximum(np.abs(g), np.abs(c))
        rows, columns = (_root_power(size.max(axis=axis, initial=0.0)) for axis in (2, 1))
        scale = np.ldexp(1.0, rows)[:, :, None] * np.ldexp(1.0, columns)[:, None, :]
        g, c = g * scale, c * scale
    return g, c


def _root_power(largest: Reals) -> NDArray[np.intp]:
    """The exponent of two nearest to 1/√largest; 0 for a line of zeros."""
    safe = np.where(largest > 0, largest, 1.0)
    return np.asarray(np.rint(-0.5 * np.log2(safe)), dtype=np.intp)


def without_algebra(g: Reals, c: Reals) -> tuple[Reals, Reals]:
    """The pencils without rows and columns that hold no s at any point: eliminated, each by its largest pivot.

    Only eigenvalues at infinity are lost. A row without s is subtracted from the others, whatever s their own pivots
    hold, and the degree stays; columns likewise.
    """
    for transposed in (False, True):
        if transposed:
            g, c = g.transpose(0, 2, 1), c.transpose(0, 2, 1)
        while g.shape[1] > 1:
            still = np.flatnonzero(~c.any(axis=(0, 2)))
            if not still.size:
                break
            row = int(still[0])
            column = int(np.abs(g[:, row]).mean(axis=0).argmax())
            with np.errstate(all="ignore"):
                line = g[:, row] / g[:, row, column][:, None]
            rows = np.delete(np.arange(g.shape[1]), row)
            columns = np.delete(np.arange(g.shape[1]), column)
            g, c = (
                m[:, rows][:, :, columns] - m[:, rows, column][:, :, None] * line[:, None, columns]
                for m in (g, c)
            )
    return g, c
