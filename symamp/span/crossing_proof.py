"""Room `span`: how far a rational formula for a bandwidth or unity-gain frequency is off over a box, proved.

With F the formula and ω the frequency at which |H(jω)|² first falls to a level, e = F/ω − 1. |N(jω)|² less the level
times |D(jω)|² is a polynomial in ω² with polynomials in the symbols for coefficients. That it is nowhere negative from
0 to F/(1 + bound) proves e ≤ bound, and that it is negative at F/(1 + bound) proves e ≥ bound.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from functools import reduce
from itertools import pairwise
from typing import Any

import numpy as np
from flint import ctx, fmpz_mpoly

from symamp.exact.formulas import PolyRatio
from symamp.exact.roots import roots
from symamp.span.bounding import BITS, Limits, Proved, nothing_proved
from symamp.span.boxes import Interval, NoProof, ProofBox
from symamp.span.brackets import SIGN_WORK, Sampler, Verdict, above_zero, nowhere_negative, prove_error
from symamp.span.monotone import strict_sign, weak_sign
from symamp.span.root_proof import sum_of, terms_at

_METHOD = "proved: the sign of |N(jω)|² less the level times |D(jω)|², up to the bounds"


def prove_crossing_error(
    numerator: Sequence[fmpz_mpoly],
    denominator: Sequence[fmpz_mpoly],
    formula: PolyRatio,
    box: ProofBox,
    *,
    level: Fraction | None = None,
    hint: tuple[float, float] | None = None,
    tolerance: float = 1e-4,
    budget: int = 20_000,
    seconds: float | None = None,
) -> Proved:
    """The least and greatest e = F/ω − 1 over the box, ω the frequency at which |H(jω)|² first falls to `level`.

    A `level` of 1 is that of the unity-gain frequency; None stands for half of |H(0)|², that of the bandwidth.
    `numerator` and `denominator` hold the coefficients of s ascending, `formula` is F in rad/s, all of them in symbols
    that the box knows. |H(0)|² must lie above the level. The rest is as for `prove_root_error`.
    """
    with ctx.workprec(BITS):
        try:
            limits = Limits(boxes=budget, seconds=seconds, work=SIGN_WORK)
            error = _CrossingError(numerator, denominator, formula, box, level, limits)
            return prove_error(error, hint=hint, tolerance=tolerance, method=_METHOD)
        except NoProof as reason:
            return nothing_proved(str(reason))


class _CrossingError:
    """The error of a formula for the frequency of a first fall to a level."""

    def __init__(
        self,
        numerator: Sequence[fmpz_mpoly],
        denominator: Sequence[fmpz_mpoly],
        formula: PolyRatio,
        box: ProofBox,
        level: Fraction | None,
        limits: Limits,
    ) -> None:
        self.box, self._level, self._limits = box, level, limits
        self._rows = len(numerator)
        self._sampler = Sampler([*numerator, *denominator, *formula], box)
        *rows, above, below = box.polynomials([*numerator, *denominator, *formula])
        up, down = (strict_sign(p, box.domain) for p in (above, below))
        if up is None or down is None or up != down:
            raise NoProof("that the formula is positive is not sure")
        above, below = above * up, below * down
        excess = _without_common(_excess(rows[: self._rows], rows[self._rows :], level), box)
        if not above_zero(excess[0], box.domain, limits).proved:
            raise NoProof("that the response starts above the level is not sure")
        self._one_crossing = _varies_once(excess, box, limits)
        self._terms = terms_at(excess, above * above, below * below, 1)

    def sampled(self, values: np.ndarray) -> np.ndarray:
        *rows, above, below = self._sampler(values)
        with np.errstate(all="ignore"):
            size = above / below
            parts = rows[: self._rows], rows[self._rows :]
            numerator, denominator = ([row * size**k for k, row in enumerate(part)] for part in parts)
            excess = np.array(_excess(numerator, denominator, self._level), dtype=float)
            found = roots(excess / np.abs(excess).max(axis=0))
            real = np.where((found.imag == 0) & (found.real > 0), found.real, np.inf)
            first = real.min(axis=0, initial=np.inf)
            return np.where(np.isfinite(first), 1 / np.sqrt(first) - 1, np.nan)

    def at_most(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        if bound <= -1:
            return Verdict(False, why="a bound of −1 or less")
        if self._one_crossing:
            return nowhere_negative(sum_of(self._at((1 / (1 + bound)) ** 2)), domain, self._limits)
        longer = self.box.with_side("part of the way", Fraction(0), Fraction(1))
        ring, terms = longer.ring, self._at((1 / (1 + bound)) ** 2)
        count = len(self.box.sides)
        way = [
            ring.from_dict({(*(int(e) for e in x[:count]), k): c for x, c in term.terms()})
            for k, term in enumerate(terms)
        ]
        return nowhere_negative(sum_of(way), (*domain, (Fraction(0), Fraction(1))), self._limits)

    def at_least(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        if bound <= -1:
            return Verdict(True)
        return above_zero(-sum_of(self._at((1 / (1 + bound)) ** 2)), domain, self._limits)

    def _at(self, square: Fraction) -> list[fmpz_mpoly]:
        """The terms in order of ω² where ω² = square·F², times one positive factor."""
        above, below, top = square.numerator, square.denominator, len(self._terms) - 1
        return [term * (above**k * below ** (top - k)) for k, term in enumerate(self._terms)]


def _excess(numerator: Sequence[Any], denominator: Sequence[Any], level: Fraction | None) -> list[Any]:
    """|N|² less the level times |D|², times a positive factor: coefficients of ω², of polynomials or of arrays."""
    n, d = (_squared(row) for row in (numerator, denominator))
    if level is None:
        weights = 2 * denominator[0] * denominator[0], numerator[0] * numerator[0]
    else:
        weights = level.denominator, level.numerator
    zero = 0 * denominator[0]
    length = max(len(n), len(d))
    n, d = ([*row, *[zero] * (length - len(row))] for row in (n, d))
    return [a * weights[0] - b * weights[1] for a, b in zip(n, d, strict=True)]


def _without_common(excess: list[fmpz_mpoly], box: ProofBox) -> list[fmpz_mpoly]:
    """The coefficients with a common factor divided out that is not zero anywhere, and without zeros at the end."""
    while len(excess) > 1 and excess[-1].is_zero():
        excess.pop()
    common = reduce(lambda a, b: a.gcd(b), excess)
    sign = strict_sign(common, box.domain)
    return excess if sign is None else [sign * p / common for p in excess]


def _varies_once(excess: Sequence[fmpz_mpoly], box: ProofBox, limits: Limits) -> bool:
    """Whether the coefficients change sign once at most, wherever in the box: then there is one crossing at most.

    That is Descartes' rule of signs.
    """
    signs = [weak_sign(p, box.domain) for p in excess]
    for k, p in enumerate(excess):
        if signs[k] is None:
            for sign in (1, -1):
                if nowhere_negative(sign * p, box.domain, limits).proved:
                    signs[k] = sign
    if None in signs:
        return False
    kept = [sign for sign in signs if sign]
    return sum(a != b for a, b in pairwise(kept)) <= 1


def _squared(row: Sequence[Any]) -> list[Any]:
    """|Σ c_k (jω)^k|² by powers of ω²: c_k² and 2·(−1)^i·c_(k−i)·c_(k+i)."""
    found = []
    for k in range(len(row)):
        total = row[k] * row[k]
        for i in range(1, min(k, len(row) - 1 - k) + 1):
            total = total + row[k - i] * row[k + i] * (2 if i % 2 == 0 else -2)
        found.append(total)
    return found
