"""The catalogue for a stage: the simplifications of the trade that mean something for it (room: assumptions).

Everything comes from the kinds of part, their parameters, where they stand and the bias; nothing from a stage's
name. Each entry is read as a stage file's table would be, so that the table and what it does agree. Source of all
of them: common practice, as in the kinds that they are made of.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from math import isfinite
from typing import Any

from symamp.assumptions.catalogue_capacitances import on_bridges, on_capacitances, on_poles
from symamp.assumptions.catalogue_devices import on_all_devices, on_matched_parts, on_single_devices
from symamp.assumptions.catalogue_resistances import on_resistances
from symamp.assumptions.catalogue_view import Proposal, View
from symamp.assumptions.kinds import KINDS
from symamp.assumptions.record import Assumption, Pair
from symamp.assumptions.table import TableReader
from symamp.circuit.stage import Stage
from symamp.errors import InputError
from symamp.exact.response import Response

PLAUSIBLE = 0.5  # a ratio above which nobody would take it to be small


@dataclass(frozen=True)
class Entry:
    """An assumption of the catalogue, the table that says it in a stage file, and the ratio that it takes to be small.

    `ratio` is at the bias point, the largest of those that it compares; None where it is not known. `why` says in
    words what the ratio is.
    """

    assumption: Assumption
    table: Mapping[str, Any]
    ratio: float | None
    why: str = ""

    @property
    def name(self) -> str:
        return self.assumption.name

    @property
    def plausible(self) -> bool:
        """Whether the bias point does not speak against it."""
        return self.ratio is None or self.ratio <= PLAUSIBLE

    @property
    def toml(self) -> str:
        """The lines of a stage file."""
        lines = [f"{key} = {_toml(value)}" for key, value in self.table.items()]
        return "\n".join(["[[assumption]]", *lines])

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols that it neglects, takes to a limit, splits or compares."""
        made = self.assumption
        compared = (name for pair in made.pairs for name in pair.difference)
        return frozenset({*made.orders, *(m.symbol for m in made.miller), *compared})


def catalogue(stage: Stage, exact: Response | None = None) -> tuple[Entry, ...]:
    """The assumptions that mean something for a stage, or for one response of it, the most general first.

    Only those that concern a symbol of the response whose bias is not zero. What the bias point speaks against is
    listed too (`Entry.plausible`): a formula may rest on it all the same.
    """
    view = View.of(stage, exact)
    found: dict[str, Entry] = {}
    for proposal in _proposals(view):
        entry = _entry(view, proposal)
        if entry is not None:
            found.setdefault(entry.name, entry)
    return tuple(found.values())


def _proposals(view: View) -> Iterator[Proposal]:
    yield from on_all_devices(view)
    yield from on_matched_parts(view)
    yield from on_resistances(view)
    yield from on_poles(view)
    yield from on_capacitances(view)
    yield from on_bridges(view)
    yield from on_single_devices(view)


def _entry(view: View, proposal: Proposal) -> Entry | None:
    try:
        assumption = TableReader(view.stage, proposal.table).read()
    except InputError:
        return None  # it cannot be said of this stage
    if not _concerns(view, assumption):
        return None
    ratio = proposal.ratio if proposal.ratio is not None else _largest_ratio(view, assumption)
    ratio = ratio if ratio is not None and isfinite(ratio) else None if ratio is None else float("inf")
    why = proposal.why or f"takes to be small: {KINDS[assumption.kinds[0]].ratio}"
    return Entry(assumption, proposal.table, ratio, why)


def _concerns(view: View, assumption: Assumption) -> bool:
    """Whether it can change the response: what it acts on is there, and of what it compares both sides are."""
    if assumption.dominant_pole or assumption.poles_far_apart:
        return True
    if assumption.pairs:
        return any(_compares(view, pair) for pair in assumption.pairs)
    if assumption.equal:
        return all(any(s in view.concerned for s in view.symbols_of(label)) for label in assumption.equal[0])
    return not view.concerned.isdisjoint({*assumption.orders, *(m.symbol for m in assumption.miller)})


def _compares(view: View, pair: Pair) -> bool:
    return bool(pair.difference) and pair.difference.keys() <= view.concerned


def _largest_ratio(view: View, assumption: Assumption) -> float | None:
    """The largest of the ratios that it compares, of those whose symbols the response has."""
    ratios = []
    for pair in assumption.pairs:
        if _compares(view, pair):
            product = view.product(pair.difference)
            if product is None:
                return None
            ratios.append(product)
    return max(ratios, default=None)


def _toml(value: Any) -> str:
    if isinstance(value, Mapping):
        inner = ", ".join(f"{key} = {_toml(item)}" for key, item in value.items())
        return f"{{ {inner} }}"
    return json.dumps(value, ensure_ascii=False)
