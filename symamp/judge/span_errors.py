"""The figures of ledgers over a span: sampled from a box and searched from the worst, or every row of a table.

Points stream through in blocks; nothing is kept of them but extremes, so memory does not grow with their number.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.judge.errors_at import ErrorTable, Progress
from symamp.judge.interrupted import ErrorSoFar, SoFar, interruptible
from symamp.span.chunks import Chunk, cut, looked_at, values_at
from symamp.span.executing import Engine
from symamp.span.extremes import Extreme, Extremes, Summary
from symamp.span.points import Box, Rows
from symamp.span.search import compass_search, places_of

# Shares need every set: they are looked at in all points while sets times points are no more than this.
_ENOUGH = 1 << 21
_WORST = 48  # of the worst places, at how many shares are looked at in any case
_AT_ONCE = 1 << 18  # sets times bias points in one chunk: larger ones are no quicker, and fewer to share out
NESTED = 1024  # bias points in a chunk where nested responses make each of them costly
# Which figures are wanted at points.
_EVERY, _BUT_SHARES, _SHARES = "every", "all but shares", "shares"
Where = Mapping[str, float] | Mapping[str, int]


@dataclass(frozen=True)
class SpanFigure:
    """Least and greatest value of a figure over the span, and the bias points where they are reached.

    `where_*` is {symbol: value} of the symbols that the span sets, or {"row": n} counted from 1. With `modulus`
    the values are those of the modulus. `points` were looked at, and at `missing` of them it has no value.
    `proved` says that no point of the span lies outside, and `method` how; a sampled figure is never proved.
    `bounds` are the bounds that a proof reached, also where it did not finish: no point lies outside them.
    """

    least: float
    greatest: float
    where_least: Where
    where_greatest: Where
    modulus: bool
    points: int
    missing: int = 0
    proved: bool = False
    method: str = ""
    bounds: tuple[float, float] | None = None


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
    stage: Stage,
    tables: Sequence[ErrorTable],
    points: int,
    seed: int,
    progress: Progress | None = None,
    executor: Executor | Engine | None = None,
) -> SpanErrors | None:
    """The figures of all tables over the stage's span; None where it has none.

    With an executor the points are looked at through it, and the figures are the same to the last bit. Raises
    Interrupted, which says what it had, where the run is interrupted; WorkerError where workers die again and again.
    """
    if stage.span.empty:
        return None
    box = None if stage.span.table is not None else Box.of(stage)
    sweep = _Sweep(_Errors(tuple(tables), box), executor, progress)
    with interruptible(sweep.so_far):
        return _by_rows(stage, sweep) if box is None else _by_sampling(box, sweep, points, seed)


@dataclass(frozen=True)
class _Part:
    """Some of a table's figures: the table that works them out, its rows that are wanted, their places among all."""

    table: ErrorTable
    rows: np.ndarray
    places: np.ndarray


@dataclass(frozen=True)
class _Errors:
    """Works out the errors of every quantity of every table, at points of the box or at values that are given."""

    tables: tuple[ErrorTable, ...]
    box: Box | None

    def at(self, chunk: Chunk) -> list[Summary]:
        """A summary for each quantity of each part (see `Look`)."""
        values = values_at(chunk, self.box)
        return [
            Summary.of(part.table.plan.figures(errors)[part.rows])
            for part in self.parts(chunk.which)
            for _, _, errors in part.table.each_at(values, chunk.points)
        ]

    def parts(self, which: str) -> list[_Part]:
        """What is wanted of the tables, in their order."""
        return [_part(table, which) for table in self.tables]

    def bare(self, with_few: bool) -> _Errors:
        """The same without what errors are not worked out from; `with_few` also for figures without shares."""
        return _Errors(tuple(table.bare(with_few) for table in self.tables), self.box)


def _part(table: ErrorTable, which: str) -> _Part:
    every = np.arange(1 + len(table.plan.rows))
    if which == _EVERY:
        return _Part(table, every, every)
    if which == _BUT_SHARES:
        few = table.without_shares
        return _Part(few, np.arange(1 + len(few.plan.rows)), few.plan.places_in(table.plan))
    shares = np.setdiff1d(every, table.plan.without_shares.places_in(table.plan))
    return _Part(table, shares, shares)


class _Sweep:
    """Takes in bias points: extremes of every quantity of every table."""

    def __init__(
        self, errors: _Errors, executor: Executor | Engine | None, progress: Progress | None
    ) -> None:
        self.errors, self._executor, self._progress = errors, executor, progress
        self.tables = errors.tables
        self.sets = sum(len(table.plan.masks) for table in self.tables)
        self.shares = any(table.plan.shares for table in self.tables)
        self.nested = any(not variant.expanded for table in self.tables for variant in table.variants)
        self.done, self.total = 0, 0
        self.extremes: dict[tuple[str, Quantity], Extremes] = {
            (table.exact.name, quantity): Extremes(1 + len(table.plan.rows))
            for table in self.tables
            for quantity in table.quantities
        }

    def size(self, sets: int) -> int:
        """How many points a chunk has under so many sets, whoever looks at it."""
        size = max(1, _AT_ONCE // sets)
        return min(size, NESTED) if self.nested else size

    def take(self, chunks: Iterable[Chunk], with_few: bool = False) -> None:
        """Chunks of any number, through the executor if there is one."""
        look = self.errors if self._executor is None else self.errors.bare(with_few)
        self._merge(looked_at(look, chunks, self._executor))

    def take_here(self, chunks: Iterable[Chunk]) -> None:
        """A few chunks, not worth to be handed over."""
        self._merge(looked_at(self.errors, chunks))

    def _merge(self, found: Iterable[tuple[Chunk, Sequence[Summary]]]) -> None:
        for chunk, summaries in found:
            each = iter(summaries)
            for table, part in zip(self.tables, self.errors.parts(chunk.which), strict=True):
                for quantity in table.quantities:
                    extremes = self.extremes[table.exact.name, quantity]
                    extremes.merge(next(each), chunk.places, part.places)
            if chunk.which != _SHARES:  # of points that have been looked at before
                self.done += chunk.points
                if self._progress:
                    self._progress("bias points", self.done, max(self.done, self.total))

    def so_far(self) -> SoFar:
        """What there is so far: the errors under all assumptions."""
        found = []
        for (name, quantity), extremes in self.extremes.items():
            extreme = extremes.result(0, extremes.any_complex)
            if extreme is not None:
                found.append(ErrorSoFar(f"{name}.{quantity.text}", quantity, extreme.least, extreme.greatest))
        return SoFar(self.done, self.total, tuple(found))

    def figures(self, where: Callable[[np.ndarray], Where]) -> dict[Any, tuple[SpanFigure | None, ...]]:
        """The extremes in their final form; a quantity with a complex figure shows moduli throughout."""
        found = {}
        for key, extremes in self.extremes.items():
            modulus = extremes.any_complex
            found[key] = tuple(
                span_figure(extremes.result(row, modulus), extremes, row, where)
                for row in range(extremes.rows)
            )
        return found


def span_figure(
    extreme: Extreme | None, among: Extremes, row: int, where: Callable[[np.ndarray], Where]
) -> SpanFigure | None:
    """An extreme in its final form; None where there is none."""
    if extreme is None:
        return None
    return SpanFigure(
        extreme.least,
        extreme.greatest,
        where(extreme.at_least),
        where(extreme.at_greatest),
        extreme.modulus,
        int(among.seen[row]),
        int(among.missing[row]),
    )


def _by_rows(stage: Stage, sweep: _Sweep) -> SpanErrors:
    rows = Rows(stage, sweep.size(sweep.sets))
    sweep.total = rows.count
    sweep.take(row_chunks(rows, _EVERY))
    return SpanErrors(sweep.figures(row_of), sweep.total, None, "every row of the table")


def row_chunks(rows: Rows, which: str = "") -> Iterator[Chunk]:
    """The rows of a table as chunks; a place is the row's number."""
    done = 0
    for count, values in rows.blocks():
        yield Chunk(which, np.arange(done, done + count, dtype=float).reshape(1, -1), values)
        done += count


def row_of(place: np.ndarray) -> Where:
    """A place as people count rows."""
    return {"row": int(place[0]) + 1}


def _by_sampling(box: Box, sweep: _Sweep, points: int, seed: int) -> SpanErrors:
    sweep.total = box.count(points)
    look = _Look(sweep, seed)
    sweep.take(look.drawn(box.blocks(points, seed)), look.in_part)
    compass_search(list(sweep.extremes.values()), look.around, box.dimensions)
    look.shares_at_the_worst()
    return SpanErrors(sweep.figures(where_in_box(box)), sweep.done, seed, box.method)


def where_in_box(box: Box) -> Callable[[np.ndarray], Where]:
    """What gives a point of the box as {symbol: value} of the symbols that the span sets."""

    def where(u: np.ndarray) -> Where:
        values = box.values(u.reshape(-1, 1))
        return {name: float(np.ravel(values[name])[0]) for name in box.varied}

    return where


class _Look:
    """Cuts points of a box into chunks: shares at all of them while that is little work, else at a draw of them."""

    def __init__(self, sweep: _Sweep, seed: int) -> None:
        self._sweep = sweep
        self._draw = np.random.default_rng(seed)
        # How many points may still be looked at under every set.
        self._left = _ENOUGH // sweep.sets if sweep.shares else None
        self._part = 1.0 if self._left is None else min(1.0, self._left / sweep.total)
        self._skipped = False

    @property
    def in_part(self) -> bool:
        """Whether shares are looked at in a draw of the sample only."""
        return self._part < 1

    def drawn(self, blocks: Iterable[np.ndarray]) -> Iterator[Chunk]:
        """The sample, the bias point first."""
        for number, u in enumerate(blocks):
            chosen = np.asarray(self._draw.random(u.shape[1]) < self._part)
            chosen[0] |= number == 0
            yield from self._all_figures(u[:, chosen])
            yield from self._all_but_shares(u[:, ~chosen])

    def around(self, u: np.ndarray) -> None:
        """Points of the search: a few at a time, each of which waits for those before it."""
        if self._left is None or (not self._skipped and u.shape[1] <= self._left):
            self._sweep.take_here(self._all_figures(u))
        else:
            self._sweep.take_here(self._all_but_shares(u))

    def shares_at_the_worst(self) -> None:
        """Shares where other figures are worst, if they have not been looked at everywhere."""
        places = places_of(list(self._sweep.extremes.values()))[:_WORST]
        if self._skipped and places:
            u = np.array(places).T
            self._sweep.take_here(cut(_SHARES, u, self._sweep.size(self._sweep.sets)))

    def _all_figures(self, u: np.ndarray) -> Iterator[Chunk]:
        yield from cut(_EVERY, u, self._sweep.size(self._sweep.sets))
        if self._left is not None:
            self._left = max(0, self._left - u.shape[1])

    def _all_but_shares(self, u: np.ndarray) -> Iterator[Chunk]:
        if u.shape[1]:
            self._skipped = True
            sets = sum(len(table.without_shares.plan.masks) for table in self._sweep.tables)
            yield from cut(_BUT_SHARES, u, self._sweep.size(sets))
