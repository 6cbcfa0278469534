"""Steps 1 and 2 on written-out polynomials: symbols renamed or replaced by formulas, and taken to their limits."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from flint import fmpz_mpoly

from symamp.assumptions.algebra import PolyRatio, formula_ratio
from symamp.assumptions.merge import Pooled, base_symbols, trimmed
from symamp.circuit.stage import Stage
from symamp.exact.polys import by_power, held, into_ring, least_exponents, lowest_terms, ring_of

NOTHING_LEFT = "0/0: nothing is left of the response"
INFINITE = "the response is infinite"


@dataclass(frozen=True)
class LimitResult:
    """What is left of a ratio in a limit: the ratio, or in `why` the words for there being none.

    `lost_origin` is true where a factor s cancelled, so that the limit's dc is not the limit of dc.
    """

    ratio: PolyRatio | None
    why: str = ""
    lost_origin: bool = False


def renamed(polynomial: fmpz_mpoly, names: Mapping[str, str]) -> fmpz_mpoly:
    """The polynomial with symbols made one with others of its ring."""
    context = polynomial.context()
    generator = dict(zip(context.names(), context.gens(), strict=True))
    if not any(name in generator for name in names):
        return polynomial
    return polynomial.compose(*(generator[names.get(name, name)] for name in generator), ctx=context)


def replaced(ratio: PolyRatio, name: str, by: PolyRatio) -> PolyRatio:
    """The ratio with a symbol replaced by a ratio of polynomials of the same ring.

    A ratio with denominator zero stands for a value without bound.
    """
    names = ratio[0].context().names()
    if name not in names:
        return ratio
    index = names.index(name)
    parts = [by_power(polynomial, index) for polynomial in ratio]
    top = max((power for part in parts for power in part), default=0)
    if top == 0:
        return ratio
    numerator, denominator = by
    out = []
    for part in parts:
        total = ratio[0].context().constant(0)
        for power, coefficient in part.items():
            total += coefficient * numerator**power * denominator ** (top - power)
        out.append(total)
    return out[0], out[1]


def limit(ratio: PolyRatio, orders: Mapping[str, int]) -> LimitResult:
    """The ratio as its symbols go to their limits at one common rate t, s fixed.

    `orders` is +1 for a symbol that goes to zero (x·t), −1 for one that grows without bound (x/t). The leading
    powers of t of numerator and denominator are what is left.
    """
    numerator, denominator = ratio
    if denominator.is_zero():
        return LimitResult(None, NOTHING_LEFT if numerator.is_zero() else INFINITE)
    if numerator.is_zero():
        return LimitResult((numerator, numerator.context().constant(1)))
    low_n, numerator = leading(numerator, orders)
    low_d, denominator = leading(denominator, orders)
    if low_n < low_d:
        return LimitResult(None, "the response grows without bound")
    if low_n > low_d:
        context = numerator.context()
        return LimitResult((context.constant(0), context.constant(1)))
    shared_s = least_exponents((numerator, denominator))[-1]
    result = lowest_terms(numerator, denominator)
    left = holding(result, orders)
    if left:
        return LimitResult(None, depends_words(left))
    return LimitResult(result, lost_origin=shared_s > 0)


def depends_words(symbols: Iterable[str]) -> str:
    """The words for a limit that is not one."""
    left = list(symbols)
    verb = "remains" if len(left) == 1 else "remain"
    return f"the limit depends on which goes first ({', '.join(left)} {verb})"


def leading(polynomial: fmpz_mpoly, orders: Mapping[str, int]) -> tuple[int, fmpz_mpoly]:
    """The lowest power of t, and the terms that have it; of zero (0, zero)."""
    names = polynomial.context().names()
    weights = [(i, orders[name]) for i, name in enumerate(names) if name in orders]
    if not weights or polynomial.is_zero():
        return 0, polynomial
    if all(order > 0 for _, order in weights):
        rest = polynomial.subs({names[i]: 0 for i, _ in weights})
        if not rest.is_zero():
            return 0, rest
    grouped: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in polynomial.terms():
        power = sum(sign * int(exponents[i]) for i, sign in weights)
        grouped.setdefault(power, {})[exponents] = int(coefficient)
    low = min(grouped)
    return low, polynomial.context().from_dict(grouped[low])


def holding(ratio: PolyRatio, names: Iterable[str]) -> list[str]:
    """Which of the names the ratio holds, in their order."""
    found = held(*ratio)
    return [name for name in names if name in found]


def symbols_in(*polynomials: fmpz_mpoly) -> list[str]:
    """The symbols that polynomials hold, in alphabetical order."""
    return sorted(held(*polynomials))


def symbol_value(stage: Stage, name: str, ask: Pooled) -> tuple[int, PolyRatio]:
    """What a symbol is after steps 1 and 2: its power of t, and the ratio that it has there.

    A ratio with denominator zero is a formula that divides by zero.
    """
    ask = trimmed(ask, stage, [name])
    context = ring_of(stage.symbols, [name])
    ratio = put(stage, (context.gens()[0], context.constant(1)), [name], ask)
    if isinstance(ratio, str):
        return 0, (context.constant(1), context.constant(0))
    if ratio[0].is_zero():
        return 0, ratio
    (high, above), (low, below) = (leading(p, ask.orders) for p in ratio)
    return high - low, lowest_terms(above, below)


def put(stage: Stage, ratio: PolyRatio, symbols: Iterable[str], ask: Pooled) -> PolyRatio | str:
    """Step 1: symbols renamed, then replaced by their formulas; or the words for a formula without value."""
    names = {ask.rename.get(name, name) for name in symbols} | set(symbols)
    for node in ask.replace.values():
        names.update(base_symbols(stage, node, ask.rename))
    context = ring_of(stage.symbols, names)
    above, below = (renamed(into_ring(p, context), ask.rename) for p in ratio)
    for name, node in ask.replace.items():
        by = formula_ratio(stage, node, ask.rename, context)
        if by[1].is_zero():
            return f"the formula set for {name} divides by zero"
        above, below = replaced((above, below), name, lowest_terms(*by))
    return above, below


def tidy(stage: Stage, ratio: PolyRatio) -> PolyRatio:
    """The ratio in a ring of the symbols that it holds, and no others."""
    context = ring_of(stage.symbols, held(*ratio))
    return into_ring(ratio[0], context), into_ring(ratio[1], context)
