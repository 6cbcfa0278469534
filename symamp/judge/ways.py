"""Which named assumptions turn an exact expression into a formula (room: judge).

Assumptions that change the network or its roots (equal, set, limits, Miller, poles) are tried in small sets, the
frames; under each, dominance is a matter of which terms fall (`symamp.judge.ways_rows`). What is found is put to the
engine as a set and compared with the formula as a rational function, so a way that is named is one.
"""

from __future__ import annotations

from collections.abc import Sequence

from symamp.assumptions.catalogue import Entry
from symamp.assumptions.read import Assumption
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import held
from symamp.exact.response import Response
from symamp.judge.verdict import Way
from symamp.judge.ways_ground import Ground
from symamp.judge.ways_search import BUDGET, Search

_RATIONAL = ("dc", "hf", "a", "b", "p", "z")


def ways_to(
    exact: Response,
    quantity: Quantity,
    target: PolyRatio,
    own: Sequence[Assumption],
    *,
    entries: Sequence[Entry] = (),
    budget: int = BUDGET,
) -> tuple[Way, ...]:
    """The sets of assumptions under which a quantity is `target` exactly; see `Ways.to`."""
    return Ways(exact, own, entries).to(quantity, target, budget=budget)


class Ways:
    """Searches among sets of assumptions on one exact response; what formulas share is worked out once."""

    def __init__(self, exact: Response, own: Sequence[Assumption], entries: Sequence[Entry] = ()) -> None:
        self._exact = exact
        self._ground = Ground(exact, own, entries) if exact.expanded else None

    def to(
        self, quantity: Quantity, target: PolyRatio, *, wider: bool = True, budget: int = BUDGET
    ) -> tuple[Way, ...]:
        """The shortest sets under which the quantity is `target` exactly; of the stage's own, else of the catalogue.

        `target` is the quantity without a face: of a pole or zero the root s itself. `equal` and `set` assumptions
        act on it too. Of the stage's own assumptions all sets are looked at (up to a count) and none that holds
        another is listed; of the catalogue, what the bias point speaks for comes first. At most three. `budget`
        counts networks that the catalogue makes of the stage, so that the result does not depend on the machine.
        Without `wider` the catalogue is not asked. Empty where none is found, where the response is not written
        out, and where the exact quantity is `target` already.
        """
        if self._ground is None or quantity.name not in _RATIONAL or quantity.face is not None:
            return ()
        if "pi" in held(*target) or target[0].is_zero() or (is_root(quantity) and self._exact.missing):
            return ()
        search = Search(self._ground, quantity, target)
        if search.holds(frozenset()):
            return ()
        found = search.among_own()
        if not found and wider:
            found = search.among_all(budget)
        return tuple(self._way(names) for names in found)

    def _way(self, names: frozenset[str]) -> Way:
        assert self._ground is not None
        ordered = tuple(sorted(names, key=self._ground.order.__getitem__))
        entries = self._ground.entries
        lines = tuple(entries[name].toml for name in ordered if name in entries)
        return Way(ordered, not lines, lines)
