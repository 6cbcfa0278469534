"""The figures of ledgers over a span: sampled from a box and searched from the worst, or every row of a table.

Points stream through in blocks; nothing is kept of them but extremes, so memory does not grow with their number.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.judge.errors_at import ErrorTable
from symamp.span.extremes import Extreme, Extremes
from symamp.span.points import Box, Rows
from symamp.span.search import compass_search

Progress = Callable[[int, int], None]
Where = Mapping[str, float] | Mapping[str, int]


@dataclass(frozen=True)
class SpanFigure:
    """Least and greatest value of a figure over the span, and the bias points where they are reached.

    `where_*` is {symbol: value} of the symbols that the span sets, or {"row": n} counted from 1. With `modulus`
    the values are those of the modulus. `missing` counts points at which the figure has no value.
    """

    least: float
    greatest: float
    where_least: Where
    where_greatest: Where
    modulus: bool
    missing: int = 0


@dataclass(frozen=True)
class SpanErrors:
    """All figures over a span: `of(response, quantity)[row]`, rows as in `Plan`."""

    figures: Mapping[tuple[str, Quantity], tuple[SpanFigure | None, ...]]
    points: int
    seed: int | None
    method: str

    def of(self, response: str, quantity: Quantity) -> tuple[SpanFigure | None, ...]:
        """The figures of one quantity, None for one that had no value anywhere."""
        return self.figures[response, quantity]


def span_errors(
    stage: Stage, tables: Sequence[ErrorTable], points: int, seed: int, progress: Progress | None = None
) -> SpanErrors | None:
    """The figures of all tables over the stage's span; None where it has none."""
    if stage.span.empty:
        return None
    sweep = _Sweep(tables)
    if stage.span.table is not None:
        return _by_rows(stage, sweep, progress)
    return _by_sampling(stage, sweep, points, seed, progress)


class _Sweep:
    """Takes in bias points: errors, figures, extremes of every quantity of every table."""

    def __init__(self, tables: Sequence[ErrorTable]) -> None:
        self.tables = tables
        self.extremes: dict[tuple[str, Quantity], Extremes] = {
            (table.exact.name, quantity): Extremes(1 + len(table.plan.rows))
            for table in tables
            for quantity in table.quantities
        }

    def take(self, values: Mapping[str, Any], places: np.ndarray) -> None:
        """Bias points, and where they are (d, P)."""
        for table in self.tables:
            for quantity, (_, errors) in table.at(values, places.shape[1]).items():
                extremes = self.extremes[table.exact.name, quantity]
                extremes.take(table.plan.figures(errors), places)

    def figures(self, where: Callable[[np.ndarray], Where]) -> dict[Any, tuple[SpanFigure | None, ...]]:
        """The extremes in their final form; a quantity with a complex figure shows moduli throughout."""
        found = {}
        for key, extremes in self.extremes.items():
            modulus = extremes.any_complex
            found[key] = tuple(
                _figure(extremes.result(row, modulus), int(extremes.missing[row]), where)
                for row in range(extremes.rows)
            )
        return found


def _figure(extreme: Extreme | None, missing: int, where: Callable[[np.ndarray], Where]) -> SpanFigure | None:
    if extreme is None:
        return None
    return SpanFigure(
        extreme.least,
        extreme.greatest,
        where(extreme.at_least),
        where(extreme.at_greatest),
        extreme.modulus,
        missing,
    )


def _by_rows(stage: Stage, sweep: _Sweep, progress: Progress | None) -> SpanErrors:
    table = stage.span.table
    assert table is not None
    total, done = len(table.rows), 0
    for count, values in Rows(stage).blocks():
        sweep.take(values, np.arange(done, done + count, dtype=float).reshape(1, -1))
        done += count
        if progress:
            progress(done, total)
    figures = sweep.figures(lambda place: {"row": int(place[0]) + 1})
    return SpanErrors(figures, total, None, "every row of the table")


def _by_sampling(
    stage: Stage, sweep: _Sweep, points: int, seed: int, progress: Progress | None
) -> SpanErrors:
    box = Box.of(stage)
    total, done = box.count(points), 0
    for u in box.blocks(points, seed):
        sweep.take(box.values(u), u)
        done += u.shape[1]
        if progress:
            progress(done, total)
    tried = compass_search(
        list(sweep.extremes.values()), lambda u: sweep.take(box.values(u), u), box.dimensions
    )

    def where(u: np.ndarray) -> Where:
        values = box.values(u.reshape(-1, 1))
        return {name: float(np.ravel(values[name])[0]) for name in box.varied}

    corners = "corners" if box.all_corners else "a draw of corners"
    method = f"sampled: scrambled Sobol points, {corners}, the bias point, and a local search from the worst"
    return SpanErrors(sweep.figures(where), done + tried, seed, method)
