"""A whole ledger once more at 50 digits: from Kirchhoff's current law written by hand, and the words of the design.

Nothing of symamp is used on the slow side but the reading of the stage file's numbers.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from functools import cache
from itertools import product
from math import prod
from typing import Any

import pytest
import sympy
from judged import COMMON_SOURCE, slow_figures, slow_partner, stage_of
from mpmath import mp, mpf, polyroots

from symamp.judge.ledger import make_ledger

ASSUMPTIONS = """
[[assumption]]
name = "gm drives the load resistance alone"
neglect = ["gds"]

[[assumption]]
name = "cgd is small against cgs"
small = ["cgd"]
against = ["cgs"]

[[assumption]]
name = "stage gain is high"
small = ["1"]
against = ["gm1*RL"]

[[assumption]]
name = "poles lie far apart"
poles_far_apart = true
"""

SYMBOLS = GM, GDS, CGS, CGD, RS, RL, CLOAD = sympy.symbols("gm1 gds1 cgs1 cgd1 RS RL CL")
S = sympy.Symbol("s")

# Kirchhoff at the gate and at the output, for one volt at the input; multiplied through by RS and RL.
ABOVE = -RL * (GM - S * CGD)
BELOW = (1 + S * RS * (CGS + CGD)) * (1 + RL * GDS + S * RL * (CLOAD + CGD)) + S * CGD * RS * RL * (
    GM - S * CGD
)

# Dominance: a term falls to another that differs from it by these exponents of SYMBOLS, or a sum of several.
STEPS = {1: (0, 0, 1, -1, 0, 0, 0), 2: (1, 0, 0, 0, 0, 1, 0)}
DIGITS = 50

Terms = dict[tuple[int, ...], int]


def dominated(terms: Terms, steps: list[tuple[int, ...]]) -> Terms:
    """The terms that fall to no other."""
    reach = {
        tuple(sum(n * x for n, x in zip(times, column, strict=True)) for column in zip(*steps, strict=True))
        for times in product(range(5), repeat=len(steps))
        if any(times)
    }

    def falls(term: tuple[int, ...]) -> bool:
        return any(tuple(a - b for a, b in zip(other, term, strict=True)) in reach for other in terms)

    return {term: factor for term, factor in terms.items() if not falls(term)}


@cache
def rows_under(made: frozenset[int]) -> list[list[Terms]]:
    """Coefficients of s ascending, of numerator and denominator, under the assumptions of these numbers."""
    rows = []
    for polynomial in (ABOVE, BELOW):
        kept = sympy.expand(polynomial.subs(GDS, 0) if 0 in made else polynomial)
        row = [dict(sympy.Poly(c, *SYMBOLS).terms()) for c in sympy.Poly(kept, S).all_coeffs()[::-1]]
        steps = [STEPS[k] for k in (1, 2) if k in made]
        rows.append([dominated(terms, steps) for terms in row] if steps else row)
    return rows


def numbers(row: list[Terms], bias: dict[str, Fraction]) -> list[Any]:
    """The coefficients' values, exact until they become floats of many digits."""
    values = [bias[symbol.name] for symbol in SYMBOLS]

    def total(terms: Terms) -> Fraction:
        return sum(
            (int(c) * prod(v**e for v, e in zip(values, term, strict=True)) for term, c in terms.items()),
            Fraction(0),
        )

    return [mpf(v.numerator) / mpf(v.denominator) for v in map(total, row)]


def roots(row: list[Any], apart: bool) -> list[Any]:
    if len(row) < 2:
        return []
    if apart:
        return sorted((-row[k] / row[k + 1] for k in range(len(row) - 1)), key=abs)
    return sorted(polyroots(row[::-1], maxsteps=200, extraprec=300), key=lambda r: (abs(r), -mp.im(r)))


def expand(found: list[Any], leading: Any) -> list[Any]:
    """The polynomial with these roots and this leading coefficient, ascending."""
    row = [leading]
    for root in found:
        row = [
            (row[k - 1] if k else mpf(0)) - (root * row[k] if k < len(row) else mpf(0))
            for k in range(len(row) + 1)
        ]
    return row


def first_fall(above: list[Any], below: list[Any], level: Any) -> Any:
    """Lowest ω at which |H|² falls through level², from the roots of its polynomial in ω²."""

    def squared(row: list[Any]) -> list[Any]:
        even = [c * (-1) ** (k // 2) for k, c in enumerate(row) if k % 2 == 0]
        odd = [c * (-1) ** (k // 2) for k, c in enumerate(row) if k % 2]
        found = [mpf(0)] * (len(row) + 1)
        for part, shift in ((even, 0), (odd, 1)):
            for i, x in enumerate(part):
                for j, y in enumerate(part):
                    found[i + j + shift] += mp.re(x * y)
        return found

    n, d = squared(above), squared(below)
    size = max(len(n), len(d))
    difference = [(n[k] if k < len(n) else 0) - level**2 * (d[k] if k < len(d) else 0) for k in range(size)]
    while difference[-1] == 0:
        difference.pop()
    scale = mp.mpf(10) ** 18  # ω² in units of (1 Grad/s)²
    found = polyroots([c * scale**k for k, c in enumerate(difference)][::-1], maxsteps=200, extraprec=300)
    real = sorted(mp.re(x) * scale for x in found if abs(mp.im(x)) < mpf(10) ** -30 * abs(x) and mp.re(x) > 0)
    return mp.sqrt(real[0])


QUANTITIES: dict[str, Callable[[list[Any], list[Any], list[Any], list[Any]], Any]] = {
    "dc": lambda above, below, zeros, poles: above[0] / below[0],
    "p1": lambda above, below, zeros, poles: poles,
    "p2": lambda above, below, zeros, poles: poles,
    "z1": lambda above, below, zeros, poles: zeros,
    "bandwidth": lambda above, below, zeros, poles: first_fall(
        above, below, abs(above[0] / below[0]) / mp.sqrt(2)
    ),
    "unity_gain_frequency": lambda above, below, zeros, poles: first_fall(above, below, mpf(1)),
}


@cache
def under(made: frozenset[int], bias: tuple[tuple[str, Fraction], ...]) -> dict[str, Any]:
    apart = 3 in made
    above, below = (numbers(row, dict(bias)) for row in rows_under(made))
    zeros, poles = roots(above, apart), roots(below, apart)
    if apart:
        above, below = expand(zeros, above[-1]), expand(poles, below[-1])
    return {name: of(above, below, zeros, poles) for name, of in QUANTITIES.items()}


def error(name: str, made: frozenset[int], bias: tuple[tuple[str, Fraction], ...]) -> Any:
    exact, approximate = under(frozenset(), bias)[name], under(made, bias)[name]
    if name[0] in "pz":
        index = int(name[1:]) - 1
        approximate = slow_partner(exact, approximate, index, lambda r: abs(mp.log(r)))
        exact = exact[index]
    return (approximate - exact) / exact


@pytest.mark.parametrize("drawn", range(3))
def test_every_figure_at_fifty_digits(drawn: int) -> None:
    changes = [{}, {"20 kohm": "300 ohm", '"0.7 pF"': '"3.3 pF"'}, {"5 mS": "1.1 mS", "4 kohm": "60 kohm"}][
        drawn
    ]
    text = COMMON_SOURCE
    for old, new in changes.items():
        assert old in text
        text = text.replace(old, new)
    stage = stage_of(text, ASSUMPTIONS)
    bias = tuple(stage.bias.items())
    ledger = make_ledger(stage, quantities=[f"gain.{name}" for name in QUANTITIES])
    with mp.workdps(DIGITS):
        for name in QUANTITIES:
            account = ledger[f"gain.{name}"]
            exact = under(frozenset(), bias)[name]
            truth = exact[int(name[1:]) - 1] if name[0] in "pz" else exact
            per = 2 * mp.pi if name in ("bandwidth", "unity_gain_frequency") else 1
            assert complex(account.exact or 0) == pytest.approx(complex(truth / per), rel=1e-11)
            wanted = slow_figures(4, cache(lambda made, name=name: error(name, made, bias)))
            assert complex(account.error or 0) == pytest.approx(
                complex(wanted[-1, "all"]), rel=1e-9, abs=1e-12
            )
            for k, share in enumerate(account.assumptions):
                for figure in ("alone", "added", "last", "share"):
                    found = share.figures[figure]
                    assert found is not None
                    assert complex(found) == pytest.approx(complex(wanted[k, figure]), rel=1e-8, abs=1e-11), (
                        name,
                        share.name,
                        figure,
                    )
