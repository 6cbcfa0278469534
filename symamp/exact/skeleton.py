"""Exact: what a minor graph's polynomials in s are like whatever the values, found modulo a prime.

At random values modulo a prime a polynomial that is not identically zero vanishes with a probability of some
degree/2^61 (Schwartz 1980, Zippel 1979); the same holds for a common factor.
"""

from __future__ import annotations

import random
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

from flint import Ordering, nmod, nmod_mpoly, nmod_mpoly_ctx, nmod_poly

from symamp.exact.cofactors import entry_symbols
from symamp.exact.graded import PRIME, row_shifts
from symamp.exact.minors import MinorGraph

Powers = tuple[int, ...]


class GraphForm(Protocol):
    """What is asked of a nested form."""

    @property
    def graph(self) -> MinorGraph: ...
    @property
    def symbols(self) -> frozenset[str]: ...
    @property
    def limits(self) -> Mapping[str, int]: ...
    @property
    def valuation(self) -> tuple[int, int]: ...
    def full_values(self, values: Mapping[str, Any]) -> dict[str, Any]: ...


@dataclass(frozen=True)
class Skeleton:
    """Numerator and denominator in s, whatever the values.

    `degrees` are theirs as they come from the graph; s^`low` and a factor of degree `common` beside it are shared.
    `powers` are those whose coefficients do not vanish once both are divided out.
    """

    degrees: tuple[int, int]
    low: int
    common: int
    powers: tuple[Powers, Powers]


def skeleton_of(form: GraphForm) -> Skeleton:
    """The skeleton of a nested form, without regard to the powers that it keeps."""
    above, below = images_with(form, random_values(form, 11))
    degrees = above.degree(), below.degree()
    if min(degrees) < 0:
        return Skeleton(degrees, 0, 0, (_powers(above), _powers(below)))
    low = min(_powers(above)[0], _powers(below)[0])
    shared = above.gcd(below)
    return Skeleton(degrees, low, shared.degree() - low, (_powers(above // shared), _powers(below // shared)))


def _powers(polynomial: nmod_poly) -> Powers:
    return tuple(k for k in range(polynomial.degree() + 1) if int(polynomial[k]))


def random_values(form: GraphForm, seed: int, moved: Iterable[str] = ()) -> dict[str, int]:
    """A random value modulo the prime for every symbol; computed ones follow by their rules.

    Symbols in `moved` get another value than they have without.
    """
    draw = random.Random(seed)
    free = sorted({*entry_symbols(form.graph), *form.symbols})
    values = {name: nmod(draw.randrange(2, PRIME), PRIME) for name in free}
    values.update((name, nmod(draw.randrange(2, PRIME), PRIME)) for name in moved)
    return {name: int(value) for name, value in form.full_values(values).items()}


def images_with(form: GraphForm, values: Mapping[str, int]) -> tuple[nmod_poly, nmod_poly]:
    """Numerator and denominator in s at values modulo the prime, each at its power of t, common factors and all."""
    graph = form.graph
    shifts = row_shifts(graph, form.limits)
    context = nmod_mpoly_ctx.get(("s", "t"), modulus=PRIME, ordering=Ordering.lex)
    entries = []
    for entry, row in zip(graph.entries, graph.entry_rows, strict=True):
        terms: dict[tuple[int, int], int] = {}
        for coefficient, symbol, power, s_power in entry:
            value, t = coefficient, shifts[row]
            if symbol is not None:
                value *= values[symbol] if power > 0 else pow(values[symbol], -1, PRIME)
                t += form.limits.get(symbol, 0) * power
            terms[s_power, t] = (terms.get((s_power, t), 0) + value) % PRIME
        entries.append(context.from_dict({key: value for key, value in terms.items() if value}))
    both = graph.walk(entries, context.constant(1), context.constant(0))
    above, below = (_of_s(p, layer) for p, layer in zip(both, form.valuation, strict=True))
    return above, below


def _of_s(polynomial: nmod_mpoly, layer: int) -> nmod_poly:
    """The coefficient of one power of t, as a polynomial in s."""
    found = {int(s): int(c) for (s, t), c in polynomial.to_dict().items() if int(t) == layer}
    return nmod_poly([found.get(k, 0) for k in range(max(found, default=0) + 1)], PRIME)
