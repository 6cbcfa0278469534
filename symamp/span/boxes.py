"""Room `span`: the box of a span as proofs see it: exact ends, and every symbol as a product of powers of its sides.

A symbol that follows another, or that an alias sets, is a product of sides and so keeps its dependence: nothing is
taken to vary by itself that does not. What does not vary is the exact bias value.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cached_property
from math import comb, lcm, sqrt

from flint import Ordering, fmpq, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Side, Stage

Interval = tuple[Fraction, Fraction]
# An interval whose upper end is more than that many times its lower one is split at the geometric mean.
_WIDE, _WIDEST = 4, 10**60


class NoProof(Exception):
    """Nothing can be proved about this over this box; the text says why."""


@dataclass(frozen=True)
class Varied:
    """What varies along a side of the box, from `low` to `high`."""

    name: str
    low: Fraction
    high: Fraction

    def __post_init__(self) -> None:
        if self.low > self.high:
            raise ValueError(f"the ends of {self.name} are reversed")

    @property
    def fixed(self) -> bool:
        """Whether both ends are the same."""
        return self.low == self.high

    @property
    def origin(self) -> Fraction:
        """The value at which the side's coordinate is 0."""
        return self.low if self.low < 0 < self.high else Fraction(0)

    @property
    def direction(self) -> int:
        """−1 where the coordinate grows as the value falls."""
        return -1 if self.low < 0 and self.high <= 0 else 1

    @property
    def interval(self) -> Interval:
        """The ends of the coordinate t ≥ 0: the value is `origin + direction·t`."""
        ends = sorted(self.direction * (end - self.origin) for end in (self.low, self.high))
        return ends[0], ends[1]


@dataclass(frozen=True)
class Product:
    """A factor times integer powers of the sides' values, one a side."""

    factor: Fraction
    powers: tuple[int, ...]

    def times(self, other: Product, power: int = 1) -> Product:
        """self · other**power."""
        powers = tuple(a + power * b for a, b in zip(self.powers, other.powers, strict=True))
        return Product(self.factor * other.factor**power, powers)

    def value(self, at: Sequence[Fraction]) -> Fraction:
        """The value where the sides have these values."""
        value = self.factor
        for side, power in zip(at, self.powers, strict=True):
            if power:
                value *= side**power
        return value


@dataclass(frozen=True)
class ProofBox:
    """A box: its sides, and the symbols that have a value as products of them."""

    sides: tuple[Varied, ...]
    symbols: Mapping[str, Product] = field(repr=False)

    @classmethod
    def of(cls, stage: Stage) -> ProofBox:
        """The box of a stage's span. ValueError where the span is a table, whose rows are all looked at anyhow."""
        if stage.span.table is not None:
            raise ValueError("a table is no box")
        sides = tuple(Varied(side.name, side.low, side.high) for side in stage.span.sides)
        return cls(sides, _Reader(stage).symbols())

    @classmethod
    def between(
        cls, sides: Mapping[str, tuple[Fraction | int, Fraction | int]], **fixed: Fraction | int
    ) -> ProofBox:
        """A box whose sides are the symbols themselves, with other symbols at fixed values."""
        varied = tuple(Varied(name, Fraction(low), Fraction(high)) for name, (low, high) in sides.items())
        symbols = {
            side.name: Product(Fraction(1), tuple(int(i == j) for j in range(len(varied))))
            for i, side in enumerate(varied)
        }
        none = (0,) * len(varied)
        return cls(varied, symbols | {name: Product(Fraction(value), none) for name, value in fixed.items()})

    def with_side(self, name: str, low: Fraction, high: Fraction) -> ProofBox:
        """The box with a side more, which is a symbol of its own, such as a frequency."""
        symbols = {known: replace(p, powers=(*p.powers, 0)) for known, p in self.symbols.items()}
        symbols[name] = Product(Fraction(1), (*(0 for _ in self.sides), 1))
        return ProofBox((*self.sides, Varied(name, low, high)), symbols)

    def halves(self, i: int) -> tuple[ProofBox, ProofBox]:
        """Both parts of the box split along side i: at the geometric mean, about, of a wide side above 0."""
        side = self.sides[i]
        middle = side.low + (side.high - side.low) * split_part(side.low, side.high)
        return tuple(  # type: ignore[return-value]
            ProofBox((*self.sides[:i], Varied(side.name, *ends), *self.sides[i + 1 :]), self.symbols)
            for ends in ((side.low, middle), (middle, side.high))
        )

    @cached_property
    def domain(self) -> tuple[Interval, ...]:
        """The intervals of the coordinates, one a side, none below 0."""
        return tuple(side.interval for side in self.sides)

    @cached_property
    def ring(self) -> fmpz_mpoly_ctx:
        """The ring over the coordinates of the sides, x0, x1, …; of a box without sides it has an idle x0."""
        return fmpz_mpoly_ctx.get(tuple(f"x{i}" for i in range(max(1, len(self.sides)))), Ordering.lex)

    def side_values(self, coordinates: Sequence[Fraction]) -> dict[str, Fraction]:
        """{side: value} at a point given by its coordinates."""
        return {s.name: s.origin + s.direction * t for s, t in zip(self.sides, coordinates, strict=True)}

    def symbol_values(self, at: Mapping[str, Fraction]) -> dict[str, Fraction]:
        """{symbol: value}, of varied and fixed symbols, where the sides have the values `at`."""
        values = [at[side.name] for side in self.sides]
        return {name: product.value(values) for name, product in self.symbols.items()}

    def polynomials(self, polynomials: Sequence[fmpz_mpoly]) -> tuple[fmpz_mpoly, ...]:
        """The same polynomials in the coordinates of the sides, all of them times one positive factor.

        NoProof where a symbol has no value, or is a negative power of a side that reaches 0.
        """
        rows = [self._substituted(polynomial) for polynomial in polynomials]
        lift = [
            max(0, -min((exponents[i] for row in rows for exponents in row), default=0))
            for i in range(len(self.sides))
        ]
        for side, power in zip(self.sides, lift, strict=True):
            if power and side.low <= 0 <= side.high:
                raise NoProof(f"a symbol is a power of {side.name} that has no value where {side.name} is 0")
        rows = [_in_coordinates(row, self.sides, lift) for row in rows]
        common = lcm(*(int(c.q) for row in rows for c in row.values()))
        idle = () if self.sides else (0,)
        return tuple(
            self.ring.from_dict({(*e, *idle): (c * common).p for e, c in row.items()}) for row in rows
        )

    def _substituted(self, polynomial: fmpz_mpoly) -> dict[tuple[int, ...], fmpq]:
        """{powers of the sides' values: coefficient}, with fixed sides put in."""
        names = polynomial.context().names()
        known: dict[tuple[int, int], tuple[fmpq, tuple[int, ...]]] = {}
        total: dict[tuple[int, ...], fmpq] = {}
        for exponents, coefficient in polynomial.terms():
            value, powers = fmpq(coefficient), [0] * len(self.sides)
            for i, exponent in enumerate(exponents):
                if not exponent:
                    continue
                key = i, int(exponent)
                if key not in known:
                    known[key] = self._power(names[i], int(exponent))
                factor, raised = known[key]
                value *= factor
                powers = [a + b for a, b in zip(powers, raised, strict=True)]
            place = tuple(powers)
            total[place] = total.get(place, fmpq(0)) + value
        return {powers: value for powers, value in total.items() if value}

    def _power(self, name: str, exponent: int) -> tuple[fmpq, tuple[int, ...]]:
        if name not in self.symbols:
            raise NoProof(f"{name} has no value")
        product = self.symbols[name]
        factor, powers = product.factor**exponent, []
        for side, power in zip(self.sides, product.powers, strict=True):
            if side.fixed and power:
                if not side.low and power < 0:
                    raise NoProof(f"{name} has no value where {side.name} is 0")
                factor *= side.low ** (power * exponent)
            powers.append(0 if side.fixed else power * exponent)
        return fmpq(factor.numerator, factor.denominator), tuple(powers)


def split_part(low: Fraction, high: Fraction) -> Fraction:
    """At which part of its width an interval is split: in the middle, of a wide one near the geometric mean."""
    if low <= 0 or high < _WIDE * low:
        return Fraction(1, 2)
    part = 1 / (1 + sqrt(min(Fraction(_WIDEST), high / low)))
    scale = 1
    while part * scale < 64:
        scale *= 2
    return Fraction(round(part * scale), scale)


def _in_coordinates(
    row: Mapping[tuple[int, ...], fmpq], sides: Sequence[Varied], lift: Sequence[int]
) -> dict[tuple[int, ...], fmpq]:
    """From powers of values, times Π coordinate**lift, to powers of coordinates."""
    current = {
        tuple(e + up for e, up in zip(exponents, lift, strict=True)): c for exponents, c in row.items()
    }
    for i, side in enumerate(sides):
        if side.direction < 0:
            # value**n = (−t)**n, and what it is lifted by is a power of t
            current = {e: -c if (e[i] - lift[i]) % 2 else c for e, c in current.items()}
        if side.origin:
            current = _shifted(current, i, fmpq(side.origin.numerator, side.origin.denominator))
    return current


def _shifted(row: Mapping[tuple[int, ...], fmpq], i: int, origin: fmpq) -> dict[tuple[int, ...], fmpq]:
    """With origin + t in the place of generator i."""
    total: dict[tuple[int, ...], fmpq] = {}
    for exponents, coefficient in row.items():
        for k in range(exponents[i] + 1):
            place = (*exponents[:i], k, *exponents[i + 1 :])
            part = coefficient * comb(exponents[i], k) * origin ** (exponents[i] - k)
            total[place] = total.get(place, fmpq(0)) + part
    return {exponents: value for exponents, value in total.items() if value}


class _Reader:
    """Each symbol of a stage as a product of the sides of its span."""

    def __init__(self, stage: Stage) -> None:
        self._stage = stage
        self._sides: dict[str, tuple[int, Side]] = {s.symbol: (i, s) for i, s in enumerate(stage.span.sides)}
        self._follows = {f.symbol: f for f in stage.span.follows}
        self._known: dict[str, Product] = {}

    def symbols(self) -> dict[str, Product]:
        names = {*self._stage.bias, *self._sides, *self._follows}
        return {name: self._product(name) for name in self._stage.symbols if name in names}

    def _product(self, name: str) -> Product:
        if name not in self._known:
            self._known[name] = self._work_out(name)
        return self._known[name]

    def _work_out(self, name: str) -> Product:
        none = (0,) * len(self._sides)
        if name in self._sides:
            place, side = self._sides[name]
            powers = tuple(side.exponent if i == place else 0 for i in range(len(none)))
            product = Product(Fraction(1), powers)
            for other, power in side.times.items():
                product = product.times(self._product(other), power)
            return product
        if name in self._follows:
            follow = self._follows[name]
            return Product(follow.ratio, none).times(self._product(follow.leader))
        return Product(self._stage.bias[name], none)
