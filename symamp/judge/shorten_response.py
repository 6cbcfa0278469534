"""The shortest N(s)/D(s) of a response whose error over frequency stays within a bound (room: judge)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from symamp.exact.forms import expanded_of
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import S
from symamp.exact.response import Response
from symamp.exact.shape import Shape, shape_of
from symamp.judge.errors_at import Progress
from symamp.judge.examined import Known
from symamp.judge.response_errors import ResponseError, ResponseSpan
from symamp.judge.sample import sample_of
from symamp.judge.sets import Plan, names_of
from symamp.judge.shorten_candidates import Candidates
from symamp.judge.shortening import Search, Tried, pareto
from symamp.judge.shortening_measures import OfResponse
from symamp.judge.shortest import ShortestResponse, TradeOff

_TRIES = 12  # responses that are looked at over the whole span before the search gives up
_SAMPLE = 128  # bias points of the sample, each with frequencies of its own
_SHARES = 8  # assumptions up to which shares are worked out


def shortest_response(
    known: Known,
    name: str,
    within: float,
    points: int,
    seed: int,
    progress: Progress | None = None,
) -> ShortestResponse:
    """The shortest response of that name whose error |Ha/H − 1| over frequency is `within` all over the span.

    For the frequencies see `symamp.judge.response_errors`. The error over a box is sampled, never proved.
    """
    exact = known.response(name)
    nothing = ShortestResponse(name, exact)
    why = _why_not(exact)
    if why:
        return replace(nothing, why=why)
    return _Job(known, exact, within, points, seed, progress).shortest(nothing)


def _why_not(exact: Response) -> str:
    if not exact.expanded:
        return (
            "the response is not written out, so it is shortened one quantity at a time: ask for "
            f"{exact.name}.dc or {exact.name}.p1"
        )
    if not exact.form.powers[0]:
        return "the response is zero, whatever the values"
    return ""


class _Job:
    def __init__(
        self,
        known: Known,
        exact: Response,
        within: float,
        points: int,
        seed: int,
        progress: Progress | None,
    ) -> None:
        self._known, self._exact, self._within = known, exact, within
        self._points, self._seed = points, seed
        self._candidates = Candidates(known, exact.name, exact)
        # Roots taken from neighbouring coefficients are no shorter response.
        usable = [a for a in self._candidates.all if not a.poles_far_apart]
        measure = OfResponse(exact, sample_of(known.stage).thinned(_SAMPLE))
        self._search = Search(exact, measure, usable, within, progress)

    def shortest(self, nothing: ShortestResponse) -> ShortestResponse:
        """The first of the responses found, from the shortest on, that holds all over the span."""
        tried = self._search.run()
        nothing = replace(nothing, tradeoff=tuple(self._step(each) for each in pareto(tried, self._within)))
        held = sorted((t for t in tried if t.worst <= self._within), key=lambda t: (t.terms, t.worst))
        for each in held[:_TRIES]:
            assert each.ratio is not None
            error = ResponseError(self._known.stage, self._exact, each.ratio)
            if error.at_bias <= self._within:
                span = error.over_span(self._points, self._seed)
                if self._holds(span):
                    return self._found(nothing, self._search.pruned(each), error, span)
        return replace(nothing, why="no response that was tried holds all over the span")

    def _holds(self, span: ResponseSpan) -> bool:
        if self._known.stage.span.empty:
            return True
        figure = span.figure
        return figure is not None and not figure.missing and figure.greatest <= self._within

    def _found(
        self, nothing: ShortestResponse, tried: Tried, error: ResponseError, span: ResponseSpan
    ) -> ShortestResponse:
        assert tried.ratio is not None
        names = self._candidates.in_order(tried.made)
        return replace(
            nothing,
            response=replace(self._exact, form=expanded_of(*tried.ratio)),
            shape=self._shape(tried.ratio),
            error=error.at_bias,
            span=span,
            assumptions=names,
            own=self._candidates.own_count(names),
            tables=self._candidates.tables_of(names),
            dropped=tried.dropped,
            figures=self._figures(names),
        )

    def _shape(self, ratio: PolyRatio) -> Shape:
        roots = [abs(root) for root in (*self._exact.poles(), *self._exact.zeros()) if root]
        return shape_of(*ratio, weights={**self._exact.bias_values, S: min(roots, default=1.0)})

    def _step(self, tried: Tried) -> TradeOff:
        assert tried.ratio is not None
        names = self._candidates.in_order(tried.made)
        return TradeOff(tried.terms, tried.worst, self._shape(tried.ratio), names, tried.dropped)

    def _figures(self, names: tuple[str, ...]) -> tuple[dict[str, float | None], ...]:
        """What each assumption adds to the largest error at the bias point."""
        if not names:
            return ()
        plan = Plan(len(names), with_shares=len(names) <= _SHARES)
        errors = np.array([[self._error_under(names_of(mask, names))] for mask in plan.masks])
        found = plan.figures(errors)[1:, 0]
        each: list[dict[str, float | None]] = [{"share": None} for _ in names]
        for (k, figure), value in zip(plan.rows, found, strict=True):
            each[k][figure] = float(value) if np.isfinite(value) else None
        return tuple(each)

    def _error_under(self, names: tuple[str, ...]) -> float:
        ratio = self._search.of(frozenset(names)).ratio
        if not names or ratio is None or ratio[1].is_zero():
            return 0.0 if not names else float("nan")
        found = ResponseError(self._known.stage, self._exact, ratio).at_bias
        return found if np.isfinite(found) else float("nan")
