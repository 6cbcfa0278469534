"""An independent numeric solution for tests: nodal analysis with dense matrices at any bias values."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from scipy.linalg import eigvals

from symamp.circuit.stage import GROUND, Asked, Part, Stage


class Nodal:
    """A + s·C of a stage driven by one voltage source, or by 1 A into a node with all sources at rest."""

    def __init__(self, stage: Stage, asked: Asked, values: Mapping[str, float]) -> None:
        nodes = dict.fromkeys(
            n for part in stage.parts.values() for n in _terminals(part).values() if n != GROUND
        )
        self.place = {node: row for row, node in enumerate(nodes)}
        sources = [part for part in stage.parts.values() if part.kind.name == "voltage_source"]
        size = len(self.place) + len(sources)
        self.constant, self.with_s, self.right = (
            np.zeros((size, size)),
            np.zeros((size, size)),
            np.zeros(size),
        )
        for part in stage.parts.values():
            self._stamp(part, values)
        for row, part in enumerate(sources, start=len(self.place)):
            for node, sign in zip(part.nodes, (1, -1), strict=True):
                if node != GROUND:
                    self.constant[row, self.place[node]] += sign
                    self.constant[self.place[node], row] += sign
            self.right[row] = float(asked.drive.get(part.label, 0))
        out = asked.to if asked.looking_into is None else asked.looking_into
        assert out is not None
        assert out[1] == GROUND
        self.out = self.place[out[0]]
        if asked.looking_into is not None:
            self.right[self.out] += 1.0

    def _stamp(self, part: Part, values: Mapping[str, float]) -> None:
        at = _terminals(part)
        for element in part.kind.elements:
            if element.parameter is None or element.parameter not in part.parameters:
                continue
            value = float(values[part.symbol(element.parameter)])
            value = 1 / value if element.what == "resistance" else value
            a, b, *control = (at[terminal] for terminal in element.terminals)
            c, d = control or (a, b)
            matrix = self.with_s if element.what == "capacitance" else self.constant
            for row, row_sign in ((a, 1), (b, -1)):
                for column, sign in ((c, 1), (d, -1)):
                    if row != GROUND and column != GROUND:
                        matrix[self.place[row], self.place[column]] += row_sign * sign * value

    def dc(self) -> float:
        """The response at s = 0."""
        return float(np.linalg.solve(self.constant, self.right)[self.out])

    def poles(self) -> np.ndarray:
        """The natural frequencies in rad/s, by increasing magnitude."""
        found = eigvals(-self.constant, self.with_s)
        found = found[np.isfinite(found)]
        found = found[np.abs(found) < 1e16]
        return found[np.argsort(np.abs(found))]


def _terminals(part: Part) -> dict[str, str]:
    at = dict(zip(part.kind.terminals, part.nodes, strict=True)) | {GROUND: GROUND}
    if part.kind.name == "bjt":
        at["inner"] = f"behind rx of {part.label}" if "rx" in part.parameters else at["base"]
    return at
