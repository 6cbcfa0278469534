"""Room `circuit`: the parts of a stage file, section by section.

A part's kind is its section's. What is read here is what a part is and which nodes it joins; the parameters
of devices follow from the bias (`bias`).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from typing import Any

from symamp.circuit.kinds import KINDS, Kind
from symamp.circuit.labels import check_label
from symamp.circuit.near import nearest, propose
from symamp.circuit.place import Path, Place
from symamp.circuit.stage import GROUND, Asked, Part
from symamp.values import quoted

MOST_NODES = 200

_CURRENT_CONTROLLED = ("cccs", "ccvs")
_PASSIVE = ("resistor", "capacitor", "inductor")
_TWO_TERMINAL = (*_PASSIVE, "voltage_source", "current_source")


def read_parts(data: Mapping[str, Any], place: Place) -> dict[str, Part]:
    """The parts by label, in file order; devices have no parameters yet.

    `data` is the stage file's top table. Raises StageError for what is no part: unknown keys and terminals,
    wrong numbers of nodes, labels that are taken or cannot be one, unknown controls, more than 200 nodes.
    """
    parts: dict[str, Part] = {}
    sections: dict[str, str] = {}
    for section, table in data.items():
        if section not in KINDS:
            continue
        if not isinstance(table, dict):
            raise place.error(
                (section,), f"{section} is no section", f"write it as [{section}] with parts below"
            )
        for label, raw in table.items():
            path: Path = (section, label)
            if label in parts:
                raise place.error(
                    path,
                    f"{label} is a label in [{sections[label]}] already",
                    "give every part a label of its own",
                )
            with place.at(path):
                check_label(label, parts)
            parts[label] = _part(KINDS[section], label, raw, path, place)
            sections[label] = section
    _check_controls(parts, place)
    _check_count(parts, place)
    return parts


def node_warnings(parts: Mapping[str, Part], asked: Iterable[Asked] = ()) -> list[str]:
    """Warnings about nodes that may be misspelt: such as look like signal ground, and loose ends.

    A loose end is a terminal on a node that nothing else touches and that no response asks about.
    """
    touched = Counter(node for part in parts.values() for node in part.nodes)
    wanted = {node for one in asked for pair in (one.to, one.over, one.looking_into) for node in pair or ()}
    warnings = [
        f"node {node} is not signal ground: the only one is {GROUND}"
        for node in touched
        if node != GROUND and node.lower() in (GROUND, "ground", "0")
    ]
    for part in parts.values():
        passive = part.kind.name in _PASSIVE
        if passive and part.nodes[0] == part.nodes[1]:
            warnings.append(f"both ends of {part.label} are on node {part.nodes[0]}: it has no effect")
        for node in part.nodes:
            if touched[node] == 1 and node != GROUND and node not in wanted:
                near = nearest(node, [other for other in touched if other != node])
                meant = (
                    f"; was {near} meant?"
                    if near
                    else f"; a supply at rest is {GROUND}"
                    if not passive
                    else ""
                )
                effect = ", so that no current flows in it" if passive else ""
                warnings.append(f"node {node} is on {part.label} alone{effect}{meant}")
    return warnings


def read_node(raw: object, path: Path, place: Place) -> str:
    """A node's name: text without spaces or control characters."""
    remedy = 'a node is named by text without spaces, such as "out"'
    if not isinstance(raw, str) or not raw:
        raise place.error(path, f"{quoted(raw)} names no node", remedy)
    if len(raw) > 100 or not raw.isprintable() or any(character.isspace() for character in raw):
        raise place.error(path, f"{quoted(raw)} cannot be a node's name", remedy)
    return raw


def read_pair(raw: object, path: Path, place: Place, what: str = "[plus, minus]") -> tuple[str, str]:
    """Two nodes in an array; `what` says in messages what the two are."""
    remedy = f'write the two nodes {what}, such as ["out", "gnd"]'
    if not isinstance(raw, list):
        raise place.error(path, f"{quoted(raw)} is no pair of nodes", remedy)
    if len(raw) != 2:
        count = f"{len(raw)} node{'' if len(raw) == 1 else 's'}"
        raise place.error(path, f"two nodes are wanted, and {count} given", remedy)
    return read_node(raw[0], (*path, 0), place), read_node(raw[1], (*path, 1), place)


def shape_of(kind: Kind) -> str:
    """How a part of that kind is written, for messages."""
    if kind.terminals == ("plus", "minus"):
        return '["plus", "minus"]'
    if kind.terminals[0].endswith("_plus"):
        keys = dict.fromkeys(terminal.rpartition("_")[0] for terminal in kind.terminals)
        return "{ " + ", ".join(f'{key} = ["a", "b"]' for key in keys) + " }"
    return (
        "{ " + ", ".join(f'{terminal} = "node"' for terminal in kind.terminals if terminal != "body") + " }"
    )


def _part(kind: Kind, label: str, raw: object, path: Path, place: Place) -> Part:
    parameters = () if kind.prefixed else tuple(parameter.name for parameter in kind.parameters)
    if kind.terminals == ("plus", "minus"):
        if not isinstance(raw, list):
            raise place.error(
                path, f"{kind.name} {label} takes two nodes", f"write {label} = {shape_of(kind)}"
            )
        return Part(kind, label, read_pair(raw, path, place), parameters)
    if not isinstance(raw, dict):
        raise place.error(
            path, f"{kind.name} {label} takes named terminals", f"write {label} = {shape_of(kind)}"
        )
    if kind.terminals[0].endswith("_plus"):
        return _ported(kind, label, raw, path, place, parameters)
    optional = {"body": GROUND} if "body" in kind.terminals else {}
    _check_keys(kind, label, raw, kind.terminals, optional, path, place)
    nodes = {key: read_node(node, (*path, key), place) for key, node in raw.items()}
    return Part(kind, label, tuple((optional | nodes)[key] for key in kind.terminals), parameters)


def _ported(
    kind: Kind, label: str, raw: dict[str, Any], path: Path, place: Place, parameters: tuple[str, ...]
) -> Part:
    """A part whose terminals come in pairs: out and control, or primary and secondary."""
    ports = tuple(dict.fromkeys(terminal.rpartition("_")[0] for terminal in kind.terminals))
    _check_keys(kind, label, raw, ports, {}, path, place)
    first = read_pair(raw[ports[0]], (*path, ports[0]), place)
    control = raw[ports[1]]
    if kind.name in _CURRENT_CONTROLLED and not isinstance(control, list):
        if not isinstance(control, str):
            raise place.error(
                (*path, ports[1]),
                f"{quoted(control)} is no control",
                "name a two-terminal part, or two nodes [a, b]",
            )
        return Part(kind, label, first, parameters, control)
    second = read_pair(control, (*path, ports[1]), place)
    return Part(kind, label, (*first, *second), parameters)


def _check_keys(
    kind: Kind,
    label: str,
    raw: Mapping[str, Any],
    known: tuple[str, ...],
    optional: Mapping[str, str],
    path: Path,
    place: Place,
) -> None:
    for key in raw:
        if key not in known:
            raise place.error(
                (*path, key), f"a {kind.name} has no terminal {quoted(key)}", propose(key, known, "terminals")
            )
    missing = [key for key in known if key not in raw and key not in optional]
    if missing:
        raise place.error(
            path,
            f"{kind.name} {label} lacks its {' and '.join(missing)}",
            f"write {label} = {shape_of(kind)}",
        )


def _check_controls(parts: Mapping[str, Part], place: Place) -> None:
    two_terminal = [part.label for part in parts.values() if part.kind.name in _TWO_TERMINAL]
    for part in parts.values():
        if part.control is None or part.control in two_terminal:
            continue
        path = (part.kind.name, part.label, "control")
        if part.control in parts:
            what = parts[part.control].kind.name
            raise place.error(
                path,
                f"{part.control} is a {what}, and a control is a part of two terminals",
                "control by the current of a resistor, capacitor, inductor or source, or by two nodes [a, b]",
            )
        raise place.error(
            path,
            f"no part is called {quoted(part.control)}",
            propose(part.control, two_terminal, "such parts"),
        )


def _check_count(parts: Mapping[str, Part], place: Place) -> None:
    if not parts:
        raise place.error(
            (), "the stage has no part", "add a section of parts, such as [mosfet] or [resistor]"
        )
    nodes: set[str] = {GROUND}
    for part in parts.values():
        nodes.update(part.nodes)
        if len(nodes) - 1 > MOST_NODES:
            raise place.error(
                (part.kind.name, part.label),
                f"more than {MOST_NODES} nodes",
                "split the stage into smaller ones",
            )
