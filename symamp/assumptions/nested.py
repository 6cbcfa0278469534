"""Steps 1 to 3 on a response that is not written out: on the minor graph, by values and by powers of t."""

from __future__ import annotations

import random
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Any

import numpy as np

from symamp.assumptions.bridge import Half, gain_across, split_stage
from symamp.assumptions.merge import Pooled, formula_value
from symamp.assumptions.read import Miller
from symamp.assumptions.rewrite import depends_words
from symamp.circuit.kinds import CONDUCTANCE, INDUCTANCE, RESISTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.exact.cofactors import Ratio, entry_symbols, ratio_of
from symamp.exact.derive import form_of, nested_of
from symamp.exact.forms import Expanded, Nested, vanishes
from symamp.exact.graded import PRIME, leading_residues
from symamp.exact.response import Response
from symamp.exact.system import System, build_system, without_symbols


@dataclass(frozen=True)
class NestedResult:
    """What is left: a form (written out where that became possible, steps 2 and 3 done), or None with why."""

    form: Nested | Expanded | None
    stage: Stage
    why: str = ""
    remarks: tuple[str, ...] = field(default=())


def nested_form(exact: Response, ask: Pooled) -> NestedResult:
    """Steps 1 to 3 for a nested response."""
    bridges = tuple(b for b in ask.miller if ask.rename.get(b.symbol, b.symbol) not in ask.orders)
    stage, halves = split_stage(exact.stage, bridges) if bridges else (exact.stage, ())
    orders = _spread(stage, ask)
    system = build_system(stage, exact.asked.without)
    computed = _renamings(stage, ask)
    for half in halves:
        gain = _gain_rule(exact.stage, exact.asked, half, ask)
        if isinstance(gain, str):
            return NestedResult(None, stage, gain)
        computed.append((half.symbol, gain))
    struck = {name for name, order in orders.items() if order > 0}
    if struck and all(order > 0 for order in orders.values()):
        result = _struck(stage, exact.asked, system, struck, tuple(computed))
        if result is not None:
            return result
    return _graded(stage, exact.asked, system, orders, tuple(computed))


def _spread(stage: Stage, ask: Pooled) -> dict[str, int]:
    """The limits of all symbols of the graph: one that is made one with another goes where that goes."""
    return {
        name: ask.orders[ask.rename.get(name, name)]
        for name in stage.symbols
        if ask.rename.get(name, name) in ask.orders
    }


def _renamings(stage: Stage, ask: Pooled) -> list[tuple[str, Any]]:
    """Value rules for step 1, in an order in which each finds what it needs."""
    rules: list[tuple[str, Any]] = []
    for name, node in reversed(ask.replace.items()):
        rules.append((name, _formula_rule(stage, node, ask.rename)))
    for name, leader in ask.rename.items():
        rules.append((name, lambda values, leader=leader: values[leader]))
    return rules


def _formula_rule(stage: Stage, node: Any, rename: Mapping[str, str]) -> Any:
    def rule(values: Mapping[str, Any]) -> Any:
        exact = all(isinstance(v, Fraction) for v in values.values())

        def value_of(what: Any) -> Any:
            if isinstance(what, Fraction):
                return what if exact else float(what)
            return values[what]

        return formula_value(stage, node, rename, value_of)

    return rule


def _struck(
    stage: Stage, asked: Asked, system: System, struck: set[str], computed: tuple[Any, ...]
) -> NestedResult | None:
    """Parts struck before derivation; None where the determinant so left is identically zero."""
    inverse = {t.symbol for row in system.rows for entry in row.values() for t in entry if t.power < 0}
    if struck & inverse:
        return None
    ratio = ratio_of(without_symbols(system, struck), asked)
    zero, infinite = vanishes(ratio.graph)
    if infinite:
        return None
    if zero:
        return NestedResult(None, stage, "the response goes to zero")
    form = form_of(stage, ratio)
    if isinstance(form, Nested):
        return NestedResult(replace(form, computed=computed), stage)
    if any(" at " in name for name, _ in computed):
        # The halves' values are found by the graph, so the form stays nested.
        return NestedResult(replace(nested_of(stage, ratio), computed=computed), stage)
    return NestedResult(form, stage)


def _graded(
    stage: Stage, asked: Asked, system: System, orders: Mapping[str, int], computed: tuple[Any, ...]
) -> NestedResult:
    """The graph to leading order in t."""
    ratio: Ratio = ratio_of(system, asked)
    form = replace(nested_of(stage, ratio), computed=computed)
    held = {name: order for name, order in orders.items() if name in entry_symbols(ratio.graph)}
    if not held:
        return NestedResult(form, stage)
    draw = random.Random(3)
    values = {name: draw.randrange(2, PRIME) for name in entry_symbols(ratio.graph)}
    s = draw.randrange(2, PRIME)
    (low_n, value_n), (low_d, value_d) = leading_residues(ratio.graph, values, s, held)
    if low_d < 0 or (low_n >= 0 and low_n < low_d):
        return NestedResult(None, stage, "the response grows without bound")
    if low_n < 0 or low_n > low_d:
        return NestedResult(None, stage, "the response goes to zero")
    moved = {**values, **{name: draw.randrange(2, PRIME) for name in held}}
    (_, other_n), (_, other_d) = leading_residues(ratio.graph, moved, s, held)
    if value_n * other_d % PRIME != other_n * value_d % PRIME:
        return NestedResult(None, stage, depends_words(held))
    return NestedResult(replace(form, limits=held, valuation=(low_n, low_d)), stage)


def _gain_rule(stage: Stage, asked: Asked, half: Half, ask: Pooled) -> Any:
    """The rule that values a half: its bridge times 1 − A or 1 − 1/A, A by the graph at s = 0."""
    across = gain_across(asked, half.bridge)
    where = f"Miller across {half.bridge.symbol}"
    ratio = ratio_of(build_system(stage, asked.without), across)
    zero, infinite = vanishes(ratio.graph)
    if infinite:
        return f"{where}: V({half.bridge.start}) is zero"
    if zero and half.bridge.both:
        return f"{where}: the gain across the part is zero, so 1 − 1/A does not exist"
    gain = nested_form(
        Response(stage, across, "", nested_of(stage, ratio)), replace(ask, miller=(), pairs=())
    )
    if gain.form is None:
        return f"{where}: {gain.why}"
    return _half_rule(stage, half, gain.form)


def _half_rule(stage: Stage, half: Half, gain: Nested | Expanded) -> Any:
    nature = stage.symbols[half.bridge.symbol].nature
    inverse = nature in (RESISTANCE, INDUCTANCE)

    def rule(values: Mapping[str, Any]) -> Any:
        above, below = _at_dc(gain, values)
        factor = (below - above) / below if half.at_start else (above - below) / above
        bridge = values[half.bridge.symbol]
        if nature == CONDUCTANCE:
            return 1 / (bridge * factor)
        return bridge / factor if inverse else bridge * factor

    return rule


def _at_dc(gain: Nested | Expanded, values: Mapping[str, Any]) -> tuple[Any, Any]:
    if all(isinstance(v, Fraction) for v in values.values()):
        numerator, denominator = gain.exact_coefficients(values)
        return tuple(Fraction(int(p[0].p), int(p[0].q)) for p in (numerator, denominator))  # type: ignore[return-value]
    points = max((v.size for v in values.values() if isinstance(v, np.ndarray) and v.ndim), default=1)
    found = gain.coefficients(values, points)
    return found.numerator[0], found.denominator[0]
