"""Room `circuit`: the responses that a stage file asks for."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from typing import Any

from symamp.circuit.near import propose
from symamp.circuit.partlist import read_node, read_pair
from symamp.circuit.place import Path, Place
from symamp.circuit.stage import GROUND, Asked, Part
from symamp.values import quoted, read_value

Pair = tuple[str, str]

SOURCES = ("voltage_source", "current_source")

_RATIO = ("from", "to", "over", "without")
_IMPEDANCE = ("looking_into", "without")
_EXAMPLE = 'write { from = "VIN", to = "out" } or { looking_into = "out" }'


def read_responses(data: Mapping[str, Any], parts: Mapping[str, Part], place: Place) -> dict[str, Asked]:
    """The responses by name, in file order. `data` is the stage file's top table.

    Raises StageError where there is none, and for unknown sources, nodes, parts and keys.
    """
    table = data.get("response")
    if table is not None and not isinstance(table, dict):
        raise place.error(
            ("response",), "response is no section", "write it as [response] with responses below"
        )
    if not table:
        raise place.error(
            ("response",),
            "the stage asks for no response",
            'add [response] and gain = { from = "VIN", to = "out" }',
        )
    return {name: _Reader(name, parts, place).read(raw) for name, raw in table.items()}


class _Reader:
    """Reads one response; holds what its messages need."""

    def __init__(self, name: str, parts: Mapping[str, Part], place: Place) -> None:
        self.name, self.parts, self.place = name, parts, place
        self.path: Path = ("response", name)
        self.nodes = dict.fromkeys((*(node for part in parts.values() for node in part.nodes), GROUND))
        self.sources = [part.label for part in parts.values() if part.kind.name in SOURCES]

    def read(self, raw: object) -> Asked:
        if not self.name or not self.name.isprintable() or set(self.name) & set(" .,()[]\u00a0"):
            raise self.error(
                (), f"{quoted(self.name)} is no name for a response", "use letters, digits and _"
            )
        if not isinstance(raw, dict):
            raise self.error((), f"{quoted(raw)} asks for no response", _EXAMPLE)
        known = _IMPEDANCE if "looking_into" in raw else _RATIO
        for key in raw:
            if key not in known:
                self.refuse_key(key, known)
        without = self.without(raw.get("without", []))
        return self.impedance(raw, without) if "looking_into" in raw else self.ratio(raw, without)

    def ratio(self, raw: Mapping[str, Any], without: tuple[str, ...]) -> Asked:
        for key in ("from", "to"):
            if key not in raw:
                raise self.error((), f"response {self.name} has no {quoted(key)}", _EXAMPLE)
        drive = self.drive(raw["from"])
        self.keep(drive, without, "from")
        over = self.voltage(raw["over"], "over") if "over" in raw else None
        source = self.source_named(raw["to"], "to")
        if source is None:
            return Asked(self.name, drive, to=self.voltage(raw["to"], "to"), over=over, without=without)
        if self.parts[source].kind.name != "voltage_source":
            raise self.error(
                ("to",),
                f"{source} is a current source, whose current is given",
                "name a node or a voltage source",
            )
        if over is not None:
            raise self.error(
                ("over",), "over goes with a node voltage, and to is a current", "leave over out"
            )
        self.keep([source], without, "to")
        return Asked(self.name, drive, to_source=source, without=without)

    def impedance(self, raw: Mapping[str, Any], without: tuple[str, ...]) -> Asked:
        source = self.source_named(raw["looking_into"], "looking_into")
        if source is None:
            pair = self.voltage(raw["looking_into"], "looking_into")
            return Asked(self.name, looking_into=pair, without=without)
        self.keep([source], without, "looking_into")
        return Asked(self.name, looking_source=source, without=without)

    def drive(self, raw: object) -> dict[str, Fraction]:
        """The sources and their weights; one source alone has weight 1."""
        if isinstance(raw, str):
            self.check_source(raw, ("from",))
            return {raw: Fraction(1)}
        if not isinstance(raw, dict) or not raw:
            raise self.error(
                ("from",),
                f"{quoted(raw)} is no drive",
                'name a source, "VIN", or several, { VP = 0.5, VN = -0.5 }',
            )
        drive = {}
        for label, weight in raw.items():
            self.check_source(label, ("from", label))
            with self.place.at((*self.path, "from", label)):
                drive[label] = read_value(weight, "")
        if not any(drive.values()):
            raise self.error(("from",), "all weights are 0", "give a source that drives a weight such as 1")
        if len({self.parts[label].kind.name for label in drive}) > 1:
            raise self.error(
                ("from",),
                "voltage and current sources drive together, which have no common unit",
                "use one kind",
            )
        return drive

    def check_source(self, label: str, below: Path) -> None:
        if label in self.sources:
            return
        if label in self.parts:
            what = self.parts[label].kind.name.replace("_", " ")
            problem = f"{label} is a {what}, and only voltage and current sources drive"
        else:
            problem = f"no source is called {quoted(label)}"
        raise self.error(below, problem, propose(label, self.sources, "sources"))

    def source_named(self, raw: object, key: str) -> str | None:
        """The source that text names, None where it names a node."""
        if not isinstance(raw, str) or raw not in self.sources:
            return None
        if raw in self.nodes:
            raise self.error(
                (key,),
                f"{raw} is both a node and a source",
                f'rename one, or write the pair ["{raw}", "gnd"]',
            )
        return raw

    def voltage(self, raw: object, key: str) -> Pair:
        """A node against gnd, or a pair of nodes that differ."""
        path = (*self.path, key)
        if isinstance(raw, list):
            pair = read_pair(raw, path, self.place, "of the pair")
        elif isinstance(raw, str):
            pair = (read_node(raw, path, self.place), GROUND)
        else:
            raise self.error((key,), f"{quoted(raw)} is no node and no pair", 'write "out" or ["out", "x"]')
        for index, node in enumerate(pair):
            if node not in self.nodes:
                below: Path = (key, index) if isinstance(raw, list) else (key,)
                known = [*self.nodes, *self.sources] if key != "over" else self.nodes
                raise self.error(below, f"no part joins a node {quoted(node)}", propose(node, known, "nodes"))
        if pair[0] == pair[1]:
            what = "gnd against itself" if pair[0] == GROUND else f"{pair[0]} against itself"
            raise self.error((key,), f"the voltage of {what} is 0", "name a node, or two that differ")
        return pair

    def without(self, raw: object) -> tuple[str, ...]:
        if not isinstance(raw, list):
            raise self.error(("without",), f"{quoted(raw)} is no list of parts", 'write without = ["RL"]')
        for index, label in enumerate(raw):
            if not isinstance(label, str) or label not in self.parts:
                proposal = propose(str(label), self.parts, "parts")
                raise self.error(("without", index), f"no part is called {quoted(label)}", proposal)
        return tuple(dict.fromkeys(raw))

    def keep(self, needed: Iterable[str], without: tuple[str, ...], key: str) -> None:
        for label in needed:
            if label in without:
                raise self.error(
                    ("without",),
                    f"{label} is taken off and stands in {quoted(key)}",
                    f"leave {label} in place",
                )

    def refuse_key(self, key: str, known: tuple[str, ...]) -> None:
        if key in _RATIO and known == _IMPEDANCE:
            raise self.error((key,), f"looking_into and {key} do not go together", _EXAMPLE)
        everything = (*_RATIO, "looking_into")
        raise self.error((key,), f"a response has no key {quoted(key)}", propose(key, everything, "keys"))

    def error(self, below: Path, problem: str, remedy: str) -> Exception:
        return self.place.error((*self.path, *below), problem, remedy)
