"""Which terms of which coefficients a formula keeps, and what drops the others (room: judge).

A quantity is the ratio of two coefficients, U/V, or a root of a row of them. Dominance drops terms; a formula P/Q
is reached when what is kept of U is g·P and of V is g·Q for some polynomial g. So some monomial m of g is such that
all of m·P stands in U and all of m·Q in V, and no assumption that drops one of these leads to the formula. What is
left to find is a cover: assumptions that together drop all else. All tests are in residues modulo a prime.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations, islice

import numpy as np
from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.assumptions.dominance import Dominance, Terms
from symamp.assumptions.dropping import TermTable
from symamp.exact.asked_quantity import Quantity
from symamp.exact.forms import Expanded
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import held, into_ring

_PRIME = 2_147_483_629  # the products of two residues fit into 64 bits
_MOST_ANCHORS = 4  # monomials m that are tried at one place

Residues = Mapping[str, int]
Anchor = tuple[np.ndarray, np.ndarray]  # where m·P stands in U and m·Q in V


@dataclass(frozen=True)
class Place:
    """Where a quantity stands in a form: U and V as numbers of rows, and the sign of U/V.

    `whole` are the rows of a polynomial of which it is a root, ascending powers of s; empty where it is the ratio.
    """

    upper: int
    lower: int
    sign: int = 1
    whole: tuple[int, ...] = ()

    @property
    def rows(self) -> tuple[int, ...]:
        return self.whole or (self.upper, self.lower)


class Table:
    """The terms of a form's coefficients, row by row, with their residues."""

    def __init__(self, form: Expanded, residues: Residues) -> None:
        self.form = form
        self.rows = [terms for row in TermTable(form).rows for terms in row]
        self.residues = residues
        self._numbers: dict[int, np.ndarray] = {}
        self._dropped: dict[tuple[int, Hashable], np.ndarray] = {}

    def places(self, quantity: Quantity, apart: bool, single: bool) -> list[Place]:
        """Where the quantity may stand: of a root any two neighbours, the first two where there is a `single` pole."""
        above, below = len(self.form.numerator), len(self.form.denominator)
        index, low = quantity.index or 0, above + self.form.powers[1][0]
        if quantity.name == "dc":
            return [Place(0, above)]
        if quantity.name == "hf":
            return [Place(above - 1, above + below - 1)] if above == below else []
        if quantity.name in ("a", "b"):
            size, start = (above, 0) if quantity.name == "a" else (below, above)
            return [Place(start + index, low)] if index < size else []
        size, start = (above, 0) if quantity.name == "z" else (below, above)
        whole = () if apart or single else tuple(range(start, start + size))
        top = 1 if single and not apart else size - 1
        return [Place(start + k, start + k + 1, -1, whole) for k in range(min(top, size - 1))]

    def numbers(self, row: int) -> np.ndarray:
        """The residue of each term of a row."""
        if row not in self._numbers:
            self._numbers[row] = _residues_of(self.rows[row], self.residues)
        return self._numbers[row]

    def dropped(self, row: int, dominance: Dominance, key: Hashable) -> np.ndarray:
        """Which terms of a row fall; `key` stands for the dominance."""
        if (row, key) not in self._dropped:
            falls_to = dominance.judge(self.rows[row])
            self._dropped[row, key] = falls_to != np.arange(len(falls_to))
        return self._dropped[row, key]


class Cover:
    """The terms of one place that are to be dropped, and what drops them."""

    def __init__(self, table: Table, place: Place, target: PolyRatio, ordered: Mapping[str, float]) -> None:
        """`target` in the ring of the form; `ordered` are logarithms of values by which anchors come first."""
        self._table, self.place = table, place
        self.starts = np.cumsum([0, *(len(table.rows[row]) for row in place.rows)])
        self._numbers = [table.numbers(row) for row in place.rows]
        self._target = tuple(_number_of(polynomial, table.residues) for polynomial in target)
        self.anchors = _anchors(table, place, target, ordered)

    def mask(self, dominance: Dominance, key: Hashable) -> np.ndarray:
        """The terms that fall, all rows in one."""
        return np.concatenate([self._table.dropped(row, dominance, key) for row in self.place.rows])

    def protected(self, anchor: Anchor) -> np.ndarray:
        """The terms m·P and m·Q, all rows in one."""
        found = np.zeros(self.starts[-1], dtype=bool)
        for row, indices in zip((self.place.upper, self.place.lower), anchor, strict=True):
            found[self.starts[self.place.rows.index(row)] + indices] = True
        return found

    def reached(self, dropped: np.ndarray) -> bool:
        """Whether what is not dropped makes the formula."""
        sums = []
        for start, numbers in zip(self.starts, self._numbers, strict=False):
            kept = numbers[~dropped[start : start + len(numbers)]]
            if not kept.size and not self.place.whole:
                return False
            sums.append(int(kept.sum() % _PRIME))
        above, below = self._target
        if not self.place.whole:
            return (sums[0] * below - self.place.sign * sums[1] * above) % _PRIME == 0
        if not any(sums[1:]):
            return False
        total = 0
        for power, number in enumerate(sums):
            total += number * pow(above, power, _PRIME) * pow(below, len(sums) - 1 - power, _PRIME)
        return total % _PRIME == 0


def in_ring_of(form: Expanded, target: PolyRatio) -> PolyRatio | None:
    """The ratio in the ring of a form; None where it holds a symbol that the form lacks."""
    context: fmpz_mpoly_ctx = form.context
    if not held(*target) <= form.symbols:
        return None
    return into_ring(target[0], context), into_ring(target[1], context)


def alike_in_residues(one: PolyRatio, other: PolyRatio, residues: Residues) -> bool:
    """Whether two ratios may be one rational function: surely not where this says no."""
    (a, b), (c, d) = (tuple(_number_of(p, residues) for p in each) for each in (one, other))
    return (a * d - c * b) % _PRIME == 0


def least_cover(
    cover: Cover, masks: Mapping[str, np.ndarray], base: np.ndarray, tries: int
) -> tuple[str, ...] | None:
    """A set of names whose masks reach the formula, as small as found in so many tries; those listed first stay.

    None where all of them together do not.
    """

    def reached(names: Iterable[str]) -> bool:
        dropped = base.copy()
        for name in names:
            dropped |= masks[name]
        return cover.reached(dropped)

    kept = list(masks)
    if not reached(kept):
        return None
    for name in reversed(list(masks)):
        rest = [other for other in kept if other != name]
        if reached(rest):
            kept = rest
    return next(_smaller(list(masks), len(kept), reached, tries), tuple(kept))


def all_covers(
    cover: Cover, masks: Mapping[str, np.ndarray], base: np.ndarray, tries: int
) -> list[tuple[str, ...]]:
    """All smallest sets, in the sense that none holds another, as far as so many tries go."""
    found: list[frozenset[str]] = []
    listed = []
    for names in subsets(list(masks), len(masks), tries):
        if any(shorter <= set(names) for shorter in found):
            continue
        dropped = base.copy()
        for name in names:
            dropped |= masks[name]
        if cover.reached(dropped):
            found.append(frozenset(names))
            listed.append(names)
    return listed


def _smaller(
    names: list[str], size: int, reached: Callable[[Iterable[str]], bool], tries: int
) -> Iterator[tuple[str, ...]]:
    return (found for found in subsets(names, size - 1, tries) if reached(found))


def subsets(names: Sequence[str], largest: int, tries: int) -> Iterator[tuple[str, ...]]:
    """Sets by size from none on, in order, no more than so many."""
    every = (chosen for size in range(largest + 1) for chosen in combinations(names, size))
    return islice(every, tries)


def _anchors(table: Table, place: Place, target: PolyRatio, ordered: Mapping[str, float]) -> list[Anchor]:
    """For each monomial m that fits, where m·P stands in U and m·Q in V; the largest at the bias point first."""
    upper, lower = table.rows[place.upper], table.rows[place.lower]
    if target[0].is_zero() or len(target[0]) > len(upper) or len(target[1]) > len(lower):
        return []
    mix = np.random.default_rng(3).integers(1, 1 << 62, upper.exponents.shape[1])
    of_upper, of_lower = (np.asarray(each.exponents.astype(np.int64) @ mix) for each in (upper, lower))
    of_above, of_below = (np.array(p.monoms(), dtype=np.int64) @ mix for p in target)
    shifts = of_upper - of_above[0]
    fits = np.ones(len(shifts), dtype=bool)
    for monomials, known in ((of_above, of_upper), (of_below, of_lower)):
        for monomial in monomials:
            fits &= np.isin(shifts + monomial, known)
    candidates = np.flatnonzero(fits)
    if ordered:
        logs = np.array([ordered.get(name, 0.0) for name in upper.polynomial.context().names()])
        sizes = upper.exponents[candidates] @ logs
        candidates = candidates[np.argsort(-sizes, kind="stable")]
    places = {int(h): i for i, h in enumerate(of_upper)}, {int(h): i for i, h in enumerate(of_lower)}
    found = []
    for candidate in candidates[:_MOST_ANCHORS]:
        pair = tuple(
            np.array([where[int(h)] for h in shifts[candidate] + monomials], dtype=np.intp)
            for where, monomials in zip(places, (of_above, of_below), strict=True)
        )
        found.append((pair[0], pair[1]))
    return found


def _residues_of(terms: Terms, residues: Residues) -> np.ndarray:
    total = np.array([int(c) % _PRIME for c in terms.factors], dtype=np.int64)
    for name, column in terms.place.items():
        powers = terms.exponents[:, column]
        if powers.any():
            table = np.array(
                [pow(residues[name], int(k), _PRIME) for k in range(int(powers.max()) + 1)], dtype=np.int64
            )
            total = total * table[powers] % _PRIME
    return total


def _number_of(polynomial: fmpz_mpoly, residues: Residues) -> int:
    return int(_residues_of(Terms(polynomial), residues).sum() % _PRIME)


def residues_for(names: Iterable[str]) -> dict[str, int]:
    """A residue for each symbol, always the same for the same names."""
    draw = np.random.default_rng(11)
    return {name: int(draw.integers(2, _PRIME)) for name in (*names, "s")}
