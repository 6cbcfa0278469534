"""The error of a quantity as a formula, where both sides are rational in the symbols."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from math import pi

import numpy as np

from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import PolyRatio, band_ratio, formula_of, rational_of
from symamp.exact.polys import held, into_ring, lowest_terms, ring_of, with_pi
from symamp.exact.response import Response
from symamp.exact.shape import Shape, shape_of
from symamp.exact.tape import largest_term, polynomial_value
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
    a = partner_ratio(exact, approximate, quantity)
    if e is None or a is None:
        return None
    return error_of_ratios(exact, e, a)


def error_of_ratios(exact: Response, e: PolyRatio, a: PolyRatio) -> ErrorFormula | None:
    """The error a/e − 1 of one ratio of polynomials against another; None where it is none, or too large."""
    ratio = error_ratio(exact, e, a)
    if ratio is None:
        return None
    above, below = ratio
    if above.is_zero():
        return ErrorFormula(shape_of(above), None)
    weights = {**exact.bias_values, "pi": pi} if exact.bias_values else None
    values = defaultdict(lambda: 1.0, {**exact.bias_values, "pi": pi})  # a symbol without a value counts as 1
    largest = lowest_terms(largest_term(above, values), largest_term(below, values))
    sizes = [polynomial_value(polynomial, values) for polynomial in largest]
    value = None if exact.missing or not sizes[1] else sizes[0] / sizes[1]
    return ErrorFormula(shape_of(above, below, weights=weights), shape_of(*largest, weights=weights), value)


def error_ratio(exact: Response, e: PolyRatio, a: PolyRatio) -> PolyRatio | None:
    """a/e − 1 in lowest terms; None where it is none, or too large to be multiplied out."""
    if e[0].is_zero() or a[1].is_zero():
        return None
    if max(len(e[0]) * len(a[1]), len(a[0]) * len(e[1])) > _TERM_LIMIT:
        return None
    context = with_pi(ring_of(exact.stage.symbols, held(*e, *a) - {"pi"}))
    (en, ed), (an, ad) = (tuple(into_ring(p, context) for p in ratio) for ratio in (e, a))
    return lowest_terms(an * ed - en * ad, en * ad)


def partner_ratio(exact: Response, approximate: Response, quantity: Quantity) -> PolyRatio | None:
    """The approximate quantity as a ratio: of a root that of its partner at the bias point."""
    if not is_root(quantity):
        return rational_of(approximate, quantity) or band_ratio(approximate, quantity)
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
