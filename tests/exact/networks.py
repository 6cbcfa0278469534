"""Hypothesis strategies for random stages that have a solution: every kind of part, every form of response.

A tree of resistors joins all nodes to ground, so that nothing floats; a part that would close a loop of
voltage-defined branches is left out as it is drawn. What is singular all the same (an op amp that no feedback
reaches) is for the test to discard.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

from hypothesis import reject
from hypothesis import strategies as st

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import GROUND, Stage
from symamp.errors import StageError

RESPONSE = "asked"

# Ranges of values as powers of ten: what an integrated stage, its test bench and its discrete parts hold.
_DECADES = {
    "ohm": (1, 5),
    "S": (-5, -2),
    "F": (-14, -10),
    "H": (-9, -5),
    "": (-1, 1),
}
KINDS = (
    "resistor", "capacitor", "inductor", "transformer", "vccs", "vcvs", "cccs", "ccvs", "opamp",
    "voltage_source", "current_source", "mosfet", "bjt",
)  # fmt: skip
_MOSFET_CAPACITANCES = ("cgs", "cgd", "cgb", "cdb", "csb")
_BJT_CAPACITANCES = ("cpi", "cmu", "ccs")


@st.composite
def values(draw: st.DrawFn, unit: str, signed: bool = False) -> float:
    """A value of two digits within the unit's decades."""
    low, high = _DECADES[unit]
    value = draw(st.integers(10, 99)) * 10.0 ** (draw(st.integers(low, high)) - 1)
    # By way of text, so that the float is the decimal nearest to it and not 4.1000000000000003e-3.
    return float(f"{-value if signed and draw(st.booleans()) else value:.3g}")


@st.composite
def stages(draw: st.DrawFn, most_nodes: int = 5, most_parts: int = 7, kinds: Sequence[str] = KINDS) -> Stage:
    """A random stage with a value for each symbol and one response, called `asked`."""
    network = _Network(draw, draw(st.integers(3, most_nodes)))
    for _ in range(draw(st.integers(2, most_parts))):
        network.add(draw(st.sampled_from(tuple(kinds))))
    network.respond()
    try:
        return network.builder.stage()
    except StageError:  # a shorted pair, a loop, an island: refused as it is read
        reject()


class _Network:
    """A stage while it is being drawn."""

    def __init__(self, draw: st.DrawFn, count: int) -> None:
        self.draw = draw
        self.builder = StageBuilder("random")
        self.nodes = [GROUND, *(f"n{k}" for k in range(1, count + 1))]
        self.rigid = {name: name for name in self.nodes}  # union-find over voltage-defined branches
        self.labels: dict[str, list[str]] = {}
        for k, name in enumerate(self.nodes[1:], start=1):
            other = k - 1 if draw(st.booleans()) else self.index(k)
            self.builder.resistor(self.label("R", "resistor"), name, self.nodes[other], self.value("ohm"))
        drive = draw(st.sampled_from(("voltage_source", "current_source")))
        while drive not in self.labels:
            self.add(drive)

    def index(self, count: int) -> int:
        return self.draw(st.integers(0, count - 1))

    def label(self, letters: str, kind: str) -> str:
        known = self.labels.setdefault(kind, [])
        # Bipolar transistors count from 51: M1 and Q1 would both have a gm1.
        known.append(f"{letters}{len(known) + (51 if letters == 'Q' else 1)}")
        return known[-1]

    def value(self, unit: str, signed: bool = False) -> float:
        return self.draw(values(unit, signed))

    def node(self) -> str:
        return self.nodes[self.index(len(self.nodes))]

    def pair(self) -> tuple[str, str]:
        """Two nodes that differ."""
        first = self.index(len(self.nodes))
        second = self.index(len(self.nodes) - 1)
        return self.nodes[first], self.nodes[second + (second >= first)]

    def root(self, name: str) -> str:
        while self.rigid[name] != name:
            name = self.rigid[name]
        return name

    def joins(self, *pairs: tuple[str, str]) -> bool:
        """Join the pairs as voltage-defined branches; False, and nothing done, where that closes a loop."""
        before = dict(self.rigid)
        for a, b in pairs:
            if self.root(a) == self.root(b):
                self.rigid = before
                return False
            self.rigid[self.root(a)] = self.root(b)
        return True

    def add(self, kind: str) -> None:
        getattr(self, f"add_{kind}")()

    def add_resistor(self) -> None:
        self.builder.resistor(self.label("R", "resistor"), *self.pair(), self.value("ohm"))

    def add_capacitor(self) -> None:
        self.builder.capacitor(self.label("C", "capacitor"), *self.pair(), self.value("F"))

    def add_inductor(self) -> None:
        self.builder.inductor(self.label("L", "inductor"), *self.pair(), self.value("H"))

    def add_voltage_source(self) -> None:
        pair = self.pair()
        if self.joins(pair):
            self.builder.voltage_source(self.label("V", "voltage_source"), *pair)

    def add_current_source(self) -> None:
        self.builder.current_source(self.label("I", "current_source"), *self.pair())

    def add_transformer(self) -> None:
        primary, secondary = self.pair(), self.pair()
        if self.joins(primary, secondary):
            label = self.label("T", "transformer")
            self.builder.transformer(label, primary=primary, secondary=secondary, value=self.value("", True))

    def add_vccs(self) -> None:
        out, control = self.pair(), self.pair()
        self.builder.vccs(self.label("G", "vccs"), out=out, control=control, value=self.value("S", True))

    def add_vcvs(self) -> None:
        out, control = self.pair(), self.pair()
        if self.joins(out):
            self.builder.vcvs(self.label("E", "vcvs"), out=out, control=control, value=self.value("", True))

    def control(self) -> str | tuple[str, str]:
        """What reads the current: a part by its name, or an ammeter between two nodes."""
        kinds = ("resistor", "capacitor", "inductor", "voltage_source", "current_source")
        labels = [label for kind in kinds for label in self.labels.get(kind, ())]
        pair = self.pair()
        if self.draw(st.booleans()) and self.joins(pair):
            return pair
        return self.draw(st.sampled_from(labels))

    def add_cccs(self) -> None:
        control, out = self.control(), self.pair()
        self.builder.cccs(self.label("F", "cccs"), out=out, control=control, value=self.value("", True))

    def add_ccvs(self) -> None:
        control, out = self.control(), self.pair()
        if self.joins(out):
            value = float(f"{100 * self.value('', True):.3g}")
            self.builder.ccvs(self.label("H", "ccvs"), out=out, control=control, value=value)

    def add_opamp(self) -> None:
        plus, minus = self.pair()
        out = self.nodes[1 + self.index(len(self.nodes) - 1)]
        if out not in (plus, minus) and self.joins((plus, minus), (out, GROUND)):
            self.builder.opamp(self.label("OA", "opamp"), plus=plus, minus=minus, out=out)

    def add_mosfet(self) -> None:
        gate, drain, source, body = (self.node() for _ in range(4))
        bias: dict[str, Any] = {"gm": self.value("S"), "gds": self.value("S")}
        if self.draw(st.booleans()):
            bias["gmb"] = self.value("S")
        bias |= self.capacitances(_MOSFET_CAPACITANCES)
        label = self.label("M", "mosfet")
        self.builder.mosfet(label, gate=gate, drain=drain, source=source, body=body, **bias)

    def add_bjt(self) -> None:
        base, collector, emitter = (self.node() for _ in range(3))
        bias: dict[str, Any] = {name: self.value("S") for name in ("gm", "gpi", "go")}
        if self.draw(st.booleans()):
            bias["rx"] = self.value("ohm")
        bias |= self.capacitances(_BJT_CAPACITANCES)
        self.builder.bjt(self.label("Q", "bjt"), base=base, collector=collector, emitter=emitter, **bias)

    def capacitances(self, names: tuple[str, ...]) -> dict[str, Any]:
        """All of them, or none."""
        return {name: self.value("F") for name in names} if self.draw(st.booleans()) else {}

    # The response

    def respond(self) -> None:
        """Ask for one response; parts that it does not stand on may be taken off."""
        sources = [*self.labels.get("voltage_source", ()), *self.labels.get("current_source", ())]
        if self.draw(st.integers(0, 3)) == 0:
            place: str | tuple[str, str] = self.draw(st.sampled_from([*self.nodes[1:], *sources, "pair"]))
            place = self.pair() if place == "pair" else place
            kept = {place} if isinstance(place, str) else set()
            self.builder.response(RESPONSE, looking_into=place, without=self.without(kept))
            return
        drive = self.drives()
        to, over = self.output()
        kept = {*drive, *({to} if isinstance(to, str) else set())}
        weights: Any = next(iter(drive)) if set(drive.values()) == {1} and len(drive) == 1 else drive
        self.builder.response(RESPONSE, source=weights, to=to, over=over, without=self.without(kept))

    def drives(self) -> dict[str, Any]:
        """One source, or two of a kind with weights."""
        kinds = [kind for kind in ("voltage_source", "current_source") if kind in self.labels]
        labels = self.labels[self.draw(st.sampled_from(kinds))]
        chosen = self.draw(st.lists(st.sampled_from(labels), min_size=1, max_size=2, unique=True))
        if len(chosen) == 1:
            return {chosen[0]: 1}
        weights = st.sampled_from(
            (Fraction(1, 2), Fraction(-1, 2), Fraction(1), Fraction(-2), Fraction(3, 8))
        )
        return {label: self.draw(weights) for label in chosen}

    def output(self) -> tuple[str | tuple[str, str], str | tuple[str, str] | None]:
        """What is read, and over which voltage if any."""
        form = self.draw(st.sampled_from(("node", "pair", "over", "current")))
        if form == "current" and "voltage_source" in self.labels:
            return self.draw(st.sampled_from(self.labels["voltage_source"])), None
        node = self.draw(st.sampled_from(self.nodes[1:]))
        if form == "over":
            return node, self.pair()
        return (self.pair() if form == "pair" else node), None

    def without(self, kept: set[str]) -> list[str]:
        """Now and then one part that is taken off first."""
        labels = [label for known in self.labels.values() for label in known if label not in kept]
        if not labels or self.draw(st.integers(0, 4)):
            return []
        return [self.draw(st.sampled_from(labels))]
