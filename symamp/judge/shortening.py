"""The search for a short formula (room: judge): named assumptions first, the cheapest error for most terms, then
single terms.

Every formula on the way is compared with the exact one at a sample of the span; what is found is judged as a claim
would be by whoever asked. The search goes by the same ladder of bounds whatever error is allowed, so that a looser
bound has all the formulas to choose from that a tighter one has.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Hashable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import Assumption
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import lowest_terms
from symamp.exact.response import Response
from symamp.exact.tape import Monomial, term_dict
from symamp.judge.shortening_measures import Measure

Progress = Callable[[str, int, int], None]
NO_FORMULA = 10**9  # the number of terms that stands for no formula at all
_LADDER = tuple(m * 10.0**k for k in (-3, -2, -1) for m in (1, 2, 3, 5))
_LEAST_COST = 1e-5  # an error below this counts as this much, so that terms decide among slight ones
_BEYOND = 8.0  # how many times what is allowed the search goes on to, for the trade-off
_SINGLE_WORK = 1_200_000  # terms times points up to which single terms are tried
_LEAST_FIRST = 48  # of the terms, the smallest: one of these is dropped next
_OFF_BY_ALL = 1.0  # an error at which a formula tells nothing any more
_BETTER = 0.9  # of the error of a shorter formula: what a longer one must at least come to
_ROUNDING = 1e-12  # an error below this is none


@dataclass(frozen=True)
class Tried:
    """A formula (None while there is none), what it rests on, how many single terms were dropped after it, and its
    worst error over the sample. `before` is the formula from which the single terms were dropped.
    """

    ratio: PolyRatio | None
    made: frozenset[str]
    dropped: int
    worst: float
    before: PolyRatio | None = None

    @cached_property
    def terms(self) -> int:
        """Terms above and below the bar."""
        return NO_FORMULA if self.ratio is None else len(self.ratio[0]) + len(self.ratio[1])


class Search:
    """All formulas that were tried for one quantity of a response, or for the response."""

    def __init__(
        self,
        exact: Response,
        measure: Measure,
        candidates: Sequence[Assumption],
        within: float,
        progress: Progress | None = None,
    ) -> None:
        self.measure, self.within = measure, within
        self._progress = progress
        self._engine = Approximator(exact)
        self._by_name = {a.name: a for a in candidates if a.applies(exact.name)}
        self._known: dict[frozenset[str], Tried] = {}
        self._shortened: set[frozenset[str]] = set()
        self._kept: dict[Hashable, Tried] = {}

    @property
    def tried(self) -> list[Tried]:
        """Each formula once: of the ways that lead to it the one with fewest single terms, then fewest assumptions."""
        return list(self._kept.values())

    def run(self) -> list[Tried]:
        """The formulas found, the exact one first where there is one; those at the end may be beyond the bound."""
        last = self.within * _BEYOND
        start = self.of(frozenset())
        for bound in (*(b for b in _LADDER if b < last), next((b for b in _LADDER if b >= last), last)):
            self._by_terms(self._assumed(start, bound), last)
        return self.tried

    def of(self, names: frozenset[str]) -> Tried:
        """The formula under a set of assumptions."""
        if names not in self._known:
            made = self._engine.under([self._by_name[name] for name in sorted(names)])
            ratio = None if made.response is None else self.measure.ratio(made.response)
            worst = self.measure.worst(ratio) if ratio is not None else (0.0 if not names else math.inf)
            if made.response is not None and ratio is None and self.measure.through:
                worst = 0.0  # no formula yet, and nothing known against going on
            self._known[names] = Tried(ratio, names, 0, worst if worst > _ROUNDING else 0.0)
            self._keep(self._known[names])
        return self._known[names]

    def _keep(self, tried: Tried) -> None:
        if tried.ratio is None or tried.ratio[0].is_zero() or not math.isfinite(tried.worst):
            return
        key = tuple(frozenset(term_dict(side).items()) for side in tried.ratio)
        before = self._kept.get(key)
        if before is None or (tried.dropped, len(tried.made)) < (before.dropped, len(before.made)):
            self._kept[key] = tried

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
                    choices.append((_gain(best, found), -found.terms, name, found))
                if self._progress:
                    self._progress("assumptions", done + 1, len(self._by_name))
            if not choices and best.ratio is None:
                choices = self._pairs(best, bound)
            if not choices:
                return best
            best = max(choices, key=lambda choice: choice[:3])[3]

    def _pairs(self, best: Tried, bound: float) -> list[tuple[float, int, str, Tried]]:
        """Two assumptions at once, where no single one leads to a formula."""
        names = [name for name in self._by_name if name not in best.made]
        found = []
        for i, one in enumerate(names):
            for other in names[i + 1 :]:
                tried = self.of(best.made | {one, other})
                if tried.ratio is not None and tried.worst <= bound:
                    found.append((_gain(best, tried), -tried.terms, one, tried))
        return found

    def pruned(self, tried: Tried) -> Tried:
        """The same formula resting on as few assumptions as lead to it, a general one in place of several."""
        before = tried.before if tried.dropped else tried.ratio
        if before is None:
            return tried
        made = self._without_needless(tried.made, before)
        for name in self._by_name:  # the general ones come first
            if name not in made and self.of(made | {name}).ratio == before:
                fewer = self._without_needless(made | {name}, before)
                if len(fewer) < len(made):
                    made = fewer
        return Tried(tried.ratio, made, tried.dropped, tried.worst, tried.before)

    def _without_needless(self, made: frozenset[str], ratio: PolyRatio) -> frozenset[str]:
        """Those that the formula needs; the last of the catalogue are asked first."""
        for name in reversed(self._by_name):
            if name in made and self.of(made - {name}).ratio == ratio:
                made = made - {name}
        return made

    def _by_terms(self, start: Tried, bound: float) -> None:
        """Single terms dropped, each time the one that leaves the least error."""
        if start.ratio is None or start.made in self._shortened:
            return
        self._shortened.add(start.made)
        if start.terms * self.measure.points > _SINGLE_WORK:
            return
        sides = [_TermArrays(side, self.measure.values, self.measure.points) for side in start.ratio]
        dropped = 0
        while True:
            worst, i, k = min(self._choices(sides), default=(math.inf, 0, 0))
            if not worst <= bound:
                return
            sides[i].drop(k)
            dropped += 1
            ratio = lowest_terms(sides[0].polynomial(), sides[1].polynomial())
            self._keep(Tried(ratio, start.made, dropped, worst, start.ratio))

    def _choices(self, sides: Sequence[_TermArrays]) -> list[tuple[float, int, int]]:
        """(worst error, side, term) of the smallest terms, were they dropped."""
        sizes = sorted(
            (size, i, k) for i in (0, 1) if len(sides[i].alive) > 1 for size, k in sides[i].sizes()
        )
        return [(self._without(sides, i, k), i, k) for _, i, k in sizes[:_LEAST_FIRST]]

    def _without(self, sides: Sequence[_TermArrays], side: int, k: int) -> float:
        totals = [each.total for each in sides]
        totals[side] = totals[side] - sides[side].arrays[k]
        with np.errstate(all="ignore"):
            return self.measure.off(totals[0] / totals[1])


def _gain(best: Tried, found: Tried) -> float:
    """Terms saved for the error added."""
    cost = max(found.worst - best.worst, _LEAST_COST)
    saved = math.log(best.terms / found.terms) if best.ratio is not None else 1.0 / found.terms
    return saved / cost


class _TermArrays:
    """The terms of a polynomial at all points of a grid."""

    def __init__(self, polynomial: fmpz_mpoly, values: Mapping[str, Any], points: int) -> None:
        self._context = polynomial.context()
        self._terms = [(tuple(int(e) for e in m), int(c)) for m, c in polynomial.terms()]
        self.arrays = [_term(m, c, values, points) for m, c in term_dict(polynomial).items()]
        self.alive = list(range(len(self.arrays)))
        self.total = np.sum(self.arrays, axis=0)

    def sizes(self) -> list[tuple[float, int]]:
        """Each term's largest part of the whole, and its place."""
        with np.errstate(all="ignore"):
            return [(_or_infinite(np.abs(self.arrays[k] / self.total).max()), k) for k in self.alive]

    def drop(self, k: int) -> None:
        self.alive.remove(k)
        self.total = np.sum([self.arrays[i] for i in self.alive], axis=0)

    def polynomial(self) -> fmpz_mpoly:
        return self._context.from_dict(dict(self._terms[i] for i in self.alive))


def _term(monomial: Monomial, coefficient: int, values: Mapping[str, Any], points: int) -> np.ndarray:
    product = np.full(points, float(coefficient))
    for name, exponent in monomial:
        product = product * values[name] ** exponent  # s makes it complex
    return product


def _or_infinite(size: Any) -> float:
    return float(size) if np.isfinite(size) else math.inf


def pareto(tried: Sequence[Tried], within: float) -> list[Tried]:
    """The trade-off: of each number of terms the least worst error, as far as longer formulas are not as bad.

    A longer one that is hardly better is left out, unless it alone is `within` what is allowed; so is what is off by
    more than the whole value.
    """
    best: dict[int, Tried] = {}
    for each in tried:
        if each.worst <= _OFF_BY_ALL and (each.terms not in best or each.worst < best[each.terms].worst):
            best[each.terms] = each
    kept: list[Tried] = []
    for terms in sorted(best, reverse=True):
        while kept and _makes_needless(best[terms].worst, kept[-1].worst, within):
            kept.pop()
        if not kept or best[terms].worst > _ROUNDING:
            kept.append(best[terms])
    return kept


def _makes_needless(shorter: float, longer: float, within: float) -> bool:
    """Whether a shorter formula's error leaves a longer one of that error no purpose."""
    if longer <= _ROUNDING or longer <= within < shorter:
        return False
    return _BETTER * shorter <= longer
