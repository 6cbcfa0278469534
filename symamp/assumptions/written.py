"""Steps 1 to 3 on a response that is written out; each distinct outcome is worked out once."""

from __future__ import annotations

from collections.abc import Hashable
from dataclasses import dataclass
from typing import Any

from symamp.assumptions.algebra import PolyRatio
from symamp.assumptions.bridge import Half, dc_words, gain_across, split_stage
from symamp.assumptions.merge import Pooled, trimmed
from symamp.assumptions.record import Miller
from symamp.assumptions.rewrite import (
    INFINITE,
    LimitResult,
    depends_words,
    holding,
    limit,
    put,
    replaced,
    symbol_value,
    symbols_in,
    tidy,
)
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.errors import TooLargeError
from symamp.exact.cofactors import Ratio, ratio_of
from symamp.exact.forms import EXPAND_LIMIT, Expanded, Nested, expanded_of, write_out
from symamp.exact.modular import vanishes
from symamp.exact.polys import by_power, from_coefficients, into_ring, least_exponents, lowest_terms, ring_of
from symamp.exact.response import Response
from symamp.exact.system import build_system, without_symbols

DC_LOST = "the limit's dc is not the limit of dc: a root reached s = 0 and cancelled"
ZERO = "the approximate response is zero"
_SUBSTITUTED = 100_000  # products of terms up to which a half's value is put in its place


@dataclass(frozen=True)
class Settled:
    """What steps 1 to 3 leave: a form, or None with why."""

    form: Expanded | Nested | None
    why: str = ""
    remarks: tuple[str, ...] = ()


class WrittenEngine:
    """Steps 1 to 3 for one written-out response."""

    def __init__(self, exact: Response, struck: frozenset[str] = frozenset()) -> None:
        """`struck` are symbols that have been put to zero on the way to the exact response's form."""
        assert isinstance(exact.form, Expanded)
        self._exact = exact
        self._struck = struck
        self._form = exact.form
        self._plain = Written(exact.stage, exact.form)
        self._bridged: dict[tuple[Miller, ...], Bridged] = {}
        self._settled: dict[Hashable, Settled] = {}

    def depends_on(self, symbol: str) -> bool:
        """Whether the response changes with the symbol."""
        return symbol in self._form.symbols

    def under(self, ask: Pooled, bridges: tuple[Miller, ...]) -> Settled:
        """The form under steps 1 to 3; one object for all sets that come to the same."""
        source: Written | Bridged = self._plain
        if bridges:
            if bridges not in self._bridged:
                self._bridged[bridges] = Bridged(self._exact, bridges, self._struck)
            source = self._bridged[bridges]
        asked = trimmed(ask, self._exact.stage, source.held)
        key = (bridges, asked.key)
        if key not in self._settled:
            nothing = not bridges and not asked.rename and not asked.replace and not asked.orders
            self._settled[key] = Settled(self._form) if nothing else self._settle(source.under(asked))
        return self._settled[key]

    def _settle(self, outcome: LimitResult) -> Settled:
        if outcome.ratio is None:
            return Settled(None, outcome.why)
        remarks = ((DC_LOST,) if outcome.lost_origin else ()) + (
            (ZERO,) if outcome.ratio[0].is_zero() else ()
        )
        return Settled(expanded_of(*tidy(self._exact.stage, outcome.ratio)), "", remarks)


class Written:
    """A written-out ratio, to be put through steps 1 and 2 of any set of assumptions."""

    def __init__(self, stage: Stage, form: Expanded) -> None:
        self.stage = stage
        self.held = form.symbols
        self._ratio = from_coefficients(form.numerator), from_coefficients(form.denominator)
        self._done: dict[Hashable, LimitResult] = {}

    def under(self, ask: Pooled) -> LimitResult:
        """The ratio with symbols renamed and replaced, in the limit that is asked for."""
        ask = trimmed(ask, self.stage, self.held)
        if ask.key not in self._done:
            self._done[ask.key] = self._under(ask)
        return self._done[ask.key]

    def _under(self, ask: Pooled) -> LimitResult:
        ratio = put(self.stage, self._ratio, self.held, ask)
        return LimitResult(None, ratio) if isinstance(ratio, str) else limit(ratio, ask.orders)


class Bridged:
    """A response whose bridging parts are in two: the split network, and the gains that value the halves."""

    def __init__(self, exact: Response, bridges: tuple[Miller, ...], struck: frozenset[str]) -> None:
        self._exact = exact
        self._stage, self._halves = split_stage(exact.stage, bridges)
        ratio = struck_ratio(self._stage, exact.asked, struck)
        _refuse_large(ratio)
        _, infinite = vanishes(ratio.graph)
        self._why = "with the bridge in two the response is infinite" if infinite else ""
        self._split = None if infinite else Written(self._stage, write_out(ratio, self._stage.symbols))
        self._gains = {bridge: _gain(exact, bridge, struck) for bridge in bridges}
        self.held = frozenset(
            symbol
            for written in (self._split, *self._gains.values())
            if isinstance(written, Written)
            for symbol in written.held
            if symbol in exact.stage.symbols
        ) | {bridge.symbol for bridge in bridges}

    def under(self, ask: Pooled) -> LimitResult:
        """Steps 1 and 2, then the halves valued by the gain so left."""
        if self._split is None:
            return LimitResult(None, self._why)
        outcome = self._split.under(ask)
        if outcome.ratio is None:
            return outcome
        ratio = outcome.ratio
        for half in self._halves:
            value = self._half(half, ask)
            if isinstance(value, str):
                return LimitResult(None, value)
            if sum(map(len, ratio)) * sum(map(len, value)) > _SUBSTITUTED:
                raise TooLargeError(f"Miller across {half.bridge.symbol}: too many terms to be written out")
            ratio = replaced(*_in_one_ring(self._stage, ratio, half.symbol, value))
        if ratio[1].is_zero():
            return LimitResult(None, INFINITE)
        if ratio[0].is_zero():
            return LimitResult(ratio)
        lost = outcome.lost_origin or least_exponents(ratio)[-1] > 0
        ratio = tidy(self._exact.stage, lowest_terms(*ratio))
        left = holding(ratio, ask.orders)
        return LimitResult(None, depends_words(left)) if left else LimitResult(ratio, "", lost)

    def _half(self, half: Half, ask: Pooled) -> PolyRatio | str:
        """The value of a half: the bridge's admittance times 1 − A, or 1 − 1/A; or the words for none."""
        bridge = half.bridge
        gain = self._gains[bridge]
        if isinstance(gain, str):
            return gain
        found = gain.under(ask)
        if found.ratio is None:
            return f"Miller across {bridge.symbol}: {found.why}"
        above, below = (by_power(p).get(0, p.context().constant(0)) for p in found.ratio)
        words = dc_words(bridge, above.is_zero(), below.is_zero())
        if words:
            return words
        _, value = symbol_value(self._stage, bridge.symbol, ask)
        factor = (below - above, below) if half.at_start else (above - below, above)
        names = symbols_in(above, below, *value)
        context = ring_of(self._stage.symbols, names)
        value, factor = (tuple(into_ring(p, context) for p in pair) for pair in (value, factor))  # type: ignore[assignment]
        nature = self._stage.symbols[bridge.symbol].nature
        if nature == CAPACITANCE:
            return value[0] * factor[0], value[1] * factor[1]
        if nature == CONDUCTANCE:
            return value[1] * factor[1], value[0] * factor[0]
        return value[0] * factor[1], value[1] * factor[0]


def _in_one_ring(
    stage: Stage, ratio: PolyRatio, name: str, by: PolyRatio
) -> tuple[PolyRatio, str, PolyRatio]:
    """What `replaced` takes, in one ring."""
    context = ring_of(stage.symbols, [*symbols_in(*ratio, *by), name])

    def moved(pair: PolyRatio) -> Any:
        return tuple(into_ring(p, context) for p in pair)

    return moved(ratio), name, moved(by)


def struck_ratio(stage: Stage, asked: Asked, struck: frozenset[str]) -> Ratio:
    """The minor graph of a response with some symbols put to zero."""
    return ratio_of(without_symbols(build_system(stage, asked.without), set(struck)), asked)


def _refuse_large(ratio: Ratio) -> None:
    """TooLargeError where the graph stands for more terms than are written out."""
    terms = sum(ratio.graph.count_terms())
    if terms > EXPAND_LIMIT:
        raise TooLargeError(f"{terms:,} product terms are not written out")


def zero_form(stage: Stage) -> Expanded:
    """The response that is zero."""
    context = ring_of(stage.symbols, ())
    return expanded_of(context.constant(0), context.constant(1))


def _gain(exact: Response, bridge: Miller, struck: frozenset[str]) -> Written | str:
    """The gain across a bridge in the network as it stands, or the words for there being none."""
    stage, across = gain_across(exact.stage, exact.asked, bridge)
    ratio = struck_ratio(stage, across, struck)
    _refuse_large(ratio)
    zero, infinite = vanishes(ratio.graph)
    return dc_words(bridge, zero, infinite) or Written(stage, write_out(ratio, stage.symbols))
