"""Room `circuit`: a span's table, a CSV file with symbols as columns and units in its header."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path as FilePath

from symamp.circuit.bias import Solved, check_sign, potential, solve
from symamp.circuit.labels import unit_of, unknown_symbol
from symamp.circuit.stage import Part, Stage, Table
from symamp.errors import InputError, ReadError, StageError
from symamp.values import quoted, read_value, split_unit

LARGEST = 20_000_000  # bytes

_HEADER = re.compile(r"(?P<name>[A-Za-z][A-Za-z0-9_]*)\s*(?:\[(?P<unit>[^\[\]]*)\])?")
_EXAMPLE = "a column reads gm1 [mS]"


@dataclass(frozen=True)
class Sheet:
    """A table as it was written: column names, the text of their units (or None), cells and their lines."""

    path: str
    names: tuple[str, ...]
    units: tuple[str | None, ...]
    rows: tuple[tuple[str, ...], ...]
    lines: tuple[int, ...]

    def error(self, row: int | None, column: int | None, problem: str, remedy: str = "") -> StageError:
        """An error about a cell (row from 0), about a row, or, without a row, about the header."""
        line = 1 if row is None else self.lines[row]
        place = [] if row is None else [f"row {row + 1}"]
        if column is not None:
            place.append(f"column {self.names[column]}")
        return StageError(problem, remedy, key=", ".join(place) or None, file=self.path, line=line)


@dataclass(frozen=True)
class _Column:
    """How one column sets its symbol: its unit and scale, and the alias solved for the symbol."""

    unit: str
    scale: Fraction | None  # None where the header has no unit: a cell may then have its own
    solved: Solved


def read_sheet(path: FilePath) -> Sheet:
    """The cells of a CSV file. Raises StageError for what is no table, with file and line."""
    shown = str(path)
    try:
        if not path.is_file():
            what = "is a folder" if path.is_dir() else "does not exist"
            raise StageError(f"the table {shown} {what}", "name a CSV file, relative to the stage file")
        if path.stat().st_size > LARGEST:
            raise StageError(f"the table {shown} is over {LARGEST // 10**6} MB", "leave out some rows")
        text = path.read_bytes().decode("utf-8-sig")
    except InputError:
        raise
    except UnicodeDecodeError:
        raise StageError("the table is no UTF-8 text", "save it as CSV in UTF-8", file=shown) from None
    except (OSError, ValueError) as error:
        raise StageError(f"the table {quoted(shown)} cannot be read: {error}", "name a CSV file") from None
    records, lines = _records(text, shown)
    if not records:
        raise StageError("the table is empty", f"give it a header, in which {_EXAMPLE}", file=shown, line=1)
    names, units = _header(records[0], shown)
    sheet = Sheet(shown, names, units, tuple(map(tuple, records[1:])), tuple(lines[1:]))
    _check_shape(sheet)
    return sheet


def parameters_in(sheet: Sheet, parts: Mapping[str, Part]) -> dict[str, set[str]]:
    """The parameters that a table's columns give each device, for a stage without bias."""
    known = potential(parts)
    given: dict[str, set[str]] = {}
    for name in sheet.names:
        if name in known and name not in parts:
            part, bare = known[name]
            target = solve(part.kind.aliases[bare]).target if bare in part.kind.aliases else bare
            given.setdefault(part.label, set()).add(target)
    return given


def read_table(sheet: Sheet, stage: Stage) -> Table:
    """The bias points of a table, in SI units; columns of aliases are turned into their symbols.

    `stage` has its symbols, aliases and bias. Raises StageError with file, line, row and column.
    """
    columns = [_column(sheet, index, stage) for index in range(len(sheet.names))]
    seen: dict[str, int] = {}
    for index, column in enumerate(columns):
        first = seen.setdefault(column.solved.target, index)
        if first != index:
            problem = f"columns {sheet.names[first]} and {sheet.names[index]} both set {column.solved.target}"
            raise sheet.error(None, index, problem, "keep one of them")
    for index, column in enumerate(columns):
        for name in column.solved.times:
            if name not in seen and name not in stage.bias:
                raise sheet.error(None, index, f"{sheet.names[index]} needs {name}", f"add a column {name}")
    order = sorted(range(len(columns)), key=lambda index: len(columns[index].solved.times))
    rows = tuple(_row(sheet, row, columns, order, stage) for row in range(len(sheet.rows)))
    return Table(sheet.path, tuple(column.solved.target for column in columns), rows)


def check_complete(sheet: Sheet, table: Table, stage: Stage) -> None:
    """Refuse a table that must give the bias and lacks a symbol. Raises StageError."""
    for name, symbol in stage.symbols.items():
        if name not in table.columns:
            unit = f" [{symbol.unit}]" if symbol.unit else ""
            raise sheet.error(
                None,
                None,
                f"missing column {name}: the stage has no [bias], so the first row must give every symbol",
                f"add a column {name}{unit}, or a [bias]",
            )


def unit_warnings(sheet: Sheet, stage: Stage) -> list[str]:
    """A warning for each column of bare numbers whose head gives no unit, where the symbol has one."""
    found = []
    for index, (name, written) in enumerate(zip(sheet.names, sheet.units, strict=True)):
        unit = unit_of(stage, name)
        bare = all(not row[index][-1:].isalpha() for row in sheet.rows)
        if unit and written is None and bare:
            found.append(f"column {name} of {sheet.path} gives no unit: its numbers are read in {unit}")
    return found


def _records(text: str, shown: str) -> tuple[list[list[str]], list[int]]:
    """The rows that are not blank, their cells without outer spaces, and the line of each."""
    records, lines = [], []
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                records.append([cell.strip() for cell in cells])
                lines.append(reader.line_num)
    except csv.Error as error:
        raise StageError(
            f"the table is no CSV: {error}", "separate cells by commas", file=shown, line=reader.line_num
        ) from None
    return records, lines


def _header(cells: list[str], shown: str) -> tuple[tuple[str, ...], tuple[str | None, ...]]:
    names, units = [], []
    for cell in cells:
        match = _HEADER.fullmatch(cell)
        if match is None:
            remedy = _EXAMPLE + ("; cells are separated by commas" if ";" in cell or "\t" in cell else "")
            raise StageError(f"{quoted(cell)} heads no column", remedy, file=shown, line=1)
        if match["name"] in names:
            raise StageError(f"column {match['name']} stands twice", "keep one of them", file=shown, line=1)
        names.append(match["name"])
        units.append(match["unit"])
    return tuple(names), tuple(units)


def _check_shape(sheet: Sheet) -> None:
    if not sheet.rows:
        raise StageError("the table has no rows", "give one bias point a row", file=sheet.path, line=1)
    width = len(sheet.names)
    for row, cells in enumerate(sheet.rows):
        if len(cells) < width:
            raise sheet.error(row, len(cells), "the row ends before this column", f"give {width} cells")
        if len(cells) > width:
            raise sheet.error(row, None, f"{len(cells)} cells under {width} columns", f"give {width} cells")
        if "" in cells:
            raise sheet.error(row, cells.index(""), "the cell is empty", "give a number in every cell")


def _column(sheet: Sheet, index: int, stage: Stage) -> _Column:
    name, written = sheet.names[index], sheet.units[index]
    if name not in stage.symbols and name not in stage.aliases:
        error = unknown_symbol(stage, name, selectors=False)
        raise sheet.error(None, index, error.problem, error.remedy)
    unit = unit_of(stage, name)
    solved = solve(stage.aliases[name]) if name in stage.aliases else Solved(name, 1)
    if written is None:
        return _Column(unit, None, solved)
    text = written.strip()
    found = split_unit("" if text == "1" else text)
    if found is None or found[1] not in ("", unit):
        wanted = f"of the unit {unit}" if unit else "a pure number"
        right = f"{name} [{unit}]" if unit else name
        raise sheet.error(None, index, f"[{text}] is no unit for {name}, which is {wanted}", f"write {right}")
    return _Column(unit, Fraction(10) ** found[0], solved)


def _row(
    sheet: Sheet, row: int, columns: list[_Column], order: list[int], stage: Stage
) -> tuple[Fraction, ...]:
    values = dict(stage.bias)
    for index in order:
        solved = columns[index].solved
        cell = _cell(sheet, row, index, columns[index], stage)
        values[solved.target] = solved.value(cell, values)
    return tuple(values[column.solved.target] for column in columns)


def _cell(sheet: Sheet, row: int, index: int, column: _Column, stage: Stage) -> Fraction:
    """A cell's value, in SI units; with a unit in the header it is a plain number."""
    name, text = sheet.names[index], sheet.rows[row][index]
    try:
        if column.scale is None:
            value = read_value(text, column.unit)
        else:
            if text[-1:].isalpha():
                raise ReadError(f"{quoted(text)} is no plain number", "the column's head gives the unit")
            value = read_value(text, "") * column.scale
        if name in stage.symbols:
            check_sign(stage.symbols[name].parameter, value, name)
        elif value <= 0:
            raise ReadError(f"{name} is not positive", "give a positive value")
    except ReadError as error:
        raise sheet.error(row, index, error.problem, error.remedy) from None
    return value
