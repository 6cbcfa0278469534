"""Exact: which symbols hardly matter to a quantity, found in order of the error that taking them to a limit makes.

A quantity is a quotient of two coefficients of s: the gain at DC is a0/b0, a dominant pole −b0/b1. Every coefficient
is a polynomial in which a symbol x stands as P + x·Q, and both its limits are had from the product diagram at the
same cost: x → 0 leaves P, and x → ∞ leaves x·Q, a product at a time and with nothing that cancels. All symbols' limits
at all reference points are worked out together.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.exact.cofactors import entry_symbols
from symamp.exact.forms import Nested
from symamp.exact.largest_elements import Choice, Side
from symamp.exact.largest_products import SIDES, TO_INFINITY, TO_ZERO, Products, products_of, sense
from symamp.exact.largest_sums import Weight, choice_value, sums

Coefficient = tuple[Side, int]  # a side of the response and a power of s
_AT_ONCE = 0.02  # of what is allowed: changes that add up to less are made in one go


@dataclass(frozen=True)
class Quotient:
    """above/below, two coefficients of s: ("numerator", 0) over ("denominator", 0) is the value at DC."""

    above: Coefficient
    below: Coefficient


AT_DC = Quotient(("numerator", 0), ("denominator", 0))


@dataclass(frozen=True)
class Strike:
    """A symbol taken to zero (`limit` 1) or to infinity (−1).

    `change` is how far that alone moved the quantities, `error` how far they are then from the exact ones in all:
    the worst over quantities and reference points, relative.
    """

    symbol: str
    limit: int
    change: float
    error: float


class Search:
    """Quotients with symbols at their limits, at all reference points.

    `values` are scalars or arrays over `points` reference bias points. Powers of s count from the one that numerator
    and denominator share whatever the values. `rename` makes symbols one with others, whose values they then have;
    `exact` are the quotients without that.
    """

    def __init__(
        self,
        nested: Nested,
        values: Mapping[str, Any],
        points: int,
        quotients: Sequence[Quotient],
        rename: Mapping[str, str] | None = None,
    ) -> None:
        self.points, self.quotients = points, quotients
        self.low = nested.skeleton.low
        highest = max(power for q in quotients for _, power in (q.above, q.below)) + self.low
        full = nested.full_values(values)
        names = {*entry_symbols(nested.graph), *(rename or {}).values()}
        self.values = {n: np.broadcast_to(np.asarray(full[n], dtype=float), (points,)) for n in names}
        self.products: Products = products_of(nested, highest)
        self.exact = self._quotients({}, [()])[:, 0]
        if rename:  # what follows is of the symbols made one, but is measured against the exact quantities
            self.products = products_of(nested, highest, rename=rename)

    def candidates(self, limits: Mapping[str, int]) -> list[tuple[str, int]]:
        """What may still be taken to a limit: what does not stand beside an infinite value everywhere.

        A symbol at several places goes to infinity at all of them: the products that hold it at each are the highest
        power of it, and where there are none the quotient has no value.
        """
        found = []
        held = {
            (side, k)
            for name, limit in limits.items()
            for side, k, i in self.products.places[name]
            if self._choice(side, k, i).power * limit < 0
        }
        for name, places in self.products.places.items():
            if name in limits or all((side, k) in held for side, k, _ in places):
                continue
            found.append((name, TO_ZERO))
            found.append((name, TO_INFINITY))
        return found

    def _choice(self, side: Side, k: int, i: int) -> Choice:
        return self.products.side(side).items[k].choices[i]

    def tried(
        self, limits: Mapping[str, int], candidates: Sequence[tuple[str, int]]
    ) -> tuple[np.ndarray, np.ndarray]:
        """For each candidate the worst change against now and the worst error against exact."""
        after = self._quotients(limits, [(), *((c,) for c in candidates)])
        with np.errstate(all="ignore"):
            change = np.abs(after[:, 1:] / after[:, :1] - 1).max(axis=(0, 2))
            error = np.abs(after[:, 1:] / self.exact[:, None] - 1).max(axis=(0, 2))
        return np.where(np.isnan(change), np.inf, change), np.where(np.isnan(error), np.inf, error)

    def error(self, limits: Mapping[str, int]) -> float:
        """The worst error with these symbols at their limits."""
        with np.errstate(all="ignore"):
            worst = float(np.abs(self._quotients(limits, [()])[:, 0] / self.exact - 1).max())
        return worst if worst == worst else float("inf")

    def _quotients(
        self, limits: Mapping[str, int], variations: Sequence[tuple[tuple[str, int], ...]]
    ) -> np.ndarray:
        """Shape (quotients, variations, points): with `limits` and each of the variations on top."""
        found = {}
        for side in SIDES:
            weights, out = self._weights(side, limits, variations)
            total = sums(
                self.products.side(side),
                weights,
                len(variations) * self.points,
                highest=self.products.highest,
                kept_out=out,
            )
            found[side] = total
        rows = []
        for q in self.quotients:
            above, below = (found[side].coefficient(power + self.low) for side, power in (q.above, q.below))
            with np.errstate(all="ignore"):
                ratio = above / below * 2.0 ** (found[q.above[0]].exponent - found[q.below[0]].exponent)
            rows.append(ratio.reshape(len(variations), self.points))
        return np.array(rows)

    def _weights(
        self, side: Side, limits: Mapping[str, int], variations: Sequence[tuple[tuple[str, int], ...]]
    ) -> tuple[list[Weight], dict[int, Any]]:
        by_symbol: dict[str, list[tuple[int, int]]] = {}
        for row, variation in enumerate(variations):
            for name, limit in variation:
                by_symbol.setdefault(name, []).append((row, limit))
        weights: list[Weight] = []
        out: dict[int, Any] = {}
        shape = len(variations), self.points
        for k, element in enumerate(self.products.side(side).items):
            changed = [c.symbol for c in element.choices if c.symbol in by_symbol]
            held = [c for c in element.choices if sense(c, limits) < 0]
            if held:
                out[k] = 0.0
            left = held or [c for c in element.choices if sense(c, limits) == 0]
            if not changed:
                weights.append(_spread(left, self.values, shape))
                continue
            parts, free = _varied(left, by_symbol, self.values, shape)
            weights.append(parts)
            if free is not None:
                out[k] = free.ravel() if k not in out else 0.0
        return weights, out


def strike_order(search: Search, *, within: float, keep: frozenset[str] = frozenset()) -> list[Strike]:
    """Symbols taken to a limit one after another, least change first, while all quotients stay `within`.

    `within` is relative (0.1 is 10 %). Symbols in `keep` stay.
    """
    made: list[Strike] = []
    limits: dict[str, int] = {}
    banned: set[tuple[str, int]] = set()
    while True:
        candidates = [c for c in search.candidates(limits) if c not in banned and c[0] not in keep]
        if not candidates:
            return made
        change, error = search.tried(limits, candidates)
        spent = 0.0
        before = len(made)
        for i in np.argsort(change, kind="stable"):
            spent += change[i]
            if len(made) > before and spent > _AT_ONCE * within:
                break
            symbol, limit = candidates[i]
            if symbol in limits:
                continue
            trial = limits | {symbol: limit}
            after = float(error[i]) if len(made) == before else search.error(trial)
            if after <= within:
                limits = trial
                made.append(Strike(symbol, limit, float(change[i]), after))
            else:
                banned.add(candidates[i])
        if len(made) == before:
            return made


def _spread(choices: Sequence[Choice], values: Mapping[str, Any], shape: tuple[int, int]) -> Weight:
    parts: list[Any] = [None, None]
    for choice in choices:
        value = np.broadcast_to(choice_value(choice, values), shape).ravel()
        before = parts[choice.s_power]
        parts[choice.s_power] = value if before is None else before + value
    return parts[0], parts[1]


def _varied(
    choices: Sequence[Choice],
    by_symbol: Mapping[str, Sequence[tuple[int, int]]],
    values: Mapping[str, Any],
    shape: tuple[int, int],
) -> tuple[Weight, np.ndarray | None]:
    """An element's weight where variations take some of its choices to a limit, and where it may be left out."""
    each = [np.array(np.broadcast_to(choice_value(c, values), shape), dtype=float) for c in choices]
    free: np.ndarray | None = None
    for i, choice in enumerate(choices):
        for row, limit in by_symbol.get(choice.symbol or "", ()):
            if limit * choice.power > 0:
                each[i][row] = 0.0
                continue
            for j in range(len(choices)):
                if j != i:
                    each[j][row] = 0.0
            free = np.ones(shape) if free is None else free
            free[row] = 0.0
    parts: list[Any] = [None, None]
    for choice, value in zip(choices, each, strict=True):
        flat = value.ravel()
        before = parts[choice.s_power]
        parts[choice.s_power] = flat if before is None else before + flat
    return (parts[0], parts[1]), free
