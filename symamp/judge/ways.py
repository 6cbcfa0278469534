"""Which named assumptions turn an exact expression into a formula (room: judge)."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import combinations

from symamp.assumptions.apply import Approximator
from symamp.assumptions.catalogue import Entry
from symamp.assumptions.read import Assumption
from symamp.exact.asked_quantity import Quantity
from symamp.exact.formulas import PolyRatio, band_ratio, rational_of
from symamp.exact.polys import held, into_ring, ring_of, with_pi
from symamp.exact.response import Response
from symamp.judge.error_formula import partner_ratio
from symamp.judge.verdict import Way

_MOST_WAYS = 3
_OWN_TRIES = 400  # sets of the stage's own assumptions
_TRIES = 240  # sets that the catalogue is asked for, for one formula
_LARGEST = 4  # assumptions of the catalogue together
_BEAM = 6  # sets of one size from which larger ones are made


class Ways:
    """Searches among sets of assumptions on one exact response; what formulas share is worked out once."""

    def __init__(self, exact: Response, own: Sequence[Assumption], entries: Sequence[Entry] = ()) -> None:
        self._exact = exact
        self._own = {a.name: a for a in own}
        self._entries = {e.name: e for e in entries if e.name not in self._own}
        self._all = {**self._own, **{name: e.assumption for name, e in self._entries.items()}}
        self._engine = Approximator(exact)
        self._ratios: dict[tuple[frozenset[str], Quantity], PolyRatio | None] = {}

    def to(self, quantity: Quantity, target: PolyRatio, *, wider: bool = True) -> tuple[Way, ...]:
        """The shortest sets under which the quantity is `target` exactly; of the stage's own, else of the catalogue.

        Without `wider` the catalogue is not asked. Empty where none is found, or the response is not written out.
        """
        if not self._exact.expanded:
            return ()
        found = self._among_own(quantity, target)
        if not found and wider:
            found = self._among_all(quantity, target)
        return tuple(self._way(names) for names in found)

    def _way(self, names: frozenset[str]) -> Way:
        ordered = tuple(name for name in self._all if name in names)
        lines = tuple(self._entries[name].toml for name in ordered if name in self._entries)
        return Way(ordered, not lines, lines)

    def _among_own(self, quantity: Quantity, target: PolyRatio) -> list[frozenset[str]]:
        found: list[frozenset[str]] = []
        for tries, names in enumerate(_subsets(list(self._own))):
            if tries >= _OWN_TRIES or len(found) >= _MOST_WAYS:
                break
            if not any(shorter <= names for shorter in found) and self._reaches(names, quantity, target):
                found.append(names)
        return found

    def _among_all(self, quantity: Quantity, target: PolyRatio) -> list[frozenset[str]]:
        """From sets of one size to larger ones, the simplest results first, while no symbol of the target is lost."""
        wanted = held(*target)
        found: list[frozenset[str]] = []
        level = [frozenset[str]()]
        tries = 0
        seen: set[frozenset[str]] = set()
        for _ in range(_LARGEST):
            made: list[tuple[int, int, frozenset[str]]] = []
            for names in level:
                before = self._size(names, quantity)
                for name in self._all:
                    wider = names | {name}
                    if wider in seen or len(wider) == len(names) or tries >= _TRIES:
                        continue
                    seen.add(wider)
                    tries += 1
                    ratio = self._ratio(wider, quantity)
                    if ratio is None or not wanted <= held(*ratio):
                        continue
                    if _same(self._exact, ratio, target):
                        found.append(wider)
                        continue
                    after = len(ratio[0]) + len(ratio[1])
                    if after < before:
                        made.append((len(held(*ratio) - wanted), after, wider))
            if len(found) >= 1:
                return found[:_MOST_WAYS]
            made.sort(key=lambda item: item[:2])
            level = [names for *_, names in made[:_BEAM]]
        return found

    def _size(self, names: frozenset[str], quantity: Quantity) -> int:
        ratio = self._ratio(names, quantity)
        return 10**9 if ratio is None else len(ratio[0]) + len(ratio[1])

    def _reaches(self, names: frozenset[str], quantity: Quantity, target: PolyRatio) -> bool:
        ratio = self._ratio(names, quantity)
        return ratio is not None and _same(self._exact, ratio, target)

    def _ratio(self, names: frozenset[str], quantity: Quantity) -> PolyRatio | None:
        key = (names, quantity)
        if key not in self._ratios:
            made = self._engine.under([self._all[name] for name in self._all if name in names]).response
            if made is None:
                self._ratios[key] = None
            elif made is self._exact:
                self._ratios[key] = rational_of(made, quantity) or band_ratio(made, quantity)
            else:
                self._ratios[key] = partner_ratio(self._exact, made, quantity)
        return self._ratios[key]


def _subsets(names: Sequence[str]) -> Iterator[frozenset[str]]:
    """All sets of one and more, small ones first."""
    for size in range(1, len(names) + 1):
        for chosen in combinations(names, size):
            yield frozenset(chosen)


def _same(exact: Response, one: PolyRatio, other: PolyRatio) -> bool:
    """Whether two ratios are one rational function."""
    context = with_pi(ring_of(exact.stage.symbols, held(*one, *other) - {"pi"}))
    (a, b), (c, d) = (tuple(into_ring(p, context) for p in ratio) for ratio in (one, other))
    return bool(a * d == c * b)
