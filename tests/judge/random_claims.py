"""Random stages and claims for the tests of judging: formulas made by dropping terms of exact expressions.

What a formula is worth is worked out from its terms in floats, and what the stage does from dense nodal matrices
(`nodal`), so neither goes through the code under test.
"""

from __future__ import annotations

import math
import random
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np
from judged import stage_of
from nodal import Nodal
from scipy.optimize import linprog

from symamp.circuit.stage import Stage
from symamp.errors import InputError
from symamp.exact.derive import derive
from symamp.exact.polys import lowest_terms
from symamp.exact.response import Response

Values = dict[str, float]
Monomial = tuple[tuple[str, int], ...]
Terms = dict[Monomial, int]

NODES = ("in", "a", "b", "out", "gnd")


def random_stage(seed: int) -> Stage:
    """One to three MOSFETs, resistors and capacitors between five nodes; another if it has no gain at DC."""
    while True:
        stage = _tried(random.Random(seed))
        if stage is not None:
            return stage
        seed += 1_000_003


def _tried(pick: random.Random) -> Stage | None:
    lines, bias = ['voltage_source.VIN = ["in", "gnd"]'], []
    for n in range(1, pick.randint(1, 3) + 1):
        drain, source = pick.sample(NODES[1:], 2)
        gate = "in" if n == 1 else pick.choice(NODES)
        lines.append(f'mosfet.M{n} = {{ gate = "{gate}", drain = "{drain}", source = "{source}" }}')
        gm = _about(pick, 3e-3)
        given = {"gm": gm, "gds": gm / pick.uniform(8, 60)}
        if source != "gnd":
            given["gmb"] = gm * pick.uniform(0.05, 0.3)
        if pick.random() < 0.6:
            given["cgs"] = _about(pick, 2e-13)
        if pick.random() < 0.5:
            given["cgd"] = _about(pick, 5e-14)
        bias.append(f"M{n} = {{ {', '.join(f'{k} = {v!r}' for k, v in given.items())} }}")
    for kind, letter, typical in (("resistor", "R", 5e3), ("capacitor", "C", 8e-13)):
        for n in range(1, pick.randint(1, 3) + 1):
            one, other = pick.sample(NODES, 2)
            lines.append(f'{kind}.{letter}{n} = ["{one}", "{other}"]')
            bias.append(f"{letter}{n} = {_about(pick, typical)!r}")
    lines.append('response.gain = { from = "VIN", to = "out" }')
    try:
        stage = stage_of("\n".join(lines), "\n[bias]\n", "\n".join(bias), "\n")
        exact = exact_of(stage)
    except InputError:
        return None
    if not exact.expanded or exact.form.numerator[0].is_zero() or exact.form.denominator[0].is_zero():
        return None
    if sum(map(len, (*exact.form.numerator, *exact.form.denominator))) > 80:
        return None
    at_dc = dense(stage, bias_of(stage)).constant
    scale = np.abs(at_dc).max(axis=1, keepdims=True)
    return stage if scale.all() and np.linalg.cond(at_dc / scale) < 1e9 else None  # no node floats at DC


def _about(pick: random.Random, typical: float) -> float:
    return float(f"{typical * math.exp(pick.uniform(-1.5, 1.5)):.3g}")


def exact_of(stage: Stage) -> Response:
    return derive(stage, stage.asked["gain"])


def terms_of(polynomial: Any) -> Terms:
    """Monomials and coefficients of a coefficient of s."""
    names = polynomial.context().names()
    return {
        tuple((n, int(e)) for n, e in zip(names, exponents, strict=True) if e): int(c)
        for exponents, c in polynomial.terms()
    }


def dropped(pick: random.Random, terms: Terms, chance: float = 0.4) -> Terms:
    """Some of the terms; at least one."""
    kept = {m: c for m, c in terms.items() if pick.random() > chance}
    return kept or dict([pick.choice(sorted(terms.items()))])


def worth(terms: Terms, values: Mapping[str, float]) -> float:
    return sum(c * math.prod(values[n] ** e for n, e in monomial) for monomial, c in terms.items())


@dataclass(frozen=True)
class Ratio:
    """A formula ±above/below, with its value and its text."""

    above: Terms
    below: Terms
    sign: int = 1

    def value(self, values: Mapping[str, float]) -> float:
        return self.sign * worth(self.above, values) / worth(self.below, values)

    @property
    def text(self) -> str:
        return f"{'-' if self.sign < 0 else ''}({written(self.above)})/({written(self.below)})"


def written(terms: Terms) -> str:
    found = []
    for monomial, c in terms.items():
        factors = [n if e == 1 else f"{n}**{e}" for n, e in monomial]
        size = "*".join([str(abs(c)), *factors] if abs(c) != 1 or not factors else factors)
        found.append(("-" if c < 0 else "+") + size)
    return "".join(found).lstrip("+")


def dc_claim(pick: random.Random, exact: Response) -> Ratio:
    """The gain at DC with terms dropped above and below."""
    above, below = map(terms_of, lowest_terms(exact.form.numerator[0], exact.form.denominator[0]))
    return Ratio(dropped(pick, above), dropped(pick, below))


def pole_claim(pick: random.Random, exact: Response, k: int) -> Ratio:
    """−b_(k−1)/b_k with terms dropped."""
    one, two = exact.form.denominator[k - 1], exact.form.denominator[k]
    return Ratio(dropped(pick, terms_of(one)), dropped(pick, terms_of(two)), -1)


def dense(stage: Stage, values: Mapping[str, float]) -> Nodal:
    return Nodal(stage, stage.asked["gain"], values)


def at_bias(stage: Stage, values: Mapping[str, float]) -> Stage:
    """The stage at another bias point."""
    return replace(stage, bias={n: Fraction(values[n]) for n in stage.bias})


def around(pick: random.Random, values: Mapping[str, float], spread: float = 3.0) -> Values:
    return {n: v * math.exp(pick.uniform(-1, 1) * math.log(spread)) for n, v in values.items()}


def bias_of(stage: Stage) -> Values:
    return {n: float(v) for n, v in stage.bias.items()}


def _exponents(above: Terms, below: Terms, names: Sequence[str]) -> list[list[int]]:
    return [
        [dict(a).get(n, 0) - dict(b).get(n, 0) for n in names] for a in above for b in below
    ]  # of every term above over every term below


def shrinking(ratios: Sequence[tuple[Terms, Terms]], names: Sequence[str]) -> dict[str, float] | None:
    """Powers of ε for each symbol under which every ratio shrinks at least as ε; None where there are none."""
    rows = [row for above, below in ratios for row in _exponents(above, below, names)]
    found = linprog(
        np.zeros(len(names)), A_ub=-np.array(rows, dtype=float), b_ub=-np.ones(len(rows)), bounds=(-4, 4)
    )
    return dict(zip(names, found.x, strict=True)) if found.status == 0 else None


def moving_alone(
    which: int, ratios: Sequence[tuple[Terms, Terms]], common: Terms, names: Sequence[str]
) -> dict[str, float] | None:
    """Powers of a factor for each symbol that multiply one ratio by it, and leave the others and what is common in
    the shares that they have; None where there are none."""
    rows, right = [], []
    for number, (above, below) in enumerate(ratios):
        found = _exponents(above, below, names)
        rows += found
        right += [1.0 if number == which else 0.0] * len(found)
    for other in _exponents(common, dict([next(iter(common.items()))]), names):
        rows.append(other)
        right.append(0.0)
    matrix = np.array(rows, dtype=float)
    solved, *_ = np.linalg.lstsq(matrix, np.array(right), rcond=None)
    return dict(zip(names, solved, strict=True)) if np.allclose(matrix @ solved, right, atol=1e-9) else None
