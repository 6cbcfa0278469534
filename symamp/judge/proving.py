"""Errors proved over a box (room: judge): which proof fits which quantity, and what it says of a sampled figure."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.forms import Expanded
from symamp.exact.formulas import PolyRatio
from symamp.exact.response import Response
from symamp.judge.examined import Examined
from symamp.judge.span_errors import SpanFigure, Where
from symamp.span.bounding import End, Proved, prove_error_range, prove_range
from symamp.span.boxes import ProofBox
from symamp.span.crossing_proof import prove_crossing_error
from symamp.span.points import Box
from symamp.span.root_proof import prove_root_error

_TOLERANCE = 1e-4
_RELATIVE = 1e-3
_BOXES = 1500
_SECONDS = 4.0  # beyond the boxes, so that no figure keeps a reader waiting
_LEVELS = {"bandwidth": None, "unity_gain_frequency": Fraction(1)}


@dataclass(frozen=True)
class Prover:
    """Proofs over the box of one stage."""

    stage: Stage
    box: ProofBox

    @classmethod
    def of(cls, stage: Stage) -> Prover | None:
        """None where there is no box: a table's rows are all looked at, and without a span there is nothing."""
        if stage.span.empty or stage.span.table is not None:
            return None
        return cls(stage, ProofBox.of(stage))

    def claim(self, claim: Examined, sampled: SpanFigure | None) -> SpanFigure | None:
        """The figure of a claim's error: proved where the proof ends, else sampled, with the bounds reached."""
        if sampled is None or sampled.missing or sampled.modulus:
            return sampled  # a root that is complex somewhere is not one of those that can be proved
        if claim.absolute:
            return self._in_decibels(claim, sampled)
        return self.settled(sampled, self._prove_claim(claim, sampled))

    def _prove_claim(self, claim: Examined, sampled: SpanFigure) -> Proved | None:
        name, hint = claim.quantity.name, (sampled.least, sampled.greatest)
        ratio = claim.error_ratio
        if ratio is not None:
            return self.ratio(ratio)
        if claim.exact_ratio is not None and claim.target is not None:
            return self.error(claim.target[1], claim.exact_ratio)
        if is_root(claim.quantity) and claim.quantity.face in (None, "magnitude", "hz"):
            if claim.target is None:
                return None
            quantity, formula = claim.target
            return self.root(claim.exact, quantity, formula, hint)
        if name in _LEVELS and claim.frequency is not None:
            return self.crossing(claim.exact, claim.quantity, claim.frequency, hint)
        return None

    def ratio(self, ratio: PolyRatio) -> Proved:
        """The range of a ratio."""
        return prove_range(
            ratio, self.box, tolerance=_TOLERANCE, relative=_RELATIVE, budget=_BOXES, seconds=_SECONDS
        )

    def error(self, formula: PolyRatio, exact: PolyRatio) -> Proved:
        """The range of formula/exact − 1, of ratios that are too large to be multiplied out."""
        return prove_error_range(
            formula,
            exact,
            self.box,
            tolerance=_TOLERANCE,
            relative=_RELATIVE,
            budget=_BOXES,
            seconds=_SECONDS,
        )

    def root(
        self, exact: Response, quantity: Quantity, formula: PolyRatio, hint: tuple[float, float]
    ) -> Proved | None:
        """The error of a rational formula, in rad/s, for a pole or zero."""
        form = exact.form
        if not isinstance(form, Expanded):
            return None
        rows = form.denominator if quantity.name == "p" else form.numerator
        return prove_root_error(
            rows,
            formula,
            quantity.index or 1,
            self.box,
            hint=hint,
            tolerance=_TOLERANCE,
            budget=_BOXES,
            seconds=_SECONDS,
        )

    def crossing(
        self, exact: Response, quantity: Quantity, formula: PolyRatio, hint: tuple[float, float]
    ) -> Proved | None:
        """The error of a rational formula, in rad/s, for a bandwidth or unity-gain frequency."""
        form = exact.form
        if not isinstance(form, Expanded):
            return None
        return prove_crossing_error(
            form.numerator,
            form.denominator,
            formula,
            self.box,
            level=_LEVELS[quantity.name],
            hint=hint,
            tolerance=_TOLERANCE,
            budget=_BOXES,
            seconds=_SECONDS,
        )

    def settled(self, sampled: SpanFigure, proved: Proved | None) -> SpanFigure:
        """The sampled figure with what was proved of it; bounds alone where the proof did not finish.

        Least and greatest stay values that are reached; the bounds lie outside, by the tolerance at most.
        """
        if proved is None:
            return sampled
        bounds = (proved.least.lower, proved.greatest.upper)
        if not all(map(math.isfinite, bounds)):
            return sampled
        if not proved.finished:
            return replace(sampled, bounds=bounds)
        # Sampled values are rounded, and may lie outside by their last digit.
        bounds = (_outward(bounds[0], sampled.least, min), _outward(bounds[1], sampled.greatest, max))
        found = replace(sampled, proved=True, method=f"{proved.method}, {proved.boxes} boxes", bounds=bounds)
        if proved.least.upper < sampled.least - _TOLERANCE:
            found = replace(
                found,
                least=proved.least.upper,
                where_least=self._where(proved.least, sampled.where_least),
            )
        if proved.greatest.lower > sampled.greatest + _TOLERANCE:
            found = replace(
                found,
                greatest=proved.greatest.lower,
                where_greatest=self._where(proved.greatest, sampled.where_greatest),
            )
        return found

    def _where(self, end: End, sampled: Where) -> Where:
        if end.at is None:
            return sampled
        values = self.box.symbol_values(end.at)
        return {name: float(values[name]) for name in Box.of(self.stage).varied}

    def _in_decibels(self, claim: Examined, sampled: SpanFigure) -> SpanFigure:
        """Of a size in dB whose ratio to the exact one is rational: the ratio's range, in dB."""
        balance = claim.plain.balance
        if claim.quantity.face != "db" or balance is None or set(balance.above) != {0}:
            return sampled
        found = self.ratio((balance.below[1], balance.above[0]))  # claimed over exact
        if not found.least.lower > 0:
            return sampled
        ends = [
            End(20 * math.log10(end.lower), 20 * math.log10(end.upper), end.at)
            for end in (found.least, found.greatest)
        ]
        return self.settled(sampled, replace(found, least=ends[0], greatest=ends[1]))


def _outward(bound: float, sampled: float, outer: Callable[[float, float], float]) -> float:
    """A bound that holds a sampled value too, where that lies outside by no more than its rounding."""
    return outer(bound, sampled) if math.isclose(bound, sampled, rel_tol=1e-12, abs_tol=1e-13) else bound
