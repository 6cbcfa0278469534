"""Exact: a short formula for quantities of a nested response, from its largest terms.

First whole symbols are taken to zero or to infinity (`striking`): that shortens a formula most, and what is left is
small enough to be written out. Then single terms go, the least first. Every step is measured against the exact
quantities at all reference points, and not by what was dropped.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Symbol
from symamp.errors import StageError, TooLargeError
from symamp.exact.forms import Expanded, Nested, expanded_of
from symamp.exact.largest import largest_of, terms_at
from symamp.exact.largest_diagram import ProductDiagram
from symamp.exact.largest_products import SIDES, Products, products_of
from symamp.exact.largest_terms import Gathering, Product, combined, least_factor
from symamp.exact.polys import S, coefficients_of_s, from_coefficients, inverted, lowest_terms, ring_of
from symamp.exact.striking import AT_DC, Coefficient, Quotient, Search, Strike, strike_order

WRITE_LIMIT = 5_000  # products up to which all are written out once symbols have been struck
_CUT = 0.1  # of the error allowed: what may be left of a coefficient of more products, or as much as WRITE_LIMIT holds
_DETOURS = (
    1.0,
    2.0,
)  # errors on the way to a form may be larger than its own: strikes make up for one another
_TRIED = 6  # ends of such a way that are tried, the last first: fewer strikes, and more single terms may go


@dataclass(frozen=True)
class Reduced:
    """A short form for some quantities of a response.

    In `form` only the coefficients that the quantities are quotients of are there, the others are zero. `strikes`
    says which symbols were taken to a limit and `dropped` how many single terms went after that; `error` is the worst
    relative error of the quantities over the reference points, and `errors` that of each.
    """

    form: Expanded
    strikes: tuple[Strike, ...]
    dropped: int
    error: float
    errors: tuple[float, ...]

    @property
    def terms(self) -> int:
        """How many terms the form has."""
        return self.form.terms


def reduced_response(
    nested: Nested,
    symbols: Mapping[str, Symbol],
    values: Mapping[str, Any],
    points: int,
    quotients: Sequence[Quotient] = (AT_DC,),
    *,
    within: float,
    rename: Mapping[str, str] | None = None,
    keep: frozenset[str] = frozenset(),
) -> Reduced:
    """The shortest form found in which all quotients are `within` (relative) at `points` reference bias points.

    How much of the error goes to striking symbols and how much to dropping terms is tried in several ways. `symbols`
    are the stage's, `values` scalars or arrays over the points. With `rename`, which makes symbols one with others,
    what that is off is in the error too. Symbols in `keep` are not struck.

    Raises StageError where a quotient is zero or infinite, where `rename` alone is off by more, or where other powers
    of s than the lowest are asked for and both sides share a factor in s whatever the values (their own coefficients
    are then others than the graph's); TooLargeError where too many terms are needed once all that may be struck is
    struck.
    """
    _refuse_shared(nested, quotients)
    search = Search(nested, values, points, quotients, rename)
    _refuse_no_value(search)
    apart = search.error({})
    if not apart <= within:
        raise StageError(
            f"to make {', '.join(rename or {})} one with others puts the quantity off by {100 * apart:.3g} %",
            f"allow more than {100 * within:.3g} %, or leave them apart",
        )
    reduction = _Reduction(nested, symbols, search, rename)
    best: Reduced | None = None
    trouble: TooLargeError | None = None
    for detour in _DETOURS:
        path = strike_order(search, within=detour * within, keep=keep)
        inside = [k for k in range(len(path) + 1) if k == 0 or path[k - 1].error <= within]
        for k in inside[: -_TRIED - 1 : -1]:
            try:
                found = reduction.after(path[:k], within)
            except TooLargeError as error:  # fewer strikes leave still more
                trouble = error
                break
            if best is None or (found.terms, found.error) < (best.terms, best.error):
                best = found
    if best is None:
        assert trouble is not None
        raise trouble
    return best


def reduced_over(
    nested: Nested,
    symbols: Mapping[str, Symbol],
    values: Mapping[str, Any],
    points: int,
    quotients: Sequence[Quotient] = (AT_DC,),
    *,
    within: float,
    rename: Mapping[str, str] | None = None,
    keep: frozenset[str] = frozenset(),
    rounds: int = 8,
) -> Reduced:
    """The same at many points: a form is found at few of them, and those at which it is worst are added.

    The errors are those over all `points`; they are larger than `within` where that was not reached in so many
    rounds. The first point is the first reference.
    """
    all_points = Search(nested, values, points, quotients, rename)
    _refuse_no_value(all_points)
    references = [0]
    best: Reduced | None = None
    for _ in range(rounds):
        here = {
            name: np.asarray(value)[references] if np.ndim(value) else value for name, value in values.items()
        }
        found = reduced_response(
            nested, symbols, here, len(references), quotients, within=within, rename=rename, keep=keep
        )
        off = _Reduction(nested, symbols, all_points, rename).off(found.form)
        errors = off.max(axis=1)
        found = replace(found, error=float(errors.max()), errors=tuple(map(float, errors)))
        if best is None or found.error < best.error:
            best = found
        if found.error <= within:
            break
        for row in off:
            references.append(int(row.argmax()))
        references = list(dict.fromkeys([*references, int(off.max(axis=0).argmax())]))
    assert best is not None
    return best


def _refuse_no_value(search: Search) -> None:
    if not (np.isfinite(search.exact).all() and search.exact.all()):
        raise StageError(
            "a quotient of coefficients is zero or infinite at one of the reference points",
            "ask for coefficients that the response has, at points at which they do not vanish",
        )


def _refuse_shared(nested: Nested, quotients: Sequence[Quotient]) -> None:
    if nested.skeleton.common and any(q.above[1] or q.below[1] for q in quotients):
        raise StageError(
            "numerator and denominator share poles that the response does not see",
            "a quotient of coefficients of s other than the lowest is not to be had from the graph",
        )


class _Reduction:
    """What is left of a response once symbols are struck, written out and shortened."""

    def __init__(
        self,
        nested: Nested,
        symbols: Mapping[str, Symbol],
        search: Search,
        rename: Mapping[str, str] | None,
    ) -> None:
        self.nested, self.symbols, self.search, self.rename = nested, symbols, search, rename
        self.needed: list[Coefficient] = sorted({c for q in search.quotients for c in (q.above, q.below)})

    def after(self, strikes: Sequence[Strike], within: float) -> Reduced:
        """The form that is left after some strikes and after as many single terms as may go."""
        products = products_of(
            self.nested,
            self.search.products.highest,
            rename=self.rename,
            limits={strike.symbol: strike.limit for strike in strikes},
        )
        form = expanded_of(*self._lowest(*self._written(products, within)))
        worst = self._errors(self._values(form)[1]).max()
        if not worst <= within:
            raise TooLargeError(
                f"with {len(strikes)} symbols struck, the {WRITE_LIMIT:,} largest terms of each coefficient are off by "
                f"{100 * worst:.3g} %, and no more are written out: allow a larger error"
            )
        dropped = 0
        while True:
            shorter, count = self._shortened(form, within)
            dropped += count
            if not count:
                break
            form = expanded_of(*self._lowest(*map(from_coefficients, shorter)))
        errors = self._errors(self._values(form)[1])
        return Reduced(form, tuple(strikes), dropped, float(errors.max()), tuple(map(float, errors)))

    def _written(self, products: Products, within: float) -> tuple[fmpz_mpoly, fmpz_mpoly]:
        """The needed coefficients as polynomials in s, with the response's scale."""
        context = ring_of(self.symbols, {n for n in products.places if n not in products.limits})
        place = {name: i for i, name in enumerate(context.names())}
        sides: list[dict[tuple[int, ...], int]] = [{}, {}]
        inverse: set[str] = set()
        for side, power in self.needed:
            scale = self.nested.scale.numerator if side == "numerator" else self.nested.scale.denominator
            for term in self._terms(products.side(side), power + self.search.low, within):
                exponents = [0] * context.nvars()
                exponents[place[S]] = power
                for name, exponent in term.monomial:
                    if name in place:
                        exponents[place[name]] = abs(exponent)
                        if exponent < 0:
                            inverse.add(name)
                terms, key = sides[SIDES.index(side)], tuple(exponents)
                terms[key] = terms.get(key, 0) + int(term.coefficient) * scale
        return inverted(context.from_dict(sides[0]), context.from_dict(sides[1]), inverse)

    def _lowest(self, numerator: fmpz_mpoly, denominator: fmpz_mpoly) -> tuple[fmpz_mpoly, fmpz_mpoly]:
        """In lowest terms. A side that no quotient asks for is 1, and the other's coefficients lose what they share."""
        asked = {side for side, _ in self.needed}
        if len(asked) == 2:
            return lowest_terms(numerator, denominator)
        coefficients = coefficients_of_s(numerator if "numerator" in asked else denominator)
        shared = coefficients[0]
        for coefficient in coefficients[1:]:
            shared = shared.gcd(coefficient)
        if next(c for c in coefficients if not c.is_zero()).coeffs()[0] < 0:
            shared = -shared
        rest = from_coefficients([coefficient / shared for coefficient in coefficients])
        one = rest.context().constant(1)
        return (rest, one) if "numerator" in asked else (one, rest)

    def _terms(self, diagram: ProductDiagram, power: int, within: float) -> list[Product]:
        """All terms of a coefficient, or those that matter at the first point."""
        values = {name: float(value[0]) for name, value in self.search.values.items()}
        terms = terms_at(diagram, power, values)
        if diagram.count() > WRITE_LIMIT:
            return largest_of(terms, rest=_CUT * within, limit=WRITE_LIMIT)[0]
        return list(combined(terms.products(), Gathering(values, least_factor(diagram))))

    def _values(
        self, form: Expanded
    ) -> tuple[list[tuple[int, int, int, np.ndarray]], dict[Coefficient, Any]]:
        """Every term as (side, power, place, values over the points), and the coefficients' values."""
        names = form.context.names()
        terms = []
        totals: dict[Coefficient, Any] = {}
        for i, row in enumerate((form.numerator, form.denominator)):
            for power, polynomial in enumerate(row):
                total = np.zeros(self.search.points)
                for k, (exponents, coefficient) in enumerate(polynomial.terms()):
                    value = np.full(self.search.points, float(coefficient))
                    for name, exponent in zip(names, exponents, strict=True):
                        if exponent:
                            value = value * self.search.values[name] ** int(exponent)
                    terms.append((i, power, k, value))
                    total = total + value
                totals[SIDES[i], power] = total
        return terms, totals

    def off(self, form: Expanded) -> np.ndarray:
        """The error of each quotient at each point; infinite where it has no value."""
        return self._off(self._values(form)[1])

    def _off(self, totals: Mapping[Coefficient, Any]) -> np.ndarray:
        found = []
        for q, exact in zip(self.search.quotients, self.search.exact, strict=True):
            scale = float(self.nested.scale) ** ((q.above[0] == SIDES[0]) - (q.below[0] == SIDES[0]))
            with np.errstate(all="ignore"):
                error = np.abs(totals.get(q.above, 0.0) / totals.get(q.below, np.nan) / (exact * scale) - 1)
            found.append(np.where(np.isnan(error), np.inf, error))
        return np.array(found)

    def _errors(self, totals: Mapping[Coefficient, Any]) -> np.ndarray:
        """The worst error of each quotient over the points."""
        return np.asarray(self._off(totals).max(axis=1))

    def _shortened(self, form: Expanded, within: float) -> tuple[list[list[fmpz_mpoly]], int]:
        """The coefficients without the terms that may go, the least first; and how many went."""
        terms, totals = self._values(form)
        with np.errstate(all="ignore"):
            size = [float(np.max(np.abs(v / totals[SIDES[i], power]))) for i, power, _, v in terms]
        left = {key: sum(1 for t in terms if (SIDES[t[0]], t[1]) == key) for key in totals}
        gone: set[tuple[int, int, int]] = set()
        for at in np.argsort(size, kind="stable"):
            i, power, k, value = terms[at]
            key = SIDES[i], power
            trial = totals | {key: totals[key] - value}
            if left[key] > 1 and self._errors(trial).max() <= within:
                totals = trial
                left[key] -= 1
                gone.add((i, power, k))
        rows = [
            [_without(p, {k for i_, j_, k in gone if (i_, j_) == (i, j)}) for j, p in enumerate(row)]
            for i, row in enumerate((form.numerator, form.denominator))
        ]
        return rows, len(gone)


def _without(polynomial: fmpz_mpoly, gone: set[int]) -> fmpz_mpoly:
    context: fmpz_mpoly_ctx = polynomial.context()
    kept = {e: c for k, (e, c) in enumerate(polynomial.terms()) if k not in gone}
    return context.from_dict(kept)
