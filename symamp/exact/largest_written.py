"""Exact: both sides of a response written out from their product diagrams, where no term ever cancels.

The minor graph writes out many more terms on its way than are left in the end; here every term of every node is one
of the result, and a resistance is put in the place of its conductance as the terms are made.
"""

from __future__ import annotations

import random
from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from flint import fmpq, fmpq_mpoly, fmpq_mpoly_ctx, fmpz_mpoly, fmpz_mpoly_ctx, nmod_poly

from symamp.circuit.stage import Symbol
from symamp.exact.cofactors import Ratio, entry_symbols
from symamp.exact.forms import Expanded, expanded_of
from symamp.exact.largest_diagram import ProductDiagram, diagram_of
from symamp.exact.largest_elements import Element, elements_of
from symamp.exact.largest_products import SIDES
from symamp.exact.largest_sums import last_uses
from symamp.exact.minors import MinorGraph
from symamp.exact.modular import PRIME
from symamp.exact.polys import S, lowest_terms, ring_of
from symamp.exact.system import Entry


def write_out_products(ratio: Ratio, symbols: Mapping[str, Symbol]) -> Expanded:
    """A response written out in lowest terms; for what is too large to be written out from the minor graph."""
    return expanded_of(*lowest_terms(*written_products(ratio, symbols), apart=not may_share(ratio.graph)))


def may_share(graph: MinorGraph) -> bool:
    """Whether both sides may have a factor in common that is not a monomial, by images modulo a prime.

    The graph itself is worked out as a polynomial in one symbol after another, the others at random values. A factor
    of positive degree in a symbol stays one where its leading coefficient does not vanish, which it does with a
    probability of some degree/2^61 (Schwartz 1980, Zippel 1979).
    """
    draw = random.Random(20)
    names = entry_symbols(graph)
    values = {name: draw.randrange(2, PRIME) for name in names}
    s_value = draw.randrange(2, PRIME)
    for name in (*names, S):
        entries = [_image(entry, values, s_value, name) for entry in graph.entries]
        above, below = graph.walk(entries, nmod_poly([1], PRIME), nmod_poly([0], PRIME))
        if above.gcd(below).degree() > min(_lowest_power(above), _lowest_power(below)):
            return True
    return False


def _image(entry: Entry, values: Mapping[str, int], s_value: int, moving: str) -> nmod_poly:
    """An entry as a polynomial in one symbol, or in s; of a resistance in its conductance."""
    powers = [0, 0]
    for coefficient, symbol, power, s_power in entry:
        value, degree = coefficient, 0
        if s_power and moving == S:
            degree = 1
        elif s_power:
            value *= s_value
        if symbol == moving:
            degree = 1
        elif symbol is not None:
            value *= values[symbol] if power > 0 else pow(values[symbol], -1, PRIME)
        powers[degree] += value
    return nmod_poly([value % PRIME for value in powers], PRIME)


def _lowest_power(polynomial: nmod_poly) -> int:
    return next((k for k in range(polynomial.degree() + 1) if int(polynomial[k])), 0)


def written_products(
    ratio: Ratio, symbols: Mapping[str, Symbol], rename: Mapping[str, str] | None = None
) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """Numerator and denominator as integer polynomials, both times the same product of resistances.

    `rename` makes symbols one with others. What numerator and denominator share is still in them.
    TooLargeError where a diagram grows too large.
    """
    names = [(rename or {}).get(name, name) for name in entry_symbols(ratio.graph)]
    context = ring_of(symbols, names)
    numerator, denominator = (
        _whole(_written(diagram_of(elements_of(ratio.graph, side, rename)), context), context)
        for side in SIDES
    )
    return numerator * ratio.scale.numerator, denominator * ratio.scale.denominator


def _written(diagram: ProductDiagram, context: fmpz_mpoly_ctx) -> fmpz_mpoly | fmpq_mpoly:
    """The sum of all products, each times every resistance that stands in the diagram."""
    if not diagram.factor:
        return context.constant(0)
    ring = context if _all_whole(diagram) else fmpq_mpoly_ctx.get(context.names(), context.ordering())
    weights = [_weights(element, ring) for element in diagram.items]
    last = last_uses(diagram)
    values: dict[int, Any] = {0: ring.constant(1)}
    for node in range(1, diagram.top + 1):
        total = None
        links = diagram.out[node], diagram.taken[node]
        for link, weight in zip(links, weights[diagram.element[node]], strict=True):
            if link is None:
                continue
            below, factor = link
            part = values[below] if factor == 1 else values[below] * number(factor)
            part = part if weight == 1 else part * weight
            total = part if total is None else total + part
        values[node] = total
        for link in links:
            if link is not None and last[link[0]] == node:
                values.pop(link[0], None)
    return values[diagram.top] * number(diagram.factor)


def _weights(element: Element, context: Any) -> tuple[Any, Any]:
    """An element left out and taken, both times the resistances among its choices."""
    generator = dict(zip(context.names(), context.gens(), strict=True))
    resistances = [c.symbol for c in element.choices if c.power < 0 and c.symbol is not None]
    out = context.constant(1)
    for name in resistances:
        out *= generator[name]
    taken = context.constant(0)
    for choice in element.choices:
        term = context.constant(number(choice.coefficient))
        for name in resistances:
            if choice.power > 0 or name != choice.symbol:
                term *= generator[name]
        if choice.power > 0 and choice.symbol is not None:
            term *= generator[choice.symbol]
        taken += term * generator[S] if choice.s_power else term
    return out, taken


def _all_whole(diagram: ProductDiagram) -> bool:
    links = (link for link in (*diagram.out, *diagram.taken) if link is not None)
    numbers = [factor for _, factor in links] + [c.coefficient for e in diagram.items for c in e.choices]
    return all(Fraction(value).denominator == 1 for value in (*numbers, diagram.factor))


def number(value: Fraction | int) -> int | fmpq:
    """A number as FLINT takes it."""
    exact = Fraction(value)
    return exact.numerator if exact.denominator == 1 else fmpq(exact.numerator, exact.denominator)


def _whole(polynomial: fmpz_mpoly | fmpq_mpoly, context: fmpz_mpoly_ctx) -> fmpz_mpoly:
    """The integers that all coefficients are once the products are added up."""
    if isinstance(polynomial, fmpz_mpoly):
        return polynomial
    return context.from_dict({exponents: int(c.p) for exponents, c in polynomial.terms()})
