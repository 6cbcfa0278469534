"""The plain data of assumptions: what each step is asked to do. Nothing here computes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

from symamp.formula import Node

Powers = Mapping[str, Fraction]  # a product of symbols: their exponents


@dataclass(frozen=True)
class Miller:
    """Bridge `symbol` from node `start` to node `end` becomes a part at each end, or at `start` alone."""

    symbol: str
    start: str
    end: str
    both: bool


@dataclass(frozen=True)
class Pair:
    """One vector of dominance and the assumption it comes from: small / against as exponents of symbols."""

    small: Powers
    against: Powers
    assumption: str

    @cached_property
    def difference(self) -> dict[str, Fraction]:
        """exponents(small) − exponents(against), zeros left out."""
        total = {name: Fraction(power) for name, power in self.small.items()}
        for name, power in self.against.items():
            total[name] = total.get(name, Fraction(0)) - power
        return {name: power for name, power in total.items() if power}

    @cached_property
    def key(self) -> frozenset[tuple[str, Fraction]]:
        """The vector."""
        return frozenset(self.difference.items())


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
