"""Which determinants a response is the ratio of: the nodal matrix, and the same bordered by drive and output."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import lcm

from symamp.circuit.stage import GROUND, Asked
from symamp.errors import StageError
from symamp.exact.minors import MinorGraph, minor_graph
from symamp.exact.system import Entry, System, Term

Sum = list[tuple[int, int]]  # (integer, set of columns)


@dataclass(frozen=True)
class Ratio:
    """A response as scale · numerator/denominator of the graph's two sums."""

    graph: MinorGraph
    scale: Fraction
    unit: str


def ratio_of(system: System, asked: Asked) -> Ratio:
    """The minor graph of a response.

    With A x = b·u and y = c·x the response is c·adj(A)·b / det(A), and c·adj(A)·b is minus the determinant of
    A bordered by b and c, which is expanded along c so that both share their minors.
    """
    drive, unit_in, weight = _drive(system, asked)
    rows = [dict(row) for row in system.rows]
    for row, coefficient in drive.items():
        rows[row][system.size] = (Term(coefficient, None, 0, 0),)
    whole: Sum = [(1, (1 << system.size) - 1)]
    numerator, denominator, unit = _sums(system, asked, whole, unit_in)
    # A weight divides out of a ratio of two outputs.
    scale = Fraction(1) if asked.over else Fraction(1, weight)
    return Ratio(minor_graph(rows, numerator, denominator), scale, unit)


def _sums(system: System, asked: Asked, whole: Sum, unit_in: str) -> tuple[Sum, Sum, str]:
    if asked.looking_source is not None:
        label = asked.looking_source
        if unit_in == "V":
            return whole, _bordered(system, {system.branch[label]: -1}), "ohm"
        plus, minus = system.sources[label]
        return _bordered(system, _voltage(system, (minus, plus))), whole, "ohm"
    if asked.looking_into is not None:
        return _bordered(system, _voltage(system, asked.looking_into)), whole, "ohm"
    if asked.to_source is not None:
        output, unit_out = {system.branch[asked.to_source]: 1}, "A"
    else:
        assert asked.to is not None
        output, unit_out = _voltage(system, asked.to), "V"
    numerator = _bordered(system, output)
    if asked.over is not None:
        return numerator, _bordered(system, _voltage(system, asked.over)), {"V": "", "A": "S"}[unit_out]
    unit = {"VV": "", "AA": "", "VA": "ohm", "AV": "S"}[unit_out + unit_in]
    return numerator, whole, unit


def _voltage(system: System, pair: tuple[str, str]) -> dict[int, int]:
    """The row c that reads the voltage of a pair of nodes."""
    output: dict[int, int] = {}
    for name, sign in zip(pair, (1, -1), strict=True):
        if name != GROUND:
            column = system.node[name]
            output[column] = output.get(column, 0) + sign
    return output


def _bordered(system: System, output: Mapping[int, int]) -> Sum:
    """−det of the matrix bordered by the drive's column and the row `output`, expanded along that row."""
    size = system.size
    everything = (1 << (size + 1)) - 1
    return [
        (coefficient * (1 if (size + column) & 1 else -1), everything ^ (1 << column))
        for column, coefficient in output.items()
        if coefficient
    ]


def _drive(system: System, asked: Asked) -> tuple[dict[int, int], str, int]:
    """The column b in integers, the unit of the drive, and the factor by which b was multiplied."""
    if asked.looking_into is not None:
        a, b = (system.node.get(name) for name in asked.looking_into)
        return _clean({a: 1, b: -1}), "A", 1
    drives = {asked.looking_source: Fraction(1)} if asked.looking_source is not None else dict(asked.drive)
    factor = lcm(*(weight.denominator for weight in drives.values()))
    column: dict[int | None, int] = {}
    units = set()
    for label, weight in drives.items():
        assert label is not None
        value = int(weight * factor)
        plus, minus = system.sources[label]
        if label in system.branch:
            row = system.branch[label]
            column[row] = column.get(row, 0) + value
            units.add("A" if _is_current(system, label) else "V")
        else:
            units.add("A")
            for name, sign in ((plus, -1), (minus, 1)):
                row_of_node = system.node.get(name)
                column[row_of_node] = column.get(row_of_node, 0) + sign * value
    if len(units) > 1:
        raise StageError(
            f"response {asked.name!r} is driven by voltage and current sources together",
            "drive it by sources of one kind, so that it has a unit",
            key=f"response.{asked.name}.from",
        )
    return _clean(column), units.pop(), factor


def _is_current(system: System, label: str) -> bool:
    """A current source that another part reads has a branch row too: its current equals the drive."""
    row = system.branch[label]
    return row in system.rows[row]


def _clean(column: Mapping[int | None, int]) -> dict[int, int]:
    return {row: value for row, value in column.items() if row is not None and value}


def entry_symbols(graph: MinorGraph) -> tuple[str, ...]:
    """The symbols that the graph's entries hold, each once, in order of appearance."""
    names: dict[str, None] = {}
    for entry in graph.entries:
        names.update((term.symbol, None) for term in entry if term.symbol)
    return tuple(names)


__all__ = ["Entry", "Ratio", "entry_symbols", "ratio_of"]
