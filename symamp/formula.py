"""Formulas that a user writes, read into a small tree: a module below all rooms of the house.

The grammar: `+ - * /`, powers `^` or `**`, brackets, `||` for "in parallel", `sqrt`, `abs`, `pi`, names, and
numbers with SI prefix and unit. The parser climbs precedences (Pratt, "Top down operator precedence", 1973).
Text that a user wrote goes nowhere but here: the tree is all that the rest of the program ever evaluates.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Protocol, TypeVar

from symamp.errors import ReadError
from symamp.values import quoted, read_value, split_unit, write_value

FUNCTIONS = ("sqrt", "abs")
LONGEST = 20_000  # characters
DEEPEST = 64  # brackets and signs within one another
LARGEST_EXPONENT = 64

Value = TypeVar("Value")


@dataclass(frozen=True)
class Number:
    """A number in SI units, with the unit written beside it ("" where none was)."""

    value: Fraction
    unit: str = ""


@dataclass(frozen=True)
class Pi:
    """The constant pi."""


@dataclass(frozen=True)
class Name:
    """A name and the column, from 1, at which it stands."""

    text: str
    column: int = field(default=1, compare=False)


@dataclass(frozen=True)
class Negate:
    a: Node


@dataclass(frozen=True)
class Binary:
    """`op` is one of + - * /."""

    op: str
    a: Node
    b: Node


@dataclass(frozen=True)
class Power:
    """A power whose exponent is a number, at most 64 in magnitude."""

    base: Node
    exponent: Fraction


@dataclass(frozen=True)
class Parallel:
    """a·b/(a + b)."""

    a: Node
    b: Node


@dataclass(frozen=True)
class Call:
    """`function` is sqrt or abs."""

    function: str
    argument: Node


Node = Number | Pi | Name | Negate | Binary | Power | Parallel | Call


class Algebra(Protocol[Value]):
    """What a formula is evaluated over: floats, arrays, polynomials, units."""

    def number(self, value: Fraction, unit: str) -> Value: ...
    def pi(self) -> Value: ...
    def name(self, text: str) -> Value: ...
    def add(self, a: Value, b: Value) -> Value: ...
    def subtract(self, a: Value, b: Value) -> Value: ...
    def multiply(self, a: Value, b: Value) -> Value: ...
    def divide(self, a: Value, b: Value) -> Value: ...
    def power(self, base: Value, exponent: Fraction) -> Value: ...
    def parallel(self, a: Value, b: Value) -> Value: ...
    def negate(self, a: Value) -> Value: ...
    def call(self, function: str, argument: Value) -> Value: ...


def parse(text: str) -> Node:
    """The tree of a formula. Raises ReadError, with the place shown by a caret, where it cannot be read."""
    if not isinstance(text, str):
        raise ReadError(f"{quoted(text)} is no formula", 'write it as text, such as "-gm1*(ro1 || RL)"')
    if len(text) > LONGEST:
        raise ReadError(f"a formula of {len(text)} characters", f"at most {LONGEST} can be read")
    return _Parser(text).whole()


def fold(node: Node, algebra: Algebra[Value]) -> Value:
    """The formula worked out over an algebra, from the leaves up, without recursion: sums may be long."""
    done: list[Value] = []
    for step in walk(node):
        if isinstance(step, Number):
            done.append(algebra.number(step.value, step.unit))
        elif isinstance(step, Pi):
            done.append(algebra.pi())
        elif isinstance(step, Name):
            done.append(algebra.name(step.text))
        elif isinstance(step, Binary | Parallel):
            b, a = done.pop(), done.pop()
            done.append(_join(algebra, step, a, b))
        else:
            done.append(_alter(algebra, step, done.pop()))
    return done.pop()


def walk(node: Node) -> Iterator[Node]:
    """All nodes, operands before what joins them, from left to right."""
    stack, order = [node], []
    while stack:
        step = stack.pop()
        order.append(step)
        stack.extend(_operands(step))
    return reversed(order)


def names(node: Node) -> list[str]:
    """The names in a formula, each once, in order of appearance."""
    return list(dict.fromkeys(step.text for step in walk(node) if isinstance(step, Name)))


def evaluate(node: Node, value_of_name: Callable[[str], float]) -> float:
    """The formula's value over real floats. 1/0 is infinite, 0/0 and the root of a negative number are NaN."""
    return fold(node, _Floats(value_of_name))


def write(node: Node) -> str:
    """The formula as text, with `**` and no more brackets than needed; `parse` reads it back to the same value."""
    return fold(node, _Writer())[0]


def error_at(text: str, column: int, problem: str, remedy: str = "") -> ReadError:
    """An error about a place in a formula (column from 1), with the text and a caret below the message."""
    start = max(column - 40, 0) if len(text) > 76 else 0
    shown = "".join(c if c.isprintable() else " " for c in text[start : start + 76])
    caret = f"\n    {shown}\n    {' ' * (column - 1 - start)}^"
    return ReadError(problem, remedy + caret) if remedy else ReadError(problem + caret)


def _operands(node: Node) -> tuple[Node, ...]:
    if isinstance(node, Binary | Parallel):
        return node.a, node.b
    if isinstance(node, Negate):
        return (node.a,)
    if isinstance(node, Power):
        return (node.base,)
    return (node.argument,) if isinstance(node, Call) else ()


def _join(algebra: Algebra[Value], node: Binary | Parallel, a: Value, b: Value) -> Value:
    if isinstance(node, Parallel):
        return algebra.parallel(a, b)
    if node.op == "+":
        return algebra.add(a, b)
    if node.op == "-":
        return algebra.subtract(a, b)
    return algebra.multiply(a, b) if node.op == "*" else algebra.divide(a, b)


def _alter(algebra: Algebra[Value], node: Node, a: Value) -> Value:
    if isinstance(node, Negate):
        return algebra.negate(a)
    if isinstance(node, Power):
        return algebra.power(a, node.exponent)
    assert isinstance(node, Call)
    return algebra.call(node.function, a)


# ---------------------------------------------------------------------------------------------- reading

_TOKEN = re.compile(
    r"(?P<space>[ \t\r\n\u00a0]+)"
    r"|(?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)(?:[ \u00a0]?(?P<unit>[^\W\d_][\w\u2126]*))?"
    r"|(?P<name>[^\W\d][\w\u2126]*)"
    r"|(?P<op>\*\*|\|\||[-+*/^()])"
)
_BINDING = {"+": 1, "-": 1, "*": 2, "/": 2, "||": 3}


@dataclass(frozen=True)
class _Token:
    what: str  # number, name, op or end
    text: str
    column: int
    number: Number | None = None


@dataclass
class _Level:
    """What stands in one pair of brackets: where `||` was met, and where any other operator was."""

    parallel: int = 0
    other: int = 0


class _Parser:
    def __init__(self, text: str) -> None:
        self.text = text
        self.tokens = list(_scan(text))
        self.position = 0
        self.depth = 0
        self.level = _Level()

    def whole(self) -> Node:
        if self.next.what == "end":
            raise error_at(self.text, 1, "the formula is empty", 'write one, such as "-gm1*(ro1 || RL)"')
        node = self.climb(0)
        if self.next.what != "end":
            raise self.unexpected()
        return node

    @property
    def next(self) -> _Token:
        return self.tokens[self.position]

    def take(self) -> _Token:
        token = self.next
        self.position += 1
        return token

    def deeper(self, step: int) -> None:
        self.depth += step
        if self.depth > DEEPEST:
            raise error_at(self.text, self.next.column, f"more than {DEEPEST} brackets or signs within one another")

    def climb(self, least: int) -> Node:
        node = self.signed()
        while self.next.what == "op" and _BINDING.get(self.next.text, -1) >= least:
            token = self.take()
            self.mind_mixing(token)
            right = self.climb(_BINDING[token.text] + 1)
            node = Parallel(node, right) if token.text == "||" else Binary(token.text, node, right)
        return node

    def mind_mixing(self, token: _Token) -> None:
        """`a*b || c` reads two ways, so `||` shares its brackets with no other operator."""
        if token.text == "||":
            self.level.parallel = self.level.parallel or token.column
        else:
            self.level.other = self.level.other or token.column
        if self.level.parallel and self.level.other:
            sign = token.text if token.text != "||" else self.text[self.level.other - 1]
            raise error_at(
                self.text,
                token.column,
                f"|| beside {sign} reads two ways",
                "put brackets around what is in parallel, such as a*(b || c)",
            )

    def signed(self) -> Node:
        if self.next.what == "op" and self.next.text in "+-":
            token = self.take()
            self.mind_mixing(token)
            self.deeper(1)
            node = self.signed()
            self.deeper(-1)
            return Negate(node) if token.text == "-" else node
        return self.power()

    def power(self) -> Node:
        base = self.atom()
        if self.next.what != "op" or self.next.text not in ("^", "**"):
            return base
        column = self.take().column
        self.deeper(1)
        exponent = self.exponent(column)
        self.deeper(-1)
        node = Power(base, exponent)
        if _growth(node) > LARGEST_EXPONENT:
            raise error_at(
                self.text, column, "the powers within one another are too high", f"at most {LARGEST_EXPONENT} in all"
            )
        return node

    def exponent(self, column: int) -> Fraction:
        sign = 1
        while self.next.what == "op" and self.next.text in "+-":
            sign = -sign if self.take().text == "-" else sign
        try:
            value = sign * fold(self.power(), _Exact())
        except _NotConstant:
            raise error_at(
                self.text, column, "the exponent is no pure number", "write one, such as 2, -1 or (1/2)"
            ) from None
        if abs(value) > LARGEST_EXPONENT or value.denominator > LARGEST_EXPONENT:
            raise error_at(
                self.text, column, "the exponent is too large", f"at most {LARGEST_EXPONENT} in magnitude"
            )
        return value

    def atom(self) -> Node:
        token = self.next
        if token.number is not None:
            self.take()
            return token.number
        if token.what == "name":
            return self.named()
        if token.text == "(":
            return self.bracketed()
        raise self.unexpected()

    def named(self) -> Node:
        token = self.take()
        if token.text in FUNCTIONS:
            if self.next.text != "(":
                raise error_at(
                    self.text, self.next.column, f"{token.text} needs brackets", f"write {token.text}(...)"
                )
            return Call(token.text, self.bracketed())
        if self.next.text == "(":
            raise error_at(
                self.text,
                token.column,
                f"{quoted(token.text)} is no function",
                f"{' and '.join(FUNCTIONS)} are; a product needs *",
            )
        return Pi() if token.text == "pi" else Name(token.text, token.column)

    def bracketed(self) -> Node:
        opened = self.take()
        outer, self.level = self.level, _Level()
        self.deeper(1)
        node = self.climb(0)
        self.deeper(-1)
        self.level = outer
        if self.next.text != ")":
            if self.next.what == "end":
                raise error_at(self.text, opened.column, "this bracket is not closed", "add )")
            raise self.unexpected()
        self.take()
        return node

    def unexpected(self) -> ReadError:
        token = self.next
        before = self.tokens[self.position - 1] if self.position else None
        if token.what == "end":
            return error_at(self.text, token.column, "the formula ends too early", "a name or a number is missing")
        if token.text == ")" and before is not None and (before.what != "op" or before.text == ")"):
            return error_at(self.text, token.column, "a bracket closes that was not opened", "remove )")
        if token.what != "op" or token.text == "(":
            return error_at(self.text, token.column, f"an operator is missing before {quoted(token.text)}", "add *")
        return error_at(self.text, token.column, f"{token.text} cannot stand here", "a name or a number is missing")


def _scan(text: str) -> Iterator[_Token]:
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        column = position + 1
        if match is None:
            raise error_at(text, column, f"{quoted(text[position])} has no meaning in a formula", _MEANT)
        position = match.end()
        if match["number"]:
            yield _number(text, match, column)
        elif match["name"]:
            if not match["name"].isascii():
                raise error_at(text, column, f"{quoted(match['name'])} is no name", "names are of ASCII letters")
            yield _Token("name", match["name"], column)
        elif match["op"]:
            yield _Token("op", match["op"], column)
    yield _Token("end", "", len(text) + 1)


_MEANT = "the signs are + - * / ^ ** ( ) and ||"


def _number(text: str, match: re.Match[str], column: int) -> _Token:
    word = match["unit"] or ""
    found = split_unit(word)
    if found is None:
        raise error_at(
            text,
            match.start("unit") + 1,
            f"{quoted(word)} after a number is no SI prefix and unit",
            "a product needs *; a value reads like 5 kohm or 3.3 pF",
        )
    try:
        value = read_value(match["number"] + word, found[1])
    except ReadError as error:
        raise error_at(text, column, error.problem, error.remedy) from None
    return _Token("number", match[0], column, Number(value, found[1]))


def _growth(node: Node) -> Fraction:
    """The product of the exponents above 1 along the steepest path, which bounds what a power grows to."""
    stack, most = [(node, Fraction(1))], Fraction(1)
    while stack:
        step, power = stack.pop()
        most = max(most, power)
        factor = max(abs(step.exponent), Fraction(1)) if isinstance(step, Power) else Fraction(1)
        stack.extend((operand, power * factor) for operand in _operands(step))
    return most


# ---------------------------------------------------------------------------------------------- algebras


class _NotConstant(Exception):
    """An exponent that is no exact number."""


class _Exact:
    """Exact numbers, for exponents; all else is refused."""

    def number(self, value: Fraction, unit: str) -> Fraction:
        return self.refuse() if unit else value

    def refuse(self, *_: object) -> Fraction:
        raise _NotConstant

    pi = name = call = refuse

    def add(self, a: Fraction, b: Fraction) -> Fraction:
        return a + b

    def subtract(self, a: Fraction, b: Fraction) -> Fraction:
        return a - b

    def multiply(self, a: Fraction, b: Fraction) -> Fraction:
        return a * b

    def divide(self, a: Fraction, b: Fraction) -> Fraction:
        return a / b if b else self.refuse()

    def power(self, base: Fraction, exponent: Fraction) -> Fraction:
        if exponent.denominator != 1 or (not base and exponent < 0):
            self.refuse()
        return base**exponent.numerator

    def parallel(self, a: Fraction, b: Fraction) -> Fraction:
        return self.divide(a * b, a + b)

    def negate(self, a: Fraction) -> Fraction:
        return -a


class _Floats:
    """Real floats by IEEE 754's rules, where Python's own would raise."""

    def __init__(self, value_of_name: Callable[[str], float]) -> None:
        self.value_of_name = value_of_name

    def number(self, value: Fraction, unit: str) -> float:
        return float(value)

    def pi(self) -> float:
        return math.pi

    def name(self, text: str) -> float:
        return float(self.value_of_name(text))

    def add(self, a: float, b: float) -> float:
        return a + b

    def subtract(self, a: float, b: float) -> float:
        return a - b

    def multiply(self, a: float, b: float) -> float:
        return a * b

    def divide(self, a: float, b: float) -> float:
        if b:
            return a / b
        return math.nan if not a or math.isnan(a) else math.copysign(math.inf, a) * math.copysign(1, b)

    def power(self, base: float, exponent: Fraction) -> float:
        if base < 0 and exponent.denominator != 1:
            return math.nan
        if not base and exponent < 0:
            return self.divide(1.0, self.power(base, -exponent))
        try:
            return base ** (exponent.numerator if exponent.denominator == 1 else float(exponent))
        except OverflowError:
            return -math.inf if base < 0 and exponent.numerator % 2 else math.inf

    def parallel(self, a: float, b: float) -> float:
        return self.divide(1.0, self.divide(1.0, a) + self.divide(1.0, b))  # right for 0 and infinity too

    def negate(self, a: float) -> float:
        return -a

    def call(self, function: str, argument: float) -> float:
        if function == "abs":
            return abs(argument)
        return math.sqrt(argument) if argument >= 0 else math.nan


_Written = tuple[str, int]  # text and how firmly it holds together


class _Writer:
    """Text in the grammar above. Firmness: 1 sum, 2 product, 3 sign, 4 parallel (brackets ever), 5 power, 6 atom."""

    def number(self, value: Fraction, unit: str) -> _Written:
        try:
            return write_value(value, unit), 6 if value >= 0 else 3
        except ValueError:
            text = f"{value.numerator}/{value.denominator}"
            return (f"{text}*1 {unit}" if unit else text), 2

    def pi(self) -> _Written:
        return "pi", 6

    def name(self, text: str) -> _Written:
        return text, 6

    def add(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 1)} + {_within(b, 2)}", 1

    def subtract(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 1)} - {_within(b, 2)}", 1

    def multiply(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 2)}*{_within(b, 3)}", 2

    def divide(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 2)}/{_within(b, 3)}", 2

    def power(self, base: _Written, exponent: Fraction) -> _Written:
        text = str(exponent) if exponent.denominator == 1 and exponent >= 0 else f"({exponent})"
        return f"{_within(base, 6)}**{text}", 5

    def parallel(self, a: _Written, b: _Written) -> _Written:
        return f"({_within(a, 5)} || {_within(b, 5)})", 6

    def negate(self, a: _Written) -> _Written:
        return f"-{_within(a, 2)}", 2

    def call(self, function: str, argument: _Written) -> _Written:
        return f"{function}({argument[0]})", 6


def _within(part: _Written, firmness: int) -> str:
    return part[0] if part[1] >= firmness else f"({part[0]})"
