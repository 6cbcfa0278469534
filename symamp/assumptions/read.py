"""Assumptions as a stage file writes them, read into records: names resolved, contradictions refused."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches
from fractions import Fraction
from typing import Any

from symamp.assumptions.dominance import Pair, pool
from symamp.assumptions.kinds import KEYS
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE, GAIN, INDUCTANCE, RESISTANCE, TURNS_RATIO
from symamp.circuit.labels import remark_of, select, select_monomials, select_symbols
from symamp.circuit.stage import Stage, Symbol
from symamp.circuit.stagefile import locate
from symamp.errors import InputError, StageError
from symamp.formula import Call, Node, Pi, Power, dimension_of, dimension_of_unit, names, parse, walk
from symamp.values import read_frequency

_OTHER_KEYS = ("name", "for")


@dataclass(frozen=True)
class Miller:
    """Bridge `symbol` from node `start` to node `end` becomes a part at each end, or at `start` alone."""

    symbol: str
    start: str
    end: str
    both: bool


@dataclass(frozen=True)
class Assumption:
    """A named assumption: what each step does. Most fields are empty in any one assumption.

    `equal` are groups of part labels in stage order; `replace` maps a symbol to a formula; `orders` maps a
    symbol to +1 where it goes to zero and −1 where it grows without bound; `pairs` are the dominance vectors.
    """

    name: str
    kinds: tuple[str, ...]
    responses: tuple[str, ...] | None = None
    equal: tuple[tuple[str, ...], ...] = ()
    replace: Mapping[str, Node] = field(default_factory=dict)
    orders: Mapping[str, int] = field(default_factory=dict)
    miller: tuple[Miller, ...] = ()
    pairs: tuple[Pair, ...] = ()
    dominant_pole: bool = False
    poles_far_apart: bool = False
    band: Fraction | None = None
    remarks: tuple[str, ...] = ()

    def applies(self, response: str) -> bool:
        """Whether it is made for that response."""
        return self.responses is None or response in self.responses


def read_assumptions(stage: Stage) -> tuple[Assumption, ...]:
    """All assumptions of a stage. Raises StageError or ReadError with file, line and key."""
    found: list[Assumption] = []
    for index, raw in enumerate(stage.assumptions):
        try:
            assumption = _Reader(stage, raw).read()
            if any(assumption.name == other.name for other in found):
                raise StageError(f"two assumptions are named {assumption.name!r}", "give each its own name")
        except InputError as error:
            path: tuple[str | int, ...] = ("assumption", index)
            if error.key:
                path = (*path, error.key)
            raise type(error)(error.problem, error.remedy, **locate(stage, path)) from None
        found.append(assumption)
    _refuse_contradictions(stage, found)
    return tuple(found)


def chosen(assumptions: Sequence[Assumption], wanted: Sequence[str]) -> tuple[Assumption, ...]:
    """The assumptions of these names, in listed order; "all" means every one. Raises StageError."""
    if "all" in wanted and all(a.name != "all" for a in assumptions):
        return tuple(assumptions)
    known = {assumption.name: assumption for assumption in assumptions}
    for name in wanted:
        if name not in known:
            near = get_close_matches(name, known, n=1)
            listed = ", ".join(repr(n) for n in known) or "this stage has none"
            raise StageError(
                f"there is no assumption named {name!r}",
                f"did you mean {near[0]!r}?" if near else f"its assumptions: {listed}",
                key="--assume",
            )
    return tuple(a for a in assumptions if a.name in set(wanted))


class _Reader:
    """Reads one table; an error's `key` is the key within it."""

    def __init__(self, stage: Stage, raw: Mapping[str, Any]) -> None:
        self.stage = stage
        self.raw = raw
        self.remarks: list[str] = []

    def read(self) -> Assumption:
        raw = self.raw
        for key in raw:
            if key not in KEYS and key not in _OTHER_KEYS:
                near = get_close_matches(str(key), [*KEYS, *_OTHER_KEYS], n=1)
                remedy = f"did you mean {near[0]}?" if near else f"known are {', '.join((*_OTHER_KEYS, *KEYS))}"
                raise StageError(f"unknown key {key!r}", remedy, key=str(key))
        name = raw.get("name")
        if not isinstance(name, str) or not name.strip():
            raise StageError(
                "an assumption has no name", 'give it one, such as name = "no body effect"', key="name"
            )
        kinds = tuple(dict.fromkeys(KEYS[key].name for key in raw if key in KEYS))
        if not kinds:
            raise StageError(
                f"assumption {name!r} says nothing",
                f"give it one of {', '.join(KEYS)}, such as neglect = [\"gmb\"]",
                key="name",
            )
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

    def _list(self, key: str) -> list[str]:
        value = self.raw.get(key, [])
        items = [value] if isinstance(value, str) else value
        if not isinstance(items, list) or not all(isinstance(item, str) for item in items):
            raise StageError(f"{key} = {value!r}", f'write a list of names, such as {key} = ["gds"]', key=key)
        if key in self.raw and not items:
            raise StageError(f"{key} is empty", f'name at least one, such as {key} = ["gds"]', key=key)
        return items

    def _flag(self, key: str) -> bool:
        value = self.raw.get(key, False)
        if not isinstance(value, bool):
            raise StageError(f"{key} = {value!r}", f"write {key} = true", key=key)
        return value

    def _responses(self) -> tuple[str, ...] | None:
        if "for" not in self.raw:
            return None
        wanted = self._list("for")
        for name in wanted:
            if name not in self.stage.asked:
                known = ", ".join(self.stage.asked)
                raise StageError(f"there is no response {name!r}", f"this stage has {known}", key="for")
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

    def _equal(self) -> tuple[tuple[str, ...], ...]:
        if "equal" not in self.raw:
            return ()
        labels = self._list("equal")
        parts = []
        for label in labels:
            part = self.stage.parts.get(label)
            if part is None or not part.parameters:
                near = get_close_matches(label, [p for p, v in self.stage.parts.items() if v.parameters], n=1)
                remedy = f"did you mean {near[0]}?" if near else "name parts of the stage that have symbols"
                raise StageError(f"{label!r} is no part with symbols", remedy, key="equal")
            parts.append(part)
        if len({part.kind.name for part in parts}) > 1:
            raise StageError(
                f"{' and '.join(labels)} are not of one kind", "equal takes parts of one kind", key="equal"
            )
        if len(set(labels)) < 2:
            raise StageError("equal needs two parts", 'such as equal = ["M1", "M2"]', key="equal")
        order = list(self.stage.parts)
        return (tuple(sorted(set(labels), key=order.index)),)

    def _set(self) -> dict[str, Node]:
        raw = self.raw.get("set", {})
        if not isinstance(raw, dict) or ("set" in self.raw and not raw):
            raise StageError(f"set = {raw!r}", 'write set = { gm4 = "2*gm3" }', key="set")
        return {self._target(key): self._formula(key, text) for key, text in raw.items()}

    def _target(self, name: str) -> str:
        if name not in self.stage.symbols:
            near = get_close_matches(name, self.stage.symbols, n=1)
            remedy = f"did you mean {near[0]}?" if near else "name one symbol of the stage"
            raise StageError(f"{name!r} is no symbol", remedy, key="set")
        return name

    def _formula(self, name: str, text: Any) -> Node:
        try:
            node = parse(str(text))
            for used in names(node):
                if used not in self.stage.symbols and used not in self.stage.aliases:
                    near = get_close_matches(used, [*self.stage.symbols, *self.stage.aliases], n=1)
                    remedy = f"did you mean {near[0]}?" if near else "use symbols of the stage"
                    raise StageError(f"{used!r} in {text!r} is no symbol", remedy)
            if any(isinstance(step, Call | Pi) or _fractional(step) for step in walk(node)):
                raise StageError(f"{text!r} is not rational", "set takes + - * / || and whole powers of symbols")
            found = dimension_of(node, self._unit)
        except InputError as error:
            raise error.at(key="set") from None
        wanted = dimension_of_unit(self.stage.symbols[name].unit)
        # A bare number takes the unit of what it stands for.
        if found != wanted and (names(node) or found != dimension_of_unit("")):
            raise StageError(
                f"{name} = {text!r} has the wrong unit", f"{name} is in {_unit_words(self.stage, name)}", key="set"
            )
        return node

    def _unit(self, name: str) -> Any:
        if name in self.stage.symbols:
            return self.stage.symbols[name].unit
        powers = self.stage.aliases[name]
        return {(-1,): "ohm"}.get(tuple(powers.values()), "")

    def _orders(self) -> dict[str, int]:
        orders: dict[str, int] = {}
        for text in self._list("neglect"):
            for symbol in self._named("neglect", text):
                self._add_order(orders, symbol.name, self._neglected(symbol), "neglect")
        for key, sign in (("open", 1), ("short", -1)):
            for text in self._list(key):
                for symbol in self._named(key, text):
                    self._add_order(orders, symbol.name, sign * self._opened(symbol, key), key)
        if "dominant_capacitor" in self.raw:
            for name in self._other_capacitors():
                self._add_order(orders, name, 1, "dominant_capacitor")
        return orders

    @staticmethod
    def _add_order(orders: dict[str, int], name: str, order: int, key: str) -> None:
        if orders.setdefault(name, order) != order:
            raise StageError(
                f"{name} is taken to zero and to infinity at once", "keep one of the two", key=key
            )

    def _neglected(self, symbol: Symbol) -> int:
        device = self.stage.parts[symbol.part].kind.prefixed
        if symbol.nature == TURNS_RATIO:
            raise StageError(
                f"neglect: {symbol.name} is a turns ratio", "take the transformer off with without = [...]", key="neglect"
            )
        if not device and symbol.nature in (RESISTANCE, INDUCTANCE):
            what = "resistor" if symbol.nature == RESISTANCE else "inductor"
            raise StageError(
                f"{symbol.name} is a {what}: neglected as a short or as an open?",
                f'write short = ["{symbol.name}"] or open = ["{symbol.name}"]',
                key="neglect",
            )
        return 1

    @staticmethod
    def _opened(symbol: Symbol, key: str) -> int:
        if symbol.nature in (RESISTANCE, INDUCTANCE):
            return -1
        if symbol.nature in (CAPACITANCE, CONDUCTANCE):
            return 1
        remedy = 'a transconductance or gain is left out with neglect = ["' + symbol.name + '"]'
        raise StageError(f"{key}: {symbol.name} is neither a resistance nor a reactance", remedy, key=key)

    def _other_capacitors(self) -> list[str]:
        text = self.raw["dominant_capacitor"]
        if not isinstance(text, str):
            raise StageError(
                f"dominant_capacitor = {text!r}", 'name one, such as "CL"', key="dominant_capacitor"
            )
        kept = self._named("dominant_capacitor", text)
        if len(kept) != 1 or kept[0].nature != CAPACITANCE:
            raise StageError(f"{text!r} is not one capacitor", 'name one, such as "CL"', key="dominant_capacitor")
        return [
            n for n, s in self.stage.symbols.items() if s.nature == CAPACITANCE and n != kept[0].name
        ]

    def _miller(self) -> tuple[Miller, ...]:
        if "miller" not in self.raw:
            return ()
        raw = self.raw["miller"]
        example = 'miller = { part = "CC", from = "g", to = "out", ends = "both" }'
        if not isinstance(raw, dict):
            raise StageError(f"miller = {raw!r}", f"write {example}", key="miller")
        unknown = [key for key in raw if key not in ("part", "from", "to", "ends")]
        missing = [key for key in ("part", "from", "to") if not isinstance(raw.get(key), str)]
        if unknown or missing:
            what = f"unknown key {unknown[0]!r}" if unknown else f"{missing[0]} is missing"
            raise StageError(what, f"write {example}", key="miller")
        if raw.get("ends", "both") not in ("both", "from"):
            raise StageError(f"ends = {raw['ends']!r}", 'ends is "both" or "from"', key="miller")
        symbols = self._named("miller", raw["part"])
        if len(symbols) != 1 or symbols[0].nature not in (RESISTANCE, CAPACITANCE, INDUCTANCE, CONDUCTANCE):
            raise StageError(f"{raw['part']!r} is not one bridging part", f"write {example}", key="miller")
        ends = bridge_nodes(self.stage, symbols[0])
        if {raw["from"], raw["to"]} != set(ends):
            raise StageError(
                f"{raw['part']} does not join {raw['from']} and {raw['to']}",
                f"it joins {ends[0]} and {ends[1]}",
                key="miller",
            )
        return (Miller(symbols[0].name, raw["from"], raw["to"], raw.get("ends", "both") == "both"),)

    def _pairs(self, name: str) -> tuple[Pair, ...]:
        if ("small" in self.raw) != ("against" in self.raw):
            lone = "small" if "small" in self.raw else "against"
            other = "against" if lone == "small" else "small"
            raise StageError(f"{lone} stands alone", f'say {other} what, such as {other} = ["gm"]', key=lone)
        small, against = self._products("small"), self._products("against")
        return tuple(Pair(x, y, name) for x in small for y in against)

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

    def _band(self) -> Fraction | None:
        if "band" not in self.raw:
            return None
        try:
            frequency = read_frequency(self.raw["band"])
        except InputError as error:
            raise error.at(key="band") from None
        if frequency <= 0:
            raise StageError(f"band = {self.raw['band']!r}", 'give a frequency above zero, such as "10 MHz"', key="band")
        return frequency


def bridge_nodes(stage: Stage, symbol: Symbol) -> tuple[str, str]:
    """The two nodes between which the element of a symbol stands."""
    part = stage.parts[symbol.part]
    for element in part.kind.elements:
        if element.parameter == symbol.parameter.name:
            a, b = element.terminals[:2]
            return _terminal(part, a), _terminal(part, b)
    raise KeyError(symbol.name)


def _terminal(part: Any, terminal: str) -> str:
    if terminal == "inner":
        return part.nodes[0] if "rx" not in part.parameters else f"{part.label}'s inner base"
    return "gnd" if terminal == "gnd" else str(part.nodes[part.kind.terminals.index(terminal)])


def _fractional(node: Node) -> bool:
    return isinstance(node, Power) and node.exponent.denominator != 1


def _unit_words(stage: Stage, name: str) -> str:
    return stage.symbols[name].unit or "no unit"


def _refuse_contradictions(stage: Stage, assumptions: Sequence[Assumption]) -> None:
    """What cannot stand together for some response: opposite limits, opposite dominance, two kinds of band."""
    for response in stage.asked:
        together = [a for a in assumptions if a.applies(response)]
        orders: dict[str, tuple[int, str]] = {}
        for assumption in together:
            for name, order in assumption.orders.items():
                before = orders.setdefault(name, (order, assumption.name))
                if before[0] != order:
                    raise _contradiction(
                        stage, assumptions, before[1], assumption.name, f"one takes {name} to zero, the other to infinity"
                    )
        bands = [a.name for a in together if a.band is not None]
        roots = [a.name for a in together if a.dominant_pole or a.poles_far_apart]
        if len(bands) > 1 or (bands and roots):
            second = bands[1] if len(bands) > 1 else roots[0]
            raise _contradiction(
                stage, assumptions, bands[0], second, "a band keeps one power of s, so no other step on roots can stand"
            )
        try:
            pool([pair for a in together for pair in a.pairs])
        except StageError as error:
            index = max(i for i, a in enumerate(assumptions) if repr(a.name) in error.problem)
            raise StageError(
                error.problem, error.remedy, **locate(stage, ("assumption", index))
            ) from None


def _contradiction(
    stage: Stage, assumptions: Sequence[Assumption], first: str, second: str, why: str
) -> StageError:
    index = [a.name for a in assumptions].index(second)
    return StageError(
        f"the assumptions {first!r} and {second!r} contradict one another: {why}",
        "keep one of them, or limit each to its responses with for = [...]",
        **locate(stage, ("assumption", index)),
    )
