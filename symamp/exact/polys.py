"""Integer polynomials in many symbols (FLINT), and ratios of them in lowest terms."""

from __future__ import annotations

import random
from collections.abc import Iterable, Mapping, Sequence
from math import gcd

from flint import fmpz_mpoly, fmpz_mpoly_ctx, nmod_poly, Ordering

from symamp.circuit import kinds
from symamp.circuit.stage import Symbol

S = "s"
_PRIME = (1 << 61) - 1

# What an analog designer writes first: transconductances, then conductances, resistances, reactances.
_RANK = {
    kinds.TRANSCONDUCTANCE: 0,
    kinds.GAIN: 1,
    kinds.TURNS_RATIO: 2,
    kinds.CONDUCTANCE: 3,
    kinds.RESISTANCE: 4,
    kinds.INDUCTANCE: 5,
    kinds.CAPACITANCE: 6,
}


def ring_of(symbols: Mapping[str, Symbol], names: Iterable[str], extra: Sequence[str] = ()) -> fmpz_mpoly_ctx:
    """The ring over these symbols, in the order in which formulas are written, with `extra` and s last."""
    place = {name: i for i, name in enumerate(symbols)}

    def rank(name: str) -> tuple[int, int, int]:
        symbol = symbols[name]
        body = 1 if symbol.parameter.name == "gmb" else 0
        return (_RANK[symbol.nature], body, place[name])

    ordered = sorted(set(names), key=rank)
    return fmpz_mpoly_ctx.get((*ordered, *extra, S), Ordering.lex)


def by_power(polynomial: fmpz_mpoly, index: int | None = None) -> dict[int, fmpz_mpoly]:
    """Split by the power of one generator (s, the last, unless `index` says otherwise)."""
    context = polynomial.context()
    place = context.nvars() - 1 if index is None else index
    parts: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.terms():
        rest = (*exponents[:place], 0, *exponents[place + 1 :])
        parts.setdefault(exponents[place], {})[rest] = coefficient
    return {power: context.from_dict(part) for power, part in parts.items()}


def coefficients_of_s(polynomial: fmpz_mpoly) -> tuple[fmpz_mpoly, ...]:
    """Coefficients of s, ascending; of the zero polynomial the zero constant."""
    parts = by_power(polynomial)
    zero = polynomial.context().constant(0)
    return tuple(parts.get(power, zero) for power in range(max(parts, default=0) + 1))


def from_coefficients(coefficients: Sequence[fmpz_mpoly]) -> fmpz_mpoly:
    """The polynomial in s with these coefficients, ascending."""
    context = coefficients[0].context()
    s = context.gen(context.nvars() - 1)
    total = context.constant(0)
    for coefficient in reversed(coefficients):
        total = total * s + coefficient
    return total


def least_exponents(polynomials: Iterable[fmpz_mpoly]) -> list[int]:
    """The least exponent of each generator over all terms of the polynomials."""
    least: list[int] | None = None
    for polynomial in polynomials:
        for exponents in polynomial.monoms():
            least = list(exponents) if least is None else [min(a, int(b)) for a, b in zip(least, exponents)]
    return [int(e) for e in least or []]


def shifted(polynomial: fmpz_mpoly, shift: Sequence[int]) -> fmpz_mpoly:
    """The polynomial times the monomial of exponents `shift` (which may be negative where it divides)."""
    if not any(shift):
        return polynomial
    context = polynomial.context()
    return context.from_dict(
        {tuple(int(e) + d for e, d in zip(exponents, shift)): c for exponents, c in polynomial.terms()}
    )


def inverted(numerator: fmpz_mpoly, denominator: fmpz_mpoly, names: set[str]) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """Write generators in `names` as their inverses: a conductance's place is taken by its resistance.

    Both polynomials are multiplied by the same monomial, which clears the negative powers.
    """
    context = numerator.context()
    places = [i for i, name in enumerate(context.names()) if name in names]
    if not places:
        return numerator, denominator
    top = {
        i: max((int(e[i]) for p in (numerator, denominator) for e in p.monoms()), default=0) for i in places
    }

    def flip(polynomial: fmpz_mpoly) -> fmpz_mpoly:
        terms = {}
        for exponents, coefficient in polynomial.terms():
            new = list(exponents)
            for i in places:
                new[i] = top[i] - int(exponents[i])
            terms[tuple(new)] = coefficient
        return context.from_dict(terms)

    return flip(numerator), flip(denominator)


def lowest_terms(numerator: fmpz_mpoly, denominator: fmpz_mpoly) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """The same ratio with nothing common left, and most terms of the denominator positive.

    ZeroDivisionError where the denominator is zero.
    """
    context = denominator.context()
    if denominator.is_zero():
        raise ZeroDivisionError("ratio with denominator zero")
    if numerator.is_zero():
        return numerator, context.constant(1)
    shift = [-e for e in least_exponents((numerator, denominator))]
    numerator, denominator = shifted(numerator, shift), shifted(denominator, shift)
    if _may_share(numerator, denominator):
        common = numerator.gcd(denominator)
        numerator, denominator = numerator / common, denominator / common
    else:
        content = gcd(_content(numerator), _content(denominator))
        if content > 1:
            numerator, denominator = numerator / content, denominator / content
    if _mostly_negative(denominator):
        numerator, denominator = -numerator, -denominator
    return numerator, denominator


def _content(polynomial: fmpz_mpoly) -> int:
    common = 0
    for coefficient in polynomial.coeffs():
        common = gcd(common, int(coefficient))
        if common == 1:
            break
    return common


def _mostly_negative(polynomial: fmpz_mpoly) -> bool:
    lowest = coefficients_of_s(polynomial)
    first = next(c for c in lowest if not c.is_zero())
    signs = sum(1 if c > 0 else -1 for c in first.coeffs())
    return signs < 0 or (signs == 0 and first.coeffs()[0] < 0)


def _may_share(p: fmpz_mpoly, q: fmpz_mpoly) -> bool:
    """Whether a common factor in some generator is possible, by images at random points modulo a prime.

    A factor of positive degree in x stays one when the other generators take values at which the leading
    coefficient in x does not vanish, so an image with no common factor shows that there is none.
    """
    if min(len(p), len(q)) < 2:
        return False
    draw = random.Random(20)
    context = p.context()
    values = [draw.randrange(2, _PRIME) for _ in range(context.nvars())]
    top_p, top_q = p.degrees(), q.degrees()
    rows_p, rows_q = _residues(p, values), _residues(q, values)
    for i in range(context.nvars()):
        if not (top_p[i] and top_q[i]):
            continue
        image_p, image_q = _image(rows_p, i, values[i]), _image(rows_q, i, values[i])
        if image_p.degree() < int(top_p[i]) or image_q.degree() < int(top_q[i]):
            return True
        if image_p.gcd(image_q).degree() > 0:
            return True
    return False


def _residues(polynomial: fmpz_mpoly, values: list[int]) -> list[tuple[tuple[int, ...], int]]:
    rows = []
    for exponents, coefficient in polynomial.terms():
        residue = int(coefficient) % _PRIME
        for value, exponent in zip(values, exponents):
            for _ in range(int(exponent)):
                residue = residue * value % _PRIME
        rows.append((tuple(int(e) for e in exponents), residue))
    return rows


def _image(rows: list[tuple[tuple[int, ...], int]], index: int, value: int) -> nmod_poly:
    """The image in generator `index` from residues in which it stood at `value`."""
    inverse = pow(value, -1, _PRIME)
    powers = [1]
    coefficients: dict[int, int] = {}
    for exponents, residue in rows:
        while len(powers) <= exponents[index]:
            powers.append(powers[-1] * inverse % _PRIME)
        e = exponents[index]
        coefficients[e] = (coefficients.get(e, 0) + residue * powers[e]) % _PRIME
    return nmod_poly([coefficients.get(e, 0) for e in range(max(coefficients, default=0) + 1)], _PRIME)
