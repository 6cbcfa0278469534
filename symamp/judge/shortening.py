"""The search for a short formula (room: judge): named assumptions first, the cheapest error for most terms, then
single terms.

Every formula on the way is compared with the exact quantity at a sample of the span; what is found is judged as
a claim would be by whoever asked.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import Assumption
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import PolyRatio, band_ratio, rational_of
from symamp.exact.polys import lowest_terms
from symamp.exact.response import Response
from symamp.exact.tape import Tape, term_dict, term_value
from symamp.judge.balance import PI
from symamp.judge.error_formula import partner_ratio
from symamp.judge.errors_at import error_of
from symamp.judge.sample import Sample

Progress = Callable[[str, int, int], None]
NO_FORMULA = 10**9  # the number of terms that stands for no formula at all
_LEAST_COST = (
    1e-3  # of the bound: an error below this counts as this much, so that terms decide among slight ones
)
_SINGLE_TERMS = 2000  # terms up to which single ones are tried
_BEYOND = 8.0  # how many times the bound the search goes on to, for the trade-off


@dataclass(frozen=True)
class Tried:
    """A formula (None while there is none), what it rests on, how many single terms were dropped after it, and its
    worst error over the sample."""

    ratio: PolyRatio | None
    made: frozenset[str]
    dropped: int
    worst: float

    @cached_property
    def terms(self) -> int:
        """Terms above and below the bar."""
        return NO_FORMULA if self.ratio is None else len(self.ratio[0]) + len(self.ratio[1])


class Search:
    """All formulas that were tried for one quantity of one response."""

    def __init__(
        self,
        exact: Response,
        quantity: Quantity,
        candidates: Sequence[Assumption],
        sample: Sample,
        within: float,
        progress: Progress | None = None,
    ) -> None:
        self.exact, self.quantity, self.sample, self.within = exact, quantity, sample, within
        self._progress = progress
        self._engine = Approximator(exact)
        self._by_name = {a.name: a for a in candidates if a.applies(exact.name)}
        self._known: dict[frozenset[str], Tried] = {}
        self.tried: list[Tried] = []
        with np.errstate(all="ignore"):
            self.values = self._exact_values()

    def _exact_values(self) -> np.ndarray:
        figures = self.exact.figures(self.sample.values, self.sample.points)
        if not is_root(self.quantity):
            return np.asarray(figures.value(self.quantity))
        roots = figures.poles if self.quantity.name == "p" else figures.zeros
        return np.asarray(roots[(self.quantity.index or 1) - 1])

    def run(self) -> list[Tried]:
        """The formulas found, the exact one first where there is one; those at the end may be beyond the bound."""
        best = self._assumed(self._start(), self.within)
        found = [best, self._by_terms(best, self.within)]
        further = self._assumed(best, self.within * _BEYOND)
        found.append(self._by_terms(further, self.within * _BEYOND))
        return self.tried

    def _start(self) -> Tried:
        return self.of(frozenset())

    def of(self, names: frozenset[str]) -> Tried:
        """The formula under a set of assumptions."""
        if names not in self._known:
            made = self._engine.under([self._by_name[name] for name in sorted(names)])
            ratio = None if made.response is None else self._ratio(made.response)
            worst = self.worst(ratio) if ratio is not None else (0.0 if not names else math.inf)
            if made.response is not None and ratio is None:
                worst = 0.0  # no formula yet, and nothing known against going on
            self._known[names] = Tried(ratio, names, 0, worst)
            self._keep(self._known[names])
        return self._known[names]

    def _ratio(self, response: Response) -> PolyRatio | None:
        if response is self.exact:
            return rational_of(response, self.quantity) or band_ratio(response, self.quantity)
        return partner_ratio(self.exact, response, self.quantity)

    def _keep(self, tried: Tried) -> None:
        if tried.ratio is not None and not tried.ratio[0].is_zero() and math.isfinite(tried.worst):
            self.tried.append(tried)

    def worst(self, ratio: PolyRatio) -> float:
        """The largest modulus of the error over the sample; infinite where there is no value somewhere."""
        if ratio[1].is_zero():
            return math.inf
        above, below = Tape(list(ratio))({**self.sample.values, PI: math.pi}, self.sample.points)
        with np.errstate(all="ignore"):
            return _largest(error_of(self.quantity, above / below, self.values))

    def _assumed(self, start: Tried, bound: float) -> Tried:
        """Assumptions made one after the other, each time the one that saves most terms for its error."""
        best = start
        while True:
            choices = []
            for done, name in enumerate(self._by_name):
                if name in best.made:
                    continue
                found = self.of(best.made | {name})
                if found.worst <= bound and found.terms < best.terms:
                    choices.append((self._gain(best, found), -found.terms, name, found))
                if self._progress:
                    self._progress("assumptions", done + 1, len(self._by_name))
            if not choices and best.ratio is None:
                choices = self._pairs(best, bound)
            if not choices:
                return best
            best = max(choices, key=lambda choice: choice[:3])[3]

    def _gain(self, best: Tried, found: Tried) -> float:
        """Terms saved for the error added."""
        cost = max(found.worst - best.worst, _LEAST_COST * self.within)
        saved = math.log(best.terms / found.terms) if best.ratio is not None else 1.0 / found.terms
        return saved / cost

    def _pairs(self, best: Tried, bound: float) -> list[tuple[float, int, str, Tried]]:
        """Two assumptions at once, where no single one leads to a formula."""
        names = [name for name in self._by_name if name not in best.made]
        found = []
        for i, one in enumerate(names):
            for other in names[i + 1 :]:
                tried = self.of(best.made | {one, other})
                if tried.ratio is not None and tried.worst <= bound:
                    found.append((self._gain(best, tried), -tried.terms, one, tried))
        return found

    def pruned(self, tried: Tried) -> Tried:
        """The same formula resting on no assumption that is not needed for it; the last made are asked first."""
        if tried.dropped or tried.ratio is None:
            return tried
        best = tried
        for name in reversed(self._by_name):
            if name in best.made:
                found = self.of(best.made - {name})
                if found.ratio == best.ratio:
                    best = found
        return best

    def _by_terms(self, start: Tried, bound: float) -> Tried:
        """Single terms dropped, each time the one that leaves the least error."""
        best = start
        if best.ratio is None or best.terms > _SINGLE_TERMS:
            return best
        sides = [_TermArrays(polynomial, self.sample) for polynomial in best.ratio]
        dropped = 0
        while True:
            choices = [
                (self._without(sides, side, k), side, k)
                for side in (0, 1)
                if sides[side].count > 1
                for k in sides[side].alive
            ]
            worst, side, k = min(choices, default=(math.inf, 0, 0))
            if not worst <= bound:
                return best
            sides[side].drop(k)
            dropped += 1
            best = Tried(
                lowest_terms(sides[0].polynomial(), sides[1].polynomial()), start.made, dropped, worst
            )
            self._keep(best)

    def _without(self, sides: Sequence[_TermArrays], side: int, k: int) -> float:
        totals = [each.total for each in sides]
        totals[side] = totals[side] - sides[side].arrays[k]
        with np.errstate(all="ignore"):
            return _largest(error_of(self.quantity, totals[0] / totals[1], self.values))


class _TermArrays:
    """The terms of a polynomial at all points of a sample."""

    def __init__(self, polynomial: fmpz_mpoly, sample: Sample) -> None:
        self._context = polynomial.context()
        self._terms = [(tuple(int(e) for e in m), int(c)) for m, c in polynomial.terms()]
        values = {**sample.values, PI: math.pi}
        self.arrays = [
            np.broadcast_to(np.asarray(term_value(m, c, values)), (sample.points,))
            for m, c in term_dict(polynomial).items()
        ]
        self.alive = list(range(len(self.arrays)))
        self.total = np.sum(self.arrays, axis=0)

    @property
    def count(self) -> int:
        return len(self.alive)

    def drop(self, k: int) -> None:
        self.alive.remove(k)
        self.total = np.sum([self.arrays[i] for i in self.alive], axis=0)

    def polynomial(self) -> fmpz_mpoly:
        return self._context.from_dict(dict(self._terms[i] for i in self.alive))


def _largest(errors: np.ndarray) -> float:
    found = np.abs(errors)
    return float(found.max()) if np.isfinite(found).all() else math.inf
