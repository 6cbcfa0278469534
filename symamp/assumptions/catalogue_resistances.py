"""What the trade says of resistances: large, small, open, short, and large by a gain (room: assumptions)."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice, permutations

from symamp.assumptions.catalogue_view import Proposal, Resistance, Transconductor, View, is_small, over
from symamp.circuit.stage import GROUND

_MOST = 60  # comparisons of one sort that are listed
_FEW = 6  # resistors up to which any two are compared; beyond, they meet at a node


def on_resistances(view: View) -> Iterator[Proposal]:
    """All of them, each sort with the smaller against the larger first."""
    yield from _against_devices(view)
    yield from islice(_times_gm(view), 2 * _MOST)
    yield from _limits(view)
    yield from islice(_against_each_other(view), _MOST)
    yield from islice(_raised_by_a_gain(view), _MOST)


def _against_devices(view: View) -> Iterator[Proposal]:
    """A resistor against ro and rpi: of all devices, then of each."""
    for alias in ("ro", "rpi"):
        owners = [r for r in view.resistances if r.text != r.owner and r.text.startswith(alias)]
        for resistor in view.resistors if owners else ():
            yield from _both_ways(view, resistor.text, alias, [r.text for r in owners])
        for resistor in view.resistors if len(owners) > 1 else ():
            for other in owners:
                yield from _both_ways(view, resistor.text, other.text, [other.text])


def _both_ways(view: View, one: str, other: str, worth: list[str]) -> Iterator[Proposal]:
    """Small against, the way round first that the bias point speaks for."""
    value, values = view.value(one), [view.value(name) for name in worth]
    known = [v for v in values if v is not None]
    first = value is None or not known or value <= min(known)
    pairs = [(one, other), (other, one)]
    for small, large in pairs if first else pairs[::-1]:
        yield is_small(small, large)


def _times_gm(view: View) -> Iterator[Proposal]:
    """gm·R at every terminal of a device: large, or small; of a resistor between source and ground: degeneration."""
    for gm in view.transconductors:
        loads = [r for r in view.resistors if r.meets(gm.control) or r.meets(gm.out)]
        if len(loads) > 1:
            products = [f"{gm.symbol}*{r.text}" for r in loads]
            yield is_small("1", products, f"{' and '.join(products)} are large")
    for gm in view.transconductors:
        for resistor in view.resistors:
            if not any(resistor.meets(node) for node in (gm.control, gm.common, gm.out)):
                continue
            product = f"{gm.symbol}*{resistor.text}"
            at_source = resistor.meets(gm.common) and gm.common not in view.shorts
            words = f"degeneration of {gm.label} by {resistor.text}" if at_source else product
            yield is_small("1", product, f"{words} is large")
            yield is_small(product, "1", f"{words} is small")


def _limits(view: View) -> Iterator[Proposal]:
    """Each resistor open, and short, against the impedance that stands beside it where the response peaks."""
    for resistor in view.resistors:
        value = view.value(resistor.text)
        beside = view.beside(resistor.ends, value)
        words, text = _open_words(view, resistor), resistor.text
        why = f"the impedance beside {text} against {text}"
        yield Proposal({"name": words, "open": [text]}, over(beside, value), why)
        why = f"{text} against the impedance beside it"
        if GROUND not in resistor.ends or not any(resistor.meets(gm.out) for gm in view.transconductors):
            yield Proposal({"name": f"{text} is short", "short": [text]}, over(value, beside), why)


def _open_words(view: View, resistor: Resistance) -> str:
    """What an open resistor means, by the terminal at which it stands."""
    text = resistor.text
    if GROUND not in resistor.ends:
        return f"{text} is open"
    if any(resistor.meets(gm.out) for gm in view.transconductors):
        return f"{text} is open: an ideal current source as load"
    if any(resistor.meets(gm.common) for gm in view.transconductors):
        return f"{text} is open: an ideal current source as tail"
    if any(resistor.meets(gm.control) for gm in view.transconductors):
        return f"{text} is open: it draws no current"
    return f"{text} is open"


def _against_each_other(view: View) -> Iterator[Proposal]:
    """Resistors against one another, the smaller at the bias point against the larger first."""
    few = len(view.resistors) <= _FEW
    later = []
    for one, other in permutations(view.resistors, 2):
        if not few and not any(one.meets(node) for node in other.ends):
            continue
        a, b = view.value(one.text), view.value(other.text)
        if a is None or b is None or a < b:
            yield is_small(one.text, other.text)
        else:
            later.append(is_small(one.text, other.text))
    yield from later


def _raised_by_a_gain(view: View) -> Iterator[Proposal]:
    """Resistances at a drain against what a source's resistance is raised to, and at a base against beta times it.

    gm·ro·X is the output resistance with X at the source, (1 + beta)·X the input resistance.
    """
    for gm in view.transconductors:
        own = next((r for r in view.resistances if r.owner == gm.label and r.text.startswith("ro")), None)
        below = [r for r in view.resistances if r.owner != gm.label and r.meets(gm.common)]
        above = [r for r in view.resistances if r.owner != gm.label and r.meets(gm.out)]
        for lower in below if own is not None and gm.common not in view.shorts else ():
            for upper in (r for r in above if r is not lower):
                raised = f"{gm.symbol}*{own.text}*{lower.text}" if own else ""
                yield is_small(upper.text, raised)
                yield is_small(raised, upper.text)
        yield from _at_base(view, gm, below)


def _at_base(view: View, gm: Transconductor, below: list[Resistance]) -> Iterator[Proposal]:
    part = view.stage.parts[gm.label]
    if not view.has(part, "gpi") or gm.common in view.shorts:
        return
    for lower in below:
        for upper in (r for r in view.resistors if r is not lower and r.meets(part.nodes[0])):
            yield is_small(upper.text, f"{part.symbol('beta')}*{lower.text}")
