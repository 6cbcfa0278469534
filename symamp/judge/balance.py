"""What a claim leaves out, term by term (room: judge).

A claim F about E is right where a polynomial balance is: E/F = above/below for a rational quantity, and for a
root the positive terms of D(F) against its negative ones. Terms that both sides have are *common*, the rest is
*left over*; each left-over term over what is common is a ratio that the claim takes to be small.

With x for E/F = 1/(1 + e) the balance is Σ above_k·x^k = Σ below_k·x^k: of a ratio above stands at x^0 and
below at x^1; of a root the coefficient of s^k stands at x^k.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, reduce

import numpy as np
from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import held, lowest_terms
from symamp.exact.tape import largest_term, polynomial_value

ByPower = Mapping[int, fmpz_mpoly]
_Terms = dict[tuple[int, ...], dict[int, int]]  # exponents -> {power of x: coefficient}
_MOST_TRIED, _MOST_LEFT = 60, 1000  # terms up to which directions are looked for, one after the other
ABOVE, BELOW = "above", "below"
PI = "pi"


@dataclass(frozen=True)
class Tacit:
    """A ratio that a claim takes to be small: one term over all that is common.

    `side` says where the term was left over. `powers` are the shares of its coefficient at each power of x.
    """

    numerator: fmpz_mpoly
    denominator: fmpz_mpoly
    side: str
    powers: Mapping[int, float]

    @property
    def is_number(self) -> bool:
        """Whether no symbol is in it."""
        return not held(self.numerator, self.denominator) - {PI}

    @property
    def sign(self) -> int:
        """+1 of a term above, −1 of one below."""
        return 1 if self.side == ABOVE else -1

    def shown(self, values: Mapping[str, float]) -> PolyRatio:
        """The ratio with the largest term of its denominator alone, in lowest terms."""
        return lowest_terms(self.numerator, largest_term(self.denominator, values))

    def value(self, values: Mapping[str, float]) -> float:
        """The ratio at a bias point (pi among the values); nan where its denominator is 0."""
        below = polynomial_value(self.denominator, values)
        return polynomial_value(self.numerator, values) / below if below else float("nan")


@dataclass(frozen=True)
class Balance:
    """The two sides by powers of x, all polynomials in one ring, with nothing in common but numbers."""

    above: ByPower
    below: ByPower

    @cached_property
    def context(self) -> fmpz_mpoly_ctx:
        return next(iter((*self.above.values(), *self.below.values()))).context()

    @property
    def two_sided(self) -> bool:
        """Whether both sides have terms: of a root whose formula has the wrong sign one has none."""
        return not all(p.is_zero() for p in self.above.values()) and not all(
            p.is_zero() for p in self.below.values()
        )

    def scaled(self, factor: Fraction, pi_power: int = 0) -> Balance:
        """The balance of the claim multiplied by factor·π^pi_power."""
        n = max([*self.above, *self.below])
        pi = self.context.gens()[self.context.names().index(PI)]
        sides = []
        for side in (self.above, self.below):
            up, down = max(0, pi_power), max(0, -pi_power)
            sides.append(
                {
                    k: p
                    * factor.numerator**k
                    * factor.denominator ** (n - k)
                    * pi ** (up * k + down * (n - k))
                    for k, p in side.items()
                }
            )
        return Balance(*sides)

    def with_equal(self, one: str, other: str) -> Balance:
        """The balance with one symbol put for another."""
        names = self.context.names()
        put, away = names.index(one), names.index(other)
        sides: tuple[dict[int, fmpz_mpoly], dict[int, fmpz_mpoly]] = ({}, {})
        for made, side in zip(sides, (self.above, self.below), strict=True):
            for k, polynomial in side.items():
                terms: dict[tuple[int, ...], int] = {}
                for exponents, coefficient in polynomial.terms():
                    moved = [int(e) for e in exponents]
                    moved[put], moved[away] = moved[put] + moved[away], 0
                    terms[tuple(moved)] = terms.get(tuple(moved), 0) + int(coefficient)
                made[k] = self.context.from_dict({m: c for m, c in terms.items() if c})
        return Balance(*sides)

    @cached_property
    def comparison(self) -> Comparison:
        """Common and left-over terms."""
        return _compare(self)

    @property
    def of_ratios(self) -> bool:
        """Whether it is that of a quantity that is rational, E/F; else one of a root of higher degree."""
        return set(self.above) == {0} and set(self.below) == {1}

    def value(self, x: float, values: Mapping[str, float]) -> float:
        """Σ above_k·x^k − Σ below_k·x^k at a bias point."""
        up, down = (
            sum(polynomial_value(p, values) * x**k for k, p in side.items())
            for side in (self.above, self.below)
        )
        return up - down


@dataclass(frozen=True)
class Comparison:
    """`common`, which both sides have, with how much of it stands at each power of x; and what is left over."""

    common: fmpz_mpoly
    matched_above: ByPower
    matched_below: ByPower
    left_above: ByPower
    left_below: ByPower

    @cached_property
    def tacit(self) -> tuple[Tacit, ...]:
        """The ratios, those left over above first; none where nothing is common."""
        if self.common.is_zero():
            return ()
        return (
            *_ratios(self.left_above, self.common, ABOVE),
            *_ratios(self.left_below, self.common, BELOW),
        )

    @property
    def work(self) -> int:
        """How many terms are gone through when the ratios are listed: of what is common, for each left over."""
        left = sum(len(p) for side in (self.left_above, self.left_below) for p in side.values())
        return left * len(self.common)

    @property
    def identity(self) -> bool:
        """Whether the claim is the exact expression: something is common, and nothing left over."""
        return not self.common.is_zero() and not self.left_above and not self.left_below

    def levels(self, values: Mapping[str, float]) -> dict[int, float]:
        """How much more of what is common stands above than below, at each power of x, as a share of it all."""
        whole = polynomial_value(self.common, values)
        found: dict[int, float] = {}
        for sign, side in ((1, self.matched_above), (-1, self.matched_below)):
            for k, polynomial in side.items():
                share = polynomial_value(polynomial, values) / whole if whole else float("nan")
                found[k] = found.get(k, 0.0) + sign * share
        return found

    def fixed_levels(self) -> dict[int, Fraction] | None:
        """The same where it is so whatever the values, else None."""
        found: dict[int, Fraction] = {}
        for sign, side in ((1, self.matched_above), (-1, self.matched_below)):
            for k, part in side.items():
                share = _number(part, self.common)
                if share is None:
                    return None
                found[k] = found.get(k, Fraction(0)) + sign * share
        return found

    @cached_property
    def is_limit(self) -> bool:
        """Whether some common term can outweigh all that is left over: its exponents are no mean of theirs.

        Then there is a direction in which all symbols may move so that only it stays (Farkas 1902). Of very many
        terms it is taken to be so.
        """
        sides = (self.left_above, self.left_below)
        left = {_without_pi(self.common, m) for side in sides for p in side.values() for m in p.monoms()}
        own = {_without_pi(self.common, m) for m in self.common.monoms()} - left
        if not left or len(own) > _MOST_TRIED or len(left) > _MOST_LEFT:
            return True
        return any(_outweighs(monomial, left) for monomial in sorted(own, reverse=True))

    @property
    def numbers(self) -> tuple[Tacit, ...]:
        """The left-over ratios that are pure numbers: no conditions, but a factor by which the claim is off."""
        return tuple(each for each in self.tacit if each.is_number)

    def slope(self, values: Mapping[str, float]) -> float:
        """The balance's derivative by x at x = 1 over what is common: −1 of a ratio."""
        return sum(k * share for k, share in self.levels(values).items())


def ratio_balance(exact: PolyRatio, claimed: PolyRatio) -> Balance:
    """The balance of a rational quantity: E/F in lowest terms. Both ratios in one ring, none of them zero."""
    above, below = lowest_terms(exact[0] * claimed[1], exact[1] * claimed[0])
    return Balance({0: above}, {1: below})


def root_balance(coefficients: Sequence[fmpz_mpoly], claimed: PolyRatio) -> Balance:
    """The balance of a root: the terms of D(F)·(denominator of F)^n by power of s, positive against negative."""
    n = len(coefficients) - 1
    above, below = claimed
    parts = [c * above**k * below ** (n - k) for k, c in enumerate(coefficients)]
    common = reduce(lambda a, b: a.gcd(b), (p for p in parts if not p.is_zero()))
    parts = [p / common for p in parts]
    context = above.context()
    sides: tuple[dict[int, fmpz_mpoly], dict[int, fmpz_mpoly]] = ({}, {})
    for k, part in enumerate(parts):
        for side, sign in zip(sides, (1, -1), strict=True):
            terms = {tuple(m): sign * int(c) for m, c in part.terms() if int(c) * sign > 0}
            if terms:
                side[k] = context.from_dict(terms)
    zero = context.constant(0)
    return Balance(sides[0] or {0: zero}, sides[1] or {0: zero})


def _compare(balance: Balance) -> Comparison:
    context = balance.context
    above, below = _by_monomial(balance.above), _by_monomial(balance.below)
    common: dict[tuple[int, ...], int] = {}
    matched: tuple[dict[int, dict], dict[int, dict]] = ({}, {})
    for monomial in above.keys() & below.keys():
        for sign in (1, -1):
            sizes = [sum(max(0, sign * c) for c in side[monomial].values()) for side in (above, below)]
            shared = min(sizes)
            if shared:
                common[monomial] = common.get(monomial, 0) + sign * shared
                for part, side in zip(matched, (above, below), strict=True):
                    _take(part, side[monomial], monomial, sign, shared)
    common = {m: c for m, c in common.items() if c}
    made = [_polynomials(context, part) for part in matched]
    left = [
        _polynomials(context, _powers(side)) for side in (above, below)
    ]  # what _take has left of either side
    return Comparison(context.from_dict(common), made[0], made[1], left[0], left[1])


def _take(
    part: dict[int, dict], powers: dict[int, int], monomial: tuple[int, ...], sign: int, size: int
) -> None:
    """Move so much of a monomial, of one sign, from a side to what is matched, low powers of x first."""
    for k in sorted(powers):
        here = min(size, max(0, sign * powers[k]))
        if here:
            powers[k] -= sign * here
            terms = part.setdefault(k, {})
            terms[monomial] = terms.get(monomial, 0) + sign * here
            size -= here


def _by_monomial(side: ByPower) -> _Terms:
    found: _Terms = {}
    for k, polynomial in side.items():
        for exponents, coefficient in polynomial.terms():
            found.setdefault(tuple(int(e) for e in exponents), {})[k] = int(coefficient)
    return found


def _powers(terms: _Terms) -> dict[int, dict]:
    found: dict[int, dict] = {}
    for monomial, powers in terms.items():
        for k, coefficient in powers.items():
            if coefficient:
                found.setdefault(k, {})[monomial] = coefficient
    return found


def _polynomials(context: fmpz_mpoly_ctx, parts: Mapping[int, dict]) -> dict[int, fmpz_mpoly]:
    found = {k: context.from_dict(terms) for k, terms in sorted(parts.items())}
    return {k: polynomial for k, polynomial in found.items() if not polynomial.is_zero()}


def _ratios(left: ByPower, common: fmpz_mpoly, side: str) -> Iterable[Tacit]:
    """Left over / common in lowest terms, term by term."""
    if not left:
        return
    shared = reduce(lambda a, b: a.gcd(b), left.values(), common)
    below = common / shared
    sign = -1 if _mostly_negative(below) else 1
    context = common.context()
    terms = _by_monomial({k: p / shared for k, p in left.items()})
    whole = {tuple(int(e) for e in m): int(c) for m, c in below.terms()}
    multiple = _multiple(terms, whole)
    if multiple:  # all that is common once more: a factor that is wrong, of whatever many terms
        one = context.constant(1)
        shares = _shares(terms[next(iter(whole))])
        yield Tacit(one * multiple.numerator, one * multiple.denominator, side, shares)
    for monomial, powers in sorted(terms.items(), reverse=True):
        total = sum(powers.values()) - multiple * whole.get(monomial, 0)
        if multiple and not total:
            continue
        numerator = context.from_dict({monomial: sign * Fraction(total).numerator})
        yield Tacit(
            *lowest_terms(numerator, sign * Fraction(total).denominator * below), side, _shares(powers)
        )


def _without_pi(common: fmpz_mpoly, monomial: Sequence[int]) -> tuple[int, ...]:
    names = common.context().names()
    return tuple(int(e) for name, e in zip(names, monomial, strict=True) if name != PI)


def _outweighs(monomial: tuple[int, ...], left: Iterable[tuple[int, ...]]) -> bool:
    """Whether d·monomial > d·l for all l in `left` and some direction d."""
    from scipy.optimize import linprog  # heavy, and only claims that fail need it

    apart = np.array([np.subtract(each, monomial) for each in left], dtype=float)
    found = linprog(np.zeros(apart.shape[1]), A_ub=apart, b_ub=-np.ones(len(apart)), bounds=(None, None))
    return bool(found.status == 0)


def _number(part: fmpz_mpoly, whole: fmpz_mpoly) -> Fraction | None:
    """part/whole where that is a number."""
    above, below = lowest_terms(part, whole)
    if held(above, below):
        return None
    return Fraction(int(above.coeffs()[0]), int(below.coeffs()[0]))


def _multiple(terms: _Terms, common: Mapping[tuple[int, ...], int]) -> Fraction:
    """The largest r for which r·common, term by term, is part of these terms; 0 where there is none."""
    if len(common) > len(terms):
        return Fraction(0)
    ratios = []
    for monomial, coefficient in common.items():
        powers = terms.get(monomial)
        if powers is None:
            return Fraction(0)
        ratios.append(Fraction(sum(powers.values()), coefficient))
    alike = len({tuple(sorted(_shares(terms[monomial]).items())) for monomial in common}) == 1
    return max(Fraction(0), min(ratios)) if alike else Fraction(0)


def _shares(powers: Mapping[int, int]) -> dict[int, float]:
    """How much of a left-over term stands at each power of x; all of one side, so of one sign."""
    total = sum(powers.values())
    return {k: float(Fraction(c, total)) for k, c in powers.items()}


def _mostly_negative(polynomial: fmpz_mpoly) -> bool:
    signs = sum(1 if c > 0 else -1 for c in polynomial.coeffs())
    return signs < 0 or (signs == 0 and polynomial.coeffs()[0] < 0)
