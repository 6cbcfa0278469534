"""A Hypothesis strategy for stages of any shape that have one solution (room: testing).

A tree of resistors joins all nodes to ground, so that nothing floats; a part that would close a loop of
voltage-defined branches is left out as it is drawn. What is singular all the same (an op amp that no feedback
reaches, a response that is zero) is drawn anew.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from hypothesis import assume
from hypothesis import strategies as st

from symamp.circuit.builder import StageBuilder
from symamp.circuit.kinds import KINDS
from symamp.circuit.near import propose
from symamp.circuit.stage import GROUND, Stage
from symamp.errors import StageError
from symamp.exact.derive import derive
from symamp.testing.bias_point import BiasPoint
from symamp.testing.printed import PrintedStage
from symamp.testing.strategies import sensible_points
from symamp.values import quoted, write_value

_DEVICES = ("mosfet", "bjt", "resistor", "capacitor")
_SOURCES = ("voltage_source", "current_source")
_LETTERS = {
    "resistor": "R", "capacitor": "C", "inductor": "L", "transformer": "T", "vccs": "G", "vcvs": "E",
    "cccs": "F", "ccvs": "H", "opamp": "OA", "voltage_source": "V", "current_source": "I", "mosfet": "M",
    "bjt": "Q",
}  # fmt: skip
_FIRST_BJT = 51  # M1 and Q1 would both have a gm1
_CAPACITANCES = {"mosfet": ("cgs", "cgd", "cgb", "cdb", "csb"), "bjt": ("cpi", "cmu", "ccs")}

_Values = Mapping[str, str]  # by symbol, with unit
_Call = Callable[[StageBuilder, _Values], None]


def random_stages(
    max_nodes: int = 5, max_parts: int = 6, devices: Sequence[str] = _DEVICES
) -> st.SearchStrategy[Stage]:
    """Random stages with sensible bias values and one response called "gain" or "impedance".

    `max_nodes` counts the nodes beside ground, at least 2; `max_parts` the parts beside the drive and a tree of
    resistors; `devices` are the kinds of part among them, named as the sections of a stage file (all kinds but
    the sources may stand there).

        @given(random_stages(devices=["mosfet", "capacitor"]))
        def test_poles_are_as_many_as_b_says(stage):
            ...

    A stage is plain data; `random_stages().map(symamp.Stage)` gives stages that answer. Each is one that a stage
    file could say, its network has one solution, and its response is neither zero nor infinite. Shrinks to few
    nodes and parts. Raises StageError for an unknown kind.
    """
    for kind in devices:
        if kind not in KINDS or kind in _SOURCES:
            known = [name for name in KINDS if name not in _SOURCES]
            raise StageError(f"no kind of part is called {quoted(kind)}", propose(kind, known, "kinds"))
    return _stages(max(2, max_nodes), max(1, max_parts), tuple(devices))


@st.composite
def _stages(draw: st.DrawFn, max_nodes: int, max_parts: int, devices: tuple[str, ...]) -> Stage:
    sketch = _Sketch(draw, draw(st.integers(2, max_nodes)))
    for _ in range(draw(st.integers(1, max_parts))):
        sketch.add(draw(st.sampled_from(devices)))
    sketch.respond()
    try:
        plain = sketch.stage({})
    except StageError:  # a shorted pair, a loop, an island: refused as it is read
        assume(False)
    point: BiasPoint = draw(sensible_points(plain))
    stage = sketch.stage({n: write_value(x, plain.symbols[n].unit) for n, x in point.exact().items()})
    try:
        response = derive(stage, next(iter(stage.asked.values())))
    except StageError:  # zero, infinite or without a unique solution whatever the values
        assume(False)
    numerator, denominator = response.exact_coefficients
    assume(numerator != 0 and denominator != 0)  # nor at this bias point
    return stage


@dataclass
class _Sketch:
    """A stage while it is being drawn: its parts as calls of the builder, to be made with values at hand."""

    draw: st.DrawFn
    count: int
    calls: list[_Call] = field(default_factory=list)
    labels: dict[str, list[str]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.nodes = [GROUND, *(f"n{k}" for k in range(1, self.count + 1))]
        self.rigid = {name: name for name in self.nodes}  # union-find over voltage-defined branches
        self.add_drive()
        for k in range(1, self.count + 1):
            self.two("resistor", (self.nodes[k], self.nodes[self.index(k)]))

    def stage(self, values: _Values) -> Stage:
        """The stage; a symbol without a value gets 1 in SI units."""
        builder = StageBuilder("random")
        for call in self.calls:
            call(builder, values)
        return PrintedStage.of(builder.stage())

    # What is drawn

    def index(self, count: int) -> int:
        return self.draw(st.integers(0, count - 1))

    def node(self) -> str:
        return self.nodes[self.index(len(self.nodes))]

    def pair(self) -> tuple[str, str]:
        """Two nodes that differ; simplest a node and ground."""
        second = self.index(len(self.nodes))
        first = self.index(len(self.nodes) - 1)
        return self.nodes[first + (first >= second)], self.nodes[second]

    def label(self, kind: str) -> str:
        known = self.labels.setdefault(kind, [])
        known.append(f"{_LETTERS[kind]}{len(known) + (_FIRST_BJT if kind == 'bjt' else 1)}")
        return known[-1]

    def joins(self, *pairs: tuple[str, str]) -> bool:
        """Join the pairs as voltage-defined branches; False, and nothing done, where that closes a loop."""
        before = dict(self.rigid)
        for a, b in pairs:
            if self.root(a) == self.root(b):
                self.rigid = before
                return False
            self.rigid[self.root(a)] = self.root(b)
        return True

    def root(self, name: str) -> str:
        while self.rigid[name] != name:
            name = self.rigid[name]
        return name

    # Parts

    def add(self, kind: str) -> None:
        if kind in ("resistor", "capacitor", "inductor"):
            self.two(kind, self.pair())
        elif kind in _CAPACITANCES:
            self.device(kind)
        elif kind == "opamp":
            self.opamp()
        else:
            self.controlled(kind)

    def add_drive(self) -> None:
        """A source from ground to the first node."""
        kind = self.draw(st.sampled_from(_SOURCES))
        pair = (self.nodes[1], GROUND)
        if kind == "voltage_source":
            self.joins(pair)
        self.two(kind, pair)

    def two(self, kind: str, pair: tuple[str, str]) -> None:
        label = self.label(kind)
        if kind in _SOURCES:
            self.calls.append(lambda b, v: getattr(b, kind)(label, *pair))
        else:
            self.calls.append(lambda b, v: getattr(b, kind)(label, *pair, v.get(label, 1)))

    def device(self, kind: str) -> None:
        terminals = KINDS[kind].terminals
        above, below = self.pair()  # the two between which its current flows
        places = dict(zip(terminals, (self.node(), above, below), strict=False))
        if kind == "mosfet":
            places["body"] = self.draw(st.sampled_from((GROUND, below, *self.nodes[1:])))
        names = list(KINDS[kind].default_parameters)
        extra = {"mosfet": "gmb", "bjt": "rx"}[kind]
        names += [extra] if self.draw(st.booleans()) else []
        names += _CAPACITANCES[kind] if self.draw(st.booleans()) else ()
        label = self.label(kind)

        def call(builder: StageBuilder, values: _Values) -> None:
            bias: dict[str, Any] = {name: values.get(f"{name}{label[1:]}", 1) for name in names}
            getattr(builder, kind)(label, **places, **bias)

        self.calls.append(call)

    def controlled(self, kind: str) -> None:
        """A controlled source or a transformer; none where it would close a loop."""
        out, control = self.pair(), self.pair()
        branches = {"transformer": (out, control), "vcvs": (out,), "ccvs": (out, control), "cccs": (control,)}
        if not self.joins(*branches.get(kind, ())):
            return
        label = self.label(kind)
        ends = ("primary", "secondary") if kind == "transformer" else ("out", "control")
        pairs = dict(zip(ends, (out, control), strict=True))
        self.calls.append(lambda b, v: getattr(b, kind)(label, **pairs, value=v.get(label, 1)))

    def opamp(self) -> None:
        plus, minus = self.pair()
        out = self.nodes[1 + self.index(len(self.nodes) - 1)]
        if out not in (plus, minus) and self.joins((plus, minus), (out, GROUND)):
            label = self.label("opamp")
            self.calls.append(lambda b, v: b.opamp(label, plus=plus, minus=minus, out=out))

    # The response

    def respond(self) -> None:
        (drive,) = (label for kind in _SOURCES for label in self.labels.get(kind, ()))
        node = self.nodes[-1 - self.index(len(self.nodes) - 1)]
        if self.draw(st.integers(0, 3)) == 3:
            self.calls.append(lambda b, v: b.response("impedance", looking_into=node))
        else:
            self.calls.append(lambda b, v: b.response("gain", source=drive, to=node))
