"""The figures of ledgers over a span: sampled from a box and searched from the worst, or every row of a table.

Points stream through in blocks; nothing is kept of them but extremes, so memory does not grow with their number.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.judge.errors_at import ErrorTable, Progress
from symamp.span.extremes import Extreme, Extremes
from symamp.span.points import Box, Rows
from symamp.span.search import compass_search, places_of

# Shares need every set: they are looked at in all points while sets times points are no more than this.
_ENOUGH = 1 << 21
_WORST = 48  # of the worst places, at how many shares are looked at in any case
_AT_ONCE = 1 << 20  # sets times bias points that are held at one time
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
        self.sets = sum(len(table.plan.masks) for table in tables)
        self.shares = any(table.plan.shares for table in tables)
        self.extremes: dict[tuple[str, Quantity], Extremes] = {
            (table.exact.name, quantity): Extremes(1 + len(table.plan.rows))
            for table in tables
            for quantity in table.quantities
        }

    def take(self, values: Mapping[str, Any], places: np.ndarray) -> None:
        """Bias points, and where they are (d, P)."""
        for table in self.tables:
            every = np.arange(1 + len(table.plan.rows))
            self._take(table, every, every, values, places)

    def take_without_shares(self, values: Mapping[str, Any], places: np.ndarray) -> None:
        """The same for all figures but shares."""
        for table in self.tables:
            few = table.without_shares
            every = np.arange(1 + len(few.plan.rows))
            self._take(few, every, few.plan.places_in(table.plan), values, places)

    def take_shares(self, values: Mapping[str, Any], places: np.ndarray) -> None:
        """The same for shares alone."""
        for table in self.tables:
            rows = np.setdiff1d(
                np.arange(1 + len(table.plan.rows)), table.plan.without_shares.places_in(table.plan)
            )
            self._take(table, rows, rows, values, places)

    def _take(
        self,
        table: ErrorTable,
        rows: np.ndarray,
        places_of_rows: np.ndarray,
        values: Mapping[str, Any],
        places: np.ndarray,
    ) -> None:
        """These rows of a table's figures, in their places among all."""
        for quantity, _, errors in table.each_at(values, places.shape[1]):
            extremes = self.extremes[table.exact.name, quantity]
            extremes.take(table.plan.figures(errors)[rows], places, places_of_rows)

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


def _by_rows(stage: Stage, sweep: _Sweep, progress: Progress | None) -> SpanErrors:
    table = stage.span.table
    assert table is not None
    total, done = len(table.rows), 0
    for count, values in Rows(stage, max(1, _AT_ONCE // sweep.sets)).blocks():
        sweep.take(values, np.arange(done, done + count, dtype=float).reshape(1, -1))
        done += count
        if progress:
            progress("bias points", done, total)
    figures = sweep.figures(lambda place: {"row": int(place[0]) + 1})
    return SpanErrors(figures, total, None, "every row of the table")


def _by_sampling(
    stage: Stage, sweep: _Sweep, points: int, seed: int, progress: Progress | None
) -> SpanErrors:
    box = Box.of(stage)
    look = _Look(box, sweep, box.count(points), seed, progress)
    for u in box.blocks(points, seed):
        look.drawn(u)
    compass_search(list(sweep.extremes.values()), look.around, box.dimensions)
    look.shares_at_the_worst()

    return SpanErrors(sweep.figures(where_in_box(box)), look.done, seed, box.method)


def where_in_box(box: Box) -> Callable[[np.ndarray], Where]:
    """What gives a point of the box as {symbol: value} of the symbols that the span sets."""

    def where(u: np.ndarray) -> Where:
        values = box.values(u.reshape(-1, 1))
        return {name: float(np.ravel(values[name])[0]) for name in box.varied}

    return where


class _Look:
    """Looks at points of a box: shares at all of them while that is little work, else at a draw of them."""

    def __init__(self, box: Box, sweep: _Sweep, total: int, seed: int, progress: Progress | None) -> None:
        self._box, self._sweep, self._total, self._progress = box, sweep, total, progress
        self._draw = np.random.default_rng(seed)
        # How many points may still be looked at under every set.
        self._left = _ENOUGH // sweep.sets if sweep.shares else None
        self._part = 1.0 if self._left is None else min(1.0, self._left / total)
        self._skipped = False
        self.done = 0

    def drawn(self, u: np.ndarray) -> None:
        """Points of the sample, the bias point first."""
        chosen = np.asarray(self._draw.random(u.shape[1]) < self._part)
        chosen[0] |= self.done == 0
        self._all_figures(u[:, chosen])
        self._all_but_shares(u[:, ~chosen])

    def around(self, u: np.ndarray) -> None:
        """Points of the search."""
        if self._left is None or (not self._skipped and u.shape[1] <= self._left):
            self._all_figures(u)
        else:
            self._all_but_shares(u)

    def shares_at_the_worst(self) -> None:
        """Shares where other figures are worst, if they have not been looked at everywhere."""
        places = places_of(list(self._sweep.extremes.values()))[:_WORST]
        if self._skipped and places:
            for piece in self._pieces(np.array(places).T, self._sweep.sets):
                self._sweep.take_shares(self._box.values(piece), piece)

    def _all_figures(self, u: np.ndarray) -> None:
        for piece in self._pieces(u, self._sweep.sets):
            self._sweep.take(self._box.values(piece), piece)
            self._count(piece.shape[1])
        if self._left is not None:
            self._left = max(0, self._left - u.shape[1])

    def _all_but_shares(self, u: np.ndarray) -> None:
        for piece in self._pieces(u, sum(len(t.without_shares.plan.masks) for t in self._sweep.tables)):
            self._skipped = True
            self._sweep.take_without_shares(self._box.values(piece), piece)
            self._count(piece.shape[1])

    def _pieces(self, u: np.ndarray, sets: int) -> Iterator[np.ndarray]:
        size = max(1, _AT_ONCE // sets)
        for start in range(0, u.shape[1], size):
            yield u[:, start : start + size]

    def _count(self, points: int) -> None:
        self.done += points
        if self._progress:
            self._progress("bias points", self.done, max(self.done, self._total))
