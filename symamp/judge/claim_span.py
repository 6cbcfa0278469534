"""Claims over a span (room: judge): sampled from a box and searched from the worst, or every row of a table."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np

from symamp.circuit.stage import Stage
from symamp.judge.claim_errors import ClaimTable, each_at
from symamp.judge.errors_at import Progress
from symamp.judge.interrupted import ErrorSoFar, SoFar, interruptible
from symamp.judge.span_errors import NESTED, SpanFigure, Where, row_chunks, row_of, span_figure, where_in_box
from symamp.span.chunks import Chunk, cut, looked_at, values_at
from symamp.span.executing import Engine
from symamp.span.extremes import Extremes, Summary
from symamp.span.points import BLOCK, Box, Rows
from symamp.span.search import compass_search


@dataclass(frozen=True)
class ClaimSpan:
    """For each table the figures of its rows over the span; how many points were looked at, and how."""

    figures: tuple[tuple[SpanFigure | None, ...], ...]
    points: int
    seed: int | None
    method: str


def claims_over_span(
    stage: Stage,
    tables: Sequence[ClaimTable],
    points: int,
    seed: int,
    progress: Progress | None = None,
    executor: Executor | Engine | None = None,
) -> ClaimSpan | None:
    """The figures of all claims over the stage's span; None where it has none.

    With an executor the points are looked at through it, and the figures are the same to the last bit. Raises
    Interrupted, which says what it had, where the run is interrupted; WorkerError where workers die again and again.
    """
    if stage.span.empty or not tables:
        return None
    box = None if stage.span.table is not None else Box.of(stage)
    size = NESTED if any(not table.exact.expanded for table in tables) else BLOCK
    sweep = _Sweep(_Figures(tuple(tables), box), progress)
    with interruptible(sweep.so_far):
        if box is None:
            rows = Rows(stage, size)
            sweep.total = rows.count
            sweep.take(row_chunks(rows), executor)
            return ClaimSpan(sweep.figures(row_of), sweep.total, None, "every row of the table")
        sweep.total = box.count(points)
        sweep.take((chunk for u in box.blocks(points, seed) for chunk in cut("", u, size)), executor)
        # The search takes a few points at a time, each of which waits for those before it.
        compass_search(sweep.errors, lambda u: sweep.take([Chunk("", u)]), box.dimensions)
    return ClaimSpan(sweep.figures(where_in_box(box)), sweep.done, seed, box.method)


@dataclass(frozen=True)
class _Figures:
    """Works out the rows of every table, at points of the box or at values that are given."""

    tables: tuple[ClaimTable, ...]
    box: Box | None

    def at(self, chunk: Chunk) -> list[Summary]:
        """For each table a summary of its error, and one of its ratios (see `Look`)."""
        values = values_at(chunk, self.box)
        return [
            Summary.of(part)
            for _, figures in each_at(self.tables, values, chunk.points)
            for part in (figures[:1], figures[1:].real)
        ]


class _Sweep:
    """Takes in bias points, and keeps the extremes of every row of every table."""

    def __init__(self, look: _Figures, progress: Progress | None) -> None:
        self._look, self._progress = look, progress
        self.errors = [Extremes(1) for _ in look.tables]
        self._ratios = [Extremes(table.rows - 1) for table in look.tables]
        self.done, self.total = 0, 0

    def take(self, chunks: Iterable[Chunk], executor: Executor | Engine | None = None) -> None:
        parts = [part for both in zip(self.errors, self._ratios, strict=True) for part in both]
        for chunk, summaries in looked_at(self._look, chunks, executor):
            for extremes, summary in zip(parts, summaries, strict=True):
                extremes.merge(summary, chunk.places)
            self.done += chunk.points
            if self._progress:
                self._progress("bias points", self.done, max(self.done, self.total))

    def so_far(self) -> SoFar:
        """What there is so far: the errors."""
        found = []
        for extremes, table in zip(self.errors, self._look.tables, strict=True):
            extreme = extremes.result(0)
            if extreme is not None:
                about, quantity = table.claim.about, table.claim.quantity
                found.append(ErrorSoFar(about, quantity, extreme.least, extreme.greatest))
        return SoFar(self.done, self.total, tuple(found))

    def figures(self, where: Callable[[np.ndarray], Where]) -> tuple[tuple[SpanFigure | None, ...], ...]:
        return tuple(
            tuple(
                span_figure(extremes.result(row), extremes, row, where)
                for extremes in (errors, ratios)
                for row in range(extremes.rows)
            )
            for errors, ratios in zip(self.errors, self._ratios, strict=True)
        )
