"""The nodal matrix of a stage: modified nodal analysis with symbols as entries.

Ho, Ruehli, Brennan, "The modified nodal approach to network analysis", IEEE Trans. Circuits Syst. 22, 1975.
Rows are Kirchhoff's current law at every node but ground, then one branch equation for every current that is
an unknown; columns are node voltages, then those currents.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from typing import NamedTuple

from symamp.circuit.kinds import Element
from symamp.circuit.stage import GROUND, Part, Stage


class Term(NamedTuple):
    """coefficient · symbol**power · s**s_power; `symbol` None for a pure number."""

    coefficient: int
    symbol: str | None
    power: int
    s_power: int


Entry = tuple[Term, ...]


@dataclass
class _Matrix:
    """Entries while they are being stamped: (row, column) → {(symbol, power, s_power): coefficient}."""

    cells: dict[tuple[int, int], dict[tuple[str | None, int, int], int]] = field(default_factory=dict)

    def add(
        self, row: int | None, column: int | None, sign: int, symbol: str | None, power: int = 1, s: int = 0
    ) -> None:
        """Add one term; a None row or column is ground's and is left out."""
        if row is None or column is None:
            return
        cell = self.cells.setdefault((row, column), {})
        key = (symbol, power if symbol else 0, s)
        cell[key] = cell.get(key, 0) + sign


@dataclass(frozen=True)
class System:
    """The nodal matrix, `rows[i]` {column: entry}, with the columns of node voltages and branch currents.

    `sources` maps a source's label to its nodes; a voltage source's row and current column are
    `branch[label]`.
    """

    size: int
    rows: tuple[dict[int, Entry], ...]
    node: dict[str, int]
    branch: dict[str, int]
    sources: dict[str, tuple[str, str]]
    symbols: tuple[str, ...]

    def at_dc(self) -> System:
        """The same at s = 0: capacitances open, inductances short circuits."""
        rows = tuple(
            {
                column: kept
                for column, entry in row.items()
                if (kept := tuple(term for term in entry if not term.s_power))
            }
            for row in self.rows
        )
        return replace(self, rows=rows)

    def column_names(self) -> dict[int, str]:
        """What each unknown is, in words."""
        names = {column: f"the voltage of node {name}" for name, column in self.node.items()}
        names.update({column: f"the current of {label}" for label, column in self.branch.items()})
        return names


# Element → how its current is written when another part reads it: as an expression of its voltage.
_READABLE = {"resistance": (-1, 0), "conductance": (1, 0), "capacitance": (1, 1)}


def build_system(stage: Stage, without: Iterable[str] = ()) -> System:
    """The nodal matrix of a stage, parts in `without` taken off."""
    gone = set(without)
    parts = [part for part in stage.parts.values() if part.label not in gone]
    node = _node_columns(parts)
    branch = _branch_columns(parts, len(node))
    stamp = _Stamp(_Matrix(), node, branch, {part.label: part for part in parts})
    for part in parts:
        for element in part.kind.elements:
            if element.parameter is None or element.parameter in part.parameters:
                stamp.element(part, element)
    size = len(node) + len(branch)
    rows: tuple[dict[int, Entry], ...] = tuple({} for _ in range(size))
    used: dict[str, None] = {}
    for (row, column), cell in stamp.matrix.cells.items():
        entry = tuple(
            Term(coefficient, symbol, power, s)
            for (symbol, power, s), coefficient in cell.items()
            if coefficient
        )
        if entry:
            rows[row][column] = entry
            used.update((term.symbol, None) for term in entry if term.symbol)
    sources = {
        part.label: (part.nodes[0], part.nodes[1])
        for part in parts
        if part.kind.name in ("voltage_source", "current_source")
    }
    return System(size, rows, node, branch, sources, tuple(used))


def terminal_node(part: Part, terminal: str) -> str:
    """The node on a terminal; a bjt's "inner" base is a node of its own once the part has rx."""
    if terminal == GROUND:
        return GROUND
    if terminal == "inner":
        return f"{part.label}'s inner base" if "rx" in part.parameters else part.nodes[0]
    return part.nodes[part.kind.terminals.index(terminal)]


def _node_columns(parts: list[Part]) -> dict[str, int]:
    node: dict[str, int] = {}
    for part in parts:
        names = list(part.nodes)
        if "rx" in part.parameters:
            names.append(terminal_node(part, "inner"))
        for name in names:
            if name != GROUND:
                node.setdefault(name, len(node))
    return node


def _branch_columns(parts: list[Part], start: int) -> dict[str, int]:
    """Columns of the currents that are unknowns: of voltage-defined outputs, inductors, ammeters, and read sources."""
    read = {part.control for part in parts if part.control}
    branch: dict[str, int] = {}
    for part in parts:
        name = part.kind.name
        own = name in ("voltage_source", "inductor", "vcvs", "ccvs", "opamp", "transformer")
        if own or (name == "current_source" and part.label in read):
            branch[part.label] = start + len(branch)
        if name in ("cccs", "ccvs") and part.control is None:
            branch[f"{part.label}'s control"] = start + len(branch)
    return branch


@dataclass
class _Stamp:
    """Puts elements into the matrix."""

    matrix: _Matrix
    node: dict[str, int]
    branch: dict[str, int]
    parts: dict[str, Part]

    def element(self, part: Part, element: Element) -> None:
        """Stamp one element of a part."""
        symbol = part.symbol(element.parameter) if element.parameter else None
        if part.kind.name in ("cccs", "ccvs"):
            self._current_controlled(part, symbol)
            return
        nodes = [self.node.get(terminal_node(part, terminal)) for terminal in element.terminals]
        getattr(self, f"_{element.what}")(part.label, symbol, nodes)

    def _pair(self, nodes: list[int | None], symbol: str | None, power: int, s: int) -> None:
        a, b = nodes
        for row, column, sign in ((a, a, 1), (a, b, -1), (b, a, -1), (b, b, 1)):
            self.matrix.add(row, column, sign, symbol, power, s)

    def _conductance(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        self._pair(nodes, symbol, 1, 0)

    def _resistance(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        self._pair(nodes, symbol, -1, 0)

    def _capacitance(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        self._pair(nodes, symbol, 1, 1)

    def _current_into(self, nodes: list[int | None], column: int) -> None:
        """The unknown current of `column` leaves the first node and enters the second."""
        self.matrix.add(nodes[0], column, 1, None)
        self.matrix.add(nodes[1], column, -1, None)

    def _voltage(self, row: int, nodes: list[int | None], sign: int = 1, symbol: str | None = None) -> None:
        """Add sign · symbol · (v(first) − v(second)) to a branch equation."""
        self.matrix.add(row, nodes[0], sign, symbol)
        self.matrix.add(row, nodes[1], -sign, symbol)

    def _voltage_source(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        row = self.branch[label]
        self._current_into(nodes, row)
        self._voltage(row, nodes)

    def _current_source(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        row = self.branch.get(label)
        if row is not None:
            self._current_into(nodes, row)
            self.matrix.add(row, row, 1, None)

    def _inductance(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        row = self.branch[label]
        self._current_into(nodes, row)
        self._voltage(row, nodes)
        self.matrix.add(row, row, -1, symbol, 1, 1)

    def _vccs(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        for row, sign in ((nodes[0], 1), (nodes[1], -1)):
            self.matrix.add(row, nodes[2], sign, symbol)
            self.matrix.add(row, nodes[3], -sign, symbol)

    def _vcvs(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        row = self.branch[label]
        self._current_into(nodes[:2], row)
        self._voltage(row, nodes[:2])
        self._voltage(row, nodes[2:], -1, symbol)

    def _opamp(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        row = self.branch[label]
        self.matrix.add(nodes[2], row, 1, None)
        self._voltage(row, nodes[:2])

    def _transformer(self, label: str, symbol: str | None, nodes: list[int | None]) -> None:
        """v(primary) = n·v(secondary); the primary's current j returns as −n·j in the secondary."""
        row = self.branch[label]
        self._current_into(nodes[:2], row)
        self.matrix.add(nodes[2], row, -1, symbol)
        self.matrix.add(nodes[3], row, 1, symbol)
        self._voltage(row, nodes[:2])
        self._voltage(row, nodes[2:], -1, symbol)

    def _current_controlled(self, part: Part, symbol: str | None) -> None:
        out = [self.node.get(name) for name in part.nodes[:2]]
        if part.kind.name == "ccvs":
            row = self.branch[part.label]
            self._current_into(out, row)
            self._voltage(row, out)
            self._read_current(part, symbol, [(row, -1)])
        else:
            self._read_current(part, symbol, [(out[0], 1), (out[1], -1)])

    def _read_current(self, part: Part, symbol: str | None, targets: list[tuple[int | None, int]]) -> None:
        """Add ±symbol times the controlling current to each target row."""
        if part.control is None:
            column = self.branch[f"{part.label}'s control"]
            ammeter = [self.node.get(name) for name in part.nodes[2:4]]
            self._current_into(ammeter, column)
            self._voltage(column, ammeter)
        else:
            column = self._current_column(self.parts[part.control])
        for row, sign in targets:
            self.matrix.add(row, column, sign, symbol)

    def _current_column(self, part: Part) -> int:
        """The column of a part's current; a resistor's or capacitor's is made an unknown of its own."""
        if part.label in self.branch:
            return self.branch[part.label]
        column = len(self.node) + len(self.branch)
        self.branch[part.label] = column
        power, s = _READABLE[part.kind.elements[0].what]
        nodes = [self.node.get(name) for name in part.nodes]
        self.matrix.add(column, column, -1, None)
        self.matrix.add(column, nodes[0], 1, part.label, power, s)
        self.matrix.add(column, nodes[1], -1, part.label, power, s)
        return column


def without_symbols(system: System, names: set[str]) -> System:
    """The matrix with these symbols put to zero where they stand as a factor."""
    rows = tuple(
        {
            column: kept
            for column, entry in row.items()
            if (kept := tuple(t for t in entry if t.symbol not in names or t.power < 0))
        }
        for row in system.rows
    )
    symbols = tuple(name for name in system.symbols if name not in names)
    return System(system.size, rows, system.node, system.branch, system.sources, symbols)
