"""The claimed formula (room: judge): its unit, its ratio of polynomials where it is one, its sign."""

from __future__ import annotations

from fractions import Fraction
from math import comb

from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.assumptions.algebra import Ratios
from symamp.assumptions.merge import Pooled, base_symbols
from symamp.circuit.labels import unit_of
from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import lowest_terms, ring_of, with_pi
from symamp.formula import Dimension, Node, dimension_of, dimension_of_unit, fold, parse
from symamp.judge.balance import PI

_MOST_TERMS = 4000  # terms up to which a formula is multiplied out
_PLAIN = Pooled()


def claimed_dimension(stage: Stage, node: Node) -> Dimension:
    """The dimension of a claimed formula. Raises ReadError where it joins unlike units."""
    return dimension_of(node, lambda name: unit_of(stage, name))


def wanted_dimension(quantity: Quantity, unit: str, response_unit: str, decibels: bool) -> Dimension:
    """The dimension that a formula of the quantity must have; `unit` is the quantity's own.

    Of a quantity in dB whose formula is not in dB it is that of the response.
    """
    if quantity.face == "db" and not decibels:
        return dimension_of_unit(response_unit)
    if in_decibels_or_degrees(quantity):
        return Dimension()
    return _dimension_of_text(unit)


def _dimension_of_text(unit: str) -> Dimension:
    """Of a unit as it is printed: "ohm·s^2", "1/s", "S/s^2"."""
    if unit in ("", "rad/s"):
        return dimension_of_unit(unit)
    return dimension_of(parse(unit.replace("·", "*")), str)


class NotRational(Exception):
    """A formula that is no ratio of polynomials, or too large a one; its words say which."""


def claims_ring(stage: Stage, names: set[str]) -> fmpz_mpoly_ctx:
    """The ring in which claims are compared: pi, which is written first, and these symbols."""
    return with_pi(ring_of(stage.symbols, names - {PI}))


def claimed_symbols(stage: Stage, node: Node, ask: Pooled = _PLAIN) -> set[str]:
    """The symbols that a formula holds, aliases resolved, after a set of `equal` and `set` assumptions."""
    found = set(base_symbols(stage, node, ask.rename))
    for name, formula in ask.replace.items():  # each before those whose targets it holds
        if name in found:
            found.update(base_symbols(stage, formula, ask.rename))
    return found


def claimed_ratio(stage: Stage, node: Node, context: fmpz_mpoly_ctx, ask: Pooled = _PLAIN) -> PolyRatio:
    """The formula in lowest terms, its symbols renamed and replaced as `ask` says. Raises NotRational."""
    ratio = fold(node, _Claimed(stage, context, ask, frozenset()))
    if ratio[1].is_zero():
        raise NotRational("the formula divides by zero")
    return lowest_terms(*ratio)


class _Claimed(Ratios):
    """The algebra of claims: with pi, roots and abs where these are rational, and no larger than is worth it."""

    def __init__(self, stage: Stage, context: fmpz_mpoly_ctx, ask: Pooled, done: frozenset[str]) -> None:
        super().__init__(stage, ask.rename, context)
        self._ask, self._done = ask, done

    def pi(self) -> PolyRatio:
        return self._generator[PI], self._context.constant(1)

    def name(self, text: str) -> PolyRatio:
        found = self._context.constant(1), self._context.constant(1)
        for symbol, power in self._stage.aliases.get(text, {text: 1}).items():
            name = self._rename.get(symbol, symbol)
            if name in self._ask.replace and name not in self._done:
                inner = _Claimed(self._stage, self._context, self._ask, self._done | {name})
                one: PolyRatio = fold(self._ask.replace[name], inner)
            else:
                one = self._generator[name], self._context.constant(1)
            found = self.multiply(found, self.power(one, Fraction(power)))
        return found

    def add(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        if a[1] == b[1]:
            return a[0] + b[0], a[1]
        return self._tidy(_product(a[0], b[1]) + _product(b[0], a[1]), _product(a[1], b[1]))

    def multiply(self, a: PolyRatio, b: PolyRatio) -> PolyRatio:
        return _product(a[0], b[0]), _product(a[1], b[1])

    def power(self, base: PolyRatio, exponent: Fraction) -> PolyRatio:
        if exponent.denominator == 2:
            base, exponent = self.call("sqrt", base), 2 * exponent
        if exponent.denominator != 1:
            raise NotRational("the formula holds a root")
        whole = abs(exponent.numerator)
        for polynomial in base:
            if comb(len(polynomial) + whole - 1, whole) > _MOST_TERMS:
                raise NotRational("the formula is too large to be multiplied out")
        above, below = base if exponent >= 0 else base[::-1]
        return above**whole, below**whole

    def call(self, function: str, argument: PolyRatio) -> PolyRatio:
        above, below = self._tidy(*argument)
        if function == "abs":
            sign = sign_of(self._stage, above) * sign_of(self._stage, below)
            if sign or above.is_zero():
                return above * (sign or 1), below
            raise NotRational("the sign of what stands in abs() depends on the values")
        roots = [_square_root(polynomial) for polynomial in (above, below)]
        if roots[0] is None or roots[1] is None:
            raise NotRational("the formula holds a root")
        above, below = roots[0], roots[1]
        if not above.is_zero() and not (sign_of(self._stage, above) and sign_of(self._stage, below)):
            raise NotRational("the formula holds a root whose sign depends on the values")
        return above, below

    def _tidy(self, above: fmpz_mpoly, below: fmpz_mpoly) -> PolyRatio:
        if below.is_zero():
            raise NotRational("the formula divides by zero")
        return lowest_terms(above, below)


def _product(a: fmpz_mpoly, b: fmpz_mpoly) -> fmpz_mpoly:
    if len(a) * len(b) > 16 * _MOST_TERMS:
        raise NotRational("the formula is too large to be multiplied out")
    return a * b


def _square_root(polynomial: fmpz_mpoly) -> fmpz_mpoly | None:
    """The polynomial whose square it is, the one with most terms positive, or None."""
    if polynomial.is_zero():
        return polynomial
    content, factors = polynomial.factor()
    root = polynomial.context().constant(1)
    number = int(content)
    whole = int(number**0.5 + 0.5) if number > 0 else 0
    if whole * whole != number or any(power % 2 for _, power in factors):
        return None
    for factor, power in factors:
        root = root * factor ** (int(power) // 2)
    signs = {1 if c > 0 else -1 for c in root.coeffs()}
    return root * whole * signs.pop() if len(signs) == 1 else None


def sign_of(stage: Stage, polynomial: fmpz_mpoly) -> int:
    """+1 or −1 where the polynomial has that sign whatever the values, else 0."""
    names = polynomial.context().names()
    for name, degree in zip(names, polynomial.degrees(), strict=True):
        if degree > 0 and name in stage.symbols and stage.symbols[name].parameter.may_be_negative:
            return 0
    signs = {1 if c > 0 else -1 for c in polynomial.coeffs()}
    return signs.pop() if len(signs) == 1 else 0
