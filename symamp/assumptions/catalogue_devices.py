"""What the trade leaves out of devices, all at once and one by one, and which parts are alike (room: assumptions)."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from symamp.assumptions.catalogue_view import Proposal, View, is_small, over
from symamp.circuit.kinds import KINDS
from symamp.circuit.stage import Part

_ALIKE = 0.1  # the relative difference up to which parts are taken for a matched pair
_FEW = 4  # devices up to which any two may be a pair; beyond, they share a gate, base, source or emitter

# (parameter, what it is compared with, the words)
_COMPARED = (
    ("gds", "gm", "gds is small against gm"),
    ("gmb", "gm", "gmb is small against gm"),
    ("gpi", "gm", "beta is large"),
    ("go", "gm", "go is small against gm"),
    ("go", "gpi", "go is small against gpi"),
    ("gds", "gmb", "gds is small against gmb"),
)

# (parameter, what it is compared with at the bias point, the words)
_NEGLECTED = (
    ("gmb", "gm", "no body effect"),
    ("gds", "gm", "no channel-length modulation"),
    ("go", "gm", "no Early effect"),
    ("gpi", "gm", "no base current"),
    ("rx", "rpi", "no base resistance"),
)


def on_all_devices(view: View) -> Iterator[Proposal]:
    """What is said of all devices at once."""
    owned = {
        p.name
        for kind in KINDS.values()
        for p in kind.parameters
        for d in view.devices
        if view.has(d, p.name)
    }
    for small, against, words in _COMPARED:
        if {small, against} <= owned:
            yield is_small(small, against, words)
    for parameter, against, words in _NEGLECTED:
        if parameter in owned:
            ratios = [
                _own_ratio(view, part, parameter, against)
                for part in view.devices
                if view.has(part, parameter)
            ]
            worst = None if None in ratios else max(r for r in ratios if r is not None)
            yield Proposal({"name": words, "neglect": [parameter]}, worst, f"{parameter} against {against}")
    if "rx" in owned:
        yield is_small("rx", "rpi")


def on_single_devices(view: View) -> Iterator[Proposal]:
    """The same device by device, where several have the parameter."""
    for small, against, _ in _COMPARED:
        owners = [part for part in view.devices if view.has(part, small)]
        others = [part for part in view.devices if view.has(part, against)]
        if len(owners) < 2 and len(others) < 2:
            continue
        for part in owners:
            if len(owners) > 1 and len(others) > 1:
                yield is_small(part.symbol(small), against)
            if view.has(part, against):
                yield is_small(part.symbol(small), part.symbol(against))
    for parameter, against, words in _NEGLECTED:
        owners = [part for part in view.devices if view.has(part, parameter)]
        for part in owners if len(owners) > 1 else ():
            ratio = _own_ratio(view, part, parameter, against)
            why = f"{part.symbol(parameter)} against {part.symbol(against)}"
            table = {"name": f"{words} in {part.label}", "neglect": [part.symbol(parameter)]}
            yield Proposal(table, ratio, why)


def on_matched_parts(view: View) -> Iterator[Proposal]:
    """Parts of one kind whose bias is nearly the same."""
    for one, other in combinations(view.parts, 2):
        if one.kind is not other.kind or not _may_be_pair(view, one, other):
            continue
        difference = _difference(view, one, other)
        if difference is not None and difference <= _ALIKE:
            table = {"name": f"{one.label} and {other.label} are matched", "equal": [one.label, other.label]}
            yield Proposal(table, difference, "the largest relative difference of their values")


def _own_ratio(view: View, part: Part, parameter: str, against: str) -> float | None:
    """A parameter over another one, or an alias, of the same device."""
    return over(view.value(part.symbol(parameter)), view.value(part.symbol(against)))


def _may_be_pair(view: View, one: Part, other: Part) -> bool:
    """Devices of a pair or a mirror share their sources or emitters, or their gates or bases."""
    if not one.kind.prefixed:
        return True
    if len(view.devices) <= _FEW:
        return True
    control, common = one.kind.terminals[0], one.kind.terminals[2]
    places = [one.kind.terminals.index(name) for name in (control, common)]
    return any(one.nodes[i] == other.nodes[i] for i in places)


def _difference(view: View, one: Part, other: Part) -> float | None:
    """The largest relative difference of the parameters that both have; None where a value is missing or 0."""
    worst = 0.0
    shared = [p for p in one.parameters if p in other.parameters]
    for parameter in shared:
        a, b = view.value(one.symbol(parameter)), view.value(other.symbol(parameter))
        if a is None or b is None:
            return None
        worst = max(worst, abs(a - b) / max(a, b))
    return worst if shared else None
