"""One assumption's table, as a stage file has it, read into a record: names, units and values checked."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from typing import Any

from symamp.assumptions.kinds import KEYS
from symamp.assumptions.record import Assumption, Miller, Pair
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE, INDUCTANCE, RESISTANCE, TURNS_RATIO
from symamp.circuit.labels import remark_of, select, select_monomials, select_symbols, unit_of
from symamp.circuit.near import propose
from symamp.circuit.stage import Stage, Symbol
from symamp.errors import InputError, StageError
from symamp.exact.system import terminal_node
from symamp.formula import (
    Call,
    Dimension,
    Node,
    Number,
    Pi,
    Power,
    dimension_of,
    dimension_of_unit,
    names,
    parse,
    walk,
)
from symamp.values import quoted, read_frequency

_OTHER_KEYS = ("name", "for")
_MILLER = 'write miller = { part = "CC", from = "g", to = "out", ends = "both" }'
_BRIDGES = (RESISTANCE, CAPACITANCE, INDUCTANCE, CONDUCTANCE)


class TableReader:
    """Reads one table; an error's `key` is the key within it, dotted."""

    def __init__(self, stage: Stage, raw: Mapping[str, Any]) -> None:
        self.stage = stage
        self.raw = raw
        self.remarks: list[str] = []

    def read(self) -> Assumption:
        """The record. Raises StageError or ReadError."""
        name, kinds = self._head()
        return Assumption(
            name=name,
            kinds=kinds,
            responses=self._responses(),
            equal=self._equal(),
            replace=self._set(),
            orders=self._orders(),
            miller=self._miller(),
            pairs=self._pairs(name),
            dominant_pole=self._flag("dominant_pole"),
            poles_far_apart=self._flag("poles_far_apart"),
            band=self._band(),
            remarks=tuple(dict.fromkeys(self.remarks)),
        )

    def _head(self) -> tuple[str, tuple[str, ...]]:
        raw = self.raw
        for key in raw:
            if key not in KEYS and key not in _OTHER_KEYS:
                remedy = propose(str(key), (*KEYS, *_OTHER_KEYS), "keys of an assumption")
                raise StageError(f"an assumption has no key {quoted(key)}", remedy, key=str(key))
        name = raw.get("name")
        if not isinstance(name, str) or not name.strip():
            example = 'give it one, such as name = "no body effect"'
            raise StageError("an assumption has no name", example, key="name")
        kinds = tuple(dict.fromkeys(KEYS[key].name for key in raw if key in KEYS and raw[key] is not False))
        if not kinds:
            remedy = f'give it one of {", ".join(KEYS)}, such as neglect = ["gmb"]'
            raise StageError(f"the assumption {quoted(name)} says nothing", remedy, key="name")
        return name, kinds

    def _list(self, key: str) -> list[str]:
        value = self.raw.get(key, [])
        items = [value] if isinstance(value, str) else value
        if not isinstance(items, list) or not all(isinstance(item, str) for item in items):
            raise StageError(
                f"{key} is {quoted(value)}", f'write a list of names, such as {key} = ["gds"]', key=key
            )
        if key in self.raw and not items:
            raise StageError(f"{key} is empty", f'name at least one, such as {key} = ["gds"]', key=key)
        return items

    def _flag(self, key: str) -> bool:
        value = self.raw.get(key, False)
        if not isinstance(value, bool):
            raise StageError(f"{key} is {quoted(value)}", f"write {key} = true, or leave it out", key=key)
        return value

    def _responses(self) -> tuple[str, ...] | None:
        if "for" not in self.raw:
            return None
        wanted = self._list("for")
        for name in wanted:
            if name not in self.stage.asked:
                remedy = propose(name, self.stage.asked, "responses")
                raise StageError(f"there is no response {quoted(name)}", remedy, key="for")
        return tuple(wanted)

    def _named(self, key: str, text: str) -> tuple[Symbol, ...]:
        try:
            symbols = select_symbols(self.stage, text)
            remark = "" if symbols else select(self.stage, text).remark
        except InputError as error:
            raise error.at(key=key) from None
        if remark:
            self.remarks.append(remark)
        return tuple(self.stage.symbols[name] for name in symbols)

    # Step 1

    def _equal(self) -> tuple[tuple[str, ...], ...]:
        if "equal" not in self.raw:
            return ()
        labels = self._list("equal")
        known = [label for label, part in self.stage.parts.items() if part.parameters]
        for label in labels:
            if label not in known:
                remedy = propose(label, known, "parts that have symbols")
                raise StageError(f"{quoted(label)} is no part that has symbols", remedy, key="equal")
        if len({self.stage.parts[label].kind.name for label in labels}) > 1:
            problem = f"{' and '.join(labels)} are not of one kind"
            raise StageError(problem, "make parts of one kind equal", key="equal")
        if len(set(labels)) < 2:
            raise StageError(
                "equal names one part alone", 'name two, such as equal = ["M1", "M2"]', key="equal"
            )
        order = list(self.stage.parts)
        return (tuple(sorted(set(labels), key=order.index)),)

    def _set(self) -> dict[str, Node]:
        raw = self.raw.get("set", {})
        if not isinstance(raw, dict) or ("set" in self.raw and not raw):
            raise StageError(f"set is {quoted(raw)}", 'write set = { gm4 = "2*gm3" }', key="set")
        return {self._target(name): self._formula(name, text) for name, text in raw.items()}

    def _target(self, name: str) -> str:
        if name in self.stage.aliases:
            made = " and ".join(self.stage.aliases[name])
            remedy = f"set what it is made of: {made}"
            raise StageError(f"{name} is an alias and cannot be set", remedy, key=f"set.{name}")
        if name not in self.stage.symbols:
            remedy = propose(name, self.stage.symbols, "symbols")
            raise StageError(f"{quoted(name)} is no symbol, so it cannot be set", remedy, key=f"set.{name}")
        return name

    def _formula(self, name: str, text: Any) -> Node:
        if isinstance(text, bool) or not isinstance(text, str | int | float):
            remedy = f'write a formula, such as set = {{ {name} = "2*gm3" }}'
            raise StageError(f"{name} is {quoted(text)}", remedy, key=f"set.{name}")
        try:
            node = parse(str(text))
            self._check_names(node)
            if any(isinstance(step, Call | Pi) or _fractional(step) for step in walk(node)):
                remedy = "set takes + - * / || and whole powers of symbols and numbers"
                raise StageError(f"{quoted(text)} is not rational", remedy)
            if any(isinstance(step, Number) and step.unit in ("dB", "deg") for step in walk(node)):
                problem = f"{quoted(text)} is in decibels or degrees, and a symbol's value never is"
                raise StageError(problem, f"write a plain factor, such as set = {{ {name} = 2 }}")
            found = dimension_of(node, lambda used: unit_of(self.stage, used))
        except InputError as error:
            raise error.at(key=f"set.{name}") from None
        wanted = self.stage.symbols[name].unit
        # A bare number takes the unit of what it stands for.
        if found != dimension_of_unit(wanted) and (names(node) or found != dimension_of_unit("")):
            remedy = f"{name} has the unit {wanted}" if wanted else f"{name} is a pure number"
            problem = f"{quoted(text)} has {f'the unit {found.unit}' if found.unit else 'no unit'}"
            raise StageError(problem, remedy, key=f"set.{name}")
        return node

    def _check_names(self, node: Node) -> None:
        known = [*self.stage.symbols, *self.stage.aliases]
        for used in names(node):
            if used not in known:
                raise StageError(f"{quoted(used)} is no symbol", propose(used, known, "symbols"))

    # Step 2

    def _orders(self) -> dict[str, int]:
        orders: dict[str, int] = {}
        for key, order_of in (("neglect", _neglected), ("open", _opened), ("short", _shorted)):
            for text in self._list(key):
                for symbol in self._named(key, text):
                    _add_order(orders, symbol.name, order_of(self.stage, symbol), key)
        for name in self._other_capacitors():
            _add_order(orders, name, 1, "dominant_capacitor")
        return orders

    def _other_capacitors(self) -> Iterable[str]:
        if "dominant_capacitor" not in self.raw:
            return ()
        text = self.raw["dominant_capacitor"]
        kept = self._named("dominant_capacitor", text) if isinstance(text, str) else ()
        if len(kept) != 1 or kept[0].nature != CAPACITANCE:
            remedy = 'name one, such as dominant_capacitor = "CL"'
            raise StageError(f"{quoted(text)} is not one capacitor", remedy, key="dominant_capacitor")
        return [n for n, s in self.stage.symbols.items() if s.nature == CAPACITANCE and n != kept[0].name]

    # Step 3

    def _miller(self) -> tuple[Miller, ...]:
        if "miller" not in self.raw:
            return ()
        raw = self.raw["miller"]
        if not isinstance(raw, dict):
            raise StageError(f"miller is {quoted(raw)}", _MILLER, key="miller")
        for key in raw:
            if key not in ("part", "from", "to", "ends"):
                raise StageError(f"miller has no key {quoted(key)}", _MILLER, key=f"miller.{key}")
        for key in ("part", "from", "to"):
            if not isinstance(raw.get(key), str):
                problem = f"{key} is {quoted(raw[key])}" if key in raw else f"miller says no {key}"
                raise StageError(problem, _MILLER, key=f"miller.{key}")
        if raw.get("ends", "both") not in ("both", "from"):
            raise StageError(f"ends is {quoted(raw['ends'])}", 'ends is "both" or "from"', key="miller.ends")
        return (Miller(self._bridge(raw), raw["from"], raw["to"], raw.get("ends", "both") == "both"),)

    def _bridge(self, raw: Mapping[str, str]) -> str:
        """The symbol of the bridging part, which joins the two nodes."""
        symbols = self._named("miller.part", raw["part"])
        if len(symbols) != 1 or symbols[0].nature not in _BRIDGES:
            remedy = "name one resistor, capacitor or inductor, or one such parameter of a device: CC, cgd1"
            raise StageError(f"{quoted(raw['part'])} is not one bridging part", remedy, key="miller.part")
        symbol = symbols[0]
        joined = bridge_nodes(self.stage, symbol)
        if {raw["from"], raw["to"]} != set(joined) or raw["from"] == raw["to"]:
            problem = f"{raw['part']} does not join {quoted(raw['from'])} and {quoted(raw['to'])}"
            key = "miller.from" if raw["from"] not in joined else "miller.to"
            raise StageError(problem, f"it joins {joined[0]} and {joined[1]}", key=key)
        for part in self.stage.parts.values():
            if part.control == symbol.part:
                problem = f"the current of {symbol.part} controls {part.label}, so it cannot be split in two"
                raise StageError(problem, "name another bridging part", key="miller.part")
        return symbol.name

    # Step 4

    def _pairs(self, name: str) -> tuple[Pair, ...]:
        if ("small" in self.raw) != ("against" in self.raw):
            lone, other = ("small", "against") if "small" in self.raw else ("against", "small")
            raise StageError(f"{lone} stands alone", f'say {other} too, such as {other} = ["gm"]', key=lone)
        small, against = self._products("small"), self._products("against")
        units = [{self._dimension(product).unit for product in side} for side in (small, against)]
        if small and against and not units[0] & units[1]:
            left, right = (" and ".join(unit or "a pure number" for unit in sorted(side)) for side in units)
            problem = f"small is in {left} and against in {right}, so nothing of one outweighs the other"
            raise StageError(problem, 'compare like with like, such as "1/RL" with "gds"', key="against")
        return tuple(Pair(x, y, name) for x in small for y in against)

    def _dimension(self, product: Mapping[str, Fraction]) -> Dimension:
        total = Dimension()
        for name, power in product.items():
            total = total.times(dimension_of_unit(unit_of(self.stage, name)).to(power))
        return total

    def _products(self, key: str) -> list[Mapping[str, Fraction]]:
        found: list[Mapping[str, Fraction]] = []
        for text in self._list(key):
            try:
                products = select_monomials(self.stage, text)
                remark = "" if products else remark_of(self.stage, text)
            except InputError as error:
                raise error.at(key=key) from None
            if remark:
                self.remarks.append(remark)
            found.extend({n: Fraction(p) for n, p in product.items()} for product in products)
        return found

    # Step 5

    def _band(self) -> Fraction | None:
        if "band" not in self.raw:
            return None
        try:
            frequency = read_frequency(self.raw["band"])
        except InputError as error:
            raise error.at(key="band") from None
        if frequency <= 0:
            remedy = 'give a frequency above zero, such as "10 MHz"'
            raise StageError(f"band is {quoted(self.raw['band'])}", remedy, key="band")
        return frequency


def bridge_nodes(stage: Stage, symbol: Symbol) -> tuple[str, str]:
    """The two nodes between which the element of a symbol stands."""
    part = stage.parts[symbol.part]
    element = next(e for e in part.kind.elements if e.parameter == symbol.parameter.name)
    a, b = element.terminals[:2]
    return terminal_node(part, a), terminal_node(part, b)


def _add_order(orders: dict[str, int], name: str, order: int, key: str) -> None:
    if orders.setdefault(name, order) != order:
        raise StageError(f"{name} is taken to zero and to infinity at once", "keep one of the two", key=key)


def _neglected(stage: Stage, symbol: Symbol) -> int:
    if symbol.nature == TURNS_RATIO:
        remedy = f'take the transformer off with without = ["{symbol.name}"]'
        raise StageError(f"{symbol.name} is a turns ratio, which cannot be neglected", remedy, key="neglect")
    device = stage.parts[symbol.part].kind.prefixed
    if not device and symbol.nature in (RESISTANCE, INDUCTANCE):
        what = "a resistor" if symbol.nature == RESISTANCE else "an inductor"
        remedy = f'write short = ["{symbol.name}"] or open = ["{symbol.name}"]'
        raise StageError(
            f"{symbol.name} is {what}: neglected as a short or as an open?", remedy, key="neglect"
        )
    return 1


def _opened(stage: Stage, symbol: Symbol, key: str = "open") -> int:
    """+1 where an open part's symbol is zero, −1 where it is without bound."""
    if symbol.nature in (RESISTANCE, INDUCTANCE):
        return -1
    if symbol.nature in (CAPACITANCE, CONDUCTANCE):
        return 1
    remedy = f'leave it out with neglect = ["{symbol.name}"]'
    raise StageError(f"{symbol.name} is no resistance, conductance or reactance", remedy, key=key)


def _shorted(stage: Stage, symbol: Symbol) -> int:
    return -_opened(stage, symbol, "short")


def _fractional(node: Node) -> bool:
    return isinstance(node, Power) and node.exponent.denominator != 1
