"""What the catalogue looks at in a stage: what stands where, and what it is worth at the bias (room: assumptions)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import isfinite, pi
from typing import Any

import numpy as np

from symamp.assumptions.table import bridge_nodes
from symamp.circuit.kinds import CAPACITANCE
from symamp.circuit.stage import GROUND, Part, Stage
from symamp.exact.response import Response
from symamp.exact.system import System, build_system, terminal_node

Table = dict[str, Any]
Ends = tuple[str, str]


@dataclass(frozen=True)
class Proposal:
    """A table that may be an entry, and the ratio that it takes to be small where its own pairs do not say it."""

    table: Table
    ratio: float | None = None
    why: str = ""


@dataclass(frozen=True)
class Transconductor:
    """What turns a voltage into a current: control node, the node common to both sides, and output node."""

    label: str
    symbol: str
    control: str
    common: str
    out: str


@dataclass(frozen=True)
class Resistance:
    """A resistance between two nodes: a resistor, or a device's ro or rpi; `text` names it in a stage file."""

    text: str
    ends: Ends
    owner: str

    def meets(self, node: str) -> bool:
        return node in self.ends and node != GROUND


@dataclass(frozen=True)
class View:
    """A stage, the symbols that matter, and what the catalogue asks of them."""

    stage: Stage
    concerned: frozenset[str]
    exact: Response | None = None
    without: tuple[str, ...] = ()

    @classmethod
    def of(cls, stage: Stage, exact: Response | None) -> View:
        names = set(stage.symbols) if exact is None else set(exact.form.symbols)
        concerned = frozenset(name for name in names if stage.bias.get(name) != 0)
        return cls(stage, concerned, exact, exact.asked.without if exact else ())

    @cached_property
    def parts(self) -> tuple[Part, ...]:
        """The parts that have a symbol that matters, in stage order."""
        return tuple(
            p for p in self.stage.parts.values() if not self.concerned.isdisjoint(self.symbols_of(p.label))
        )

    @cached_property
    def devices(self) -> tuple[Part, ...]:
        return tuple(part for part in self.parts if part.kind.prefixed)

    def symbols_of(self, label: str) -> tuple[str, ...]:
        part = self.stage.parts[label]
        return tuple(part.symbol(parameter) for parameter in part.parameters)

    def has(self, part: Part, parameter: str) -> bool:
        """Whether a part has a parameter that matters."""
        return parameter in part.parameters and part.symbol(parameter) in self.concerned

    @cached_property
    def transconductors(self) -> tuple[Transconductor, ...]:
        found = []
        for part in self.parts:
            if part.kind.name == "vccs":
                out, low, control, _ = part.nodes
                found.append(Transconductor(part.label, part.label, control, low, out))
            elif self.has(part, "gm"):
                element = next(e for e in part.kind.elements if e.parameter == "gm")
                out, common, control = (terminal_node(part, t) for t in element.terminals[:3])
                found.append(Transconductor(part.label, part.symbol("gm"), control, common, out))
        return tuple(found)

    @cached_property
    def resistances(self) -> tuple[Resistance, ...]:
        found = []
        for part in self.parts:
            if part.kind.name == "resistor":
                found.append(Resistance(part.label, _two(part.nodes), part.label))
            for alias, powers in part.kind.aliases.items():
                if len(powers) == 1 and self.has(part, next(iter(powers))):
                    symbol = self.stage.symbols[part.symbol(next(iter(powers)))]
                    found.append(Resistance(part.symbol(alias), bridge_nodes(self.stage, symbol), part.label))
        return tuple(found)

    @cached_property
    def resistors(self) -> tuple[Resistance, ...]:
        return tuple(r for r in self.resistances if r.text == r.owner)

    @cached_property
    def capacitances(self) -> dict[str, Ends]:
        """The capacitances with their nodes: first those that are parts of their own."""
        found = {
            name: bridge_nodes(self.stage, symbol)
            for name, symbol in self.stage.symbols.items()
            if symbol.nature == CAPACITANCE and name in self.concerned
        }
        return dict(sorted(found.items(), key=lambda item: not self.own(item[0])))

    @cached_property
    def shorts(self) -> frozenset[str]:
        """Nodes that are at signal ground, or that a voltage source holds against it."""
        held = {GROUND}
        for part in self.stage.parts.values():
            if part.kind.name == "voltage_source" and GROUND in part.nodes:
                held.update(part.nodes)
        return frozenset(held)

    def own(self, symbol: str) -> bool:
        """Whether a symbol is a part's own label."""
        return self.stage.symbols[symbol].part == symbol

    def value(self, name: str) -> float | None:
        """The size of a symbol or alias of one symbol at the bias point; None where it is not given, or 0."""
        return self.product({n: Fraction(p) for n, p in self.stage.aliases.get(name, {name: 1}).items()})

    def product(self, powers: Mapping[str, Fraction]) -> float | None:
        """The size of a product of symbols at the bias point; None where one has no value or is 0."""
        total = 1.0
        for name, power in powers.items():
            value = abs(float(self.stage.bias.get(name, 0)))
            if not value:
                return None
            total *= value ** float(power)
        return total

    def beside(self, ends: Ends, resistance: float | None) -> float | None:
        """The size of the impedance that stands beside a resistance between two nodes, all sources at rest.

        In ohm, where the response peaks (at s = 0 without one); None where values are missing.
        """
        if resistance is None or self._middle is None:
            return None
        seen = self._impedance(self._middle, ends)
        if seen is None:
            return None
        left = 1 / seen - 1 / resistance if seen else 0
        return float(abs(1 / left)) if left else (float("inf") if seen else 0.0)

    def reactance_over(self, name: str) -> float | None:
        """|Z| of a capacitance over that of what stands in series with it, where the response peaks; infinite at DC."""
        value = self.value(name)
        if value is None or self._middle is None or self.peak is None:
            return None
        if not self.peak:
            return float("inf")
        own, seen = 1 / (2j * pi * self.peak * value), self._impedance(self._middle, self.capacitances[name])
        if not seen or 1 / seen == 1 / own:
            return None if seen is None else float("inf")
        return float(abs(own * (1 / seen - 1 / own)))

    @cached_property
    def peak(self) -> float | None:
        """The frequency in Hz at which the response is largest; None where it is not known."""
        if self.exact is None or self.exact.missing or not self.exact.expanded:
            return None
        with np.errstate(all="ignore"):
            found = float(np.real(self.exact.bias_figures.peak_frequency[0]))
        return found if isfinite(found) else None

    @cached_property
    def time_constants(self) -> dict[str, float]:
        """The open-circuit time constant of each capacitance, as far as it has one, in seconds."""
        found = {}
        for name, ends in self.capacitances.items():
            seen, value = (
                (None if self._rest is None else self._impedance(self._rest, ends)),
                self.value(name),
            )
            if seen is not None and value is not None and isfinite(abs(seen)):
                found[name] = abs(seen) * value
        return found

    @cached_property
    def _rest(self) -> tuple[System, np.ndarray] | None:
        return self._inverse(0.0)

    @cached_property
    def _middle(self) -> tuple[System, np.ndarray] | None:
        return self._inverse(self.peak) if self.peak else self._rest

    def _inverse(self, hertz: float) -> tuple[System, np.ndarray] | None:
        """The inverse of the nodal matrix at a frequency; None where a value is missing or the matrix is singular."""
        system = build_system(self.stage, self.without)
        if any(name not in self.stage.bias for name in system.symbols):
            return None
        matrix = np.zeros((system.size, system.size), dtype=complex)
        for row, cells in enumerate(system.rows):
            for column, entry in cells.items():
                for coefficient, symbol, power, s_power in entry:
                    value = complex(coefficient)
                    if symbol is not None:
                        size = float(self.stage.bias[symbol])
                        if not size and power < 0:
                            return None
                        value *= size**power
                    matrix[row, column] += value * (2j * pi * hertz) ** s_power
        scale = np.abs(matrix).max(axis=1, keepdims=True, initial=0.0)
        if not scale.all():
            return None
        try:
            inverse = np.linalg.inv(matrix / scale) / scale.T
        except np.linalg.LinAlgError:
            return None
        return (system, inverse) if np.isfinite(inverse).all() else None

    @staticmethod
    def _impedance(solved: tuple[System, np.ndarray], ends: Ends) -> complex | None:
        """The impedance between two nodes; None where a node is not there."""
        system, inverse = solved
        pick = np.zeros(system.size)
        for node, sign in zip(ends, (1.0, -1.0), strict=True):
            if node != GROUND:
                if node not in system.node:
                    return None
                pick[system.node[node]] += sign
        return complex(pick @ inverse @ pick)


def over(small: float | None, large: float | None) -> float | None:
    """Their ratio; None where one is not known."""
    if small is None or large is None:
        return None
    return small / large if large else float("inf")


def is_small(small: str | Sequence[str], against: str | Sequence[str], name: str = "") -> Proposal:
    """The table "small against"."""
    left, right = ([side] if isinstance(side, str) else list(side) for side in (small, against))
    words = (
        name
        or f"{' and '.join(left)} {'is' if len(left) == 1 else 'are'} small against {' and '.join(right)}"
    )
    return Proposal({"name": words, "small": left, "against": right})


def _two(nodes: Sequence[str]) -> Ends:
    return nodes[0], nodes[1]
