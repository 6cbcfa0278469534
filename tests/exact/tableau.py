"""An independent solver for tests: the sparse tableau of a stage, written from its parts and nothing else.

Hachtel, Brayton, Gustavson, "The sparse tableau approach to network analysis and design", IEEE Trans. Circuit
Theory 18, 1971: unknowns are all node voltages, branch voltages and branch currents; equations are the two
laws of Kirchhoff and one law for each branch. It is solved in balls of 60 digits, so that the answer bounds
itself.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from fractions import Fraction
from typing import Any

from flint import acb, acb_mat, arb, ctx, fmpq

from symamp.circuit.stage import GROUND, Asked, Part, Stage

DIGITS = 60
Key = tuple[str, Any]
Law = dict[
    Key, tuple[Fraction, Fraction]
]  # unknown -> (constant, factor of s); the sum is the right-hand side


@contextmanager
def digits(count: int) -> Iterator[None]:
    """Balls of so many digits within the block."""
    before = ctx.dps
    ctx.dps = count
    try:
        yield
    finally:
        ctx.dps = before


class Tableau:
    """The tableau of a stage at exact values, driven as a response asks."""

    def __init__(self, stage: Stage, asked: Asked, values: Mapping[str, Fraction] | None = None) -> None:
        self.asked = asked
        self.values = stage.bias if values is None else values
        self.parts = {p.label: p for p in stage.parts.values() if p.label not in asked.without}
        self.ends: list[tuple[str, str]] = []
        self.laws: list[tuple[Law, Fraction]] = []
        self.branch: dict[str, int] = {}
        self.drive = dict(asked.drive)
        if asked.looking_source is not None:
            self.drive = {asked.looking_source: Fraction(1)}
        for part in sorted(
            self.parts.values(), key=lambda p: len(p.kind.terminals)
        ):  # what others read, first
            getattr(self, part.kind.name)(part)
        if asked.looking_into is not None:
            # 1 A is brought into the first node: inside the test source it flows from second to first.
            self.law({("i", self.new(asked.looking_into[1], asked.looking_into[0])): 1}, right=1)

    # Branches and laws

    def new(self, plus: str, minus: str) -> int:
        self.ends.append((plus, minus))
        return len(self.ends) - 1

    def law(
        self, constant: Mapping[Key, Any], with_s: Mapping[Key, Any] | None = None, right: Any = 0
    ) -> None:
        law: Law = {}
        for factors, place in ((constant, 0), (with_s or {}, 1)):
            for key, factor in factors.items():
                pair = list(law.get(key, (Fraction(0), Fraction(0))))
                pair[place] += Fraction(factor)
                law[key] = (pair[0], pair[1])
        self.laws.append((law, Fraction(right)))

    def sense(self, plus: str, minus: str) -> int:
        """A branch without current, whose voltage is read."""
        k = self.new(plus, minus)
        self.law({("i", k): 1})
        return k

    def own(self, part: Part) -> Fraction:
        return self.values[part.label]

    # Parts

    def resistor(self, part: Part) -> None:
        k = self.branch[part.label] = self.new(*part.nodes)
        self.law({("u", k): 1, ("i", k): -self.own(part)})

    def capacitor(self, part: Part) -> None:
        k = self.branch[part.label] = self.new(*part.nodes)
        self.law({("i", k): 1}, {("u", k): -self.own(part)})

    def inductor(self, part: Part) -> None:
        k = self.branch[part.label] = self.new(*part.nodes)
        self.law({("u", k): 1}, {("i", k): -self.own(part)})

    def voltage_source(self, part: Part) -> None:
        k = self.branch[part.label] = self.new(*part.nodes)
        self.law({("u", k): 1}, right=self.drive.get(part.label, 0))

    def current_source(self, part: Part) -> None:
        k = self.branch[part.label] = self.new(*part.nodes)
        self.law({("i", k): 1}, right=self.drive.get(part.label, 0))

    def vccs(self, part: Part) -> None:
        k, control = self.new(*part.nodes[:2]), self.sense(*part.nodes[2:])
        self.law({("i", k): 1, ("u", control): -self.own(part)})

    def vcvs(self, part: Part) -> None:
        k, control = self.new(*part.nodes[:2]), self.sense(*part.nodes[2:])
        self.law({("u", k): 1, ("u", control): -self.own(part)})

    def control(self, part: Part) -> int:
        if part.control is not None:
            return self.branch[part.control]
        k = self.new(*part.nodes[2:])
        self.law({("u", k): 1})
        return k

    def cccs(self, part: Part) -> None:
        k, control = self.new(*part.nodes[:2]), self.control(part)
        self.law({("i", k): 1, ("i", control): -self.own(part)})

    def ccvs(self, part: Part) -> None:
        k, control = self.new(*part.nodes[:2]), self.control(part)
        self.law({("u", k): 1, ("i", control): -self.own(part)})

    def opamp(self, part: Part) -> None:
        plus, minus, out = part.nodes
        k = self.new(plus, minus)
        self.law({("u", k): 1})
        self.law({("i", k): 1})
        self.new(out, GROUND)  # whatever voltage and current: no law

    def transformer(self, part: Part) -> None:
        """v1 = n·v2 and no power kept: v1·i1 + v2·i2 = 0, so that i2 = −n·i1."""
        first, second = self.new(*part.nodes[:2]), self.new(*part.nodes[2:])
        self.law({("u", first): 1, ("u", second): -self.own(part)})
        self.law({("i", second): 1, ("i", first): self.own(part)})

    def mosfet(self, part: Part) -> None:
        """i_d = gm·v_gs + gmb·v_bs + gds·v_ds, and five capacitances."""
        gate, drain, source, body = part.nodes
        self.channel(
            part, drain, source, {"gm": (gate, source), "gmb": (body, source), "gds": (drain, source)}
        )
        ends = {"cgs": (gate, source), "cgd": (gate, drain), "cgb": (gate, body)}
        self.capacitances(part, ends | {"cdb": (drain, body), "csb": (source, body)})

    def bjt(self, part: Part) -> None:
        """i_c = gm·v_π + go·v_ce, i_b = gpi·v_π, with v_π behind rx."""
        base, collector, emitter = part.nodes
        if "rx" in part.parameters:
            inner = f"{part.label} behind rx"
            k = self.new(base, inner)
            self.law({("u", k): 1, ("i", k): -self.values[part.symbol("rx")]})
            base = inner
        self.channel(part, collector, emitter, {"gm": (base, emitter), "go": (collector, emitter)})
        self.channel(part, base, emitter, {"gpi": (base, emitter)})
        ends = {"cpi": (base, emitter), "cmu": (base, collector), "ccs": (collector, GROUND)}
        self.capacitances(part, ends)

    def channel(self, part: Part, plus: str, minus: str, factors: Mapping[str, tuple[str, str]]) -> None:
        """A branch whose current is the sum of parameters times voltages."""
        k = self.new(plus, minus)
        sum_of: dict[Key, Any] = {("i", k): 1}
        for name, pair in factors.items():
            if name in part.parameters:
                sum_of["u", self.sense(*pair)] = -self.values[part.symbol(name)]
        self.law(sum_of)

    def capacitances(self, part: Part, ends: Mapping[str, tuple[str, str]]) -> None:
        for name, pair in ends.items():
            if name in part.parameters:
                k = self.new(*pair)
                self.law({("i", k): 1}, {("u", k): -self.values[part.symbol(name)]})

    # Solving

    def equations(self) -> Iterator[tuple[Law, Fraction]]:
        """Kirchhoff's current law at each node, his voltage law for each branch, and the branches' laws."""
        at: dict[str, Law] = {}
        for k, ends in enumerate(self.ends):
            for node, sign in zip(ends, (1, -1), strict=True):
                if node != GROUND:
                    law = at.setdefault(node, {})
                    before = law.get(("i", k), (Fraction(0), Fraction(0)))[0]
                    law["i", k] = (before + sign, Fraction(0))
        yield from ((law, Fraction(0)) for law in at.values())
        for k, (plus, minus) in enumerate(self.ends):
            law = {("u", k): (Fraction(1), Fraction(0))}
            for node, sign in ((plus, -1), (minus, 1)):
                if node != GROUND:
                    before = law.get(("v", node), (Fraction(0), Fraction(0)))[0]
                    law["v", node] = (before + sign, Fraction(0))
            yield law, Fraction(0)
        yield from self.laws

    def response(self, omega: Fraction) -> acb:
        """The response at s = j·omega, in a ball."""
        with digits(DIGITS):
            equations = list(self.equations())
            keys: dict[Key, int] = {}
            for law, _ in equations:
                for key in law:
                    keys.setdefault(key, len(keys))
            matrix, right = acb_mat(len(equations), len(keys)), acb_mat(len(equations), 1)
            for row, (law, value) in enumerate(equations):
                right[row, 0] = _ball(value)
                for key, (constant, factor) in law.items():
                    matrix[row, keys[key]] = acb(_ball(constant), _ball(factor * omega))
            solution = matrix.solve(right)
            return self.read({key: solution[place, 0] for key, place in keys.items()})

    def read(self, found: Mapping[Key, acb]) -> acb:
        asked = self.asked

        def voltage(pair: tuple[str, str]) -> acb:
            a, b = (acb(0) if node == GROUND else found["v", node] for node in pair)
            return a - b

        if asked.looking_into is not None:
            return voltage(asked.looking_into)
        if asked.looking_source is not None:
            part = self.parts[asked.looking_source]
            if part.kind.name == "voltage_source":
                return -1 / found["i", self.branch[part.label]]
            return voltage((part.nodes[1], part.nodes[0]))
        if asked.to_source is not None:
            return found["i", self.branch[asked.to_source]]
        assert asked.to is not None
        return voltage(asked.to) if asked.over is None else voltage(asked.to) / voltage(asked.over)


def _ball(value: Fraction) -> arb:
    return arb(fmpq(value.numerator, value.denominator))
