"""Quantities as formulas: ratios of polynomials where a quantity is rational, quadratic roots where it is one."""

from __future__ import annotations

from dataclasses import replace
from math import pi
from typing import Protocol

import numpy as np
from flint import fmpz_mpoly

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.exact.forms import Expanded, Nested
from symamp.exact.polys import (
    held,
    into_ring,
    lowest_terms,
    ring_of,
    with_pi,
)
from symamp.exact.shape import QuadraticRoot, Shape, shape_of
from symamp.exact.tape import polynomial_value

Formula = Shape | QuadraticRoot
PolyRatio = tuple[fmpz_mpoly, fmpz_mpoly]


class Formed(Protocol):
    """What formulas ask of a response."""

    @property
    def stage(self) -> Stage: ...
    @property
    def form(self) -> Expanded | Nested: ...
    @property
    def apart(self) -> bool: ...
    @property
    def single_pole(self) -> bool: ...
    @property
    def first_zero(self) -> Expanded | Nested | None: ...
    @property
    def missing(self) -> tuple[str, ...]: ...
    @property
    def bias_values(self) -> dict[str, float]: ...
    @property
    def negative_ok(self) -> frozenset[str]: ...


def formula_of(response: Formed, quantity: Quantity) -> Formula | None:
    """The formula of a quantity, or None: of a face (not in dB or degrees) where the quantity's sign is sure."""
    if quantity.face is not None:
        return _face_formula(response, quantity)
    ratio = rational_of(response, quantity)
    if ratio is not None:
        return shape_of(*ratio, weights=response.bias_values or None)
    if quantity.name in ("p", "z") and isinstance(response.form, Expanded):
        return _quadratic_root(response, quantity)
    band = band_ratio(response, quantity)
    return None if band is None else _with_pi_shape(response, band)


def _face_formula(response: Formed, quantity: Quantity) -> Formula | None:
    """Of what is positive as it is, its own formula; of what is rational, its real and imaginary part and size."""
    whole = replace(quantity, face=None)
    if quantity.name in ("bandwidth", "gain_bandwidth"):
        return formula_of(response, whole)
    ratio = rational_of(response, whole)
    if ratio is None or quantity.face not in ("re", "im", "magnitude", "hz"):
        return None
    above, below = ratio
    if quantity.face == "im":
        above = 0 * above
    if quantity.face in ("re", "im") or above.is_zero():
        return shape_of(*lowest_terms(above, below), weights=response.bias_values or None)
    sign = _sign(above) * _sign(below)
    if not sign or response.negative_ok & held(above, below):
        return None
    if quantity.face == "hz":
        return _with_pi_shape(response, _over_two_pi(response, above * sign, below))
    return shape_of(above * sign, below, weights=response.bias_values or None)


def band_ratio(response: Formed, quantity: Quantity) -> PolyRatio | None:
    """b0/(2π·b1), or |a0|/(2π·b1), of a response with one pole and no zero whose coefficients have one sign each.

    The ring has pi first. None for any other response, or quantity than bandwidth and gain-bandwidth.
    """
    form = _levels(response)
    if quantity.name not in ("bandwidth", "gain_bandwidth") or form is None:
        return None
    if len(form.denominator) != 2 or len(form.numerator) != 1:
        return None
    b0, b1 = form.denominator
    above = form.numerator[0] if quantity.name == "gain_bandwidth" else b0
    if _sign(b0) <= 0 or _sign(b1) <= 0 or not _sign(above) or response.negative_ok & form.symbols:
        return None
    return _over_two_pi(response, above * _sign(above), b1)


def _over_two_pi(response: Formed, above: fmpz_mpoly, below: fmpz_mpoly) -> PolyRatio:
    """above/(2π·below), in lowest terms."""
    context = with_pi(ring_of(response.stage.symbols, held(above, below)))
    above, below = (into_ring(p, context) for p in (above, 2 * below))
    return lowest_terms(above, below * context.gens()[0])


def _with_pi_shape(response: Formed, ratio: PolyRatio) -> Shape:
    weights = {**response.bias_values, "pi": pi} if response.bias_values else None
    return shape_of(*ratio, weights=weights)


def _sign(polynomial: fmpz_mpoly) -> int:
    """+1 or −1 where all terms have that sign, else 0."""
    signs = {1 if c > 0 else -1 for c in polynomial.coeffs()}
    return signs.pop() if len(signs) == 1 else 0


def rational_of(response: Formed, quantity: Quantity) -> PolyRatio | None:
    """numerator/denominator in lowest terms of a quantity that is rational in the symbols, or None."""
    form = _levels(response)
    if form is None:
        return None
    if quantity.name in ("dc", "hf", "a", "b"):
        ratio = _coefficient_ratio(form, quantity)
    elif quantity.name in ("p", "z"):
        ratio = _rational_root(response, quantity)
    else:
        return None
    return None if ratio is None else lowest_terms(*ratio)


def _levels(response: Formed) -> Expanded | None:
    """The written-out form from which all but the roots come."""
    form = response.form
    if not isinstance(form, Expanded):
        return None
    return (
        Expanded(form.numerator[:1], form.denominator[:2])
        if response.apart and response.single_pole
        else form
    )


def _coefficient_ratio(form: Expanded, quantity: Quantity) -> PolyRatio | None:
    numerator, denominator = form.numerator, form.denominator
    zero, one = form.context.constant(0), form.context.constant(1)
    if quantity.name == "dc":
        return None if denominator[0].is_zero() else (numerator[0], denominator[0])
    if quantity.name == "hf":
        if len(numerator) > len(denominator):
            return None
        return (numerator[-1], denominator[-1]) if len(numerator) == len(denominator) else (zero, one)
    index = quantity.index or 0
    unit = next(c for c in denominator if not c.is_zero())
    row = numerator if quantity.name == "a" else denominator
    return (row[index], unit) if index < len(row) else (zero, one)


def _root_form(response: Formed, quantity: Quantity) -> Expanded:
    form = response.form
    if quantity.name == "z" and response.first_zero is not None:
        form = response.first_zero
    assert isinstance(form, Expanded)
    return form


def _root_coefficients(response: Formed, quantity: Quantity) -> tuple[fmpz_mpoly, ...]:
    form = _root_form(response, quantity)
    return form.denominator if quantity.name == "p" else form.numerator


def root_factor(response: Formed, quantity: Quantity) -> tuple[fmpz_mpoly, ...] | None:
    """The irreducible factor in s that has a pole or zero, coefficients ascending; None where none is written out."""
    if not isinstance(response.form, Expanded):
        return None
    coefficients = _root_coefficients(response, quantity)
    if len(coefficients) <= (quantity.index or 1):
        return None
    found = _factor_of_root(response, quantity, coefficients)
    return None if found is None else found[0]


def _rational_root(response: Formed, quantity: Quantity) -> PolyRatio | None:
    index = quantity.index or 1
    coefficients = _root_coefficients(response, quantity)
    if len(coefficients) <= index:
        return None
    if response.apart:
        k = _apart_index(response, coefficients, index)
        return None if k is None or coefficients[k].is_zero() else (-coefficients[k - 1], coefficients[k])
    factor = _factor_of_root(response, quantity, coefficients)
    if factor is None or len(factor[0]) != 2:
        return None
    return -factor[0][0], factor[0][1]


def _apart_index(response: Formed, coefficients: tuple[fmpz_mpoly, ...], index: int) -> int | None:
    """Which ratio of neighbours is the index-th by magnitude at the bias point (in order where there is none)."""
    if response.missing:
        return index
    values = [polynomial_value(c, response.bias_values) for c in coefficients]
    sizes = []
    for k in range(1, len(values)):
        if values[k]:
            sizes.append((abs(values[k - 1] / values[k]), k))
    sizes.sort()
    return sizes[index - 1][1] if index <= len(sizes) else None


def _quadratic_root(response: Formed, quantity: Quantity) -> QuadraticRoot | None:
    index = quantity.index or 1
    coefficients = _root_coefficients(response, quantity)
    if len(coefficients) <= index or response.apart:
        return None
    factor = _factor_of_root(response, quantity, coefficients)
    if factor is None or len(factor[0]) != 3:
        return None
    c, b, a = factor[0]
    weights = response.bias_values or None
    first = QuadraticRoot.of(a, b, c, 1, weights)
    second = QuadraticRoot.of(a, b, c, -1, weights)
    smaller = second if _sign(b) < 0 else first
    if weights is not None and not response.missing:
        values = [polynomial_value(p, response.bias_values) for p in (a, b, c)]
        roots = _quadratic_values(*values)
        if roots[0].imag:
            smaller = first if roots[0].imag > 0 else second
        else:
            smaller = first if abs(roots[0]) <= abs(roots[1]) else second
    other = second if smaller is first else first
    return smaller if factor[1] == 0 else other


def _quadratic_values(a: float, b: float, c: float) -> tuple[complex, complex]:
    """(−b + sqrt(b² − 4ac))/(2a) and with −; the smaller in magnitude from the product of both."""
    root = np.sqrt(complex(b * b - 4 * a * c))
    plus, minus = (-b + root) / (2 * a), (-b - root) / (2 * a)
    if root.imag == 0 and b:
        if b > 0:
            plus = c / (a * minus)
        else:
            minus = c / (a * plus)
    return complex(plus), complex(minus)


def _factor_of_root(
    response: Formed, quantity: Quantity, coefficients: tuple[fmpz_mpoly, ...]
) -> tuple[tuple[fmpz_mpoly, ...], int] | None:
    """The irreducible factor in s that has the root asked for, and which of its roots that is (from 0)."""
    index = quantity.index or 1
    factors = _root_form(response, quantity).factors[0 if quantity.name == "z" else 1]
    if len(factors) == 1 and len(factors[0]) - 1 == len(coefficients) - 1:
        return factors[0], index - 1
    if response.missing:
        return None
    places: list[tuple[float, int, tuple[fmpz_mpoly, ...]]] = []
    for factor in factors:
        values = [polynomial_value(c, response.bias_values) for c in factor]
        sizes = sorted(abs(r) for r in np.roots(values[::-1]))
        places.extend((size, i, factor) for i, size in enumerate(sizes))
    places.sort(key=lambda place: place[0])
    if index > len(places):
        return None
    _, which, factor = places[index - 1]
    return factor, which
