"""Room `circuit`: the span of a stage file: sides of a box, symbols that follow others, or a table."""

from __future__ import annotations

import graphlib
from collections.abc import Mapping
from fractions import Fraction
from math import prod
from pathlib import Path as FilePath
from typing import Any

from symamp.circuit.bias import Solved, check_sign, solve
from symamp.circuit.kinds import BARE_PARAMETERS
from symamp.circuit.labels import owned, unit_of, unknown_symbol
from symamp.circuit.place import Path, Place
from symamp.circuit.stage import Follow, Part, Side, Span, Stage
from symamp.circuit.tablefile import Sheet, read_sheet
from symamp.errors import ReadError
from symamp.values import quoted, read_percent, read_value, show_value

_SHAPES = 'write two ends ["2 mS", "8 mS"], a percentage "30 %", or { follows = "gm1" }'


def span_sheet(data: Mapping[str, Any], folder: FilePath, place: Place) -> Sheet | None:
    """The table that the span names, None where it names none. `data` is the stage file's top table."""
    table = data.get("span", {})
    if not isinstance(table, dict):
        raise place.error(("span",), "span is no section", "write it as [span] with sides below")
    if "table" not in table:
        return None
    path: Path = ("span", "table")
    others = [key for key in table if key != "table"]
    if others:
        raise place.error(
            ("span", others[0]),
            f"a table and the side {quoted(others[0])} are both given",
            "give one or the other",
        )
    if not isinstance(table["table"], str) or not table["table"]:
        raise place.error(path, f"{quoted(table['table'])} names no table", 'write table = "corners.csv"')
    with place.at(path):
        return read_sheet(folder / table["table"])


def read_box(data: Mapping[str, Any], stage: Stage, place: Place) -> tuple[Span, list[str], list[str]]:
    """The sides and followers of a span, then warnings, then remarks. Leaders stand before their followers.

    `stage` has its parts, symbols, aliases and bias. Raises StageError or ReadError, with their place.
    """
    reader = _Reader(stage, place)
    for key, raw in data.get("span", {}).items():
        reader.read(key, raw)
    follows, sides = tuple(reader.ordered()), tuple(reader.sides.values())
    warnings = [text for side in sides for text in _outside(side, reader.at_bias(side.name))]
    return Span(sides, follows), warnings, reader.remarks


def _outside(side: Side, value: Fraction | None) -> list[str]:
    if value is None or side.low <= value <= side.high:
        return []
    shown = [show_value(float(x), side.unit) for x in (value, side.low, side.high)]
    return [
        f"{side.name}: its bias, {shown[0]}, lies outside its side of the span, {shown[1]} to {shown[2]}; "
        "the bias point is looked at in any case, and a worst value may be its own"
    ]


class _Reader:
    """Collects sides and followers by the symbol that they set."""

    def __init__(self, stage: Stage, place: Place) -> None:
        self.stage, self.place = stage, place
        self.sides: dict[str, Side] = {}
        self.follows: dict[str, Follow] = {}
        self.set_by: dict[str, str] = {}
        self.remarks: list[str] = []

    def read(self, key: str, raw: object) -> None:
        path: Path = ("span", key)
        names = self.names(key, path)
        if not names:
            self.remarks.append(f"span: no device of this stage has {key}: it has no effect")
        if isinstance(raw, dict):
            self.read_follow(key, raw, names, path)
            return
        for name in names:
            if isinstance(raw, list):
                low, high = self.ends(key, name, raw, path)
            elif isinstance(raw, str):
                low, high = self.around_bias(name, raw, path)
            else:
                raise self.place.error(path, f"{quoted(raw)} is no side", _SHAPES)
            self.keep_side(key, name, low, high, path)

    def names(self, key: str, path: Path) -> list[str]:
        """The symbols and aliases that a selector names, one by one."""
        stage = self.stage
        if key in stage.symbols or key in stage.aliases:
            return [key]
        if key in stage.parts:
            part = stage.parts[key]
            if not part.parameters:
                raise self.place.error(path, f"{key} has no small-signal parameters", "name another part")
            return [part.symbol(parameter) for parameter in part.parameters]
        if key in BARE_PARAMETERS:
            return [part.symbol(key) for part in stage.parts.values() if owned(part, key) is not None]
        with self.place.at(path):
            raise unknown_symbol(stage, key)

    def ends(self, key: str, name: str, raw: list[Any], path: Path) -> tuple[Fraction, Fraction]:
        part = self.stage.parts.get(key)
        if part is not None and part.kind.prefixed:
            raise self.place.error(
                path, f"{key} has parameters of several kinds", 'give a percentage, "30 %"'
            )
        if len(raw) != 2:
            raise self.place.error(path, f"a side has two ends, and {len(raw)} are given", _SHAPES)
        low, high = (self.end(name, end, (*path, index)) for index, end in enumerate(raw))
        if low > high:
            unit = self.unit(name)
            shown = ", ".join(f'"{show_value(float(end), unit)}"' for end in (high, low))
            raise self.place.error(path, f"the ends of {name} are reversed", f"write [{shown}]")
        self.check_crossing(name, low, high, path)
        return low, high

    def end(self, name: str, raw: object, path: Path) -> Fraction:
        with self.place.at(path):
            value = read_value(raw, self.unit(name))  # type: ignore[arg-type]
            self.check_value(name, value)
        return value

    def around_bias(self, name: str, raw: str, path: Path) -> tuple[Fraction, Fraction]:
        with self.place.at(path):
            ratio = read_percent(raw)
        value = self.at_bias(name)
        if value is None:
            raise self.place.error(
                path, f"{name} has no bias for {raw.strip()} to be of", f"give {name} a bias, or two ends"
            )
        low, high = sorted((value * (1 - ratio), value * (1 + ratio)))
        with self.place.at(path):
            self.check_value(name, low)
        self.check_crossing(name, low, high, path)
        return low, high

    def check_value(self, name: str, value: Fraction) -> None:
        if name in self.stage.symbols:
            check_sign(self.stage.symbols[name].parameter, value, f"an end of {name}")
        elif value <= 0:
            raise ReadError(f"an end of {name} is not positive", "give a positive value")

    def check_crossing(self, name: str, low: Fraction, high: Fraction, path: Path) -> None:
        symbol = self.stage.symbols.get(name)
        if symbol is not None and low < 0 < high and not symbol.parameter.may_be_zero:
            raise self.place.error(path, f"the side of {name} passes through 0", "keep to one sign")

    def keep_side(self, key: str, name: str, low: Fraction, high: Fraction, path: Path) -> None:
        solved = solve(self.stage.aliases[name]) if name in self.stage.aliases else Solved(name, 1)
        self.claim(solved.target, key, path)
        self.sides[solved.target] = Side(
            name, low, high, self.unit(name), solved.target, solved.exponent, solved.times
        )

    def read_follow(self, key: str, raw: dict[str, Any], names: list[str], path: Path) -> None:
        if list(raw) != ["follows"] or not isinstance(raw["follows"], str):
            raise self.place.error(path, f"{quoted(raw)} is no side", _SHAPES)
        part = self.stage.parts.get(key)
        if part is not None and part.kind.prefixed:
            raise self.place.error(path, f"{key} has several parameters", f"name one, such as {names[0]}")
        for name in names:
            leader = self.leader(key, name, raw["follows"].strip(), (*path, "follows"))
            if leader is None:
                self.remarks.append(
                    f"span: {name} follows nothing: its device has no {raw['follows'].strip()}"
                )
                continue
            follow = self.follow(name, leader, (*path, "follows"))
            self.claim(follow.symbol, key, path)
            self.follows[follow.symbol] = follow

    def leader(self, key: str, name: str, text: str, path: Path) -> str | None:
        """The symbol or alias to follow; a bare name means that of the follower's own device."""
        stage = self.stage
        if text in stage.symbols or text in stage.aliases:
            return text
        if text in stage.parts:
            raise self.place.error(path, f"{text} has no single value to follow", "name one symbol")
        if text not in BARE_PARAMETERS:
            with self.place.at(path):
                raise unknown_symbol(stage, text)
        device = self.device_of(name)
        if device is None:
            raise self.place.error(
                path, f"{name} is of no device, so {text} could be any device's", "name one"
            )
        if owned(device, text) is not None:
            return device.symbol(text)
        if key in BARE_PARAMETERS and key != name:
            return None
        raise self.place.error(path, f"{device.label} has no {text}", "name a symbol that the stage has")

    def device_of(self, name: str) -> Part | None:
        """The device of a symbol or alias, None for a part with one parameter."""
        symbol = next(iter(self.stage.aliases.get(name, {name: 1})))
        part = self.stage.parts[self.stage.symbols[symbol].part]
        return part if part.kind.prefixed else None

    def follow(self, name: str, leader: str, path: Path) -> Follow:
        """An alias follows one of the same power: that ro1 follows ro2 says that gds1 follows gds2."""
        one, other = (self.stage.aliases.get(each, {each: 1}) for each in (name, leader))
        if len(one) > 1 or len(other) > 1 or list(one.values()) != list(other.values()):
            raise self.place.error(
                path,
                f"{name} cannot keep a ratio to {leader}: they are powers of symbols that do not match",
                f"let symbols follow symbols, such as {next(iter(one))} and {next(iter(other))}",
            )
        symbol, lead = next(iter(one)), next(iter(other))
        for each in (symbol, lead):
            if each not in self.stage.bias:
                raise self.place.error(
                    path, f"{each} has no bias, so there is no ratio to keep", f"give {each} a bias"
                )
        if self.stage.bias[lead] == 0:
            raise self.place.error(
                path, f"{lead} is 0 at the bias point, so there is no ratio to keep", "follow another"
            )
        return Follow(symbol, lead, self.stage.bias[symbol] / self.stage.bias[lead])

    def claim(self, symbol: str, key: str, path: Path) -> None:
        if symbol in self.set_by:
            first = self.set_by[symbol]
            raise self.place.error(
                path, f"{symbol} is set by {first} already", f"keep one of {first} and {key}"
            )
        self.set_by[symbol] = key

    def needs(self, symbol: str) -> list[str]:
        """The symbols that must be known before this one."""
        if symbol in self.follows:
            return [self.follows[symbol].leader]
        return list(self.sides[symbol].times) if symbol in self.sides else []

    def ordered(self) -> list[Follow]:
        """The followers, each after its leader. Refuses rings."""
        symbols = graphlib.TopologicalSorter({symbol: self.needs(symbol) for symbol in self.set_by})
        try:
            order = list(symbols.static_order())
        except graphlib.CycleError as error:
            ring = list(reversed(error.args[1]))
            place: Path = ("span", self.set_by[ring[0]])
            problem = f"{' follows '.join(ring)}: a ring"
            raise self.place.error(place, problem, "let one of them have a side of its own") from None
        return [self.follows[symbol] for symbol in order if symbol in self.follows]

    def unit(self, name: str) -> str:
        return unit_of(self.stage, name)

    def at_bias(self, name: str) -> Fraction | None:
        """The bias value of a symbol or alias, None where it has none or is infinite."""
        powers = self.stage.aliases.get(name, {name: 1})
        bias = self.stage.bias
        if any(symbol not in bias or (bias[symbol] == 0 and power < 0) for symbol, power in powers.items()):
            return None
        return prod((bias[symbol] ** power for symbol, power in powers.items()), start=Fraction(1))
