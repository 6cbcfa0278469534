"""Open-circuit time constants: what each reactive part adds to b1, the coefficient of s in the denominator.

Cochrun and Grabel, "A method for the determination of the transfer function of electronic circuits", IEEE Trans.
Circuit Theory 20, 1973: b1/b0 is the sum over capacitors of C times the resistance that C sees, and over inductors
of L over that resistance, with the other capacitors open, the other inductors short and all sources at rest.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import lcm

from flint import fmpz_mpoly

from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.exact.cofactors import Ratio, entry_symbols, ratio_of
from symamp.exact.forms import EXPAND_LIMIT, raw_polynomials
from symamp.exact.minors import MinorGraph
from symamp.exact.polys import by_power, lowest_terms
from symamp.exact.shape import Shape, shape_in_resistances
from symamp.exact.system import build_system


@dataclass(frozen=True)
class TimeConstant:
    """One reactive part's: `part` is its symbol; numbers are at the bias point, None with `why`.

    `resistance` in ohm, `seconds`, and `share` of the sum over all parts. `formula` is the resistance as a
    formula, None where the response is not written out.
    """

    part: str
    resistance: float | None
    seconds: float | None
    share: float | None
    formula: Shape | None
    why: str = ""


def time_constants(
    stage: Stage, asked: Asked, rename: Mapping[str, str] | None = None
) -> tuple[TimeConstant, ...]:
    """The time constants of all reactive parts that the response's denominator holds.

    They are those of the network: a factor that cancels from the response counts here. `rename` maps a
    conductance to the resistance to write in its place ({"gds1": "ro1"}).
    """
    ratio = ratio_of(build_system(stage, asked.without), asked)
    held = set(entry_symbols(ratio.graph))
    names = [n for n in stage.symbols if n in held and stage.symbols[n].nature in (CAPACITANCE, INDUCTANCE)]
    if not names:
        return ()
    formulas = _formulas(stage, ratio, names, rename or {})
    missing = [name for name in stage.symbols if name in held and name not in stage.bias]
    if missing:
        why = f"{', '.join(missing)} has no bias value"
        return tuple(TimeConstant(n, None, None, None, formulas.get(n), why) for n in names)
    b0, added = _linear_terms(stage, ratio)
    if not b0:
        why = "the others at rest leave no path at DC: the resistance is infinite"
        return tuple(TimeConstant(n, None, None, None, formulas.get(n), why) for n in names)
    total = sum(added.values())
    found = []
    for name in names:
        tau, value = added.get(name, Fraction(0)) / b0, stage.bias[name]
        above, below = (tau, value) if stage.symbols[name].nature == CAPACITANCE else (value, tau)
        resistance = float(above / below) if below else None
        share = float(tau * b0 / total) if total else None
        found.append(TimeConstant(name, resistance, float(tau), share, formulas.get(name)))
    return tuple(found)


def _linear_terms(stage: Stage, ratio: Ratio) -> tuple[Fraction, dict[str, Fraction]]:
    """b0, and what each reactive part adds to b1, both times one number: exactly, at the bias point.

    b1 is linear in the reactive parts, so each adds its value times the determinant's derivative at s = 0, and
    all derivatives come from one walk down the graph (Baur and Strassen, Theor. Comput. Sci. 22, 1983).
    """
    graph = ratio.graph
    entries = _integer_entries(graph, stage.bias)
    at_rest = [sum(value for _, s_power, value in terms if not s_power) for terms in entries]
    values = [1]
    for edges in graph.edges[1:]:
        values.append(sum(sign * at_rest[entry] * values[child] for child, entry, sign in edges))
    slopes, entry_slopes = [0] * len(values), [0] * len(entries)
    for factor, node in graph.denominator:
        slopes[node] += factor
    for node in range(len(values) - 1, 0, -1):
        slope = slopes[node]
        for child, entry, sign in graph.edges[node] if slope else ():
            slopes[child] += sign * slope * at_rest[entry]
            entry_slopes[entry] += sign * slope * values[child]
    added: dict[str, Fraction] = {}
    for terms, slope in zip(entries, entry_slopes, strict=True):
        for symbol, s_power, value in terms if slope else ():
            if s_power and symbol is not None:
                added[symbol] = added.get(symbol, Fraction(0)) + value * slope
    return Fraction(sum(factor * values[node] for factor, node in graph.denominator)), added


def _integer_entries(
    graph: MinorGraph, bias: Mapping[str, Fraction]
) -> list[list[tuple[str | None, int, int]]]:
    """Each entry's terms as (symbol, power of s, value), each matrix row times what makes it whole."""
    entries: list[list[tuple[str | None, int, Fraction]]] = [
        [
            (symbol, s_power, coefficient * (bias[symbol] ** power if symbol is not None else Fraction(1)))
            for coefficient, symbol, power, s_power in entry
        ]
        for entry in graph.entries
    ]
    whole: dict[int, int] = {}
    for terms, row in zip(entries, graph.entry_rows, strict=True):
        whole[row] = lcm(whole.get(row, 1), *(value.denominator for _, _, value in terms))
    return [
        [(symbol, s_power, int(value * whole[row])) for symbol, s_power, value in terms]
        for terms, row in zip(entries, graph.entry_rows, strict=True)
    ]


def _formulas(stage: Stage, ratio: Ratio, names: list[str], rename: Mapping[str, str]) -> dict[str, Shape]:
    """The resistances as formulas; those of a part that sees none or an infinite one are left out."""
    if sum(ratio.graph.count_terms()) > EXPAND_LIMIT:
        return {}
    _, denominator = raw_polynomials(ratio, stage.symbols)
    parts = by_power(denominator)
    b0, b1 = parts.get(0), parts.get(1)
    if b0 is None or b1 is None:
        return {}
    context = denominator.context()
    place = {name: i for i, name in enumerate(context.names())}
    reactive = [place[n] for n in names]
    # Terms of b0 with a reactive part in them are those of a network at rest that it does not have.
    b0 = _only(b0, reactive, None)
    weights = {name: float(value) for name, value in stage.bias.items()} or None
    found = {}
    for name in names:
        slope = _only(b1, reactive, place[name])
        if b0.is_zero() or slope.is_zero():
            continue
        coefficient = by_power(slope, place[name])[1]
        pair = (coefficient, b0) if stage.symbols[name].nature == CAPACITANCE else (b0, coefficient)
        found[name] = shape_in_resistances(*lowest_terms(*pair), rename, weights)
    return found


def _only(polynomial: fmpz_mpoly, reactive: list[int], wanted: int | None) -> fmpz_mpoly:
    """The terms that hold, of all reactive symbols, just the wanted one (once), or none."""
    kept = {}
    for exponents, coefficient in polynomial.terms():
        if all(exponents[i] == (1 if i == wanted else 0) for i in reactive):
            kept[exponents] = coefficient
    return polynomial.context().from_dict(kept)
