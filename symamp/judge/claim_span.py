"""Claims over a span (room: judge): sampled from a box and searched from the worst, or every row of a table."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from symamp.circuit.stage import Stage
from symamp.judge.claim_errors import ClaimTable, each_at
from symamp.judge.errors_at import Progress
from symamp.judge.span_errors import SpanFigure, Where, span_figure, where_in_box
from symamp.span.extremes import Extremes
from symamp.span.points import Box, Rows, Values
from symamp.span.search import compass_search


@dataclass(frozen=True)
class ClaimSpan:
    """For each table the figures of its rows over the span; how many points were looked at, and how."""

    figures: tuple[tuple[SpanFigure | None, ...], ...]
    points: int
    seed: int | None
    method: str


def claims_over_span(
    stage: Stage, tables: Sequence[ClaimTable], points: int, seed: int, progress: Progress | None = None
) -> ClaimSpan | None:
    """The figures of all claims over the stage's span; None where it has none."""
    if stage.span.empty or not tables:
        return None
    look = _Look(tables)
    if stage.span.table is not None:
        total = len(stage.span.table.rows)
        for count, values in Rows(stage).blocks():
            look.take(values, np.arange(look.done, look.done + count, dtype=float).reshape(1, -1))
            if progress:
                progress("bias points", look.done, total)
        figures = look.figures(lambda place: {"row": int(place[0]) + 1})
        return ClaimSpan(figures, total, None, "every row of the table")
    box = Box.of(stage)

    def around(u: np.ndarray) -> None:
        look.take(box.values(u), u)

    for u in box.blocks(points, seed):
        around(u)
        if progress:
            progress("bias points", look.done, max(look.done, box.count(points)))
    compass_search([extremes for extremes, _ in look.errors()], around, box.dimensions)
    return ClaimSpan(look.figures(where_in_box(box)), look.done, seed, box.method)


class _Look:
    """Takes in bias points, and keeps the extremes of every row of every table."""

    def __init__(self, tables: Sequence[ClaimTable]) -> None:
        self.tables = tables
        self._errors = [Extremes(1) for _ in tables]
        self._ratios = [Extremes(table.rows - 1) for table in tables]
        self.done = 0

    def errors(self) -> list[tuple[Extremes, ClaimTable]]:
        """The extremes of the errors, from which a search goes on."""
        return list(zip(self._errors, self.tables, strict=True))

    def take(self, values: Values, places: np.ndarray) -> None:
        self.done += places.shape[1]
        for number, figures in each_at(self.tables, values, places.shape[1]):
            self._errors[number].take(figures[:1], places)
            if figures.shape[0] > 1:
                self._ratios[number].take(figures[1:].real, places)

    def figures(self, where: Callable[[np.ndarray], Where]) -> tuple[tuple[SpanFigure | None, ...], ...]:
        return tuple(
            tuple(
                span_figure(extremes.result(row), extremes, row, where)
                for extremes in (errors, ratios)
                for row in range(extremes.rows)
            )
            for errors, ratios in zip(self._errors, self._ratios, strict=True)
        )
