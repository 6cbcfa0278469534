"""Step 3, Miller's theorem: the stage with a bridging part in two, and the gain that says how large they are."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from symamp.assumptions.record import Miller
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE, INDUCTANCE, KINDS, RESISTANCE
from symamp.circuit.stage import GROUND, Asked, Part, Stage, Symbol

# A conductance's halves are resistors, valued by their resistance.
_KIND = {RESISTANCE: "resistor", CONDUCTANCE: "resistor", CAPACITANCE: "capacitor", INDUCTANCE: "inductor"}
_TEST = "test current"  # no label that a user can type


@dataclass(frozen=True)
class Half:
    """One of the two parts: its symbol, the bridge it comes from, and whether it stands at `from`."""

    symbol: str
    bridge: Miller
    at_start: bool


def split_stage(stage: Stage, bridges: Sequence[Miller]) -> tuple[Stage, tuple[Half, ...]]:
    """The stage with every bridge taken out and its halves put in, to ground."""
    parts = dict(stage.parts)
    symbols = dict(stage.symbols)
    halves: list[Half] = []
    for bridge in bridges:
        symbol = stage.symbols[bridge.symbol]
        owner = parts[symbol.part]
        if owner.kind.prefixed:
            left = tuple(p for p in owner.parameters if p != symbol.parameter.name)
            parts[owner.label] = replace(owner, parameters=left)
        else:
            del parts[owner.label]
        for node, at_start in ((bridge.start, True), (bridge.end, False)):
            if node != GROUND and (at_start or bridge.both):
                label = f"{bridge.symbol} at {node}"
                kind = KINDS[_KIND[symbol.nature]]
                parts[label] = Part(kind, label, (node, GROUND), (kind.parameters[0].name,))
                symbols[label] = Symbol(label, label, kind.parameters[0])
                halves.append(Half(label, bridge, at_start))
    return replace(stage, parts=parts, symbols=symbols), tuple(halves)


def gain_across(stage: Stage, asked: Asked, bridge: Miller) -> tuple[Stage, Asked]:
    """The response V(to)/V(from) under the asked response's own drive, and the stage that has it.

    The drive of an impedance is the current that is sent into its nodes.
    """
    drive = dict(asked.drive)
    if asked.looking_source is not None:
        drive = {asked.looking_source: Fraction(1)}
    elif asked.looking_into is not None:
        drive = {_TEST: Fraction(1)}
        a, b = asked.looking_into
        test = Part(KINDS["current_source"], _TEST, (b, a))
        stage = replace(stage, parts={**stage.parts, _TEST: test})
    across = Asked(
        asked.name,
        drive=drive,
        to=(bridge.end, GROUND),
        over=(bridge.start, GROUND),
        without=asked.without,
    )
    return stage, across


def dc_words(bridge: Miller, zero: bool, infinite: bool) -> str:
    """The words for a gain that gives no halves, "" where it does: A = 0, or V(from) = 0."""
    where = f"Miller across {bridge.symbol}"
    if infinite:
        zero_or_infinite = f"V({bridge.start}) is zero at s = 0, or V({bridge.end}) infinite"
        return f"{where}: {zero_or_infinite}, so A = V({bridge.end})/V({bridge.start}) does not exist"
    if zero and bridge.both:
        return f"{where}: A = V({bridge.end})/V({bridge.start}) is zero at s = 0, so 1 − 1/A does not exist"
    return ""
