"""Room `circuit`: stage files, read into a `Stage` with every name, unit and selector in them checked.

Values come from `tomllib`; lines are looked up (`positions`) only when a message needs one.
"""

from __future__ import annotations

import os
import re
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from symamp.circuit.bias import body_warnings, read_bias, with_parameters
from symamp.circuit.checks import check_asked
from symamp.circuit.kinds import KINDS
from symamp.circuit.labels import alias_table, check_devices, check_symbols, symbols_of
from symamp.circuit.near import nearest, propose
from symamp.circuit.partlist import node_warnings, read_parts
from symamp.circuit.place import Place, dotted
from symamp.circuit.responses import read_responses
from symamp.circuit.spanfile import read_box, span_sheet
from symamp.circuit.stage import Span, Stage
from symamp.circuit.tablefile import Sheet, check_complete, parameters_in, read_table, unit_warnings
from symamp.errors import InputError, StageError
from symamp.values import quoted

ENDING = ".stage.toml"
LARGEST = 1_000_000  # bytes
LONGEST_LINE = 20_000  # characters; a longer one is no stage, and can take tomllib minutes

_OTHER_SECTIONS = ("title", "response", "bias", "span", "assumption", "claim")
_LISTS = ("assumption", "claim")
_TOML_PLACE = re.compile(r" \(at (?:line (\d+), column \d+|end of document)\)")
_BACKSLASH = re.compile(r"[Uu]nescaped '\\\\'|[Ee]scape|hex value")
SINGLE_QUOTES = r"write LaTeX between single quotes, formula = '\frac{g_{m1}}{C_L}'"
_TWICE = re.compile(r"[Oo]verwrite|twice|[Dd]uplicate|[Mm]utate|[Rr]edefine")


def read_stage(path: str | os.PathLike[str]) -> Stage:
    """The stage of a stage file. Raises StageError or ReadError: file, line and key of the first mistake."""
    found = Path(path)
    return parse_stage(_read(found), file=str(found), folder=found.parent)


def parse_stage(data: bytes, *, file: str | None, folder: Path) -> Stage:
    """The stage that the bytes of a stage file describe.

    `file` is what messages call it; `folder` is where its table lies. Raises as `read_stage`.
    """
    source = data.removeprefix(b"\xef\xbb\xbf")
    place = Place(file, source)
    tables = _tables(source, file)
    _check_sections(tables, place)
    try:
        stage = _stage(tables, place, folder)
        for asked in stage.asked.values():
            check_asked(stage, asked)
    except InputError as error:
        if error.file is not None or error.key is None:
            raise
        raise error.at(file=file, line=place.line(tuple(error.key.split(".")))) from None
    return stage


def locate(stage: Stage, path: tuple[str | int, ...]) -> dict[str, Any]:
    """Where a path such as ("claim", 0, "formula") stands: `file`, `line` and `key`, as errors take them.

    Members of arrays count from 0 in the path and from 1 in the key. `line` is None for a stage without a
    file; for a path that is not in the file it is that of the nearest key above it.
    """
    return {
        "file": stage.file,
        "line": Place(stage.file, stage.source).line(path),
        "key": dotted(path) or None,
    }


def _read(path: Path) -> bytes:
    """The bytes of a stage file; never more than one over the largest, whatever the path leads to."""
    shown = str(path)
    try:
        if path.is_dir():
            raise StageError("this is a folder", f"name a stage file, one that ends in {ENDING}", file=shown)
        if not path.exists():
            raise StageError("there is no such file", _similar(path), file=shown)
        if not path.is_file():
            raise StageError(
                "this is no ordinary file", f"name a stage file, one that ends in {ENDING}", file=shown
            )
        with path.open("rb") as stream:
            data = stream.read(LARGEST + 1)
    except InputError:
        raise
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise StageError(
            f"the file cannot be read: {reason}", "name a stage file", file=quoted(shown)
        ) from None
    if len(data) > LARGEST:
        raise StageError("the file is over 1 MB, which no stage is", "name a stage file", file=shown)
    return data


def _similar(path: Path) -> str:
    """A stage file of nearly that name in the same folder, as a remedy."""
    try:
        beside = sorted(entry.name for entry in path.parent.iterdir() if entry.name.endswith(ENDING))
    except OSError:
        return f"name a stage file, one that ends in {ENDING}"
    found = nearest(path.name, beside)
    return f"the nearest one there is {found}" if found else f"name a stage file, one that ends in {ENDING}"


def _tables(source: bytes, file: str | None) -> dict[str, Any]:
    """What TOML makes of the text."""
    try:
        text = source.decode("utf-8")
    except UnicodeDecodeError as error:
        line = source[: error.start].count(b"\n") + 1
        raise StageError("the file is no UTF-8 text", "save it as UTF-8", file=file, line=line) from None
    for number, line_text in enumerate(text.splitlines(), start=1):
        if len(line_text) > LONGEST_LINE:
            problem = f"a line of {len(line_text)} characters"
            raise StageError(problem, "break it into several lines", file=file, line=number)
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise StageError("arrays or tables are nested too deeply", "nest them less", file=file) from None
    except ValueError as error:  # TOMLDecodeError, and numbers that Python refuses for their length
        raise _toml_error(str(error), text, file) from None


def _toml_error(message: str, text: str, file: str | None) -> StageError:
    match = _TOML_PLACE.search(message)
    line = None
    if match is not None:
        message = message[: match.start()]
        line = int(match[1]) if match[1] else len(text.splitlines()) or 1
    if _TWICE.search(message):
        return StageError(f"something is defined twice: {message}", "define it once", file=file, line=line)
    remedy = 'a stage file is TOML, in which text stands in quotes: CL = ["out", "gnd"]'
    if _BACKSLASH.search(message):
        remedy = f"between double quotes a backslash is an escape; {SINGLE_QUOTES}"
    return StageError(f"this is not TOML: {message}", remedy, file=file, line=line)


def _check_sections(tables: Mapping[str, Any], place: Place) -> None:
    known = (*KINDS, *_OTHER_SECTIONS)
    for section, content in tables.items():
        if section not in known:
            what = "section" if isinstance(content, dict | list) else "key"
            raise place.error(
                (section,), f"no {what} is called {quoted(section)}", propose(section, known, "sections")
            )
    title = tables.get("title", "")
    if not isinstance(title, str):
        raise place.error(("title",), f"{quoted(title)} is no title", 'write it as text, title = "My stage"')
    for name in _LISTS:
        content = tables.get(name, [])
        if not isinstance(content, list) or not all(isinstance(item, dict) for item in content):
            raise place.error((name,), f"{name} is no list of tables", f"write [[{name}]] above each one")


def _stage(tables: Mapping[str, Any], place: Place, folder: Path) -> Stage:
    parts = read_parts(tables, place)
    check_devices(tuple(parts.values()))
    values = read_bias(tables, parts, place)
    sheet = span_sheet(tables, folder, place)
    given = values if values or sheet is None else parameters_in(sheet, parts)
    parts = with_parameters(parts, given)
    check_symbols(parts)
    asked = read_responses(tables, parts, place)
    stage = Stage(
        title=tables.get("title", "") or _title(place.file),
        parts=parts,
        asked=asked,
        symbols=symbols_of(parts.values()),
        aliases=alias_table(parts.values()),
        bias={},
        assumptions=tuple(tables.get("assumption", ())),
        claims=tuple(tables.get("claim", ())),
        file=place.file,
        warnings=(*body_warnings(parts), *node_warnings(parts, asked.values())),
        source=place.source,
    )
    bias = {
        name: values[symbol.part][symbol.parameter.name]
        for name, symbol in stage.symbols.items()
        if symbol.parameter.name in values.get(symbol.part, {})
    }
    stage = replace(stage, bias=bias)
    return _with_box(stage, tables, place) if sheet is None else _with_table(stage, sheet)


def _title(file: str | None) -> str:
    return Path(file).name.removesuffix(ENDING) if file else "stage"


def _with_box(stage: Stage, tables: Mapping[str, Any], place: Place) -> Stage:
    span, warnings, remarks = read_box(tables, stage, place)
    return replace(
        stage, span=span, warnings=(*stage.warnings, *warnings), remarks=(*stage.remarks, *remarks)
    )


def _with_table(stage: Stage, sheet: Sheet) -> Stage:
    """The stage with its table; without a bias the first row becomes it."""
    table = read_table(sheet, stage)
    if not stage.bias:
        check_complete(sheet, table, stage)
        row = dict(zip(table.columns, table.rows[0], strict=True))
        stage = replace(stage, bias={name: row[name] for name in stage.symbols})
    warnings = (*stage.warnings, *unit_warnings(sheet, stage))
    return replace(stage, span=Span(table=table), warnings=warnings)
