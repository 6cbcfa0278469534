"""The tree of a formula and its evaluation over any algebra: a module below all rooms of the house."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Protocol, TypeVar

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
        stack.extend(operands(step))
    return reversed(order)


def names(node: Node) -> list[str]:
    """The names in a formula, each once, in order of appearance."""
    return list(dict.fromkeys(step.text for step in walk(node) if isinstance(step, Name)))


def operands(node: Node) -> tuple[Node, ...]:
    """The nodes that a node joins, from left to right."""
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
