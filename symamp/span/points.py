"""Bias points of a span: a box with its sides, or the rows of a table, as arrays of symbol values."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np

from symamp.circuit.stage import Side, Span, Stage
from symamp.span.sobol import Sobol

BLOCK = 8192
CORNER_LIMIT = 1 << 12  # corners beyond which a seeded draw of that many stands for all
Values = dict[str, Any]


@dataclass(frozen=True)
class Box:
    """The box of a span: a point is a vector u in the unit cube, one component a side.

    A side is spaced geometrically where both its ends are positive, else evenly.
    """

    stage: Stage
    _base: Mapping[str, float] = field(repr=False)

    @classmethod
    def of(cls, stage: Stage) -> Box:
        """The box of a stage's span."""
        return cls(stage, {name: float(value) for name, value in stage.bias.items()})

    @property
    def span(self) -> Span:
        return self.stage.span

    @property
    def dimensions(self) -> int:
        """How many sides there are."""
        return len(self.span.sides)

    @cached_property
    def varied(self) -> tuple[str, ...]:
        """The symbols that the span sets, in the order of the stage."""
        names = {side.symbol for side in self.span.sides} | {f.symbol for f in self.span.follows}
        return tuple(name for name in self.stage.symbols if name in names)

    def values(self, u: np.ndarray) -> Values:
        """Symbol values at points u of shape (sides, P): arrays for symbols that vary, scalars for the others."""
        values: Values = dict(self._base)
        for place, (side, component) in enumerate(zip(self.span.sides, u, strict=True)):
            low, high = float(side.low), float(side.high)
            value = low * (high / low) ** component if low > 0 else low + (high - low) * component
            # The ends are the ends, to the last digit.
            value = np.where(component <= 0, low, np.where(component >= 1, high, value))
            # And so is the bias value, which a logarithm and back would move in its last digit.
            value = np.where(component == self.bias_point[place], self._bias_value(side), value)
            values[side.symbol] = value**side.exponent if side.exponent != 1 else value
        for side in self.span.sides:
            for name, power in side.times.items():
                values[side.symbol] = values[side.symbol] * self._followed(values, name) ** power
        for follow in self.span.follows:
            values[follow.symbol] = self._followed(values, follow.symbol)
        return values

    @cached_property
    def _leaders(self) -> dict[str, tuple[str, float]]:
        return {f.symbol: (f.leader, float(f.ratio)) for f in self.span.follows}

    def _followed(self, values: Mapping[str, Any], name: str) -> Any:
        """The value of a symbol, through those that it follows (the reader has refused rings)."""
        factor = 1.0
        while name in self._leaders:
            name, ratio = self._leaders[name]
            factor *= ratio
        return values[name] * factor

    @cached_property
    def bias_point(self) -> np.ndarray:
        """u of the bias point, (sides, 1); a component may lie outside [0, 1]."""
        return np.array([[self._component(side)] for side in self.span.sides]).reshape(self.dimensions, 1)

    def _bias_value(self, side: Side) -> float:
        """What is varied, at the bias point."""
        value = self._base[side.symbol]
        for name, power in side.times.items():
            value /= self._base[name] ** power
        return value if side.exponent == 1 else float(value ** (1 / side.exponent))

    def _component(self, side: Side) -> float:
        value = self._bias_value(side)
        low, high = float(side.low), float(side.high)
        if high == low:
            return 0.0
        if low > 0:
            return float(np.log(value / low) / np.log(high / low))
        return (value - low) / (high - low)

    def corners(self, seed: int) -> np.ndarray:
        """All corners of the box (sides, 2**sides), or a seeded draw of CORNER_LIMIT where there are more."""
        d = self.dimensions
        if d <= CORNER_LIMIT.bit_length() - 1:
            codes = np.arange(1 << d)
            return ((codes[None, :] >> np.arange(d)[:, None]) & 1).astype(float)
        return np.random.default_rng(seed).integers(0, 2, size=(d, CORNER_LIMIT)).astype(float)

    @property
    def all_corners(self) -> bool:
        return self.dimensions <= CORNER_LIMIT.bit_length() - 1

    @property
    def method(self) -> str:
        """How a box is looked at, in words."""
        corners = "corners" if self.all_corners else "a draw of corners"
        return (
            f"sampled: scrambled Sobol points, {corners}, the bias point, and a local search from the worst"
        )

    def blocks(self, points: int, seed: int) -> Iterator[np.ndarray]:
        """The bias point and corners, then `points` scrambled Sobol points, in blocks (sides, ≤ BLOCK)."""
        fixed = np.concatenate([self.bias_point, self.corners(seed)], axis=1)
        for start in range(0, fixed.shape[1], BLOCK):
            yield fixed[:, start : start + BLOCK]
        if points < 1:
            return
        sobol = Sobol(self.dimensions, seed)
        for start in range(0, points, BLOCK):
            yield sobol.points(start, min(BLOCK, points - start))

    def count(self, points: int) -> int:
        """How many points `blocks` gives."""
        return 1 + min(1 << self.dimensions, CORNER_LIMIT) + points


@dataclass(frozen=True)
class Rows:
    """The rows of a table as bias points, in blocks of `size` at most."""

    stage: Stage
    size: int = BLOCK

    @property
    def varied(self) -> tuple[str, ...]:
        assert self.stage.span.table is not None
        return self.stage.span.table.columns

    @property
    def count(self) -> int:
        """How many rows there are."""
        assert self.stage.span.table is not None
        return len(self.stage.span.table.rows)

    def blocks(self) -> Iterator[tuple[int, Values]]:
        """(number of rows, symbol values) in blocks."""
        table = self.stage.span.table
        assert table is not None
        base = {name: float(value) for name, value in self.stage.bias.items()}
        data = np.array([[float(cell) for cell in row] for row in table.rows])
        size = min(self.size, BLOCK)
        for start in range(0, len(data), size):
            part = data[start : start + size]
            columns = {n: np.ascontiguousarray(c) for n, c in zip(table.columns, part.T, strict=True)}
            yield len(part), {**base, **columns}
