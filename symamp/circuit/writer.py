"""Room `circuit`: a stage written as a stage file, the same text for the same stage every time."""

from __future__ import annotations

import math
import os
import re
import secrets
import shutil
import tomllib
from collections.abc import Container, Iterable, Mapping, Sequence
from decimal import Decimal
from fractions import Fraction
from math import prod
from pathlib import Path
from typing import Any

from symamp.circuit.kinds import Parameter
from symamp.circuit.stage import GROUND, Asked, Part, Side, Stage
from symamp.circuit.stagefile import ENDING, parse_stage
from symamp.errors import InputError, StageError
from symamp.values import read_value, write_value

Document = dict[str, Any]

# What follows the parts, in this order; the sections of parts keep the order of the document.
_AFTER_PARTS = ("response", "bias", "span", "assumption", "claim")
_WIDEST = 100  # a list that is longer than this is written one item a line

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {'"': '\\"', "\\": "\\\\", "\b": "\\b", "\t": "\\t", "\n": "\\n", "\f": "\\f", "\r": "\\r"}


def stage_toml(document: Mapping[str, Any]) -> str:
    """The TOML text of a stage document, as `tomllib` would give it: title, parts, response, bias, span,
    assumptions, claims.

    Values may be text, whole numbers, floats, `Decimal`, booleans, lists and tables. Raises StageError, with
    the key, for anything else and for text that no file can hold.
    """
    plain = {key: value for key, value in document.items() if not _is_section(value)}
    blocks = [[f"{_key(key)} = {_value(value, key)}" for key, value in plain.items()]]
    for key in sorted((key for key in document if key not in plain), key=_rank):
        value = document[key]
        if isinstance(value, Mapping):
            blocks.append([f"[{_key(key)}]", *_section(value, key)])
        else:
            for number, table in enumerate(value, start=1):
                lines = (_line(name, item, f"{key}.{number}.{name}") for name, item in table.items())
                blocks.append([f"[[{_key(key)}]]", *lines])
    return "\n\n".join("\n".join(block) for block in blocks if block) + "\n"


def save_stage(stage: Stage, path: str | os.PathLike[str]) -> Path:
    """Save the stage as a stage file that reads back as an equal stage; returns the file's path.

    A stage that was read from a file keeps its text, comments included, as long as nothing about it changed
    and its table, if it has one, is still found from the new folder. Raises StageError where the name does
    not end in `.stage.toml`, and OSError as the file system does; a file that was there stays whole until the
    new one is.
    """
    target = Path(path)
    document = _source_document(stage)
    text = stage.source if document is not None else None
    document = document or _built(stage)
    if not document.get("title"):  # else the new file's name would give the title
        document, text = {**document, "title": stage.title}, None
    if stage.span.table is not None:
        written = document["span"]["table"]
        seen_from_there = moved(written, _folder(stage), target.parent)
        if seen_from_there != written:
            document["span"]["table"], text = seen_from_there, None
    return write_whole(target, stage_toml(document) if text is None else text)


def document_of(stage: Stage) -> Document:
    """The stage as a document of plain dicts and lists, which `stage_toml` writes.

    It is what the stage's file says, where the stage was read from one and is still that; else it is made
    from the stage's data. A value that has no finite decimal is then written as an alias that has one (gds of
    1/3 mS as an ro of 3 kohm); StageError where there is none.
    """
    return _source_document(stage) or _built(stage)


def replace_file(target: Path, data: bytes) -> None:
    """Write bytes to a new file beside the target, which then takes its place. OSError as the file system does."""
    final = Path(os.path.realpath(target))  # a link stays a link
    beside = final.with_name(f".{final.name}.{secrets.token_hex(6)}")
    try:
        with open(beside, "xb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        if final.exists():
            shutil.copymode(final, beside)
        os.replace(beside, final)
    except BaseException:
        beside.unlink(missing_ok=True)
        raise


def write_whole(path: str | os.PathLike[str], text: str | bytes) -> Path:
    """Write a stage file whole or not at all: to a new file beside it, which then takes its place.

    Raises StageError where the name does not end in `.stage.toml`, and OSError as the file system does.
    """
    target = Path(path)
    if not target.name.endswith(ENDING) or target.name == ENDING:
        raise StageError(
            f"{target.name} is not the name of a stage file", f"let it end in {ENDING}: {_renamed(target)}"
        )
    replace_file(target, text.encode("utf-8") if isinstance(text, str) else text)
    return target


def moved(written: str, old: Path, new: Path) -> str:
    """A path that was relative to one folder, relative to another; absolute ones stay."""
    if Path(written).is_absolute() or old.resolve() == new.resolve():
        return written
    return Path(os.path.relpath(old.resolve() / written, new.resolve())).as_posix()


def _renamed(path: Path) -> str:
    stem = path.name.removesuffix(".toml").removesuffix(".stage").strip(".")
    return f"{stem or 'amplifier'}{ENDING}"


# Sections ---------------------------------------------------------------------------------------------------


def _is_section(value: Any) -> bool:
    if isinstance(value, Mapping):
        return True
    return _is_list(value) and bool(value) and all(isinstance(item, Mapping) for item in value)


def _is_list(value: Any) -> bool:
    return isinstance(value, Sequence) and not isinstance(value, str | bytes)


def _rank(key: str) -> int:
    return _AFTER_PARTS.index(key) if key in _AFTER_PARTS else -1


def _section(table: Mapping[str, Any], place: str) -> list[str]:
    """One line an entry, equals signs below each other and, where all entries are tables, their columns."""
    keys = [_key(key) for key in table]
    width = max(map(len, keys), default=0)
    if all(isinstance(value, Mapping) and value for value in table.values()):
        values = _columns([_cells(value, f"{place}.{key}") for key, value in table.items()])
    else:
        values = [_value(value, f"{place}.{key}") for key, value in table.items()]
    return [f"{key:<{width}} = {value}" for key, value in zip(keys, values, strict=True)]


def _columns(rows: list[list[str]]) -> list[str]:
    """Inline tables, the cells of a column below each other where they hold the same key."""
    lines = ["{ "] * len(rows)
    for column in range(max(map(len, rows), default=0)):
        here = [row[column] for row in rows if column < len(row)]
        same = len({cell.partition(" = ")[0] for cell in here}) == 1
        width = max(map(len, here)) + 2 if same else 0
        for index, row in enumerate(rows):
            if column < len(row) - 1:
                lines[index] += f"{row[column]}, ".ljust(width)
            elif column == len(row) - 1:
                lines[index] += row[column] + " }"
    return lines


def _line(key: str, value: Any, place: str) -> str:
    text = f"{_key(key)} = {_value(value, place)}"
    if len(text) <= _WIDEST or not _is_list(value):
        return text
    items = "".join(f"    {_value(item, place)},\n" for item in value)
    return f"{_key(key)} = [\n{items}]"


# Keys and values --------------------------------------------------------------------------------------------


def _key(key: str) -> str:
    return key if _BARE_KEY.fullmatch(key) else _text(key, key)


def _value(value: Any, place: str) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return _text(value, place)
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float | Decimal):
        return _number(value)
    if isinstance(value, Mapping):
        return _inline(_cells(value, place))
    if _is_list(value):
        return f"[{', '.join(_value(item, place) for item in value)}]"
    raise StageError(
        f"{value!r} cannot stand in a stage file", "give text, a number, true, a list or a table", key=place
    )


def _cells(table: Mapping[str, Any], place: str) -> list[str]:
    return [f"{_key(key)} = {_value(value, f'{place}.{key}')}" for key, value in table.items()]


def _inline(cells: Iterable[str]) -> str:
    inside = ", ".join(cells)
    return f"{{ {inside} }}" if inside else "{}"


def _number(value: float | Decimal) -> str:
    if not math.isfinite(value):
        return "nan" if math.isnan(value) else "inf" if value > 0 else "-inf"
    text = str(value) if isinstance(value, Decimal) else repr(float(value))
    return text if any(mark in text for mark in ".eE") else text + ".0"


def _text(text: str, place: str) -> str:
    """A basic string of TOML 1.0: control characters escaped, all else as it is."""
    if any("\ud800" <= character <= "\udfff" for character in text):
        raise StageError(f"{text!r} holds half a character, which no file can hold", key=place)
    return '"' + "".join(_escaped(character) for character in text) + '"'


def _escaped(character: str) -> str:
    if character in _ESCAPES:
        return _ESCAPES[character]
    return f"\\u{ord(character):04X}" if character < " " or character == "\x7f" else character


# The document of a stage ------------------------------------------------------------------------------------


def _source_document(stage: Stage) -> Document | None:
    """What the stage's file says, or None where there is none or the stage is no longer what it says."""
    if stage.source is None:
        return None
    try:
        said = parse_stage(stage.source, file=stage.file, folder=_folder(stage))
    except InputError:  # its table may be gone
        return None
    if said != stage:
        return None
    return tomllib.loads(stage.source.decode("utf-8"))


def _folder(stage: Stage) -> Path:
    return Path(stage.file).parent if stage.file else Path()


def _built(stage: Stage) -> Document:
    document: Document = {"title": stage.title}
    for part in stage.parts.values():
        document.setdefault(part.kind.name, {})[part.label] = _part(part)
    sections = {
        "response": {asked.name: _response(asked, stage.parts) for asked in stage.asked.values()},
        "bias": _bias(stage),
        "span": _span(stage),
        "assumption": [_plain(table) for table in stage.assumptions],
        "claim": [_plain(table) for table in stage.claims],
    }
    return document | {key: value for key, value in sections.items() if value}


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _plain(item) for key, item in value.items()}
    return [_plain(item) for item in value] if _is_list(value) else value


def _part(part: Part) -> Any:
    terminals, nodes = part.kind.terminals, part.nodes
    if terminals == ("plus", "minus"):
        return list(nodes)
    if not terminals[0].endswith("_plus"):
        return dict(zip(terminals, nodes, strict=True))
    first, second = terminals[0].removesuffix("_plus"), terminals[2].removesuffix("_plus")
    return {first: list(nodes[:2]), second: part.control or list(nodes[2:])}


def _response(asked: Asked, labels: Container[str]) -> Document:
    written: Document = {}
    if asked.drive:
        written["from"] = _drive(asked)
    for key in ("to", "over", "looking_into"):
        pair: tuple[str, str] | None = getattr(asked, key)
        if pair is not None:
            # a node that shares its name with a source needs the pair to be told apart
            written[key] = pair[0] if pair[1] == GROUND and pair[0] not in labels else list(pair)
    if asked.to_source is not None:
        written["to"] = asked.to_source
    if asked.looking_source is not None:
        written["looking_into"] = asked.looking_source
    if asked.without:
        written["without"] = list(asked.without)
    return written


def _drive(asked: Asked) -> str | Document:
    labels = list(asked.drive)
    if list(asked.drive.values()) == [1]:
        return labels[0]
    place = f"response.{asked.name}.from"
    return {label: exact_number(weight, f"{place}.{label}") for label, weight in asked.drive.items()}


def exact_number(value: Fraction, place: str) -> int | float | str:
    """A pure number as a stage file gives it: a bare one where that is exact, else text; as `exact_text`."""
    text = exact_text(value, "", place)
    if value.denominator == 1:
        return int(value)
    return float(text) if read_value(float(text), "") == value else text


def exact_text(value: Fraction, unit: str, place: str) -> str:
    """Text that is exactly this value; StageError, with the key `place`, where no finite decimal is."""
    text = _exact_text(value, unit)
    if text is None:
        shown = f"{value} {unit}".rstrip()
        raise StageError(f"{shown} has no finite decimal", "give a value that has one", key=place)
    return text


def _exact_text(value: Fraction, unit: str) -> str | None:
    try:
        return write_value(value, unit)
    except ValueError:
        return None


def _bias(stage: Stage) -> Document:
    bias: Document = {}
    for part in stage.parts.values():
        values = {
            name: stage.bias[part.symbol(name)] for name in part.parameters if part.symbol(name) in stage.bias
        }
        written = dict(_bias_entry(part, part.kind.parameter(name), values) for name in values)
        if written:
            bias[part.label] = written if part.kind.prefixed else next(iter(written.values()))
    return bias


def _bias_entry(part: Part, parameter: Parameter, values: Mapping[str, Fraction]) -> tuple[str, str]:
    """The parameter and its value, or an alias and its value where only that has a finite decimal."""
    value = values[parameter.name]
    text = _exact_text(value, parameter.unit)
    if text is not None:
        return parameter.name, text
    for alias, powers in part.kind.aliases.items():
        if powers.get(parameter.name) == -1 and all(name in values for name in powers):
            over = prod((values[name] for name, power in powers.items() if power == 1), start=Fraction(1))
            text = _exact_text(over / value, "ohm" if len(powers) == 1 else "")
            if text is not None:
                return alias, text
    return parameter.name, exact_text(value, parameter.unit, f"bias.{part.label}.{parameter.name}")


def _span(stage: Stage) -> Document:
    span: Document = {side.name: _side(stage, side) for side in stage.span.sides}
    span |= {follow.symbol: {"follows": follow.leader} for follow in stage.span.follows}
    if stage.span.table is not None:
        span["table"] = moved(stage.span.table.path, Path(), _folder(stage))
    return span


def _side(stage: Stage, side: Side) -> list[str] | str:
    """Both ends, or the percentage about the bias value where only that has a finite decimal."""
    ends = [_exact_text(end, side.unit) for end in (side.low, side.high)]
    if None not in ends:
        return [end for end in ends if end is not None]
    middle = (side.low + side.high) / 2
    percent = _exact_text(100 * (side.high - middle) / abs(middle), "") if middle else None
    if percent is None or middle != _at_bias(stage, side):
        raise StageError(
            f"the ends of {side.name} have no finite decimals", "give ends that have", key=f"span.{side.name}"
        )
    return f"{percent} %"


def _at_bias(stage: Stage, side: Side) -> Fraction | None:
    """The bias value of what the side varies, from symbol = value**exponent · Π times."""
    if any(name not in stage.bias for name in (side.symbol, *side.times)):
        return None
    others = prod((stage.bias[name] ** power for name, power in side.times.items()), start=Fraction(1))
    power = stage.bias[side.symbol] / others
    return power if side.exponent == 1 else 1 / power
