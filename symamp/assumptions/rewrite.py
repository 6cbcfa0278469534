"""Steps 1 and 2 on written-out polynomials: symbols renamed or replaced by formulas, and taken to their limits."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.exact.polys import S, by_power, least_exponents, lowest_terms

PolyRatio = tuple[fmpz_mpoly, fmpz_mpoly]


@dataclass(frozen=True)
class LimitResult:
    """What is left of a ratio in a limit: the ratio, or in `why` the words for there being none.

    `lost_origin` is true where a factor s cancelled, so that the limit's dc is not the limit of dc.
    """

    ratio: PolyRatio | None
    why: str = ""
    lost_origin: bool = False


def into_ring(polynomial: fmpz_mpoly, context: fmpz_mpoly_ctx) -> fmpz_mpoly:
    """The same polynomial in a ring that has all its generators."""
    if polynomial.context() is context:
        return polynomial
    names = polynomial.context().names()
    place = {name: i for i, name in enumerate(context.names())}
    width = context.nvars()
    terms: dict[tuple[int, ...], int] = {}
    for exponents, coefficient in polynomial.terms():
        new = [0] * width
        for name, exponent in zip(names, exponents, strict=True):
            if exponent:
                new[place[name]] = int(exponent)
        terms[tuple(new)] = coefficient
    return context.from_dict(terms)


def renamed(polynomial: fmpz_mpoly, names: Mapping[str, str]) -> fmpz_mpoly:
    """The polynomial with symbols made one with others of its ring."""
    all_names = polynomial.context().names()
    place = {name: i for i, name in enumerate(all_names)}
    moves = [(place[a], place[b]) for a, b in names.items() if a in place]
    if not moves:
        return polynomial
    terms: dict[tuple[int, ...], int] = {}
    for exponents, coefficient in polynomial.terms():
        new = [int(e) for e in exponents]
        for source, target in moves:
            new[target] += new[source]
            new[source] = 0
        key = tuple(new)
        terms[key] = terms.get(key, 0) + int(coefficient)
    return polynomial.context().from_dict({e: c for e, c in terms.items() if c})


def replaced(ratio: PolyRatio, name: str, by: PolyRatio) -> PolyRatio:
    """The ratio with a symbol replaced by a ratio of polynomials of the same ring."""
    names = ratio[0].context().names()
    if name not in names:
        return ratio
    index = names.index(name)
    parts = [by_power(polynomial, index) for polynomial in ratio]
    top = max((power for part in parts for power in part), default=0)
    if top == 0:
        return ratio
    numerator, denominator = by
    out = []
    for part in parts:
        total = ratio[0].context().constant(0)
        for power, coefficient in part.items():
            total += coefficient * numerator**power * denominator ** (top - power)
        out.append(total)
    return out[0], out[1]


def limit(ratio: PolyRatio, orders: Mapping[str, int]) -> LimitResult:
    """The ratio as its symbols go to their limits at one common rate t, s fixed.

    `orders` is +1 for a symbol that goes to zero (x·t), −1 for one that grows without bound (x/t). The leading
    powers of t of numerator and denominator are what is left.
    """
    numerator, denominator = ratio
    names = numerator.context().names()
    weights = [(i, orders[name]) for i, name in enumerate(names) if name in orders]
    if not weights or numerator.is_zero():
        return LimitResult(lowest_terms(numerator, denominator))
    low_n, leading_n = _leading(numerator, weights)
    low_d, leading_d = _leading(denominator, weights)
    if low_n < low_d:
        return LimitResult(None, "the response grows without bound")
    if low_n > low_d:
        zero = numerator.context().constant(0)
        return LimitResult((zero, numerator.context().constant(1)))
    s = len(names) - 1
    shared_s = least_exponents((leading_n, leading_d))[s]
    result = lowest_terms(leading_n, leading_d)
    left = _held(result, orders)
    if left:
        return LimitResult(None, depends_words(left))
    return LimitResult(result, lost_origin=shared_s > 0)


def depends_words(symbols: Iterable[str]) -> str:
    """The words for a limit that is not one."""
    return f"the limit depends on which goes first ({', '.join(symbols)} remain)"


def _leading(polynomial: fmpz_mpoly, weights: list[tuple[int, int]]) -> tuple[int, fmpz_mpoly]:
    grouped: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.terms():
        power = sum(sign * int(exponents[i]) for i, sign in weights)
        grouped.setdefault(power, {})[exponents] = coefficient
    low = min(grouped)
    return low, polynomial.context().from_dict(grouped[low])


def _held(ratio: PolyRatio, names: Iterable[str]) -> list[str]:
    """Which of the names the ratio still holds."""
    held = {
        name
        for polynomial in ratio
        for name, degree in zip(polynomial.context().names(), polynomial.degrees(), strict=True)
        if degree
    }
    return [name for name in names if name in held and name != S]
