"""How far an approximate response is off over frequency (room: judge): |Ha(jω)/H(jω) − 1| over a band.

The band goes from dc up to the unity-gain frequency of the exact response, each bias point having its own; where there
is none, up to the highest of its poles and zeros.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from math import pi
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.exact.figures import Figures
from symamp.exact.formulas import PolyRatio
from symamp.exact.graded import horner
from symamp.exact.polys import coefficients_of_s
from symamp.exact.response import Response
from symamp.exact.tape import Tape
from symamp.judge.span_errors import SpanFigure, row_chunks, row_of, span_figure, where_in_box
from symamp.span.chunks import cut
from symamp.span.extremes import Extremes, Summary
from symamp.span.points import BLOCK, Box, Rows
from symamp.span.search import compass_search

BAND = "from dc up to the unity-gain frequency, or where there is none up to the highest pole or zero"
_FREQUENCIES = 25  # of each bias point, in equal steps of their logarithm, beside the roots themselves
_BELOW = 1e-2  # of the lowest root: the least frequency but for one that is as good as dc
_AT_ONCE = BLOCK // 16  # bias points, each with all its frequencies


@dataclass(frozen=True)
class Band:
    """Frequencies s = jω of each bias point, shape (K, P), the first as good as dc, and the exact response there."""

    s: np.ndarray
    exact: np.ndarray

    @classmethod
    def of(cls, exact: Response, values: Mapping[str, Any], points: int) -> Band:
        """The band of an exact response at `points` bias points."""
        with np.errstate(all="ignore"):
            figures = exact.figures(values, points)
            s = 1j * _frequencies(figures)
            given = exact.coefficients(values, points)
            sigma = s / given.omega
            found = horner(given.numerator, sigma) / horner(given.denominator, sigma)
        return cls(s, found)

    def errors(self, approximate: np.ndarray) -> np.ndarray:
        """The largest error of each bias point, shape (P,)."""
        with np.errstate(all="ignore"):
            found = np.abs(approximate / self.exact - 1).max(axis=0)
        return np.where(np.isnan(found), np.inf, found)


def _frequencies(figures: Figures) -> np.ndarray:
    """ω of each bias point: in equal steps, and at the magnitudes of the roots within."""
    sizes = np.abs(np.concatenate([figures.zeros, figures.poles]))
    sizes = np.where(sizes > 0, sizes, np.nan)
    if not sizes.size or np.isnan(sizes).all():
        return np.full((1, figures.points), 1.0)  # the same at all frequencies
    none = np.isnan(sizes).all(axis=0)
    lowest, highest = (pick(np.where(none, 1.0, sizes), axis=0) for pick in (np.nanmin, np.nanmax))
    unity = 2 * pi * np.asarray(figures.value(Quantity("unity_gain_frequency")), dtype=float)
    top = np.where(np.isfinite(unity) & (unity > 0), unity, highest)
    bottom = _BELOW * np.minimum(lowest, top)
    steps = np.linspace(0.0, 1.0, _FREQUENCIES)[:, None]
    even = bottom * (top / bottom) ** steps
    at_roots = np.clip(np.where(np.isnan(sizes), top, sizes), bottom, top)
    return np.concatenate([even[:1] * _BELOW, even, at_roots])


def ratio_on(ratio: PolyRatio, values: Mapping[str, Any], s: np.ndarray) -> np.ndarray:
    """N(s)/D(s) of polynomials that hold s, at frequencies of shape (K, P)."""
    rows = [coefficients_of_s(side) for side in ratio]
    arrays = Tape([c for row in rows for c in row])(values, s.shape[1])
    split = len(rows[0])
    with np.errstate(all="ignore"):
        return np.asarray(horner(np.array(arrays[:split]), s) / horner(np.array(arrays[split:]), s))


@dataclass(frozen=True)
class ResponseSpan:
    """The least and greatest error over the span, None where there is no value or no span, and how it was looked at."""

    figure: SpanFigure | None
    points: int = 0
    seed: int | None = None
    method: str = ""


@dataclass(frozen=True)
class ResponseError:
    """An approximate response N(s)/D(s) beside the exact one."""

    stage: Stage
    exact: Response
    ratio: PolyRatio

    def at(self, values: Mapping[str, Any], points: int) -> np.ndarray:
        """The largest error over the band at each bias point, shape (points,)."""
        spread = {n: np.broadcast_to(np.asarray(v, dtype=float), (points,)) for n, v in values.items()}
        band = Band.of(self.exact, spread, points)
        return band.errors(ratio_on(self.ratio, spread, band.s))

    @cached_property
    def at_bias(self) -> float:
        """That at the bias point."""
        return float(self.at(self.exact.bias_values, 1)[0])

    def over_span(self, points: int, seed: int) -> ResponseSpan:
        """Sampled from a box and searched from the worst, or at every row of a table; never proved."""
        if self.stage.span.empty:
            return ResponseSpan(None)
        extremes = Extremes(1)
        if self.stage.span.table is not None:
            rows = Rows(self.stage, _AT_ONCE)
            for chunk in row_chunks(rows):
                assert chunk.values is not None
                extremes.merge(self._summary(chunk.values, chunk.points), chunk.places)
            figure = span_figure(extremes.result(0), extremes, 0, row_of)
            return ResponseSpan(figure, rows.count, None, "every row of the table")
        box = Box.of(self.stage)

        def take(u: np.ndarray) -> None:
            for chunk in cut("", u, _AT_ONCE):
                extremes.merge(self._summary(box.values(chunk.places), chunk.points), chunk.places)

        for u in box.blocks(points, seed):
            take(u)
        compass_search([extremes], take, box.dimensions)
        figure = span_figure(extremes.result(0), extremes, 0, where_in_box(box))
        return ResponseSpan(figure, int(extremes.seen[0]), seed, box.method)

    def _summary(self, values: Mapping[str, Any], points: int) -> Summary:
        return Summary.of(self.at(values, points).reshape(1, -1))
