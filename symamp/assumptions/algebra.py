"""Formulas over ratios of polynomials: what a `set` assumption puts in a symbol's place."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.formula import Node, fold

PolyRatio = tuple[fmpz_mpoly, fmpz_mpoly]


def formula_ratio(stage: Stage, node: Node, rename: Mapping[str, str], context: fmpz_mpoly_ctx) -> PolyRatio:
    """A rational formula as a ratio of polynomials of a ring that has all its symbols, these renamed.

    The denominator is zero where the formula divides by zero.
    """
    return fold(node, Ratios(stage, rename, context))


class Ratios:
    """The algebra of formulas without pi and functions; see `symamp.formula_tree.Algebra`.

    `subtract`, `divide` and `parallel` are worked out through `add`, `multiply` and `negate`.
    """

    def __init__(self, stage: Stage, rename: Mapping[str, str], context: fmpz_mpoly_ctx) -> None:
        self._stage, self._rename, self._context = stage, rename, context
        self._generator = dict(zip(context.names(), context.gens(), strict=True))

    def number(self, value: Fraction, unit: str) -> PolyRatio:
        return self._context.constant(value.numerator), self._context.constant(value.denominator)

    def pi(self) -> PolyRatio:
        raise StageError("a set formula cannot hold pi")

    def name(self, text: str) -> PolyRatio:
        above = below = self._context.constant(1)
        for symbol, power in self._stage.aliases.get(text, {text: 1}).items():
            generator = self._generator[self._rename.get(symbol, symbol)]
            if power > 0:
                above = above * generator**power
            else:
                below = below * generator**-power
        return above, below

    def add(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return a[0] * b[1] + b[0] * a[1], a[1] * b[1]

    def subtract(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return self.add(a, self.negate(b))

    def multiply(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return a[0] * b[0], a[1] * b[1]

    def divide(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return self.multiply(a, b[::-1])

    def power(self, base: PolyRatio, exponent: Fraction) -> PolyRatio:
        whole = int(exponent)
        above, below = base if whole >= 0 else base[::-1]
        return above ** abs(whole), below ** abs(whole)

    def parallel(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return self.divide(self.multiply(a, b), self.add(a, b))

    def negate(self, a: PolyRatio) -> PolyRatio:
        return -a[0], a[1]

    def call(self, function: str, argument: PolyRatio) -> PolyRatio:
        raise StageError(f"a set formula cannot hold {function}")
