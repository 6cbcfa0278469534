"""The search for assumptions behind one formula (room: judge): frames, and under each what dominance has to drop."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from symamp.assumptions.merge import Pooled, pooled
from symamp.assumptions.read import Assumption
from symamp.assumptions.rewrite import put
from symamp.errors import StageError, TooLargeError
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.forms import Expanded
from symamp.exact.formulas import PolyRatio, rational_of
from symamp.exact.polys import held, into_ring, lowest_terms, ring_of
from symamp.judge.error_formula import partner_ratio
from symamp.judge.ways_ground import Ground, is_frame, only_roots
from symamp.judge.ways_rows import (
    Cover,
    Place,
    alike_in_residues,
    all_covers,
    in_ring_of,
    least_cover,
    subsets,
)

BUDGET = 240  # frames that the catalogue is asked for, for one formula; a large form counts for several
_MOST_WAYS = 3
_OWN_FRAMES = 256  # frames of the stage's own assumptions
_LARGEST = 3  # assumptions of the catalogue in one frame, roots aside
_LARGEST_SET = 6  # assumptions of the catalogue in one way
_BEAM = 4  # frames of one size from which larger ones are made
_COVERS = 400  # sets of dominance assumptions that are looked at under one frame
_TOGETHER = 24  # comparisons that are pooled where no assumption drops a term by itself
_COSTLY = 500  # terms of a form that make it count for one more

Names = frozenset[str]


@dataclass(frozen=True)
class Framed:
    """What steps 1 to 3 of some assumptions leave, and the places where the formula may come from."""

    names: Names
    form: Expanded
    ask: Pooled
    wanted: Names
    covers: tuple[Cover, ...]


class Search:
    """One formula: `target` is what the quantity is to be."""

    def __init__(self, ground: Ground, quantity: Quantity, target: PolyRatio) -> None:
        self.ground, self.quantity, self.target = ground, quantity, target
        self.wanted = held(*target)
        fits = {name: a for name, a in ground.all.items() if self._fits(a)}
        self.roots = [name for name, a in fits.items() if only_roots(a)]
        self.changing = [name for name, a in fits.items() if not only_roots(a) and is_frame(a)]
        self.dominant = [name for name, a in fits.items() if not is_frame(a)]
        self._framed: dict[Names, Framed | None] = {}
        self._held: dict[Names, bool] = {}
        self._masks: dict[tuple[Names, Place, str], np.ndarray | None] = {}
        self._there: dict[Names, Names] = {}
        self._spent = 0

    def _fits(self, assumption: Assumption) -> bool:
        """Whether the formula can stand under an assumption, as far as symbols tell, and the quantity feels it."""
        if assumption.band is not None or (only_roots(assumption) and not is_root(self.quantity)):
            return False
        return bool(assumption.replace) or self.wanted.isdisjoint(assumption.orders)

    # The stage's own assumptions

    def among_own(self) -> list[Names]:
        """Sets that hold none of the others, by size."""
        own = self.ground.own
        frames = [name for name in (*self.changing, *self.roots) if name in own]
        dominant = [name for name in self.dominant if name in own]
        found: list[Names] = []
        for frame in subsets(frames, len(frames), _OWN_FRAMES):
            framed = self.frame(Names(frame))
            for names in self._all_covers(framed, dominant) if framed else ():
                if self.holds(names):
                    found.append(names)
        return self._minimal(found)

    def _all_covers(self, framed: Framed, dominant: Sequence[str]) -> Iterator[Names]:
        for cover in framed.covers:
            base = self._mask(cover, framed, ())
            for anchor in cover.anchors:
                masks = self._allowed(cover, framed, dominant, cover.protected(anchor))
                covers = list(all_covers(cover, masks, base, _COVERS)) if base is not None else []
                for names in covers or self._together(cover, framed, dominant):
                    yield framed.names | Names(names)

    # The catalogue

    def among_all(self, budget: int) -> list[Names]:
        """Frames by size, the most telling first; one size beyond the first that leads to the formula."""
        self._spent = 0
        level: list[Names] = [Names()]
        seen = {Names()}
        found: list[Names] = []
        first: int | None = None
        for size in range(_LARGEST + 1):
            for names in level:
                found += self._under(names)
            if found and first is None:
                first = size
            if size == _LARGEST or (first is not None and size > first):
                break
            level = self._grown(level, seen, budget * (size + 1) / _LARGEST)
        return self._minimal([names for names in found if len(names) <= _LARGEST_SET])

    def _under(self, names: Names) -> list[Names]:
        """The least ways under a frame, with each thing that may be said of roots beside it."""
        found: list[Names] = []
        for framed in self._leading(names):
            way = next((made for made in self._least_covers(framed) if self.holds(made)), None)
            if way is not None and not any(self.holds(way - {name}) for name in framed.names):
                found.append(way)
        return found

    def _least_covers(self, framed: Framed) -> Iterator[Names]:
        """Plausible assumptions alone, then all."""
        plausible = [name for name in self.dominant if self.ground.plausible(name)]
        for dominant in (plausible, self.dominant):
            for cover in framed.covers:
                base = self._mask(cover, framed, ())
                if base is None:
                    continue
                for anchor in cover.anchors:
                    masks = self._allowed(cover, framed, dominant, cover.protected(anchor))
                    names = least_cover(cover, masks, base, _COVERS)
                    if names is not None:
                        yield framed.names | Names(names)
                    else:
                        for names in self._together(cover, framed, list(masks)):
                            yield framed.names | Names(names)

    def _grown(self, level: Sequence[Names], seen: set[Names], budget: float) -> list[Names]:
        """Frames with one assumption more, that still hold the formula's symbols and fewer others first."""
        grown: list[tuple[tuple[int, int], Names]] = []
        for names in level:
            before = self.ground.form(self._assumptions(names), self.quantity)
            surplus = before.symbols - self.wanted if before else frozenset()
            for name in sorted(
                self.changing, key=lambda n: (not self.ground.plausible(n), -self._rid(n, surplus))
            ):
                wider = names | {name}
                if wider in seen or self._spent >= budget:
                    continue
                seen.add(wider)
                form = self.ground.form(self._assumptions(wider), self.quantity)
                self._spent += 1 + (form.terms // _COSTLY if form else 0)
                framed = None if form is None or form is before else self._leading(wider)
                if framed:
                    doubts = sum(not self.ground.plausible(n) for n in wider)
                    surplus_left = min(len(each.form.symbols - each.wanted) for each in framed)
                    grown.append(((surplus_left + 2 * doubts, form.terms if form else 0), wider))
        grown.sort(key=lambda item: item[0])
        few = [(self._left(names), size, names) for size, names in grown[: 2 * _BEAM]]
        few.sort(key=lambda item: item[:2])
        return [names for *_, names in few[:_BEAM]]

    def _leading(self, names: Names) -> list[Framed]:
        """The frames, each with one thing that may be said of roots, from which the formula may come."""
        every = (self.frame(names | set(said)) for said in ((), *((n,) for n in self.roots)))
        return [framed for framed in every if framed is not None]

    def _left(self, names: Names) -> int:
        """The fewest terms that plausible dominance leaves beside those of the formula."""
        plausible = [name for name in self.dominant if self.ground.plausible(name)]
        least = 1 << 30
        for framed in self._leading(names):
            for cover in framed.covers:
                base = self._mask(cover, framed, ())
                for anchor in cover.anchors if base is not None else ():
                    protected = cover.protected(anchor)
                    gone = protected.copy() if base is None else protected | base
                    for mask in self._allowed(cover, framed, plausible, protected).values():
                        gone |= mask
                    least = min(least, int((~gone).sum()))
        return least

    def _rid(self, name: str, surplus: Names) -> int:
        """How many of some symbols an assumption does away with."""
        assumption = self.ground.all[name]
        followers = [s for s in self.ground.renamed(assumption) if s in surplus]
        return len(surplus & set(assumption.orders)) + len(followers) + len(surplus & set(assumption.replace))

    # What both do

    def frame(self, names: Names) -> Framed | None:
        """The frame of these assumptions; None where the formula cannot come from it."""
        if names not in self._framed:
            self._framed[names] = self._frame(names)
        return self._framed[names]

    def _frame(self, names: Names) -> Framed | None:
        made = self._assumptions(names)
        form = self.ground.form(made, self.quantity)
        if form is None:
            return None
        ask = pooled(self.ground.exact.stage, made)
        target = self._renamed(ask)
        inside = None if target is None else in_ring_of(form, target)
        if inside is None:
            return None
        table = self.ground.table(form)
        places = table.places(self.quantity, ask.poles_far_apart, ask.dominant_pole)
        covers = [Cover(table, place, inside, self.ground.logs) for place in places]
        covers = [cover for cover in covers if cover.anchors]
        return Framed(names, form, ask, Names(held(*inside)), tuple(covers)) if covers else None

    def _assumptions(self, names: Names) -> list[Assumption]:
        return [self.ground.all[name] for name in sorted(names, key=self.ground.order.__getitem__)]

    def _renamed(self, ask: Pooled) -> PolyRatio | None:
        """The formula with what `equal` and `set` say of its symbols."""
        if not ask.rename and not ask.replace:
            return self.target
        found = put(self.ground.exact.stage, self.target, self.wanted, ask)
        return None if isinstance(found, str) else found

    def _mask(self, cover: Cover, framed: Framed, names: Sequence[str]) -> np.ndarray | None:
        """The terms that fall by these dominance assumptions and the frame's; None where they cannot stand together."""
        pairs = list(framed.ask.pairs)
        if not framed.ask.rename:
            pairs += [pair for name in names for pair in self.ground.all[name].pairs]
        elif names:
            stage = self.ground.exact.stage
            pairs = list(pooled(stage, self._assumptions(framed.names | set(names))).pairs)
        if not any(pair.difference for pair in pairs):
            return np.zeros(cover.starts[-1], dtype=bool)
        dominance, key = self.ground.dominance(pairs)
        try:
            return None if dominance is None else cover.mask(dominance, key)
        except TooLargeError:
            return None

    def _allowed(
        self, cover: Cover, framed: Framed, names: Sequence[str], protected: np.ndarray
    ) -> dict[str, np.ndarray]:
        """What each dominance assumption drops, of those that drop something and nothing that is to stay.

        Of two that take a ratio and its inverse to be small, the first stays.
        """
        masks: dict[str, np.ndarray] = {}
        taken: set[int] = set()
        there = self._concerned(framed)
        for name in names:
            own, turned = self.ground.comparisons(name)
            if name not in there or not taken.isdisjoint(turned):
                continue
            key = (framed.names, cover.place, name)
            if key not in self._masks:
                self._masks[key] = self._mask(cover, framed, (name,))
            mask = self._masks[key]
            if mask is not None and mask.any() and not (mask & protected).any():
                masks[name] = mask
                taken.update(own)
        return masks

    def _concerned(self, framed: Framed) -> Names:
        """The dominance assumptions of which the form has both sides; all where symbols were made one."""
        if framed.ask.rename:
            return Names(self.dominant)
        if framed.names not in self._there:
            held_here = framed.form.symbols
            self._there[framed.names] = Names(
                name
                for name in self.dominant
                if any(pair.difference.keys() <= held_here for pair in self.ground.all[name].pairs)
            )
        return self._there[framed.names]

    def _together(self, cover: Cover, framed: Framed, names: Sequence[str]) -> Iterator[tuple[str, ...]]:
        """Sets by whose pooled vectors terms fall that fall by none of them alone."""
        counts = np.cumsum([len(self.ground.all[name].pairs) for name in names])
        names = [name for name, count in zip(names, counts, strict=True) if count <= _TOGETHER]
        every = self._mask(cover, framed, names) if len(names) > 1 else None
        if every is None or not cover.reached(every):
            return
        kept = list(names)
        for name in reversed(names):
            rest = [other for other in kept if other != name]
            mask = self._mask(cover, framed, rest)
            if mask is not None and cover.reached(mask):
                kept = rest
        yield tuple(kept)

    def holds(self, names: Names) -> bool:
        """Whether the quantity under these assumptions is the formula, as a rational function."""
        if names not in self._held:
            self._held[names] = self._holds(names)
        return self._held[names]

    def _holds(self, names: Names) -> bool:
        exact, made = self.ground.exact, self._assumptions(names)
        response = self.ground.engine.under(made).response
        if response is None:
            return False
        whole = response is exact
        ratio = (
            rational_of(response, self.quantity) if whole else partner_ratio(exact, response, self.quantity)
        )
        try:
            target = self._renamed(pooled(exact.stage, made))
        except StageError:
            return False
        if ratio is None or target is None:
            return False
        # A formula may have a great many terms: residues tell two that differ apart without multiplying them out.
        if not alike_in_residues(ratio, target, self.ground.residues):
            return False
        context = ring_of(exact.stage.symbols, held(*ratio, *target))
        (a, b), (c, d) = (
            tuple(into_ring(p, context) for p in lowest_terms(*each)) for each in (ratio, target)
        )
        return bool(a * d == c * b)

    def _minimal(self, found: Sequence[Names]) -> list[Names]:
        """By size, then in listed order; none that holds another, and of doubtful ones none beside others."""

        def rank(names: Names) -> tuple[int, int, list[int]]:
            doubts = sum(not self.ground.plausible(name) for name in names)
            return doubts, len(names), sorted(map(self.ground.order.__getitem__, names))

        least = [n for n in dict.fromkeys(found) if not any(other < n for other in found)]
        ranked = sorted(least, key=rank)
        if ranked and not rank(ranked[0])[0]:
            ranked = [names for names in ranked if not rank(names)[0]]
        alike = {self._said(names): names for names in reversed(ranked)}
        return [names for names in ranked if alike[self._said(names)] == names][:_MOST_WAYS]

    def _said(self, names: Names) -> Names:
        """The names, where of the catalogue all that is said of one bridge is one, and all that is said of roots."""
        said = set()
        for name in names:
            made = self.ground.all[name]
            bridge = made.miller[0].symbol if made.miller else ""
            if name in self.ground.own:
                said.add(name)
            else:
                said.add("roots" if only_roots(made) else f"Miller's theorem on {bridge}" if bridge else name)
        return Names(said)
