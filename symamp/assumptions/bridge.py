"""Step 3, Miller's theorem: the stage with a bridging part in two, and the gain that says how large they are."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from symamp.assumptions.read import Miller
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE, INDUCTANCE, KINDS, RESISTANCE
from symamp.circuit.stage import GROUND, Asked, Part, Stage, Symbol

# A conductance's halves are resistors, valued by their resistance.
_KIND = {RESISTANCE: "resistor", CONDUCTANCE: "resistor", CAPACITANCE: "capacitor", INDUCTANCE: "inductor"}


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
                # A name that no user can type, so that it clashes with none.
                label = f"{bridge.symbol} at {node}"
                kind = KINDS[_KIND[symbol.nature]]
                parts[label] = Part(kind, label, (node, GROUND), (kind.parameters[0].name,))
                symbols[label] = Symbol(label, label, kind.parameters[0])
                halves.append(Half(label, bridge, at_start))
    return replace(stage, parts=parts, symbols=symbols), tuple(halves)


def gain_across(asked: Asked, bridge: Miller) -> Asked:
    """The response V(to)/V(from) under the asked response's own drive."""
    if asked.looking_into is not None or asked.looking_source is not None:
        drive = dict(asked.drive)
        return replace(
            asked,
            drive=drive,
            to=(bridge.end, GROUND),
            over=(bridge.start, GROUND),
            to_source=None,
        )
    return replace(asked, to=(bridge.end, GROUND), to_source=None, over=(bridge.start, GROUND))
