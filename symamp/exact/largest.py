"""Exact: the dominant terms of a nested response's coefficients, and a short response made of them.

The terms come from the product diagram (`largest_diagram`), in which nothing cancels, and the magnitudes of all
products are added up over the same diagram: what was not generated is bounded, and not only in its net sum.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import exp, fsum, inf, log
from typing import Any

from symamp.exact.forms import Nested
from symamp.exact.largest_diagram import ProductDiagram, nothing
from symamp.exact.largest_elements import Element, Side
from symamp.exact.largest_products import side_diagram
from symamp.exact.largest_sums import choice_value, magnitudes_of, sums, weights_of
from symamp.exact.largest_terms import SAME, Gathering, LargestProducts, Monomial, Product, least_factor

_TIES = 5_000  # products of the same magnitude that are added at most once there is enough


@dataclass(frozen=True)
class Dominant:
    """The largest terms of one coefficient at a bias point, as (monomial, integer), the largest first.

    `total` is the coefficient's value and `kept` that of the terms; `rest` is |total − kept|/|total|. `left` is what
    the magnitudes of all products that were not generated add up to, over |total|: it bounds `rest`, and no large
    terms that cancel one another can hide in it. `complete` says that there are no more terms.
    """

    terms: tuple[tuple[Monomial, int], ...]
    kept: float
    total: float
    rest: float
    left: float
    complete: bool


@dataclass(frozen=True)
class CoefficientTerms:
    """The products of s**`power` on one side of a nested response, at one bias point.

    `total` and `magnitudes` are logarithms of |the sum of products| and of the sum of their magnitudes; `sign` is the
    sum's.
    """

    diagram: ProductDiagram
    power: int
    values: Mapping[str, float]
    total: float
    sign: int
    magnitudes: float

    def products(self) -> LargestProducts:
        """Products by magnitude, one for each path of the diagram and choice of its elements."""
        return LargestProducts(self.diagram, self.power, self.values)


def coefficient_terms(
    nested: Nested,
    which: Side,
    power: int,
    values: Mapping[str, float],
    *,
    rename: Mapping[str, str] | None = None,
) -> CoefficientTerms:
    """The terms of a coefficient of a nested response, without the response's scale, ready to be generated.

    `power` counts from the power of s that numerator and denominator share whatever the values. A factor of higher
    degree that they share stays in both. `values` are those of the symbols at the bias point; `rename` makes symbols
    one with others. TooLargeError where the diagram grows too large.
    """
    full = {name: float(value) for name, value in nested.full_values(values).items()}
    place = 0 if which == "numerator" else 1
    raw = power + nested.skeleton.low
    keep = nested.keep[place]
    if keep is not None and power not in keep:
        return CoefficientTerms(nothing(), raw, full, -inf, 0, -inf)
    diagram = side_diagram(nested, which, raw, rename)
    return terms_at(diagram, raw, full)


def terms_at(diagram: ProductDiagram, power: int, values: Mapping[str, float]) -> CoefficientTerms:
    """The products of s**power of a diagram at a bias point."""
    return CoefficientTerms(diagram, power, values, *_totals(diagram, power, values))


def _totals(diagram: ProductDiagram, power: int, values: Mapping[str, float]) -> tuple[float, int, float]:
    """log |sum|, its sign, and log of the sum of magnitudes."""
    omega = natural_frequency(diagram.items, values)
    shift = power * log(omega)
    net = sums(diagram, weights_of(diagram.items, values, omega), 1, highest=power)
    every = sums(diagram, magnitudes_of(diagram.items, values, omega), 1, highest=power, signed=False)
    value, size = float(net.coefficient(power)[0]), float(every.coefficient(power)[0])
    return (
        log(abs(value)) + net.exponent * log(2) - shift if value else -inf,
        (value > 0) - (value < 0),
        log(size) + every.exponent * log(2) - shift if size else -inf,
    )


def dominant_terms(
    nested: Nested,
    which: Side,
    power: int,
    values: Mapping[str, float],
    *,
    rest: float,
    limit: int,
    rename: Mapping[str, str] | None = None,
) -> Dominant:
    """The largest terms of the coefficient of s**power, until what is `left` is at most `rest`.

    No more than `limit` terms are kept. Products of the same monomial are added up, and what cancels is no term; to
    settle the last ones 5,000 products more are looked at, and monomials that are not settled then are left out.
    For the other arguments see `coefficient_terms`, and for what is bounded `Dominant`.
    """
    terms = coefficient_terms(nested, which, power, values, rename=rename)
    if terms.magnitudes == -inf:
        return Dominant((), 0.0, 0.0, 0.0, 0.0, True)
    return _dominant(terms, *largest_of(terms, rest=rest, limit=limit))


def largest_of(terms: CoefficientTerms, *, rest: float, limit: int) -> tuple[list[Product], float, bool]:
    """The largest terms; what is left in magnitude, as a part of the sum of all magnitudes; whether they are all.

    They end where what is left is at most `rest` of |the net sum|, or at `limit` terms.
    """
    net = exp(terms.total - terms.magnitudes)
    least = least_factor(terms.diagram)
    gathering = Gathering(terms.values, least)
    found: list[Product] = []
    left, complete = 1.0, True
    enough: float | None = None  # what is no smaller than this is still added, to settle what was begun
    ties = 0
    for product in terms.products():
        found.extend(gathering.settled(product.log))
        if enough is None and (left <= rest * net or len(found) + len(gathering) >= limit):
            enough = gathering.lowest() + log(least) - SAME
        if enough is not None:
            ties += 1
            if product.log < enough or ties > _TIES:
                complete = False
                break
        gathering.add(product)
        left -= exp(product.log - terms.magnitudes)
    if complete:
        found.extend(gathering.settled(-inf))
        left = 0.0
    found.sort(key=lambda term: (-term.log, term.monomial))
    cut = [term.log for term in found[limit:]] + gathering.unsettled()
    left = max(left, 0.0) + fsum(exp(size - terms.magnitudes) for size in cut)
    return found[:limit], left, complete and not cut


def _dominant(terms: CoefficientTerms, found: list[Product], left: float, complete: bool) -> Dominant:
    net = terms.sign * exp(terms.total - terms.magnitudes)
    negative = {name for name, value in terms.values.items() if value < 0}
    kept = fsum(_sign(term, negative) * exp(term.log - terms.magnitudes) for term in found)
    if complete:
        net = kept  # better than the sum over the diagram, which may be all rounding where terms cancel
    size = exp(terms.magnitudes) if terms.magnitudes > -700 else 0.0
    return Dominant(
        tuple((term.monomial, whole(term.coefficient)) for term in found),
        kept * size,
        net * size,
        _over(abs(net - kept), abs(net)),
        _over(left, abs(net)),
        complete,
    )


def _over(part: float, of: float) -> float:
    return part / of if of else (inf if part else 0.0)


def _sign(term: Product, negative: set[str]) -> int:
    """The sign of a term's value."""
    odd = sum(power for name, power in term.monomial if name in negative) & 1
    return -1 if (term.coefficient < 0) != bool(odd) else 1


def whole(coefficient: Fraction) -> int:
    """The integer that a monomial's factor is: a determinant of integers and symbols has no others."""
    assert coefficient.denominator == 1
    return coefficient.numerator


def natural_frequency(items: Sequence[Element], values: Mapping[str, Any]) -> float:
    """A frequency at which what stands with s is of the size of what stands without."""
    logs: tuple[list[float], list[float]] = ([], [])
    for element in items:
        for choice in element.choices:
            size = abs(float(choice_value(choice, values)))
            if choice.symbol is not None and size:
                logs[choice.s_power].append(log(size))
    if not logs[1]:
        return 1.0
    return exp((fsum(logs[0]) / len(logs[0]) if logs[0] else 0.0) - fsum(logs[1]) / len(logs[1]))
