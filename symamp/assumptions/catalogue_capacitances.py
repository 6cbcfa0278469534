"""What the trade says of capacitances and of the poles that they make (room: assumptions)."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice, pairwise, permutations

from symamp.assumptions.catalogue_view import Ends, Proposal, Transconductor, View, is_small, over
from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE, Parameter
from symamp.circuit.stage import GROUND

_MOST = 80  # comparisons of two capacitances that are listed
_FEW = 5  # capacitances up to which any two are compared; beyond, they meet at a node


def on_poles(view: View) -> Iterator[Proposal]:
    """One dominant pole; poles and zeros far apart."""
    reactive = [n for n in view.concerned if view.stage.symbols[n].nature in (CAPACITANCE, INDUCTANCE)]
    if len(reactive) < 2:
        return
    ratios = _pole_ratios(view)
    first = ratios[0] if ratios else None
    why = "each pole against the next"
    yield Proposal(
        {"name": "poles and zeros lie far apart", "poles_far_apart": True}, max(ratios, default=None), why
    )
    why = "the lowest pole against the next"
    yield Proposal({"name": "one pole is dominant", "dominant_pole": True}, first, why)


def on_capacitances(view: View) -> Iterator[Proposal]:
    """One alone, a sort neglected, one neglected or a short, one small against another."""
    names = list(view.capacitances)
    if not names:
        return
    yield from _only_ones(view, names)
    yield from _neglected(view, names)
    for name in names:
        if view.own(name) and not view.shorts.intersection(view.capacitances[name]):
            yield Proposal(
                {"name": f"{name} is a short", "short": [name]}, view.reactance_over(name), _short_why(name)
            )
        elif view.own(name) and _bypasses(view, name):
            table = {"name": f"{name} is a short: it bypasses", "short": [name]}
            yield Proposal(table, view.reactance_over(name), _short_why(name))
    yield from islice(_compared(view, names), _MOST)


def on_bridges(view: View) -> Iterator[Proposal]:
    """What bridges a gain: its Miller capacitance outweighs the others; Miller's theorem on it."""
    for gm in view.transconductors:
        for name, ends, start, end in _bridges(view, gm):
            yield from _outweighing(view, gm, name, start, end)
            for both, words in ((True, "at both ends"), (False, "at the input alone")):
                bridge = {"part": name, "from": ends[0], "to": ends[1], "ends": "both" if both else "from"}
                yield Proposal({"name": f"Miller's theorem on {name}, {words}", "miller": bridge})


def _pole_ratios(view: View) -> list[float]:
    """|p_k/p_(k+1)| at the bias point."""
    exact = view.exact
    if exact is None or exact.missing or not exact.expanded:
        return []
    sizes = [abs(p) for p in exact.poles()]
    return [a / b for a, b in pairwise(sizes) if b]


def _only_ones(view: View, names: list[str]) -> Iterator[Proposal]:
    total = sum(view.time_constants.values())
    for name in names if len(names) > 1 else ():
        own = view.time_constants.get(name)
        others = None if own is None else max(total - own, 0.0)
        table = {"name": f"{name} is the only capacitance that counts", "dominant_capacitor": name}
        yield Proposal(table, over(others, own), f"the other time constants against that of {name}")


def _neglected(view: View, names: list[str]) -> Iterator[Proposal]:
    """By parameter, all in the devices, then each."""
    bare = [p.name for p in _device_parameters(view)]
    why = "their time constants against the others"
    if bare and any(view.own(name) for name in names):
        table = {"name": "no capacitances in the devices", "neglect": bare}
        yield Proposal(table, _share(view, [n for n in names if not view.own(n)]), why)
    for parameter in bare if len(names) > 1 else ():
        own = [d.symbol(parameter) for d in view.devices if view.has(d, parameter)]
        if len(own) > 1:
            yield Proposal(
                {"name": f"{parameter} is neglected", "neglect": [parameter]}, _share(view, own), why
            )
    for name in names if len(names) > 1 else ():
        yield Proposal({"name": f"{name} is neglected", "neglect": [name]}, _share(view, [name]), why)


def _device_parameters(view: View) -> list[Parameter]:
    found: dict[str, Parameter] = {}
    for part in view.devices:
        for parameter in part.kind.parameters:
            if parameter.nature == CAPACITANCE and view.has(part, parameter.name):
                found[parameter.name] = parameter
    return list(found.values())


def _share(view: View, names: list[str]) -> float | None:
    """Their open-circuit time constants over those of the others; None where one is not known."""
    known = view.time_constants
    if any(name not in known for name in names):
        return None
    own = sum(known[name] for name in names)
    return over(own, max(sum(known.values()) - own, 0.0))


def _short_why(name: str) -> str:
    return f"the impedance of {name} against what stands in series with it"


def _bypasses(view: View, name: str) -> bool:
    """Whether a capacitance stands at a source or emitter."""
    ends = view.capacitances[name]
    return any(gm.common in ends and gm.common not in view.shorts for gm in view.transconductors)


def _compared(view: View, names: list[str]) -> Iterator[Proposal]:
    """Capacitances against one another, the smaller at the bias point against the larger first."""
    few = len(names) <= _FEW
    yield from _against_all(view, names)
    later = []
    for one, other in permutations(names, 2):
        if not few and not _meet(view.capacitances[one], view.capacitances[other]):
            continue
        a, b = view.value(one), view.value(other)
        if a is None or b is None or a < b:
            yield is_small(one, other)
        else:
            later.append(is_small(one, other))
    yield from later


def _against_all(view: View, names: list[str]) -> Iterator[Proposal]:
    """All those of devices against one that is a part; one against all others that it meets."""
    bare = [parameter.name for parameter in _device_parameters(view)]
    for name in names if bare else ():
        if view.own(name):
            yield is_small(bare, name, f"the capacitances of the devices are small against {name}")
    for name in names if len(names) > 2 else ():
        others = [n for n in names if n != name and _meet(view.capacitances[name], view.capacitances[n])]
        if len(others) > 1:
            yield is_small(name, others)


def _meet(one: Ends, other: Ends) -> bool:
    return any(node in other and node != GROUND for node in one)


def _bridges(view: View, gm: Transconductor) -> Iterator[tuple[str, Ends, str, str]]:
    """What joins the control node of a device to its output, by itself or with a resistor in series.

    Each with its own two nodes, the control's side first, then the control node and the output.
    """
    if gm.control in view.shorts or gm.out in view.shorts:
        return
    joined = dict(view.capacitances)
    joined.update({r.text: r.ends for r in view.resistors})
    for name, ends in joined.items():
        for first, last in (ends, ends[::-1]):
            if first == last or GROUND in ends:
                continue
            if _reaches(view, name, first, gm.control) and _reaches(view, name, last, gm.out):
                yield name, (first, last), gm.control, gm.out


def _reaches(view: View, name: str, node: str, wanted: str) -> bool:
    """Whether a node is the one wanted, or a resistor away from it."""
    if node == wanted:
        return True
    if name not in view.capacitances:
        return False
    return any(set(r.ends) == {node, wanted} for r in view.resistors)


def _outweighing(view: View, gm: Transconductor, name: str, start: str, end: str) -> Iterator[Proposal]:
    """The other capacitances at both ends are small against the bridge times the gain."""
    if name not in view.capacitances:
        return
    others = [
        other for other, ends in view.capacitances.items() if other != name and _meet(ends, (start, end))
    ]
    at_ends = [r for r in view.resistances if r.meets(start) or r.meets(end)]
    if others and at_ends:
        against = [f"{gm.symbol}*{r.text}*{name}" for r in at_ends]
        words = f"the other capacitances are small against {name} times the gain of {gm.label}"
        yield is_small(others, against, words)
