"""The factored shape of an expression (room: exact): what a formula looks like before it is set in type.

FLINT polynomials go in; a `Shape`, a coefficient times factors over factors in the order in which a designer
writes them, comes out, and is written as text in the grammar of formulas, as LaTeX or as a SymPy expression.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

from flint import fmpz_mpoly_ctx

from symamp.exact import writing
from symamp.exact.terms import Factor, Term

_FlintTerm = tuple[tuple[int, ...], int]  # (exponents in the order of the context, coefficient)

VARIABLE = "s"  # the complex frequency; written last, as in b0 + b1*s
_CANCELLED = 1e-12  # a sum smaller than this beside its largest term is rounding, and has no sign
FACTOR_LIMIT = 400  # terms; a longer polynomial has its common monomial taken out, and is not factored


@dataclass(frozen=True)
class Shape:
    """coefficient · numerator factors / denominator factors; no sum in it begins with a minus.

    The sign of the whole is the coefficient's. Zero is the coefficient 0 with no factors.
    """

    coefficient: Fraction
    numerator: tuple[Factor, ...] = ()
    denominator: tuple[Factor, ...] = ()

    def text(self) -> str:
        """The formula in the grammar of stage files: `-gm1*(gm2 + gds2)/(gds1*gds2)`."""
        return writing.shape_written(self, writing.PLAIN)

    def latex(self) -> str:
        """The formula for LaTeX's math mode (amsmath)."""
        return writing.shape_written(self, writing.LATEX)

    def sympy(self, negative_ok: frozenset[str] = frozenset()) -> Any:
        """The SymPy expression; symbols are positive, those of `negative_ok` real, s is complex."""
        from symamp.exact.sympy_form import shape_sympy

        return shape_sympy(self, negative_ok)

    def __neg__(self) -> Shape:
        return replace(self, coefficient=-self.coefficient)

    def __mul__(self, other: Shape) -> Shape:
        """The product; equal factors are gathered and cancelled, nothing is expanded."""
        powers: dict[str | tuple[Term, ...], int] = {}
        for sign, factors in (
            (1, self.numerator + other.numerator),
            (-1, self.denominator + other.denominator),
        ):
            for factor in factors:
                powers[factor.base] = powers.get(factor.base, 0) + sign * factor.power
        coefficient = self.coefficient * other.coefficient
        if coefficient == 0:
            return Shape(Fraction(0))
        # The sort is stable: symbols before sums, else in the order of first appearance.
        bases = sorted(powers, key=lambda base: not isinstance(base, str))
        above = tuple(Factor(base, powers[base]) for base in bases if powers[base] > 0)
        below = tuple(Factor(base, -powers[base]) for base in bases if powers[base] < 0)
        return Shape(coefficient, above, below)


@dataclass(frozen=True)
class QuadraticRoot:
    """(−b ± sqrt(b² − 4·a·c))/(2·a), a root of a·s² + b·s + c; `branch` is +1 or −1."""

    a: Shape
    b: Shape
    c: Shape
    branch: int

    def __post_init__(self) -> None:
        if self.branch not in (1, -1):
            raise ValueError(f"branch={self.branch!r} must be 1 or -1")
        if self.a.coefficient == 0:
            raise ZeroDivisionError("the coefficient a of a quadratic root is zero")

    @classmethod
    def of(
        cls, a: Any, b: Any, c: Any, branch: int, weights: Mapping[str, float] | None = None
    ) -> QuadraticRoot:
        """The root from the polynomials a, b, c (fmpz_mpoly); `weights` as in `shape_of`.

        Where a reads as negative all three change sign, and with them the branch: the root is the same.
        """
        shapes = [shape_of(each, weights=weights) for each in (a, b, c)]
        if shapes[0].coefficient < 0:
            shapes, branch = [-each for each in shapes], -branch
        return cls(shapes[0], shapes[1], shapes[2], branch)

    def text(self) -> str:
        """The formula in the grammar of stage files, with sqrt()."""
        return writing.root_written(self, writing.PLAIN)

    def latex(self) -> str:
        """The formula for LaTeX's math mode (amsmath)."""
        return writing.root_written(self, writing.LATEX)

    def sympy(self, negative_ok: frozenset[str] = frozenset()) -> Any:
        """The SymPy expression; symbols as in `Shape.sympy`."""
        from symamp.exact.sympy_form import root_sympy

        return root_sympy(self, negative_ok)

    @property
    def under_root(self) -> tuple[Shape, Shape]:
        """The two terms under the root: b² and −4·a·c."""
        return self.b * self.b, Shape(Fraction(-4)) * self.a * self.c

    @property
    def below(self) -> Shape:
        """What it is divided by: 2·a."""
        return Shape(Fraction(2)) * self.a


def shape_of(numerator: Any, denominator: Any = None, weights: Mapping[str, float] | None = None) -> Shape:
    """The shape of numerator/denominator (fmpz_mpoly, in lowest terms; no denominator means 1).

    Symbols stand in the order of the polynomials' context, s last; terms by power of s, then the shorter
    product first, then by symbol; positive terms before negative ones. `weights`, the symbols' values at the
    bias point, puts the larger of like terms first and turns every sum with terms of both signs so that it is
    positive there: where all symbols are positive, the sign in front of the shape is then the sign that it
    has at that point (at s = 0). A symbol without a weight counts as zero. Raises ZeroDivisionError where the
    denominator is zero.
    """
    if denominator is not None and denominator.is_zero():
        raise ZeroDivisionError("the denominator of a shape is zero")
    if numerator.is_zero():
        return Shape(Fraction(0))
    content, above = _factored(numerator, weights)
    divisor, below = (1, ()) if denominator is None else _factored(denominator, weights)
    return Shape(Fraction(content, divisor), above, below)


def shape_in_resistances(
    numerator: Any,
    denominator: Any,
    rename: Mapping[str, str],
    weights: Mapping[str, float] | None = None,
) -> Shape:
    """The shape with conductances written as resistances; `rename` maps `gds1` to `ro1`.

    Both polynomials are multiplied by the power of the resistance that clears it: exponent e of gds1 becomes
    (greatest e) − e of ro1. `weights` may name either. Names that the polynomials lack are passed over.
    Raises ValueError where a new name is taken.
    """
    denominator = numerator.context().constant(1) if denominator is None else denominator
    names = numerator.context().names()
    renamed = [rename.get(name, name) for name in names]
    if len(set(renamed)) != len(renamed):
        raise ValueError(f"the new names {sorted(rename.values())} are not all free")
    context = fmpz_mpoly_ctx.get(renamed, numerator.context().ordering())
    turned = [place for place, name in enumerate(names) if name in rename]
    above, above_powers = _turned(numerator, turned)
    below, below_powers = _turned(denominator, turned)
    monomials = ([0] * len(names), [0] * len(names))
    for place, more, less in zip(turned, below_powers, above_powers, strict=True):
        monomials[0 if more > less else 1][place] = abs(more - less)
    up, down = (context.from_dict({tuple(powers): 1}) for powers in monomials)
    values = _resistance_weights(weights, rename)
    return shape_of(context.from_dict(above) * up, context.from_dict(below) * down, values)


def polynomial_terms(polynomial: Any) -> tuple[Term, ...]:
    """The terms of an expanded polynomial in the order in which they are written, as they are."""
    order = _Order(polynomial.context().names(), None)
    return order.arranged(_read(polynomial))


def polynomial_text(polynomial: Any) -> str:
    """An expanded polynomial as a plain sum, in our order, in the grammar of stage files."""
    return writing.sum_written(polynomial_terms(polynomial), writing.PLAIN) or "0"


def polynomial_latex(polynomial: Any) -> str:
    """An expanded polynomial as a plain sum, in our order, for LaTeX's math mode."""
    return writing.sum_written(polynomial_terms(polynomial), writing.LATEX) or "0"


def polynomial_sympy(polynomial: Any, negative_ok: frozenset[str] = frozenset()) -> Any:
    """An expanded polynomial as a SymPy sum; symbols as in `Shape.sympy`."""
    from symamp.exact.sympy_form import sum_sympy

    return sum_sympy(polynomial_terms(polynomial), negative_ok)


def _factored(polynomial: Any, weights: Mapping[str, float] | None) -> tuple[int, tuple[Factor, ...]]:
    """(content with sign, factors in order) of a polynomial that is not zero."""
    order = _Order(polynomial.context().names(), weights)
    if len(polynomial) > FACTOR_LIMIT:
        return _monomial_out(polynomial, order)
    content, found = polynomial.factor()
    content = int(content)
    symbols: list[tuple[int, Factor]] = []
    sums: list[tuple[Any, Factor]] = []
    for base, power in found:
        power = int(power)
        if len(base) == 1:  # a FLINT factor of one term is a symbol, apart from its sign
            ((exponents, coefficient),) = _read(base)
            place = exponents.index(1)
            content *= coefficient**power
            symbols.append((order.ranks[place], Factor(order.names[place], power)))
        else:
            sign, terms = order.turned(_read(base))
            content *= sign**power
            sums.append((order.sum_key(_read(base)), Factor(terms, power)))
    in_order = [*sorted(symbols, key=_first), *sorted(sums, key=_first)]
    return content, tuple(factor for _, factor in in_order)


def _first(pair: tuple[Any, Factor]) -> Any:
    return pair[0]


def _monomial_out(polynomial: Any, order: _Order) -> tuple[int, tuple[Factor, ...]]:
    """As `_factored` for a long polynomial: content and common monomial, and the rest as one sum."""
    terms = _read(polynomial)
    content = math.gcd(*(coefficient for _, coefficient in terms))
    common = [min(column) for column in zip(*(exponents for exponents, _ in terms), strict=True)]
    rest = [
        (tuple(map(int.__sub__, exponents, common)), coefficient // content)
        for exponents, coefficient in terms
    ]
    sign, written = order.turned(rest)
    symbols = tuple(Factor(name, power) for name, power in order.product(common))
    return sign * content, (*symbols, Factor(written))


def _turned(polynomial: Any, places: Sequence[int]) -> tuple[dict[tuple[int, ...], int], list[int]]:
    """(terms with exponents e at `places` made greatest − e, the greatest exponents)."""
    terms = _read(polynomial)
    greatest = [max((exponents[place] for exponents, _ in terms), default=0) for place in places]
    turned = {}
    for exponents, coefficient in terms:
        powers = list(exponents)
        for place, most in zip(places, greatest, strict=True):
            powers[place] = most - powers[place]
        turned[tuple(powers)] = coefficient
    return turned, greatest


def _read(polynomial: Any) -> list[_FlintTerm]:
    """[(exponents, coefficient), …] in Python's integers."""
    pairs = zip(polynomial.monoms(), polynomial.coeffs(), strict=True)
    return [(tuple(map(int, exponents)), int(coefficient)) for exponents, coefficient in pairs]


def _resistance_weights(
    weights: Mapping[str, float] | None, rename: Mapping[str, str]
) -> dict[str, float] | None:
    if weights is None:
        return None
    turned = {new: 1 / weights[old] for old, new in rename.items() if weights.get(old)}
    return {**turned, **weights}


class _Order:
    """The order in which a designer writes symbols and terms, over one context's names."""

    def __init__(self, names: Sequence[str], weights: Mapping[str, float] | None) -> None:
        self.names = tuple(names)
        written = sorted(range(len(names)), key=lambda place: names[place] == VARIABLE)
        self.written = written
        self.ranks = {place: rank for rank, place in enumerate(written)}
        self._variable = self.names.index(VARIABLE) if VARIABLE in self.names else None
        self._weights = None if weights is None else [weights.get(name, 0.0) for name in self.names]

    def product(self, exponents: Sequence[int]) -> tuple[tuple[str, int], ...]:
        """((symbol, exponent), …) as written."""
        return tuple((self.names[place], exponents[place]) for place in self.written if exponents[place])

    def arranged(self, terms: Iterable[_FlintTerm]) -> tuple[Term, ...]:
        """The terms as written: positive ones first, then by `_key`."""
        ordered = sorted(terms, key=lambda term: (term[1] < 0, *self._key(*term)))
        return tuple((coefficient, self.product(exponents)) for exponents, coefficient in ordered)

    def turned(self, terms: list[_FlintTerm]) -> tuple[int, tuple[Term, ...]]:
        """(sign, sign · terms as written), the sign such that the sum reads as a positive one."""
        sign = self._sign(terms)
        return sign, self.arranged((exponents, sign * coefficient) for exponents, coefficient in terms)

    def sum_key(self, terms: list[_FlintTerm]) -> tuple[Any, ...]:
        """Where a sum stands among sums: shorter ones first, then by their terms."""
        ordered = sorted((self._plain_key(exponents), abs(coefficient)) for exponents, coefficient in terms)
        signs = [coefficient for _, coefficient in terms]
        return len(ordered), ordered, signs

    def _power(self, exponents: Sequence[int]) -> int:
        return 0 if self._variable is None else exponents[self._variable]

    def _plain_key(self, exponents: Sequence[int]) -> tuple[Any, ...]:
        return self._power(exponents), sum(exponents), tuple(-exponents[place] for place in self.written)

    def _key(self, exponents: Sequence[int], coefficient: int) -> tuple[Any, ...]:
        power, degree, symbols = self._plain_key(exponents)
        return power, degree, -self._size(exponents, coefficient), symbols

    def _size(self, exponents: Sequence[int], coefficient: int) -> float:
        """The logarithm of a term's magnitude at the weights, s left out; 0 where there are none."""
        if self._weights is None:
            return 0.0
        size = math.log(abs(coefficient))
        for place, exponent in enumerate(exponents):
            if exponent and place != self._variable:
                weight = abs(self._weights[place])
                size += exponent * math.log(weight) if weight else -math.inf
        return size

    def _sign(self, terms: list[_FlintTerm]) -> int:
        """The sign of the sum at s → 0: its value there, else that of most terms, else of the first."""
        if len({coefficient > 0 for _, coefficient in terms}) == 1:
            return 1 if terms[0][1] > 0 else -1  # also where a negative symbol makes it negative
        lowest = min(self._power(exponents) for exponents, _ in terms)
        seen = [term for term in terms if self._power(term[0]) == lowest]
        value = self._value(seen) if self._weights is not None else 0.0
        value = value or sum(math.copysign(1, coefficient) for _, coefficient in seen)
        value = value or min(seen, key=lambda term: self._plain_key(term[0]))[1]
        return 1 if value > 0 else -1

    def _value(self, terms: list[_FlintTerm]) -> float:
        """The sum at the weights over its largest term's magnitude, so that nothing underflows."""
        sizes = [self._size(*term) for term in terms]
        largest = max(sizes)
        if not math.isfinite(largest):
            return 0.0
        value = math.fsum(
            math.copysign(math.exp(size - largest), self._term_sign(*term))
            for size, term in zip(sizes, terms, strict=True)
        )
        return value if abs(value) > _CANCELLED * len(terms) else 0.0

    def _term_sign(self, exponents: Sequence[int], coefficient: int) -> int:
        weights = self._weights or ()
        odd = sum(
            1
            for place, weight in enumerate(weights)
            if weight < 0 and exponents[place] % 2 and place != self._variable
        )
        return -coefficient if odd % 2 else coefficient
