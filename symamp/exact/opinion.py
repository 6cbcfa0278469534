"""A second opinion on a response: the same network solved by lcapy, at random rational values, s a symbol.

The two derivations share the parts' meaning and nothing else: this one is built from the parts, not from the
nodal matrix, in elements with numbers for names. At the values drawn, both must be the same rational function
of s exactly. That no difference shows at random values has a probability of some degree/values where the
two are not identically equal (Schwartz 1980, Zippel 1979).
"""

from __future__ import annotations

import json
import os
import random
import subprocess
import sys
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any

from flint import fmpq, fmpq_poly

from symamp.circuit.stage import GROUND, Asked, Part, Stage
from symamp.errors import MissingLibraryError, SymampError
from symamp.exact.derive import derive
from symamp.exact.forms import Expanded, Nested

_DRAWS = 5  # how often new values are drawn where the old ones make a denominator zero
_GREATEST = 97  # numerators and denominators of the values drawn


@dataclass(frozen=True)
class Opinion:
    """Whether the two derivations agree; None where there was no second one, `words` says why.

    `ours` and `theirs` are the response as a rational function of s at `values`, as text ("" where there is
    none); `seconds` is what the other side took.
    """

    agrees: bool | None
    ours: str
    theirs: str
    values: Mapping[str, Fraction]
    seconds: float
    words: str


def second_opinion(stage: Stage, asked: Asked, *, seed: int = 1, timeout: float = 60.0) -> Opinion:
    """Derive a response a second time, by lcapy, and compare exactly. `timeout` is in seconds.

    Raises MissingLibraryError where lcapy is not installed, and what `derive` raises.
    """
    form = derive(stage, asked).form
    values, ours = drawn_values(stage, form, seed)
    network = network_of(stage, asked, values)
    start = time.monotonic()
    try:
        answer = ask([network], timeout)[0]
    except subprocess.TimeoutExpired:
        answer = {"error": f"no answer within {timeout:g} s: the network is too large for it"}
    seconds = time.monotonic() - start
    if "error" in answer:
        words = f"no second opinion: {answer['error']}"
        return Opinion(None, rational_text(*ours), "", values, seconds, words)
    theirs = network.ratio(answer["voltages"])
    agrees = same(ours, theirs)
    words = "both derivations agree exactly" if agrees else "the two derivations differ"
    return Opinion(agrees, rational_text(*ours), rational_text(*theirs), values, seconds, words)


Rational = tuple[fmpq_poly, fmpq_poly]  # numerator and denominator in s


def drawn_values(stage: Stage, form: Expanded | Nested, seed: int) -> tuple[dict[str, Fraction], Rational]:
    """Random rationals for all symbols, and the form's numerator and denominator at them."""
    draw = random.Random(seed)
    for _ in range(_DRAWS):
        values = {name: _number(draw, s.parameter.may_be_negative) for name, s in stage.symbols.items()}
        numerator, denominator = form.exact_coefficients(values)
        if denominator != 0:
            return values, (numerator, denominator)
    raise SymampError("the response's denominator is zero at every value drawn")


def _number(draw: random.Random, may_be_negative: bool) -> Fraction:
    value = Fraction(draw.randint(1, _GREATEST), draw.randint(1, _GREATEST))
    return -value if may_be_negative and draw.random() < 0.5 else value


def same(ours: Rational, theirs: Rational) -> bool:
    """Whether two rational functions are equal."""
    return bool(ours[0] * theirs[1] == theirs[0] * ours[1])


def rational_text(numerator: fmpq_poly, denominator: fmpq_poly) -> str:
    """The function in lowest terms, the denominator's lowest coefficient that is not zero made 1."""
    common = numerator.gcd(denominator)
    numerator, denominator = numerator / common, denominator / common
    lowest = next(c for c in denominator.coeffs() if c != 0)
    return f"({_polynomial_text(numerator / lowest)})/({_polynomial_text(denominator / lowest)})"


def _polynomial_text(polynomial: fmpq_poly) -> str:
    terms = [
        f"{coefficient}" + ("" if power == 0 else "*s" if power == 1 else f"*s^{power}")
        for power, coefficient in enumerate(polynomial.coeffs())
        if coefficient != 0
    ]
    return " + ".join(terms).replace("+ -", "- ") or "0"


@dataclass
class Network:
    """A network of numbered nodes and elements for the other side, and which voltages make the response.

    The response is V(top)/V(bottom) · sign, each a difference of two nodes; `bottom` None is a drive of 1.
    """

    elements: list[dict[str, Any]] = field(default_factory=list)
    top: tuple[int, int] | None = None
    bottom: tuple[int, int] | None = None
    sign: int = 1

    @property
    def read(self) -> list[int]:
        """The nodes whose voltages are wanted."""
        return [*(self.top or ()), *(self.bottom or ())]

    def ratio(self, voltages: Sequence[Sequence[Sequence[str]]]) -> Rational:
        """The response from the voltages of the nodes in `read`."""
        pairs = [tuple(fmpq_poly([_fmpq(c) for c in side]) for side in both) for both in voltages]
        one = fmpq_poly([1])
        top = _difference(pairs[0], pairs[1]) if self.top else (one, one)
        bottom = _difference(*pairs[-2:]) if self.bottom else (one, one)
        return top[0] * bottom[1] * self.sign, top[1] * bottom[0]


def _fmpq(text: str) -> fmpq:
    value = Fraction(text)
    return fmpq(value.numerator, value.denominator)


def _difference(first: Any, second: Any) -> Rational:
    return first[0] * second[1] - second[0] * first[1], first[1] * second[1]


def ask(networks: Sequence[Network], timeout: float) -> list[dict[str, Any]]:
    """The other side's answers. Raises MissingLibraryError, SymampError, and TimeoutExpired of subprocess."""
    question = {"networks": [{"elements": n.elements, "read": n.read} for n in networks]}
    # -P: a file of the working folder that is called like a library is not to be imported.
    command = [sys.executable, "-P", "-m", "symamp.exact.opinion_worker"]
    above = str(Path(__file__).resolve().parents[2])
    paths = [above, *filter(None, [os.environ.get("PYTHONPATH")])]
    done = subprocess.run(
        command,
        input=json.dumps(question),
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=timeout,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(paths)},
        check=False,
    )
    if done.returncode != 0:
        last = done.stderr.strip().splitlines()[-1:] or ["no word"]
        raise SymampError(f"the second derivation broke off: {last[0]}")
    reply = json.loads(done.stdout)
    if "missing" in reply:
        raise MissingLibraryError('a second opinion needs lcapy: pip install "symamp[second-opinion]"')
    return list(reply["answers"])


def network_of(stage: Stage, asked: Asked, values: Mapping[str, Fraction]) -> Network:
    """The stage at the values given, driven and read as the response asks."""
    return _Builder(stage, asked, values).build()


class _Builder:
    """Writes the parts out as elements.

    A current that is read, by a controlled source or by the response, flows through a source of 0 V in series
    with the part's first node. lcapy's G and I bring their current *into* their first node.
    """

    def __init__(self, stage: Stage, asked: Asked, values: Mapping[str, Fraction]) -> None:
        self.asked, self.values = asked, values
        self.parts = [part for part in stage.parts.values() if part.label not in asked.without]
        self.network = Network()
        self.numbers = {GROUND: 0}
        self.meters: dict[str, int] = {}  # label of a part whose current is read -> number of its 0 V source
        self.drive = dict(asked.drive)
        if asked.looking_source is not None:
            self.drive = {asked.looking_source: Fraction(1)}

    def build(self) -> Network:
        wanted = {self.asked.to_source, self.asked.looking_source}
        read = {part.control for part in self.parts} | wanted
        for part in self.parts:  # those that others read come first
            if len(part.kind.terminals) == 2:
                self.two_terminal(part, metered=part.label in read)
        for part in self.parts:
            if len(part.kind.terminals) > 2:
                getattr(self, part.kind.name)(part)
        self.respond()
        return self.network

    # Nodes and elements

    def node(self, name: str) -> int:
        return self.numbers.setdefault(name, len(self.numbers))

    def fresh(self) -> int:
        return self.node(f"fresh {len(self.numbers)}")  # no node of a stage has a space in its name

    def add(self, what: str, nodes: Sequence[int], value: Fraction | int, control: int | None = None) -> int:
        element: dict[str, Any] = {"what": what, "nodes": list(nodes), "value": str(Fraction(value))}
        if control is not None:
            element["control"] = control
        self.network.elements.append(element)
        return len(self.network.elements) - 1

    def value(self, part: Part, parameter: str) -> Fraction:
        return self.values[part.symbol(parameter)]

    # Parts

    def two_terminal(self, part: Part, metered: bool) -> None:
        plus, minus = (self.node(name) for name in part.nodes)
        if metered:
            inner = self.fresh()
            self.meters[part.label] = self.add("V", (plus, inner), 0)
            plus = inner
        weight = self.drive.get(part.label, Fraction(0))
        match part.kind.name:
            case "current_source":
                self.add("I", (minus, plus), weight)
            case "voltage_source":
                self.add("V", (plus, minus), weight)
            case name:
                letter = {"resistor": "R", "capacitor": "C", "inductor": "L"}[name]
                self.add(letter, (plus, minus), self.values[part.label])

    def vccs(self, part: Part) -> None:
        plus, minus, *control = (self.node(name) for name in part.nodes)
        self.add("G", (minus, plus, *control), self.values[part.label])

    def vcvs(self, part: Part) -> None:
        self.add("E", [self.node(name) for name in part.nodes], self.values[part.label])

    def cccs(self, part: Part) -> None:
        out = [self.node(name) for name in part.nodes[:2]]
        self.add("F", out, self.values[part.label], self.meter(part))

    def ccvs(self, part: Part) -> None:
        out = [self.node(name) for name in part.nodes[:2]]
        self.add("H", out, self.values[part.label], self.meter(part))

    def meter(self, part: Part) -> int:
        """The 0 V source through which a part's control current flows."""
        if part.control is not None:
            return self.meters[part.control]
        return self.add("V", [self.node(name) for name in part.nodes[2:]], 0)

    def opamp(self, part: Part) -> None:
        """0 V between the inputs; what current that takes is led round them and comes out of the output."""
        plus, minus, out = (self.node(name) for name in part.nodes)
        short = self.add("V", (plus, minus), 0)
        self.add("F", (minus, plus), 1, short)
        self.add("F", (out, 0), 1, short)

    def transformer(self, part: Part) -> None:
        self.add("TF", [self.node(name) for name in part.nodes], self.values[part.label])

    def mosfet(self, part: Part) -> None:
        gate, drain, source, body = (self.node(name) for name in part.nodes)
        self.transconductance(part, "gm", drain, source, gate)
        self.transconductance(part, "gmb", drain, source, body)
        self.conductance(part, "gds", drain, source)
        self.capacitance(part, "cgs", gate, source)
        self.capacitance(part, "cgd", gate, drain)
        self.capacitance(part, "cgb", gate, body)
        self.capacitance(part, "cdb", drain, body)
        self.capacitance(part, "csb", source, body)

    def bjt(self, part: Part) -> None:
        base, collector, emitter = (self.node(name) for name in part.nodes)
        if "rx" in part.parameters:
            inner = self.fresh()
            self.add("R", (base, inner), self.value(part, "rx"))
            base = inner
        self.transconductance(part, "gm", collector, emitter, base)
        self.conductance(part, "gpi", base, emitter)
        self.conductance(part, "go", collector, emitter)
        self.capacitance(part, "cpi", base, emitter)
        self.capacitance(part, "cmu", base, collector)
        self.capacitance(part, "ccs", collector, 0)

    def transconductance(self, part: Part, name: str, drain: int, source: int, gate: int) -> None:
        """A current from drain to source, set by the voltage from gate to source."""
        if name in part.parameters:
            self.add("G", (source, drain, gate, source), self.value(part, name))

    def conductance(self, part: Part, name: str, a: int, b: int) -> None:
        if name in part.parameters:
            self.add("R", (a, b), 1 / self.value(part, name))

    def capacitance(self, part: Part, name: str, a: int, b: int) -> None:
        if name in part.parameters:
            self.add("C", (a, b), self.value(part, name))

    # The response

    def respond(self) -> None:
        asked, network = self.asked, self.network
        if asked.looking_into is not None:
            a, b = (self.node(name) for name in asked.looking_into)
            self.add("I", (a, b), 1)
            network.top = (a, b)
        elif asked.looking_source is not None:
            self.look_from(next(part for part in self.parts if part.label == asked.looking_source))
        elif asked.to_source is not None:
            network.top = (self.current(asked.to_source), 0)
        else:
            assert asked.to is not None
            network.top = (self.node(asked.to[0]), self.node(asked.to[1]))
            if asked.over is not None:
                network.bottom = (self.node(asked.over[0]), self.node(asked.over[1]))

    def look_from(self, source: Part) -> None:
        """The impedance that a source sees: 1 V over the current it sends, or the voltage that 1 A meets."""
        network = self.network
        if source.kind.name == "voltage_source":
            network.bottom, network.sign = (self.current(source.label), 0), -1
        else:
            network.top = (self.node(source.nodes[1]), self.node(source.nodes[0]))

    def current(self, label: str) -> int:
        """A node whose voltage is the current of a part, from its first node to its second."""
        probe = self.fresh()
        self.add("H", (probe, 0), 1, self.meters[label])
        return probe
