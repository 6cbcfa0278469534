"""What a set of assumptions asks of symbols: which are one, which are replaced, and where they go."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Generic, TypeVar

from symamp.assumptions.dominance import Pair
from symamp.assumptions.read import Assumption, Miller
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.formula import Node, fold, names

Value = TypeVar("Value")


@dataclass(frozen=True)
class Pooled:
    """A set of assumptions as one: nothing here depends on the order in which they were listed."""

    rename: Mapping[str, str] = field(default_factory=dict)
    replace: Mapping[str, Node] = field(default_factory=dict)
    orders: Mapping[str, int] = field(default_factory=dict)
    miller: tuple[Miller, ...] = ()
    pairs: tuple[Pair, ...] = ()
    dominant_pole: bool = False
    poles_far_apart: bool = False
    band: Fraction | None = None
    remarks: tuple[str, ...] = ()


def pooled(stage: Stage, assumptions: Sequence[Assumption]) -> Pooled:
    """Pool a set; raises StageError where two of them contradict one another."""
    rename = _renaming(stage, [group for a in assumptions for group in a.equal])
    replace: dict[str, Node] = {}
    orders: dict[str, int] = {}
    for assumption in assumptions:
        for name, node in assumption.replace.items():
            _add(replace, rename.get(name, name), node, assumption.name)
        for name, order in assumption.orders.items():
            _add(orders, rename.get(name, name), order, assumption.name)
    pairs = tuple(
        Pair(_moved(pair.small, rename), _moved(pair.against, rename), pair.assumption)
        for a in assumptions
        for pair in a.pairs
    )
    return Pooled(
        rename,
        {name: replace[name] for name in _in_order(replace, rename, stage)},
        orders,
        tuple(dict.fromkeys(m for a in assumptions for m in a.miller)),
        pairs,
        any(a.dominant_pole for a in assumptions),
        any(a.poles_far_apart for a in assumptions),
        next((a.band for a in assumptions if a.band is not None), None),
        tuple(dict.fromkeys(r for a in assumptions for r in a.remarks)),
    )


def _add(into: dict[str, Any], name: str, value: Any, assumption: str) -> None:
    if into.setdefault(name, value) != value:
        raise StageError(
            f"assumption {assumption!r} contradicts another about {name}", "keep one of them", key="assumption"
        )


def _renaming(stage: Stage, groups: Sequence[tuple[str, ...]]) -> dict[str, str]:
    """{symbol: the symbol that stands for it}; overlapping lists merge, the first part in the file leads."""
    place = {label: i for i, label in enumerate(stage.parts)}
    leader: dict[str, str] = {}

    def lead(label: str) -> str:
        while leader.get(label, label) != label:
            label = leader[label]
        return label

    for group in groups:
        first, *others = sorted({lead(label) for label in group}, key=place.__getitem__)
        for other in others:
            leader[other] = first
    rename = {}
    for label in leader:
        part, top = stage.parts[label], stage.parts[lead(label)]
        for parameter in part.parameters:
            if parameter in top.parameters and part is not top:
                rename[part.symbol(parameter)] = top.symbol(parameter)
    return _lacking(stage, leader, lead, rename)


def _lacking(stage: Stage, leader: Any, lead: Any, rename: dict[str, str]) -> dict[str, str]:
    """Parameters that the leader lacks stay; those of several followers are one with the first of them."""
    first: dict[tuple[str, str], str] = {}
    for label in sorted(leader, key=list(stage.parts).index):
        part = stage.parts[label]
        for parameter in part.parameters:
            symbol = part.symbol(parameter)
            if symbol not in rename and part.label != lead(label):
                stands = first.setdefault((lead(label), parameter), symbol)
                if stands != symbol:
                    rename[symbol] = stands
    return rename


def _moved(powers: Mapping[str, Fraction], rename: Mapping[str, str]) -> dict[str, Fraction]:
    moved: dict[str, Fraction] = {}
    for name, power in powers.items():
        new = rename.get(name, name)
        moved[new] = moved.get(new, Fraction(0)) + power
    return moved


def _in_order(replace: Mapping[str, Node], rename: Mapping[str, str], stage: Stage) -> list[str]:
    """Targets in such an order that each formula's own targets come after it; a ring is an error."""
    order: list[str] = []
    visiting: list[str] = []

    def visit(name: str) -> None:
        if name in order:
            return
        if name in visiting:
            ring = " → ".join((*visiting[visiting.index(name) :], name))
            raise StageError(f"set formulas run in a ring: {ring}", "break it at one of them", key="assumption")
        visiting.append(name)
        for used in base_symbols(stage, replace[name], rename):
            if used in replace:
                visit(used)
        visiting.pop()
        order.append(name)

    for name in sorted(replace):
        visit(name)
    return order[::-1]


def base_symbols(stage: Stage, node: Node, rename: Mapping[str, str]) -> list[str]:
    """The symbols that a formula holds, aliases resolved and symbols renamed."""
    found: list[str] = []
    for name in names(node):
        for symbol in stage.aliases[name] if name in stage.aliases else (name,):
            found.append(rename.get(symbol, symbol))
    return found


class Field(Generic[Value]):
    """A formula's algebra over values that know + − · /: floats, arrays, fractions."""

    def __init__(self, stage: Stage, rename: Mapping[str, str], value_of: Any) -> None:
        self._stage, self._rename, self._value_of = stage, rename, value_of

    def number(self, value: Fraction, unit: str) -> Any:
        return self._value_of(value)

    def pi(self) -> Any:
        raise StageError("a set formula cannot hold pi")

    def name(self, text: str) -> Any:
        powers = self._stage.aliases.get(text, {text: 1})
        total: Any = self.number(Fraction(1), "")
        for symbol, power in powers.items():
            value = self._value_of(self._rename.get(symbol, symbol))
            total = self.multiply(total, value) if power > 0 else self.divide(total, value)
        return total

    def add(self, a: Any, b: Any) -> Any:
        return a + b

    def subtract(self, a: Any, b: Any) -> Any:
        return a - b

    def multiply(self, a: Any, b: Any) -> Any:
        return a * b

    def divide(self, a: Any, b: Any) -> Any:
        return a / b

    def power(self, base: Any, exponent: Fraction) -> Any:
        whole = int(exponent)
        total = self.number(Fraction(1), "")
        for _ in range(abs(whole)):
            total = self.multiply(total, base)
        return total if whole >= 0 else self.divide(self.number(Fraction(1), ""), total)

    def parallel(self, a: Any, b: Any) -> Any:
        return self.divide(self.multiply(a, b), self.add(a, b))

    def negate(self, a: Any) -> Any:
        return self.subtract(self.number(Fraction(0), ""), a)

    def call(self, function: str, argument: Any) -> Any:
        raise StageError(f"a set formula cannot hold {function}")


class Ratios(Field[Any]):
    """The same over ratios (numerator, denominator) of polynomials of one ring."""

    def add(self, a: Any, b: Any) -> Any:
        return a[0] * b[1] + b[0] * a[1], a[1] * b[1]

    def subtract(self, a: Any, b: Any) -> Any:
        return a[0] * b[1] - b[0] * a[1], a[1] * b[1]

    def multiply(self, a: Any, b: Any) -> Any:
        return a[0] * b[0], a[1] * b[1]

    def divide(self, a: Any, b: Any) -> Any:
        return a[0] * b[1], a[1] * b[0]


def formula_value(stage: Stage, node: Node, rename: Mapping[str, str], value_of: Any) -> Any:
    """A formula's value; `value_of` takes a symbol's name or a Fraction."""
    return fold(node, Field(stage, rename, value_of))


def formula_ratio(stage: Stage, node: Node, rename: Mapping[str, str], context: Any) -> Any:
    """A formula as a ratio of polynomials of the ring."""
    generator = dict(zip(context.names(), context.gens(), strict=True))
    one = context.constant(1)

    def value_of(what: Any) -> Any:
        if isinstance(what, Fraction):
            return context.constant(what.numerator), context.constant(what.denominator)
        return generator[what], one

    return fold(node, Ratios(stage, rename, value_of))
