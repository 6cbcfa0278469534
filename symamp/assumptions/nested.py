"""Steps 1 to 3 on a response that is not written out: on the minor graph, by values and by powers of t."""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass, replace

from symamp.assumptions.bridge import Half, dc_words, gain_across, split_stage
from symamp.assumptions.merge import Pooled, trimmed
from symamp.assumptions.record import Miller
from symamp.assumptions.rewrite import INFINITE, NOTHING_LEFT, depends_words, symbol_value
from symamp.assumptions.rules import GainRule, Rule, ValueRule
from symamp.assumptions.written import DC_LOST, ZERO, Settled, WrittenEngine, struck_ratio, zero_form
from symamp.circuit.kinds import CAPACITANCE
from symamp.circuit.stage import Stage
from symamp.errors import TooLargeError
from symamp.exact.cofactors import Ratio, entry_symbols
from symamp.exact.derive import form_of, nested_of
from symamp.exact.forms import Expanded, Nested, write_out_small
from symamp.exact.graded import PRIME, leading_residues
from symamp.exact.polys import ring_of
from symamp.exact.response import Response
from symamp.exact.skeleton import images_with, random_values

_S = 1234567890123  # where s stands when only identities are asked for


@dataclass(frozen=True)
class _Network:
    """The network of the response with some bridges in two."""

    stage: Stage
    halves: tuple[Half, ...]
    ratio: Ratio
    held: frozenset[str]


@dataclass(frozen=True)
class _Changed:
    """What a set of assumptions does to the symbols of a graph: limits by power of t, and rules for values."""

    orders: Mapping[str, int]
    rules: tuple[tuple[str, Rule], ...]


class NestedEngine:
    """Steps 1 to 3 for one nested response."""

    def __init__(self, exact: Response) -> None:
        assert isinstance(exact.form, Nested)
        self._exact = exact
        self._form = exact.form
        self._networks: dict[tuple[Miller, ...], _Network] = {}
        self._gains: dict[Miller, NestedEngine | str] = {}
        self._written: dict[Hashable, WrittenEngine | None] = {}
        self._settled: dict[Hashable, Settled] = {}

    def depends_on(self, symbol: str) -> bool:
        """Whether the response changes with the symbol, by random values modulo a prime."""
        return symbol in entry_symbols(self._form.graph) and bool(_moving(self._form, [symbol]))

    def under(self, ask: Pooled, bridges: tuple[Miller, ...]) -> Settled:
        """The form under steps 1 to 3; one object for all sets that come to the same."""
        network = self._network(bridges)
        asked = trimmed(ask, self._exact.stage, network.held)
        key = (bridges, asked.key)
        if key not in self._settled:
            nothing = not bridges and not asked.rename and not asked.replace and not asked.orders
            self._settled[key] = Settled(self._form) if nothing else self._settle(asked, bridges, network)
        return self._settled[key]

    def _network(self, bridges: tuple[Miller, ...]) -> _Network:
        if bridges not in self._networks:
            stage, halves = split_stage(self._exact.stage, bridges)
            ratio = struck_ratio(stage, self._exact.asked, frozenset())
            held = set(entry_symbols(ratio.graph)) | {bridge.symbol for bridge in bridges}
            for bridge in bridges:
                gain = self._gain(bridge)
                held.update(() if isinstance(gain, str) else entry_symbols(gain._form.graph))
            held &= set(self._exact.stage.symbols)
            self._networks[bridges] = _Network(stage, halves, ratio, frozenset(held))
        return self._networks[bridges]

    def _settle(self, ask: Pooled, bridges: tuple[Miller, ...], network: _Network) -> Settled:
        changed = _changed(network, ask)
        if isinstance(changed, str):
            return Settled(None, changed)
        orders, rules = dict(changed.orders), list(changed.rules)
        for half in network.halves:
            rule = self._half_rule(half, ask)
            if isinstance(rule, str):
                return Settled(None, rule)
            if rule is None:
                orders[half.symbol], rule = -1, _nominal(network.stage)
            rules.append((half.symbol, rule))
        if not orders:
            written = self._write_out(ask, bridges, frozenset())
            if written is not None:
                return written
        if orders and all(order > 0 for order in orders.values()):
            result = self._strike(ask, bridges, network, frozenset(orders), tuple(rules))
            if result is not None:
                return result
        return self._in_limit(ask, network, orders, tuple(rules))

    # Parts struck before derivation

    def _strike(
        self,
        ask: Pooled,
        bridges: tuple[Miller, ...],
        network: _Network,
        struck: frozenset[str],
        rules: tuple[tuple[str, Rule], ...],
    ) -> Settled | None:
        """The limit by a smaller network; None where its determinant vanishes, or a resistance is to be zero."""
        if any(t.symbol in struck and t.power < 0 for entry in network.ratio.graph.entries for t in entry):
            return None
        form = nested_of(network.stage, struck_ratio(network.stage, self._exact.asked, struck))
        form = replace(form, computed=_needed(rules, form))
        (low_n, _), (low_d, _) = leading_residues(form.graph, random_values(form, 3), _S, {})
        if low_d < 0:
            return None
        if low_n < 0:
            return Settled(zero_form(self._exact.stage), "", (ZERO,))
        plain = nested_of(network.stage, network.ratio)
        before = replace(plain, computed=_needed(rules, plain))
        lost = (DC_LOST,) if form.skeleton.low > before.skeleton.low else ()
        found = self._write_out(ask, bridges, struck)
        if found is not None:
            return replace(found, remarks=tuple(dict.fromkeys((*found.remarks, *lost))))
        return Settled(form, "", lost)

    def _write_out(self, ask: Pooled, bridges: tuple[Miller, ...], struck: frozenset[str]) -> Settled | None:
        """What the set leaves, written out where that is small; None where it is not."""
        engine = self._write(struck, ask.rename)
        if engine is None:
            return None
        try:
            return engine.under(ask, bridges)
        except TooLargeError:
            return None

    def _write(self, struck: frozenset[str], rename: Mapping[str, str]) -> WrittenEngine | None:
        """The response without these symbols and with those made one, where it is small enough to be written out."""
        stage = self._exact.stage
        key = (struck, frozenset(rename.items()))
        if key not in self._written:
            ratio = struck_ratio(stage, self._exact.asked, struck)
            form: Expanded | Nested | None = form_of(stage, ratio)
            if isinstance(form, Nested):
                form = write_out_small(ratio, stage.symbols, rename) if rename else None
            self._written[key] = (
                WrittenEngine(replace(self._exact, form=form), struck) if isinstance(form, Expanded) else None
            )
        return self._written[key]

    # The whole graph, to leading order in t

    def _in_limit(
        self, ask: Pooled, network: _Network, orders: Mapping[str, int], rules: tuple[tuple[str, Rule], ...]
    ) -> Settled:
        plain = nested_of(network.stage, network.ratio)
        before = replace(plain, computed=_needed(rules, plain))
        (low_n, _), (low_d, _) = leading_residues(before.graph, random_values(before, 3), _S, orders)
        if low_d < 0:
            return Settled(None, NOTHING_LEFT if low_n < 0 else INFINITE)
        if low_n < 0 or low_n > low_d:
            return Settled(zero_form(self._exact.stage), "", (ZERO,))
        if low_n < low_d:
            return Settled(None, "the response grows without bound")
        form = replace(before, limits=dict(orders), valuation=(low_n, low_d))
        if not orders:
            return Settled(form)
        left = _moving(form, list(ask.orders))
        if left:
            return Settled(None, depends_words(left))
        return Settled(form, "", (DC_LOST,) if form.skeleton.low > before.skeleton.low else ())

    # Bridges

    def _half_rule(self, half: Half, ask: Pooled) -> Rule | str | None:
        """The rule that values a half; None where it is without bound, or the words for there being no half."""
        engine = self._gain(half.bridge)
        if isinstance(engine, str):
            return engine
        found = engine.under(ask, ())
        if found.form is None:
            return f"Miller across {half.bridge.symbol}: {found.why}"
        words = dc_words(half.bridge, *(0 not in powers for powers in found.form.powers))
        if words:
            return words
        stage = self._exact.stage
        nature = stage.symbols[half.bridge.symbol].nature
        if nature != CAPACITANCE and _is_one(found.form):
            return None
        value = ValueRule(symbol_value(stage, half.bridge.symbol, ask)[1])
        return GainRule(half, nature, value, found.form)

    def _gain(self, bridge: Miller) -> NestedEngine | str:
        """The gain across a bridge in the network as it stands, or the words for there being none."""
        if bridge not in self._gains:
            stage, across = gain_across(self._exact.stage, self._exact.asked, bridge)
            form = nested_of(stage, struck_ratio(stage, across, frozenset()))
            (low_n, _), (low_d, _) = leading_residues(form.graph, random_values(form, 3), _S, {})
            words = dc_words(bridge, low_n < 0, low_d < 0)
            engine = NestedEngine(Response(stage, across, "", form))
            self._gains[bridge] = words or engine
        return self._gains[bridge]


def _changed(network: _Network, ask: Pooled) -> _Changed | str:
    """Limits and value rules for the symbols of the graph; or the words for a formula without value."""
    orders: dict[str, int] = {}
    rules: list[tuple[str, Rule]] = []
    own = {half.symbol for half in network.halves}
    for name in entry_symbols(network.ratio.graph):
        leader = ask.rename.get(name, name)
        touched = leader != name or leader in ask.replace
        if name in own or not (touched or name in ask.orders):
            continue
        order, ratio = symbol_value(network.stage, name, ask)
        if ratio[1].is_zero():
            return f"the formula set for {name} divides by zero"
        if ratio[0].is_zero():
            orders[name] = 1  # a formula that is zero: the symbol itself goes to zero
            rules.append((name, _nominal(network.stage)))
            continue
        if order:
            orders[name] = order
        if touched:
            rules.append((name, ValueRule(ratio)))
    return _Changed(orders, tuple(rules))


def _nominal(stage: Stage) -> ValueRule:
    """The value 1, for a symbol that is in its limit whatever its value."""
    one = ring_of(stage.symbols, ()).constant(1)
    return ValueRule((one, one))


def _is_one(gain: Nested | Expanded) -> bool:
    """Whether a gain is 1 at s = 0, whatever the values."""
    if isinstance(gain, Expanded):
        return bool(gain.numerator[0] == gain.denominator[0])
    above, below = images_with(gain, random_values(gain, 11))
    return bool(above[gain.skeleton.low] == below[gain.skeleton.low])


def _needed(rules: tuple[tuple[str, Rule], ...], form: Nested) -> tuple[tuple[str, Rule], ...]:
    """The rules of symbols that the graph holds."""
    held = set(entry_symbols(form.graph))
    return tuple((name, rule) for name, rule in rules if name in held)


def _moving(form: Nested, symbols: Sequence[str]) -> list[str]:
    """Those of the symbols with which the response moves, by random values modulo the prime."""
    base = _image(form, ())

    def moves(together: Sequence[str]) -> bool:
        n, d = _image(form, together)
        return bool((n * base[1] - base[0] * d) % PRIME)

    if not moves(symbols):
        return []
    return [symbol for symbol in symbols if moves([symbol])]


def _image(form: Nested, moved: Sequence[str]) -> tuple[int, int]:
    """Numerator and denominator at one s, to leading order in t."""
    (_, n), (_, d) = leading_residues(form.graph, random_values(form, 3, moved), _S, form.limits)
    return n, d
