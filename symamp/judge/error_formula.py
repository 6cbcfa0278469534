"""The error of a quantity as a formula, where both sides are rational in the symbols."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from flint import fmpz_mpoly

from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import formula_of, rational_of
from symamp.exact.polys import held, into_ring, lowest_terms, ring_of
from symamp.exact.response import Response
from symamp.exact.shape import Shape, shape_of
from symamp.exact.tape import polynomial_value, term_dict, term_value
from symamp.judge.pairing import partners

_TERM_LIMIT = 4000  # terms above which the difference is not multiplied out


@dataclass(frozen=True)
class ErrorFormula:
    """The error (a − e)/e in lowest terms, and its leading term: the largest at the bias point over the largest.

    `leading_value` is that term's value there; well above the error where other terms nearly cancel it.
    """

    shape: Shape
    leading: Shape | None
    leading_value: float | None = None


def error_formula(exact: Response, approximate: Response, quantity: Quantity) -> ErrorFormula | None:
    """The error's formula, or None where the quantity is not rational in the symbols."""
    if quantity.face is not None:
        return None
    if quantity.name == "bandwidth" and formula_of(exact, quantity) and formula_of(approximate, quantity):
        quantity = Quantity("p", index=1)  # of one pole each the bandwidth is |p1|/2π, and as much off
    e = rational_of(exact, quantity)
    a = _partner(exact, approximate, quantity)
    if e is None or a is None or e[0].is_zero() or a[1].is_zero():
        return None
    if max(len(e[0]) * len(a[1]), len(a[0]) * len(e[1])) > _TERM_LIMIT:
        return None
    context = ring_of(exact.stage.symbols, held(*e, *a))
    (en, ed), (an, ad) = (tuple(into_ring(p, context) for p in ratio) for ratio in (e, a))
    above, below = an * ed - en * ad, en * ad
    if above.is_zero():
        return ErrorFormula(shape_of(above), None)
    above, below = lowest_terms(above, below)
    weights = exact.bias_values or None
    values = defaultdict(lambda: 1.0, exact.bias_values)  # a symbol without a value counts as 1
    largest = lowest_terms(_largest(above, values), _largest(below, values))
    sizes = [polynomial_value(polynomial, values) for polynomial in largest]
    value = None if exact.missing or not sizes[1] else sizes[0] / sizes[1]
    return ErrorFormula(shape_of(above, below, weights=weights), shape_of(*largest, weights=weights), value)


def _partner(
    exact: Response, approximate: Response, quantity: Quantity
) -> tuple[fmpz_mpoly, fmpz_mpoly] | None:
    """The approximate quantity as a ratio: of a root that of its partner at the bias point."""
    if not is_root(quantity):
        return rational_of(approximate, quantity)
    both = [
        np.array(r.poles() if quantity.name == "p" else r.zeros(), dtype=complex).reshape(-1, 1)
        for r in (exact, approximate)
    ]
    index = (quantity.index or 1) - 1
    found = partners(*both)
    if index >= found.shape[0] or np.isnan(found[index, 0]):
        return None
    place = int(np.flatnonzero(both[1][:, 0] == found[index, 0])[0])
    return rational_of(approximate, Quantity(quantity.name, index=place + 1))


def _largest(polynomial: fmpz_mpoly, values: Mapping[str, float]) -> fmpz_mpoly:
    """The term that is largest in magnitude at the bias point."""
    terms = term_dict(polynomial).items()
    monomial, coefficient = max(terms, key=lambda item: abs(term_value(item[0], item[1], values)))
    context = polynomial.context()
    place = {name: i for i, name in enumerate(context.names())}
    exponents = [0] * context.nvars()
    for name, exponent in monomial:
        exponents[place[name]] = exponent
    return context.from_dict({tuple(exponents): coefficient})
