"""The engine: a set of assumptions put to an exact response, in steps, as a set."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from flint import fmpz_mpoly

from symamp.assumptions.bridge import Half, gain_across, split_stage
from symamp.assumptions.dominance import Dominance, Fall, pool
from symamp.assumptions.merge import Pooled, base_symbols, formula_ratio, pooled
from symamp.assumptions.nested import NestedResult, nested_form
from symamp.assumptions.read import Assumption, Miller
from symamp.assumptions.rewrite import LimitResult, PolyRatio, into_ring, limit, renamed, replaced
from symamp.assumptions.roots import step_on_roots
from symamp.circuit.kinds import CONDUCTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import form_of
from symamp.exact.forms import Expanded, expanded_of, vanishes
from symamp.exact.polys import S, by_power, from_coefficients, lowest_terms, ring_of
from symamp.exact.response import Response
from symamp.exact.shape import polynomial_text
from symamp.exact.system import build_system

_CANCELLING = 10.0  # Σ|term|/|Σ term| above which kept terms are said to nearly cancel
_DC_LOST = "the limit's dc is not the limit of dc: a root reached s = 0 and cancelled"


@dataclass(frozen=True)
class Dropped:
    """A dropped term, the term of the same coefficient that it fell to, and their ratio at the bias point."""

    coefficient: str
    term: str
    against: str
    ratio: float | None


@dataclass(frozen=True)
class Approximation:
    """A response under a set of assumptions; `response` is None where nothing is left, and `why` says so."""

    assumptions: tuple[str, ...]
    response: Response | None
    why: str = ""
    dropped: tuple[Dropped, ...] = ()
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()


class Approximator:
    """Puts sets of assumptions to one exact response; what sets share is worked out once."""

    def __init__(self, exact: Response) -> None:
        self.exact = exact
        self._split: dict[tuple[Miller, ...], _Split] = {}
        self._done: dict[tuple[str, ...], Approximation] = {}

    def under(self, assumptions: Sequence[Assumption]) -> Approximation:
        """The response under these assumptions; those that are made for other responses are passed over."""
        made = [a for a in assumptions if a.applies(self.exact.name)]
        key = tuple(sorted(a.name for a in made))
        if key not in self._done:
            result = self._under(pooled(self.exact.stage, made)) if made else _unchanged(self.exact)
            self._done[key] = replace(result, assumptions=tuple(a.name for a in made))
        return self._done[key]

    def _under(self, ask: Pooled) -> Approximation:
        remarks = list(ask.remarks)
        if not self.exact.expanded:
            return self._nested(ask, remarks)
        bridges = self._live_bridges(ask, remarks)
        if bridges:
            outcome = self._bridged(ask, bridges)
        else:
            outcome = self._limited(self.exact.form, self.exact.stage, ask)
        if outcome.ratio is None:
            return Approximation((), None, outcome.why, remarks=tuple(remarks))
        if outcome.lost_origin:
            remarks.append(_DC_LOST)
        if outcome.ratio[0].is_zero():
            remarks.append("the approximate response is zero")
        return self._finish(ask, outcome.ratio, remarks)

    def _nested(self, ask: Pooled, remarks: list[str]) -> Approximation:
        """The same on the minor graph; where what is left can be written out, from step 4 on as usual."""
        result: NestedResult = nested_form(self.exact, ask)
        remarks += result.remarks
        if result.form is None:
            return Approximation((), None, result.why, remarks=tuple(remarks))
        if isinstance(result.form, Expanded):
            left = replace(ask, orders={}, miller=())
            outcome = self._limited(result.form, result.stage, left)
            if outcome.ratio is None:
                return Approximation((), None, outcome.why, remarks=tuple(remarks))
            return self._finish(ask, outcome.ratio, remarks)
        if ask.pairs:
            why = (
                f"dominance compares written-out terms, and this response stands for {self.exact.terms:,} product "
                "terms that are not written out"
            )
            return Approximation((), None, why, remarks=tuple(remarks))
        response = replace(self.exact, form=result.form)
        return self._on_roots(ask, response, (), (), remarks)

    # Steps 1 and 2

    def _limited(self, form: Expanded | Any, stage: Stage, ask: Pooled, extra: tuple[str, ...] = ()) -> LimitResult:
        """A written-out form with symbols renamed and replaced, and its limit taken."""
        context = self._ring(form, stage, ask, extra)
        ratio = (
            into_ring(from_coefficients(form.numerator), context),
            into_ring(from_coefficients(form.denominator), context),
        )
        ratio = (renamed(ratio[0], ask.rename), renamed(ratio[1], ask.rename))
        for name, node in ask.replace.items():
            by = formula_ratio(stage, node, ask.rename, context)
            if by[1].is_zero():
                return LimitResult(None, f"the formula set for {name} divides by zero")
            ratio = replaced(ratio, name, by)
        if ratio[1].is_zero():
            why = "0/0: nothing is left of the response" if ratio[0].is_zero() else "the response is infinite"
            return LimitResult(None, why)
        return limit(ratio, ask.orders)

    @staticmethod
    def _ring(form: Expanded, stage: Stage, ask: Pooled, extra: tuple[str, ...]) -> Any:
        held = set(form.context.names()) - {S}
        names = held | {ask.rename[n] for n in held if n in ask.rename}
        for node in ask.replace.values():
            names.update(base_symbols(stage, node, ask.rename))
        if names == held and not extra:
            return form.context
        return ring_of(stage.symbols, names | set(extra))

    # Step 3

    def _live_bridges(self, ask: Pooled, remarks: list[str]) -> tuple[Miller, ...]:
        """The bridges that are still there after step 2."""
        live = []
        for bridge in ask.miller:
            if ask.rename.get(bridge.symbol, bridge.symbol) in ask.orders:
                remarks.append(f"{bridge.symbol} is taken to its limit, so there is no bridge to split")
            else:
                live.append(bridge)
        return tuple(live)

    def _bridged(self, ask: Pooled, bridges: tuple[Miller, ...]) -> LimitResult:
        if bridges not in self._split:
            self._split[bridges] = _Split(self.exact, bridges)
        split = self._split[bridges]
        extra = tuple({half.bridge.symbol for half in split.halves})
        outcome = self._limited(split.form, split.stage, ask, extra)
        if outcome.ratio is None:
            return outcome
        ratio = outcome.ratio
        for half in split.halves:
            gain = self._dc_gain(split.gains[half.bridge], ask, half.bridge)
            if isinstance(gain, str):
                return LimitResult(None, gain)
            names = set(ratio[0].context().names()) - {S} | set(gain[0].context().names()) - {S}
            context = ring_of(split.stage.symbols, names)
            ratio = (into_ring(ratio[0], context), into_ring(ratio[1], context))
            gain = (into_ring(gain[0], context), into_ring(gain[1], context))
            by = self._half_value(split.stage, half, gain, ask.rename, context)
            ratio = replaced(ratio, half.symbol, by)
        if ratio[1].is_zero():
            return LimitResult(None, "the response is infinite")
        return LimitResult(lowest_terms(*ratio), lost_origin=outcome.lost_origin)

    def _dc_gain(self, gain: Response | str, ask: Pooled, bridge: Miller) -> PolyRatio | str:
        """A = V(to)/V(from) at s = 0, or the words for there being none."""
        if isinstance(gain, str):
            return gain
        where = f"Miller across {bridge.symbol}"
        outcome = self._limited(gain.form, gain.stage, ask)
        if outcome.ratio is None:
            return f"{where}: {outcome.why}"
        at_dc = [by_power(p).get(0) for p in outcome.ratio]
        if at_dc[1] is None:
            return f"{where}: V({bridge.start}) is zero at s = 0, so the gain across the part is infinite"
        if at_dc[0] is None and bridge.both:
            return f"{where}: the gain across the part is zero at s = 0, so 1 − 1/A does not exist"
        zero = outcome.ratio[1].context().constant(0)
        return at_dc[0] if at_dc[0] is not None else zero, at_dc[1]

    @staticmethod
    def _half_value(stage: Stage, half: Half, gain: PolyRatio, rename: Mapping[str, str], context: Any) -> PolyRatio:
        """The value of a half in terms of its bridge's: admittance times 1 − A, or 1 − 1/A."""
        above, below = gain
        factor = (below - above, below) if half.at_start else (above - below, above)
        name = rename.get(half.bridge.symbol, half.bridge.symbol)
        value = dict(zip(context.names(), context.gens(), strict=True))[name]
        nature = stage.symbols[half.bridge.symbol].nature
        if stage.symbols[half.symbol].nature == "capacitance":
            return value * factor[0], factor[1]
        if nature == CONDUCTANCE:
            return factor[1], value * factor[0]
        return value * factor[1], factor[0]

    # Steps 4 and 5

    def _finish(self, ask: Pooled, ratio: PolyRatio, remarks: list[str]) -> Approximation:
        form = expanded_of(*ratio)
        dropped: tuple[Dropped, ...] = ()
        warnings: tuple[str, ...] = ()
        dominance = pool(ask.pairs)
        if ask.pairs and dominance is None:
            remarks.append("no two sides of the dominance differ: it has no effect")
        if dominance is not None:
            remarks += [f"{name!r} compares a symbol with itself, and that has no effect" for name in dominance.idle]
            form, dropped, warnings = self._dominated(form, dominance)
        response = replace(self.exact, form=form)
        return self._on_roots(ask, response, dropped, warnings, remarks)

    def _dominated(
        self, form: Expanded, dominance: Dominance
    ) -> tuple[Expanded, tuple[Dropped, ...], tuple[str, ...]]:
        dropped: list[Dropped] = []
        warnings: list[str] = []
        kept: list[list[fmpz_mpoly]] = []
        for where, coefficients in (("numerator", form.numerator), ("denominator", form.denominator)):
            row = []
            for power, coefficient in enumerate(coefficients):
                stays, falls = dominance.judge(coefficient)
                name = f"{where} s^{power}"
                records = [self._record(name, coefficient, fall) for fall in falls]
                warnings += self._nearly_cancelling(name, stays, records)
                dropped += records
                row.append(stays)
            kept.append(row)
        ratio = lowest_terms(from_coefficients(kept[0]), from_coefficients(kept[1]))
        return expanded_of(*ratio), tuple(dropped), tuple(warnings)

    def _record(self, name: str, coefficient: fmpz_mpoly, fall: Fall) -> Dropped:
        context = coefficient.context()
        term, against = (
            context.from_dict({exponents: factor})
            for exponents, factor in ((fall.term, fall.factor), (fall.against, fall.against_factor))
        )
        above, below = self._number(term), self._number(against)
        ratio = above / below if above is not None and below else None
        return Dropped(name, polynomial_text(term), polynomial_text(against), ratio)

    def _number(self, term: fmpz_mpoly) -> float | None:
        """A single term's value at the bias point."""
        total = 1.0
        names = term.context().names()
        for exponents, coefficient in term.terms():
            total = float(coefficient)
            for name, exponent in zip(names, exponents, strict=True):
                if exponent:
                    if name not in self.exact.bias_values:
                        return None
                    total *= self.exact.bias_values[name] ** int(exponent)
        return total

    def _nearly_cancelling(self, name: str, stays: fmpz_mpoly, dropped: Sequence[Dropped]) -> list[str]:
        signs = {c > 0 for c in stays.coeffs()}
        if len(signs) < 2 or self.exact.missing:
            return []
        context = stays.context()
        values = [self._number(context.from_dict({e: c})) for e, c in stays.terms()]
        known = [v for v in values if v is not None]
        total, size = abs(sum(known)), sum(abs(v) for v in known)
        if len(known) < len(values) or size <= _CANCELLING * total:
            return []
        largest = max(dropped, key=lambda d: abs(d.ratio or 0.0), default=None)
        matter = f"; the dropped term {largest.term} may matter" if largest else ""
        return [f"{self.exact.name}: kept terms of the {name} nearly cancel at the bias point{matter}"]

    def _on_roots(
        self,
        ask: Pooled,
        response: Response,
        dropped: tuple[Dropped, ...],
        warnings: tuple[str, ...],
        remarks: list[str],
    ) -> Approximation:
        final, why, more = step_on_roots(response, ask)
        remarks += more
        return Approximation((), final, why, dropped, warnings, tuple(dict.fromkeys(remarks)))


class _Split:
    """The network with bridges in two, written out with the halves' values open, and the gains across them."""

    def __init__(self, exact: Response, bridges: tuple[Miller, ...]) -> None:
        self.stage, self.halves = split_stage(exact.stage, bridges)
        ratio = ratio_of(build_system(self.stage, exact.asked.without), exact.asked)
        self.form = form_of(self.stage, ratio)
        self.gains = {bridge: _gain(exact.stage, exact.asked, bridge) for bridge in bridges}


def _gain(stage: Stage, asked: Asked, bridge: Miller) -> Response | str:
    """The gain across a bridge in the network as it stands, or the words for there being none."""
    across = gain_across(asked, bridge)
    ratio = ratio_of(build_system(stage, asked.without), across)
    zero, infinite = vanishes(ratio.graph)
    if infinite:
        return f"Miller across {bridge.symbol}: V({bridge.start}) is zero"
    if zero and bridge.both:
        return f"Miller across {bridge.symbol}: the gain across the part is zero, so 1 − 1/A does not exist"
    return Response(stage, across, "", form_of(stage, ratio))


def _unchanged(exact: Response) -> Approximation:
    return Approximation((), exact)
