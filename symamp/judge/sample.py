"""A modest sample of a span (room: judge): enough bias points to compare many formulas, the corners among them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.span.points import Box, Rows
from symamp.span.sobol import Sobol

_CORNERS = 256
_DRAWN = 256
_ROWS = 2048


@dataclass(frozen=True)
class Sample:
    """Symbol values at `points` bias points, the bias point first (of a table: its rows, or a draw of them)."""

    values: dict[str, Any]
    points: int

    def thinned(self, most: int) -> Sample:
        """No more than so many of the points, evenly taken, the first among them."""
        if self.points <= most:
            return self
        chosen = np.unique(np.linspace(0, self.points - 1, most).round().astype(int))
        return Sample({name: np.asarray(v)[chosen] for name, v in self.values.items()}, len(chosen))


def sample_of(stage: Stage, seed: int = 1) -> Sample:
    """The sample of a stage's span; the bias point alone where it has none."""
    bias = {name: np.array([float(value)]) for name, value in stage.bias.items()}
    if stage.span.empty:
        return Sample(bias, 1)
    if stage.span.table is not None:
        return _of_rows(stage, bias, seed)
    box = Box.of(stage)
    corners = box.corners(seed)
    if corners.shape[1] > _CORNERS:
        chosen = np.random.default_rng(seed).choice(corners.shape[1], _CORNERS, replace=False)
        corners = corners[:, np.sort(chosen)]
    drawn = Sobol(box.dimensions, seed).points(0, _DRAWN)
    u = np.concatenate([box.bias_point, corners, drawn], axis=1)
    values = {name: _spread(value, u.shape[1]) for name, value in box.values(u).items()}
    return Sample(values, u.shape[1])


def _of_rows(stage: Stage, bias: dict[str, np.ndarray], seed: int) -> Sample:
    blocks = list(Rows(stage).blocks())
    columns = {
        name: np.concatenate([_spread(values[name], count) for count, values in blocks]) for name in bias
    }
    count = len(next(iter(columns.values())))
    if count > _ROWS:
        chosen = np.sort(np.random.default_rng(seed).choice(count, _ROWS, replace=False))
        columns = {name: column[chosen] for name, column in columns.items()}
    whole = {name: np.concatenate([bias[name], column]) for name, column in columns.items()}
    return Sample(whole, len(next(iter(whole.values()))))


def _spread(value: Any, points: int) -> np.ndarray:
    return np.broadcast_to(np.asarray(value, dtype=float), (points,))
