"""Integer polynomials in many symbols (FLINT), and ratios of them in lowest terms."""

from __future__ import annotations

import random
from collections.abc import Iterable, Mapping, Sequence
from math import gcd

from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx, nmod_poly

from symamp.circuit import kinds
from symamp.circuit.stage import Symbol
from symamp.exact.modular import PRIME

S = "s"
_GCD_AT_ONCE = (
    5000  # terms up to which a greatest common divisor is sought without asking whether there may be one
)

_FACTOR_LIMIT = 2000  # terms above which a polynomial in s is not factored in search of its roots

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


def with_pi(context: fmpz_mpoly_ctx) -> fmpz_mpoly_ctx:
    """The ring with pi before all else."""
    return fmpz_mpoly_ctx.get(("pi", *context.names()), Ordering.lex)


def times_two_pi(ratio: tuple[fmpz_mpoly, fmpz_mpoly]) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """2π·ratio in lowest terms, in a ring that has pi: rad/s of what is in Hz. ValueError where it lacks pi."""
    above, below = ratio
    context = above.context()
    return lowest_terms(2 * above * context.gens()[context.names().index("pi")], below)


def into_ring(polynomial: fmpz_mpoly, context: fmpz_mpoly_ctx) -> fmpz_mpoly:
    """The same polynomial in a ring that has all the generators it holds. KeyError where it lacks one."""
    own = polynomial.context()
    if own is context:
        return polynomial
    known = context.names()
    for name, degree in zip(own.names(), polynomial.degrees(), strict=True):
        if degree > 0 and name not in known:
            raise KeyError(name)
    return polynomial.project_to_context(context)


def held(*polynomials: fmpz_mpoly) -> set[str]:
    """The generators that the polynomials hold, s left out."""
    found: set[str] = set()
    for polynomial in polynomials:
        names = polynomial.context().names()
        found.update(name for name, degree in zip(names, polynomial.degrees(), strict=True) if degree > 0)
    return found - {S}


def by_power(polynomial: fmpz_mpoly, index: int | None = None) -> dict[int, fmpz_mpoly]:
    """Split by the power of one generator (s, the last, unless `index` says otherwise)."""
    context = polynomial.context()
    place = context.nvars() - 1 if index is None else index
    name, generator = context.names()[place], context.gens()[place]
    parts: dict[int, fmpz_mpoly] = {}
    power = 0
    while not polynomial.is_zero():
        low = polynomial.subs({name: 0})
        if not low.is_zero():
            parts[power] = low
        polynomial = (polynomial - low) / generator
        power += 1
    return parts


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


def factors_in_s(coefficients: tuple[fmpz_mpoly, ...]) -> list[tuple[fmpz_mpoly, ...]]:
    """The factors of positive degree in s, each as coefficients of s ascending, repeated by multiplicity."""
    polynomial = from_coefficients(coefficients)
    if len(polynomial) > _FACTOR_LIMIT:
        return [tuple(coefficients)]
    if len(coefficients) == 2 and not coefficients[0].is_zero():
        return [tuple(coefficients)]
    found = []
    for factor, multiplicity in polynomial.factor()[1]:
        if max(by_power(factor)) > 0:
            found.extend([coefficients_of_s(factor)] * multiplicity)
    return found


def least_exponents(polynomials: Iterable[fmpz_mpoly]) -> list[int]:
    """The least exponent of each generator over all terms of the polynomials."""
    least: list[int] | None = None
    for polynomial in polynomials:
        if not polynomial.is_zero():
            here = [int(e) for e in polynomial.term_content().monoms()[0]]
            least = here if least is None else [min(a, b) for a, b in zip(least, here, strict=True)]
    return least or []


def inverted(
    numerator: fmpz_mpoly, denominator: fmpz_mpoly, names: set[str]
) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """Write generators in `names` as their inverses: a conductance's place is taken by its resistance.

    Both polynomials are multiplied by the same monomial, which clears the negative powers.
    """
    context = numerator.context()
    places = [i for i, name in enumerate(context.names()) if name in names]
    if not places:
        return numerator, denominator
    degrees = numerator.degrees(), denominator.degrees()
    top = {i: max(0, *(int(each[i]) for each in degrees)) for i in places}

    def flip(polynomial: fmpz_mpoly) -> fmpz_mpoly:
        terms = {}
        for exponents, coefficient in polynomial.terms():
            new = list(exponents)
            for i in places:
                new[i] = top[i] - int(exponents[i])
            terms[tuple(new)] = coefficient
        return context.from_dict(terms)

    return flip(numerator), flip(denominator)


def lowest_terms(
    numerator: fmpz_mpoly, denominator: fmpz_mpoly, *, apart: bool = False
) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """The same ratio with nothing common left, and most terms of the denominator positive.

    `apart` says that both are known to share no more than a monomial and an integer. ZeroDivisionError where the
    denominator is zero.
    """
    context = denominator.context()
    if denominator.is_zero():
        raise ZeroDivisionError("ratio with denominator zero")
    if numerator.is_zero():
        return numerator, context.constant(1)
    shared = least_exponents((numerator, denominator))
    if any(shared):
        monomial = context.from_dict({tuple(shared): 1})
        numerator, denominator = numerator / monomial, denominator / monomial
    small = len(numerator) + len(denominator) <= _GCD_AT_ONCE
    if not apart and (small or _may_share(numerator, denominator)):
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
    """Of the coefficient of the lowest power of s."""
    context = polynomial.context()
    low = least_exponents((polynomial,))[-1]
    first = (polynomial / context.gens()[-1] ** low).subs({S: 0})
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
    values = [draw.randrange(2, PRIME) for _ in range(context.nvars())]
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
        residue = int(coefficient) % PRIME
        for value, exponent in zip(values, exponents, strict=True):
            for _ in range(int(exponent)):
                residue = residue * value % PRIME
        rows.append((tuple(int(e) for e in exponents), residue))
    return rows


def _image(rows: list[tuple[tuple[int, ...], int]], index: int, value: int) -> nmod_poly:
    """The image in generator `index` from residues in which it stood at `value`."""
    inverse = pow(value, -1, PRIME)
    powers = [1]
    coefficients: dict[int, int] = {}
    for exponents, residue in rows:
        while len(powers) <= exponents[index]:
            powers.append(powers[-1] * inverse % PRIME)
        e = exponents[index]
        coefficients[e] = (coefficients.get(e, 0) + residue * powers[e]) % PRIME
    return nmod_poly([coefficients.get(e, 0) for e in range(max(coefficients, default=0) + 1)], PRIME)
