"""Open-circuit time constants: what each reactive part adds to b1, the coefficient of s in the denominator.

Cochrun and Grabel, "A method for the determination of the transfer function of electronic circuits", IEEE Trans.
Circuit Theory 20, 1973: b1/b0 is the sum over capacitors of C times the resistance that C sees, and over inductors
of L over that resistance, with the other capacitors open, the other inductors short and all sources at rest.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from flint import fmpz_mpoly

from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.exact.cofactors import Ratio, entry_symbols, ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import EXPAND_LIMIT, raw_polynomials
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
    seconds = _seconds(stage, ratio, names)
    total = float(np.sum(seconds))
    found = []
    for name, tau in zip(names, seconds, strict=True):
        if not np.isfinite(tau):
            why = "the others at rest leave no path at DC: the resistance is infinite"
            found.append(TimeConstant(name, None, None, None, formulas.get(name), why))
            continue
        value = float(stage.bias[name])
        if stage.symbols[name].nature == CAPACITANCE:
            resistance = tau / value if value else None
        else:
            resistance = value / tau if tau else None
        share = float(tau / total) if np.isfinite(total) and total else None
        found.append(TimeConstant(name, resistance, float(tau), share, formulas.get(name)))
    return tuple(found)


def _seconds(stage: Stage, ratio: Ratio, names: list[str]) -> np.ndarray:
    """b1/b0 with one reactive part left at a time: one bias point a part."""
    values = {name: float(value) for name, value in stage.bias.items()}
    points = len(names)
    arrays: dict[str, np.ndarray | float] = dict(values)
    for i, name in enumerate(names):
        arrays[name] = np.where(np.arange(points) == i, values[name], 0.0)
    given = nested_of(stage, ratio).coefficients(arrays, points)
    below = given.denominator
    with np.errstate(all="ignore"):
        b1 = below[1] if below.shape[0] > 1 else np.zeros(points)
        tau = b1 / below[0] / given.omega
    return np.where(below[0] == 0, np.inf, tau + 0.0)  # + 0.0 makes a zero of −0.0


def _formulas(
    stage: Stage, ratio: Ratio, names: list[str], rename: Mapping[str, str]
) -> dict[str, Shape]:
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
