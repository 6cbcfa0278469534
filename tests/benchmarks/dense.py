"""Numeric nodal analysis with a dense matrix at each frequency: the plain way, for comparison."""

from __future__ import annotations

import numpy as np

from symamp.circuit.stage import GROUND, Asked, Part, Stage


def response(stage: Stage, asked: Asked, s: np.ndarray) -> np.ndarray:
    """The ratio of a node's voltage to its drive at complex frequencies s, each by one dense solve."""
    constant, with_s, right, place = _matrices(stage, asked)
    matrices = constant + s[:, None, None] * with_s
    solved = np.linalg.solve(matrices, np.broadcast_to(right[:, None], (s.size, right.size, 1)))
    assert asked.to is not None
    found: np.ndarray = solved[:, place[asked.to[0]], 0]
    return found


def _matrices(stage: Stage, asked: Asked) -> tuple[np.ndarray, np.ndarray, np.ndarray, dict[str, int]]:
    """A + sC, the right-hand side, and the rows of the nodes: node voltages first, then currents of sources."""
    place: dict[str, int] = {}
    for part in stage.parts.values():
        for node in _nodes(part).values():
            place.setdefault(node, len(place))
    place.pop(GROUND, None)
    place = {node: row for row, node in enumerate(place)}
    sources = [part for part in stage.parts.values() if part.kind.name == "voltage_source"]
    size = len(place) + len(sources)
    both, right = np.zeros((2, size, size)), np.zeros(size)
    for part in stage.parts.values():
        _stamp(both, part, stage, place)
    for row, part in enumerate(sources, start=len(place)):
        for node, sign in zip(part.nodes, (1, -1), strict=True):
            if node != GROUND:
                both[0, row, place[node]] += sign
                both[0, place[node], row] += sign
        right[row] = float(asked.drive.get(part.label, 0))
    return both[0], both[1], right, place


def _stamp(both: np.ndarray, part: Part, stage: Stage, place: dict[str, int]) -> None:
    nodes = _nodes(part)
    for element in part.kind.elements:
        if element.parameter is None or element.parameter not in part.parameters:
            continue
        value = float(stage.bias[part.symbol(element.parameter)])
        value = 1 / value if element.what == "resistance" else value
        a, b, *control = (nodes[terminal] for terminal in element.terminals)
        c, d = control or (a, b)
        layer = 1 if element.what == "capacitance" else 0
        for row, row_sign in ((a, 1), (b, -1)):
            for column, sign in ((c, 1), (d, -1)):
                if row != GROUND and column != GROUND:
                    both[layer, place[row], place[column]] += row_sign * sign * value


def _nodes(part: Part) -> dict[str, str]:
    """The node on each terminal, the inner base of a transistor with rx among them."""
    nodes = dict(zip(part.kind.terminals, part.nodes, strict=True)) | {GROUND: GROUND}
    if part.kind.name == "bjt":
        nodes["inner"] = f"behind rx of {part.label}" if "rx" in part.parameters else nodes["base"]
    return nodes
