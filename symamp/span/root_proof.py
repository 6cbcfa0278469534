"""Room `span`: how far a rational formula for a real pole or zero is off over a box, proved.

With F the formula and p the root, e = F/p − 1. That e lies within bounds is a matter of the signs of the polynomial
at F/(1 + bound), once it is known that the root is the only one within a ring around the origin. How many lie nearer
than a circle of radius c·|F| is told by Pellet's theorem: A. E. Pellet, "Sur un mode de séparation des racines des
équations et la formule de Lagrange", Bull. Sci. Math. 5, 1881; where that does not settle it, by the argument
principle: no root lies on the circle anywhere in the box, so that their number within is that at any one point.
(M. Marden, "Geometry of Polynomials", AMS 1966, sections 1 and 28. Sources from memory.)
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce
from itertools import product
from math import inf, isfinite, sqrt
from typing import Any

import numpy as np
from flint import ctx, fmpz, fmpz_mpoly, fmpz_poly

from symamp.exact.formulas import PolyRatio
from symamp.exact.roots import roots
from symamp.span.bernstein import degrees_of, size_of
from symamp.span.bounding import BITS, End, Limits, Proved, nothing_proved
from symamp.span.boxes import Interval, NoProof, ProofBox
from symamp.span.brackets import (
    SIGN_WORK,
    Sampler,
    Verdict,
    above_zero,
    first_points,
    nowhere_negative,
    prove_error,
    short,
    side_values,
)
from symamp.span.monotone import exact_value, strict_sign, weak_sign

_TERMS = 200_000  # products of terms above which polynomials are not multiplied out
_UNSURE_SIGNS = 3  # coefficients without a sure sign up to which both signs are tried
_PARTS, _PARTS_OF = 32, 400_000  # parts of the box, and of large polynomials coefficients in them, at most
_RADII = 9  # radii that are tried between two neighbouring roots


def prove_root_error(
    denominator: Sequence[fmpz_mpoly],
    formula: PolyRatio,
    index: int,
    box: ProofBox,
    *,
    hint: tuple[float, float] | None = None,
    tolerance: float = 1e-4,
    budget: int = 20_000,
    seconds: float | None = None,
) -> Proved:
    """The least and greatest e = F/p − 1 over the box, p the index-th root by magnitude, which must be real.

    `denominator` holds the coefficients of s ascending, `formula` is F in rad/s as numerator and denominator, all of
    them in symbols that the box knows. `hint` is the least and greatest e seen elsewhere. The bounds of each end are
    to be `tolerance` apart; `budget` boxes and `seconds` are spent on each sign that is asked for. Never raises for
    what cannot be proved: the result then says why.
    """
    limits = Limits(boxes=budget, seconds=seconds, work=SIGN_WORK)

    def over(part: ProofBox) -> Proved:
        error = _RootError(denominator, formula, index, part, limits)
        return prove_error(error, hint=hint, tolerance=tolerance, method=error.method)

    with ctx.workprec(BITS):
        try:
            return _by_parts(over, box, tolerance)
        except NoProof as reason:
            return nothing_proved(str(reason))


class _TooNear(NoProof):
    """No circle parts two roots throughout the box; one may where it is split along `side`, into `parts` at most."""

    def __init__(self, text: str, side: int, parts: int) -> None:
        super().__init__(text)
        self.side, self.parts = side, parts


def _by_parts(over: Callable[[ProofBox], Proved], box: ProofBox, tolerance: float) -> Proved:
    """The proof over a box, or over parts of it, each with circles of its own."""
    pending, found, parts = [box], [], 1
    while pending:
        part = pending.pop()
        try:
            found.append(over(part))
        except _TooNear as reason:
            if parts >= reason.parts:
                raise
            parts += 1
            pending += part.halves(reason.side)
    if len(found) == 1:
        return found[0]
    return _together(found, tolerance)


def _together(found: Sequence[Proved], tolerance: float) -> Proved:
    """What is proved over the whole from what is proved over its parts."""
    least, greatest = (
        End(
            pick(end.lower for end in ends),
            pick(end.upper for end in ends),
            pick(ends, key=lambda end: end.upper if pick is min else end.lower).at,
        )
        for pick, ends in ((min, [each.least for each in found]), (max, [each.greatest for each in found]))
    )
    near = max(least.gap, greatest.gap) <= tolerance
    return Proved(
        least,
        greatest,
        sum(each.boxes for each in found),
        near,
        f"{max((each.method for each in found), key=len)}, over {len(found)} parts of the box",
        "" if near else next((each.why for each in found if each.why), "the parts' bounds lie too far apart"),
    )


@dataclass(frozen=True)
class _Ring:
    """The root is the only one with `inner`·|F| < |s| < `outer`·|F|; None for no bound."""

    inner: Fraction
    outer: Fraction | None


class _RootError:
    """The error of a formula for a root."""

    def __init__(
        self,
        coefficients: Sequence[fmpz_mpoly],
        formula: PolyRatio,
        index: int,
        box: ProofBox,
        limits: Limits,
    ) -> None:
        self.box, self._limits, self._index = box, limits, index
        self._sampler = Sampler([*coefficients, *formula], box)
        *given, above, below = box.polynomials([*coefficients, *formula])
        while given and given[-1].is_zero():
            given.pop()
        if not 1 <= index < len(given):
            raise NoProof(f"there is no root {index}")
        up, down = (strict_sign(p, box.domain) for p in (above, below))
        if up is None or down is None:
            raise NoProof("the formula's sign is not sure")
        above, below = above * up, below * down
        self._side = up * down  # the sign of F
        self._terms = terms_at(given, above, below, self._side)
        self._theorems: set[str] = set()
        self._points = first_points(box)
        self._rows = self._sampler(side_values(box, self._points))
        self._ring = self._find_ring()
        self._inside = self._sign_inside()

    @property
    def method(self) -> str:
        """How bounds on the error are proved."""
        how = " and ".join(sorted(self._theorems)) or "the degree"
        return f"proved: signs of the polynomial at the bounds, and how many roots lie nearer by {how}"

    def sampled(self, values: np.ndarray) -> np.ndarray:
        found, size = self._roots_over_formula(self._sampler(values))
        root = found[self._index - 1] * self._side
        with np.errstate(all="ignore"):
            return np.where((root.imag == 0) & (root.real > 0) & np.isfinite(size), 1 / root.real - 1, np.nan)

    def at_most(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        if bound <= -1:
            return Verdict(False, why="a bound of −1 or less")
        radius = 1 / (1 + bound)
        if radius <= self._ring.inner:
            return Verdict(True)
        if self._ring.outer is not None and radius >= self._ring.outer:
            return Verdict(False, why="the bound lies beyond the next root")
        return nowhere_negative(self._inside * self._at(radius), domain, self._limits)

    def at_least(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        if bound <= -1:
            return Verdict(True)
        radius = 1 / (1 + bound)
        if self._ring.outer is not None and radius >= self._ring.outer:
            return Verdict(True)
        if radius <= self._ring.inner:
            return Verdict(False, why="the bound lies beyond the root before")
        return nowhere_negative(-self._inside * self._at(radius), domain, self._limits)

    def _at(self, radius: Fraction) -> fmpz_mpoly:
        """The polynomial where s = radius·F, times a positive factor."""
        return sum_of(self._scaled(radius))

    def _scaled(self, radius: Fraction) -> list[fmpz_mpoly]:
        """The terms of the polynomial in order of s there, times one positive factor."""
        above, below, top = radius.numerator, radius.denominator, len(self._terms) - 1
        return [term * (above**k * below ** (top - k)) for k, term in enumerate(self._terms)]

    def _roots_over_formula(self, rows: Sequence[np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
        """Roots over |F|, and |F|, from the values of the coefficients and of both sides of the formula."""
        *c, above, below = rows
        with np.errstate(all="ignore"):
            size = np.abs(above / below)
            return roots(np.array(c)) / size, size

    def _sign_inside(self) -> int:
        """The sign of the polynomial between the inner circle and the root: it has none of its own there."""
        if self._ring.inner:
            start = self._at(self._ring.inner)
        else:
            start = self._terms[0]
            if strict_sign(start, self.box.domain) is None:
                raise NoProof("the sign of the lowest coefficient is not sure")
        value = exact_value(start, _middle(self.box.domain))
        return 1 if value > 0 else -1

    def _find_ring(self) -> _Ring:
        """Circles between the root and its neighbours, with a proof of how many roots each of them encloses."""
        found, _ = self._roots_over_formula(self._rows)
        sizes = np.abs(found)
        if not np.isfinite(sizes[: self._index]).all() or found[self._index - 1].imag.any():
            raise NoProof("somewhere in the box there is no such root, or it is not real")
        here = sizes[self._index - 1]
        inner, outer = Fraction(0), None
        if self._index > 1:
            inner = self._circle(sizes[self._index - 2], here, self._index - 1)
        if self._index < len(self._terms) - 1:
            beyond = np.where(np.isnan(sizes[self._index]), inf, sizes[self._index])
            outer = self._circle(here, beyond, self._index)
        elif strict_sign(self._terms[-1], self.box.domain) is None:
            raise NoProof("the sign of the highest coefficient is not sure")
        return _Ring(inner, outer)

    def _circle(self, nearer: np.ndarray, farther: np.ndarray, count: int) -> Fraction:
        """A radius over |F| between those of two roots, within which there are exactly `count` throughout the box."""
        low, high = float(nearer.max()), float(farther.min())
        side = self._side_to_split(nearer, farther)
        parts = max(2, min(_PARTS, _PARTS_OF // size_of(degrees_of(*self._terms))))
        if not low < high:
            raise _TooNear(f"roots {count} and {count + 1} come too near to each other", side, parts)
        high = high if isfinite(high) else low * 1e4
        steps = [low * (high / low) ** ((k + 1) / (_RADII + 1)) for k in range(_RADII)]
        for radius in sorted(steps, key=lambda r: -self._pellet_margin(r, count))[:2]:
            if self._pellet_margin(radius, count) > 0 and self._by_pellet(short(radius), count):
                self._theorems.add("Pellet's theorem")
                return short(radius)
        radius = short(sqrt(low * high))
        if self._by_argument(radius, count):
            self._theorems.add("the argument principle")
            return radius
        raise _TooNear(f"that exactly {count} roots lie nearest could not be proved", side, parts)

    def _side_to_split(self, nearer: np.ndarray, farther: np.ndarray) -> int:
        """The side by whose halves the two roots are parted best."""

        def gap(i: int) -> float:
            low = self._points[i] < 0.5
            return min(
                float(farther[half].min() / nearer[half].max()) if half.any() else 0.0 for half in (low, ~low)
            )

        free = [i for i, side in enumerate(self.box.sides) if not side.fixed]
        if not free:
            raise NoProof("two roots come too near to each other")
        return max(free, key=gap)

    def _pellet_margin(self, radius: float, count: int) -> float:
        """By how much term `count` outweighs the others together, at the points that are tried first."""
        *c, above, below = self._rows
        with np.errstate(all="ignore"):
            size = np.abs(above / below) * radius
            sizes = [np.abs(row) * size**k for k, row in enumerate(c)]
            margin = sizes[count] / np.sum(sizes, axis=0) - 0.5
        return float(np.nan_to_num(margin, nan=-1.0).min())

    def _by_pellet(self, radius: Fraction, count: int) -> bool:
        """|b_k|·r^k > Σ |b_j|·r^j over the other j, throughout the box: exactly k roots lie within |s| < r."""
        terms = self._scaled(radius)
        signs = [weak_sign(term, self.box.domain) for term in terms]
        main = strict_sign(terms[count], self.box.domain)
        unsure = [k for k, sign in enumerate(signs) if sign is None and k != count]
        if main is None or len(unsure) > _UNSURE_SIGNS:
            return False
        for tried in product((1, -1), repeat=len(unsure)):
            chosen = dict(zip(unsure, tried, strict=True))
            others = [term * (chosen.get(k) or signs[k] or 0) for k, term in enumerate(terms) if k != count]
            margin = reduce(lambda total, term: total - term, others, terms[count] * main)
            if not above_zero(margin, self.box.domain, self._limits).proved:
                return False
        return True

    def _by_argument(self, radius: Fraction, count: int) -> bool:
        """No root lies on the circle, whatever the point of the box, and within it there are `count` at one point."""
        terms = self._scaled(radius)
        if sum(len(p) * len(q) for p in terms for q in terms) > _TERMS:
            return False
        at = _middle(self.box.domain)
        values = [exact_value(term, at) for term in terms]
        if _count_inside(values) != count:
            return False
        longer = self.box.with_side("cosine of the angle", Fraction(-1), Fraction(1))
        return above_zero(_squared_on_circle(terms, longer), longer.domain, self._limits).proved


def terms_at(
    coefficients: Sequence[fmpz_mpoly], above: fmpz_mpoly, below: fmpz_mpoly, side: int
) -> list[fmpz_mpoly]:
    """b_k·F^k by k, all of them times a positive factor that takes the fractions away; F = side·above/below."""
    top, found = len(coefficients) - 1, []
    for k, coefficient in enumerate(coefficients):
        if len(coefficient) * len(above) ** k * len(below) ** (top - k) > 50 * _TERMS:
            raise NoProof("the polynomial at the formula is too large to be multiplied out")
        term = coefficient * above**k * below ** (top - k) * side**k
        if len(term) > _TERMS:
            raise NoProof("the polynomial at the formula is too large to be multiplied out")
        found.append(term)
    for factor in (above, below):
        while not factor.is_constant() and all(divmod(term, factor)[1].is_zero() for term in found):
            found = [divmod(term, factor)[0] for term in found]
    return found


def sum_of(terms: Sequence[fmpz_mpoly]) -> fmpz_mpoly:
    """The sum of polynomials."""
    return reduce(lambda total, term: total + term, terms)


def _middle(domain: Sequence[Interval]) -> list[Fraction]:
    return [(low + high) / 2 for low, high in domain]


def _count_inside(values: Sequence[Fraction]) -> int | None:
    """How many roots of a polynomial in z lie within |z| < 1; None where one is too near to the circle."""
    scale = reduce(lambda a, b: a * b.denominator, values, 1)
    found: Any = fmpz_poly([int(value * scale) for value in values]).complex_roots()
    count = 0
    for root, multiplicity in found:
        size = abs(root)
        if size < 1:
            count += multiplicity
        elif not size > 1:
            return None
    return count


def _squared_on_circle(terms: Sequence[fmpz_mpoly], longer: ProofBox) -> fmpz_mpoly:
    """|Σ t_k·e^(jkθ)|² = Σ t_j·t_k·cos((j − k)θ), with Chebyshev polynomials of cos θ, the last side of the box."""
    ring = longer.ring
    lifted = [
        ring.from_dict({(*(int(e) for e in x), 0): c for x, c in _over_sides(term, longer)}) for term in terms
    ]
    cosine = ring.gens()[-1] - 1  # the side from −1 to 1 by its coordinate from 0 to 2
    chebyshev = [ring.constant(1), cosine]
    while len(chebyshev) < len(terms):
        chebyshev.append(2 * cosine * chebyshev[-1] - chebyshev[-2])
    total = ring.constant(0)
    for j, one in enumerate(lifted):
        total += one * one
        for k in range(j):
            total += 2 * one * lifted[k] * chebyshev[j - k]
    return total


def _over_sides(term: fmpz_mpoly, longer: ProofBox) -> list[tuple[tuple[int, ...], fmpz]]:
    """Terms by the sides before the last; the ring of a box without sides has an idle generator."""
    return [(tuple(x[: len(longer.sides) - 1]), c) for x, c in term.terms()]
