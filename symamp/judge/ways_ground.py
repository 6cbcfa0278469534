"""What searches among sets of assumptions on one exact response share (room: judge)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import log

from symamp.assumptions.apply import Approximator
from symamp.assumptions.catalogue import Entry
from symamp.assumptions.dominance import Dominance, pool
from symamp.assumptions.merge import pooled
from symamp.assumptions.read import Assumption
from symamp.assumptions.record import Pair
from symamp.errors import StageError, TooLargeError
from symamp.exact.asked_quantity import Quantity
from symamp.exact.forms import Expanded
from symamp.exact.response import Response
from symamp.judge.ways_rows import Table, residues_for


class Ground:
    """A written-out response, the stage's own assumptions on it, the catalogue's, and the engine for both."""

    def __init__(self, exact: Response, own: Sequence[Assumption], entries: Sequence[Entry] = ()) -> None:
        assert isinstance(exact.form, Expanded)
        self.exact = exact
        self.own = {a.name: a for a in own if a.applies(exact.name)}
        self.entries = {e.name: e for e in entries if e.name not in self.own}
        self.all = {**self.own, **{name: e.assumption for name, e in self.entries.items()}}
        self.order = {name: i for i, name in enumerate(self.all)}
        self.engine = Approximator(exact)
        self.logs = {name: log(abs(value)) for name, value in exact.bias_values.items() if value}
        # At s = 0 there is less to do; what is found is put to the whole response all the same.
        ends = Expanded(exact.form.numerator[:1], exact.form.denominator[:1])
        self._at_dc = Approximator(replace(exact, form=ends))
        self.residues = residues_for(exact.stage.symbols)
        self._tables: dict[int, Table] = {}
        self._renamed: dict[str, frozenset[str]] = {}
        self._compared: dict[str, tuple[frozenset[int], frozenset[int]]] = {}
        self._numbers: dict[object, int] = {}
        self._dominances: dict[frozenset[object], Dominance | None] = {}

    def form(self, frame: Sequence[Assumption], quantity: Quantity) -> Expanded | None:
        """What steps 1 to 3 of a frame leave, or None; for a value at s = 0 of the response there alone."""
        engine = self._at_dc if quantity.name == "dc" else self.engine
        changes = [made for a in frame if (made := without_roots(a)) is not None]
        found = engine.under(changes).response
        return found.form if found is not None and isinstance(found.form, Expanded) else None

    def table(self, form: Expanded) -> Table:
        """The terms of a form, kept for all formulas."""
        if id(form) not in self._tables:
            self._tables[id(form)] = Table(form, self.residues)
        return self._tables[id(form)]

    def dominance(self, pairs: Sequence[Pair]) -> tuple[Dominance | None, frozenset[object]]:
        """The pooled pairs, and what stands for them; None where they contradict one another or say nothing."""
        key: frozenset[object] = frozenset(pair.key for pair in pairs)
        if key not in self._dominances:
            try:
                self._dominances[key] = pool(pairs)
            except (StageError, TooLargeError):
                self._dominances[key] = None
        return self._dominances[key], key

    def renamed(self, assumption: Assumption) -> frozenset[str]:
        """The symbols that `equal` makes one with others."""
        if assumption.name not in self._renamed:
            found = pooled(self.exact.stage, [assumption]).rename if assumption.equal else ()
            self._renamed[assumption.name] = frozenset(found)
        return self._renamed[assumption.name]

    def comparisons(self, name: str) -> tuple[frozenset[int], frozenset[int]]:
        """Numbers of what an assumption compares, and of the same the other way round."""
        if name not in self._compared:
            keys = [pair.key for pair in self.all[name].pairs]
            turned = [frozenset((n, -p) for n, p in key) for key in keys]
            both = (
                {self._numbers.setdefault(k, len(self._numbers)) for k in side} for side in (keys, turned)
            )
            there, back = map(frozenset, both)
            self._compared[name] = there, back
        return self._compared[name]

    def plausible(self, name: str) -> bool:
        """Whether the bias point does not speak against it; the stage's own are not asked."""
        return name not in self.entries or self.entries[name].plausible


def is_frame(assumption: Assumption) -> bool:
    """Whether it does more than to compare terms."""
    return bool(
        assumption.equal
        or assumption.replace
        or assumption.orders
        or assumption.miller
        or assumption.dominant_pole
        or assumption.poles_far_apart
        or assumption.band is not None
    )


def only_roots(assumption: Assumption) -> bool:
    """Whether it speaks of roots alone."""
    return is_frame(assumption) and not is_frame(_with_no_word_on_roots(assumption)) and not assumption.pairs


def without_roots(assumption: Assumption) -> Assumption | None:
    """What steps 1 to 3 make of it; None where that is nothing."""
    kept = replace(_with_no_word_on_roots(assumption), pairs=())
    if kept != assumption:  # the engine knows assumptions by their names
        kept = replace(kept, name=f"steps 1 to 3 of {assumption.name}")
    return kept if is_frame(kept) else None


def _with_no_word_on_roots(assumption: Assumption) -> Assumption:
    return replace(assumption, dominant_pole=False, poles_far_apart=False, band=None)
