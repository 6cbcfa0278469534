"""The plain data of a stage: parts, responses asked for, bias, span, and assumptions as they were written.

Everything here is frozen and says what it means; nothing here computes a response.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from symamp.circuit.kinds import Kind, Parameter

GROUND = "gnd"


@dataclass(frozen=True)
class Part:
    """A part: its kind, label and nodes, in the order of `kind.terminals`.

    For cccs and ccvs `nodes` holds the two out nodes and, where the control is an ammeter, its two nodes;
    else `control` is the label of the two-terminal part whose current controls it. `parameters` are the bare
    names that this part has: all of a kind with one, those that the bias gives of a device.
    """

    kind: Kind
    label: str
    nodes: tuple[str, ...]
    parameters: tuple[str, ...] = ()
    control: str | None = None

    def symbol(self, parameter: str) -> str:
        """The symbol of a bare parameter name: `gm1`, `gm_tail`, or the label itself."""
        if not self.kind.prefixed:
            return self.label
        rest = self.label[1:]
        return f"{parameter}{rest}" if rest[:1].isdigit() else f"{parameter}_{rest}"


@dataclass(frozen=True)
class Symbol:
    """A small-signal parameter of a part, with its unit ("S", "ohm", "F", "H", "")."""

    name: str
    part: str
    parameter: Parameter

    @property
    def unit(self) -> str:
        return self.parameter.unit

    @property
    def nature(self) -> str:
        return self.parameter.nature


@dataclass(frozen=True)
class Asked:
    """A response that is asked for.

    Either a ratio: `drive` {source: weight}, and `to` a pair of nodes or `to_source` a voltage source's label
    (its current, plus to minus), `over` a pair of nodes or None for the drive itself. Or an impedance:
    `looking_into` a pair of nodes, or `looking_source` a source's label.
    """

    name: str
    drive: Mapping[str, Fraction] = field(default_factory=dict)
    to: tuple[str, str] | None = None
    to_source: str | None = None
    over: tuple[str, str] | None = None
    looking_into: tuple[str, str] | None = None
    looking_source: str | None = None
    without: tuple[str, ...] = ()


@dataclass(frozen=True)
class Side:
    """A side of the box: what is varied, from `low` to `high`, and how it sets its symbol.

    The symbol's value is value**exponent times the product of the `times` symbols to their exponents: a side
    on `ro1` sets gds1 = ro1**−1; one on `beta1` sets gpi1 = beta1**−1 · gm1.
    """

    name: str
    low: Fraction
    high: Fraction
    unit: str
    symbol: str
    exponent: int = 1
    times: Mapping[str, int] = field(default_factory=dict)


@dataclass(frozen=True)
class Follow:
    """A symbol that keeps its bias ratio to another: symbol = ratio · leader."""

    symbol: str
    leader: str
    ratio: Fraction


@dataclass(frozen=True)
class Table:
    """A table of bias points: symbols as columns, one bias point a row (values in SI units)."""

    path: str
    columns: tuple[str, ...]
    rows: tuple[tuple[Fraction, ...], ...]


@dataclass(frozen=True)
class Span:
    """The set of bias points: a box (sides and followers) or a table; all empty where none is given."""

    sides: tuple[Side, ...] = ()
    follows: tuple[Follow, ...] = ()
    table: Table | None = None

    @property
    def empty(self) -> bool:
        return not self.sides and not self.follows and self.table is None


@dataclass(frozen=True)
class Stage:
    """A stage, read and checked: every node, label, unit and selector in it means something.

    `symbols` are in the order of the parts and of each kind's parameters. `bias` lacks a symbol that has no
    value. `aliases` maps `ro1` to {"gds1": −1}. `assumptions` and `claims` are the tables as written; the
    assumptions are read by `symamp.assumptions`. `lines` maps a dotted path (("bias", "M1", "gm")) to its line.
    """

    title: str
    parts: Mapping[str, Part]
    asked: Mapping[str, Asked]
    symbols: Mapping[str, Symbol]
    aliases: Mapping[str, Mapping[str, int]]
    bias: Mapping[str, Fraction]
    span: Span = Span()
    assumptions: tuple[Mapping[str, Any], ...] = ()
    claims: tuple[Mapping[str, Any], ...] = ()
    file: str | None = None
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    source: bytes | None = field(default=None, repr=False, compare=False)
