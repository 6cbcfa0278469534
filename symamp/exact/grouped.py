"""A long sum as a designer groups it: capacitors that see the same conductances stand together.

b1 of a cascode is not sixteen products but (CL + cdb2 + cgd2)·(gm2 + gmb2 + gds1 + gds2) + gds2·(cgs2 + …).
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Any

from symamp.exact.shape import Shape, shape_of

_SHORT = 4  # terms up to which a sum is read at a glance as it is


def grouped(
    polynomial: Any, reactive: Collection[str], weights: Mapping[str, float] | None = None
) -> tuple[Shape, ...]:
    """Shapes that add up to the polynomial (fmpz_mpoly): one where it factors or is short, else one a group.

    Terms are grouped by what they hold beside the `reactive` symbols; where grouping gains nothing the whole
    sum is one shape.
    """
    whole = shape_of(polynomial, weights=weights)
    if len(polynomial) <= _SHORT or len([f for f in whole.numerator if f.is_sum]) > 1:
        return (whole,)
    groups = _by_coefficient(polynomial, reactive)
    if len(groups) < 2 or 2 * len(groups) > len(polynomial):
        return (whole,)
    context = polynomial.context()
    return tuple(shape_of(context.from_dict(terms), weights=weights) for terms in groups)


def _by_coefficient(polynomial: Any, reactive: Collection[str]) -> list[dict[tuple[int, ...], int]]:
    """The terms in groups whose reactive products share one coefficient, in order of first appearance."""
    names = polynomial.context().names()
    places = [i for i, name in enumerate(names) if name in reactive]
    by_product: dict[tuple[int, ...], dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.terms():
        product = tuple(int(exponents[i]) for i in places)
        rest = [int(e) for e in exponents]
        for i in places:
            rest[i] = 0
        by_product.setdefault(product, {})[tuple(rest)] = int(coefficient)
    groups: dict[frozenset[Any], dict[tuple[int, ...], int]] = {}
    for product, coefficients in by_product.items():
        terms = groups.setdefault(frozenset(coefficients.items()), {})
        for rest_key, coefficient in coefficients.items():
            exponents = list(rest_key)
            for i, e in zip(places, product, strict=True):
                exponents[i] = e
            terms[tuple(exponents)] = coefficient
    return list(groups.values())
