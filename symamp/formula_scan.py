"""The words and signs of a formula, each with its place: a module below all rooms of the house.

Besides the signs that are typed, those of print are read as well: `·`, `×`, `−`, `⁄`, `∥`, `π`, `√(`, `x²`.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Callable, Iterator
from typing import NamedTuple

from symamp.errors import ReadError
from symamp.formula_tree import Number
from symamp.values import PREFIXES, quoted, read_value, split_unit

MEANT = "the signs are + - * / ^ ** ( ) and ||"
_ANGULAR = "rad/s"
_PLAIN_UNITS = {"dB": "dB", "deg": "deg", "°": "deg"}  # units of formulas alone, which take no prefix

_HIGH = "⁰¹²³⁴⁵⁶⁷⁸⁹"

_TOKEN = re.compile(
    r"(?P<space>[ \t\r\n\u00a0\u2009\u202f]+)"
    r"|(?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    rf"(?:[ \u00a0\u2009\u202f]?(?P<unit>[a-zA-Z\u00b5\u03bc]?rad/s(?![\w])|°|[^\W\d_{_HIGH}][^\W{_HIGH}]*))?"
    r"|(?P<raised>[⁺⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+)"
    rf"|(?P<name>[^\W\d{_HIGH}][^\W{_HIGH}]*)"
    r"|(?P<op>\*\*|\|\||[-+*/^()·⋅×∙−∥√÷⁄∕])"
)
PRINTED = {"·": "*", "⋅": "*", "∙": "*", "×": "*", "÷": "/", "⁄": "/", "∕": "/", "−": "-", "∥": "||"}
RAISED = re.compile(r"[⁺⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+")
_RAISED = str.maketrans("⁺⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "+-0123456789")


class Token(NamedTuple):
    """A word or sign: `what` is number, name, op or end; `column` counts from 1."""

    what: str
    text: str
    column: int
    number: Number | None = None


def error_at(text: str, column: int, problem: str, remedy: str = "") -> ReadError:
    """An error about a place in a formula (column from 1), with the text and a caret below the message."""
    start = max(column - 40, 0) if len(text) > 76 else 0
    shown = "".join(c if c.isprintable() else " " for c in text[start : start + 76])
    caret = f"\n    {shown}\n    {' ' * (column - 1 - start)}^"
    return ReadError(problem, remedy + caret) if remedy else ReadError(problem + caret)


def scan(text: str) -> Iterator[Token]:
    """The words and signs of a formula in our grammar, `end` last. Raises ReadError for what is none of them."""
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        column = position + 1
        if match is None:
            raise error_at(text, column, f"{named(text[position])} has no meaning in a formula", MEANT)
        position = match.end()
        if match["number"]:
            yield number_token(text, column, match["number"], match["unit"] or "", match.start("unit") + 1)
        elif match["raised"]:
            yield Token("op", "^", column)
            yield from raised_tokens(text, column, match["raised"])
        elif match["name"]:
            yield _name(text, column, match["name"])
        elif match["op"] == "√":
            yield Token("name", "sqrt", column)
        elif match["op"]:
            yield Token("op", PRINTED.get(match["op"], match["op"]), column)
    yield Token("end", "", len(text) + 1)


def raised_tokens(text: str, column: int, raised: str) -> Iterator[Token]:
    """An exponent in raised digits, such as `⁻²`: its sign and its number."""
    written = raised.translate(_RAISED)
    if written[0] in "+-":
        yield Token("op", written[0], column)
    yield number_token(text, column, written.lstrip("+-"), "", column)


def _name(text: str, column: int, name: str) -> Token:
    if name == "π":
        return Token("name", "pi", column)
    if not name.isascii():
        foreign = next(c for c in name if not c.isascii())
        raise error_at(
            text,
            column + name.index(foreign),
            f"{quoted(name)} is no name: {named(foreign)} is no ASCII letter",
            "names are of ASCII letters",
        )
    return Token("name", name, column)


def number_token(text: str, column: int, number: str, unit: str, unit_column: int) -> Token:
    """A number with its prefix and unit, in SI units. Raises ReadError with the place of what is wrong."""
    try:
        if unit in _PLAIN_UNITS:
            value = Number(read_value(number, ""), _PLAIN_UNITS[unit])
        elif unit.endswith(_ANGULAR) and unit[: -len(_ANGULAR)] in ("", *PREFIXES):
            value = Number(read_value(number + unit[: -len(_ANGULAR)], ""), _ANGULAR)
        else:
            value = _with_unit(text, number, unit, unit_column)
    except ReadError as error:
        if "\n" in error.remedy or "\n" in error.problem:  # it has its caret
            raise
        raise error_at(text, column, error.problem, error.remedy) from None
    return Token("number", number + unit, column, value)


def _with_unit(text: str, number: str, unit: str, column: int) -> Number:
    found = split_unit(unit)
    if found is None:
        raise error_at(
            text,
            column,
            f"{quoted(unit)} after a number is no SI prefix and unit",
            "a product needs *; a value reads like 5 kohm or 3.3 pF",
        )
    return Number(read_value(number + unit, found[1]), found[1])


def named(character: str) -> str:
    """A character as it goes into a message: by its code point and name where it is not plain ASCII."""
    if character.isascii():
        return quoted(character)
    name = unicodedata.name(character, "")
    shown = quoted(character) if character.isprintable() else '""'
    return f"{shown} (U+{ord(character):04X}{f', {name.lower()}' if name else ''})"


# Units as LaTeX writes them

UPRIGHT = (
    "mathrm", "text", "textrm", "mathit", "operatorname", "mathsf", "mathbf", "textit", "mbox", "mathnormal",
)  # fmt: skip
_UNIT_WORDS = {
    "Omega": "ohm", "upOmega": "ohm", "textohm": "ohm", "mu": "u", "upmu": "u", "textmu": "u", "degree": "°",
    "textdegree": "°",
}  # fmt: skip
_PREFIX = "[afpnu\u00b5\u03bcmkMGT]"
_SPACE = re.compile(r"(?:[\s~]|\\[,;:! ]|\\(?:thinspace|quad)(?![A-Za-z]))*")
_PIECE = re.compile(
    rf"\\(?:{'|'.join(UPRIGHT)})\s*\{{(?P<upright>(?:[^{{}}\\$]|\\[A-Za-z]+|\\[,;:! ])*)\}}"
    r"|(?P<circle>\^\s*(?:\\circ(?![A-Za-z])|\{\s*\\circ\s*\}))"
    rf"|\\(?P<word>{'|'.join(_UNIT_WORDS)})(?![A-Za-z])"
    rf"|(?P<sign>{_PREFIX}?[\u03a9\u2126]|°|{_PREFIX}(?=\s*\\(?:up)?Omega(?![A-Za-z]))"
    rf"|(?:{_PREFIX}?(?:ohm|Hz|[SFHVA])|{_PREFIX}s|dB|deg)(?![A-Za-z0-9]))"
)
_INSIDE = re.compile(r"\\([A-Za-z]+)|\\[,;:! ]|[\s~]+")
_UNIT = re.compile(r"[A-Za-z/\u00b0\u00b5\u03bc\u03a9\u2126]+")


def latex_unit(text: str, position: int, is_name: Callable[[str], bool]) -> tuple[str, int, int]:
    r"""Prefix and unit after a number in LaTeX: `\,\mathrm{k}\Omega`, `\,\text{pF}`, `^\circ`.

    The unit ("" for none), the column at which it begins, and the position after it. What has a subscript is no
    unit, nor what `is_name` says is the name of a symbol.
    """
    unit, column = "", position + 1
    while True:
        start = _after_space(text, position)
        found = _PIECE.match(text, start)
        piece = _unit_piece(found) if found is not None else ""
        if found is None or not _UNIT.fullmatch(piece) or (not unit and is_name(piece)):
            return unit, column, position
        if text.startswith("_", _after_space(text, found.end())):
            return unit, column, position
        column = column if unit else start + 1
        unit, position = unit + piece, found.end()


def _after_space(text: str, position: int) -> int:
    found = _SPACE.match(text, position)
    return found.end() if found is not None else position


def _unit_piece(found: re.Match[str]) -> str:
    if found["upright"] is not None:
        return _INSIDE.sub(
            lambda inner: _UNIT_WORDS.get(inner[1], f"\\{inner[1]}") if inner[1] else "", found["upright"]
        )
    return "°" if found["circle"] else _UNIT_WORDS[found["word"]] if found["word"] else found["sign"]
