"""The ledger's figures the plain way: a Python loop over points and sets, with SymPy's lambdified coefficients."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import permutations
from typing import Any

import numpy as np
import sympy

from symamp.exact.response import Response


class Loop:
    """The responses under all sets; the first is the exact one. Called at a point it gives (sets, quantities).

    Quantities are dc, p1, p2, z1, bandwidth, unity-gain frequency; a root without a partner is nan.
    """

    def __init__(self, responses: Sequence[Response]) -> None:
        self._names = sorted(set().union(*(r.form.symbols for r in responses)))
        symbols = [sympy.Symbol(name, positive=True) for name in self._names]
        self._sets = [
            (
                sympy.lambdify(symbols, _renamed(r.numerator, symbols), modules="math"),
                sympy.lambdify(symbols, _renamed(r.denominator, symbols), modules="math"),
                r.apart,
            )
            for r in responses
        ]

    def __call__(self, point: Mapping[str, float]) -> np.ndarray:
        arguments = [point[name] for name in self._names]
        found = np.empty((len(self._sets), 6), dtype=complex)
        exact_poles = exact_zeros = np.empty(0)
        for k, (numerator, denominator, apart) in enumerate(self._sets):
            n, d = np.array(numerator(*arguments)[::-1]), np.array(denominator(*arguments)[::-1])
            zeros, poles = (_apart(n), _apart(d)) if apart else (np.roots(n), np.roots(d))
            if apart:
                n, d = n[0] * _monic(zeros), d[0] * _monic(poles)
            zeros, poles = zeros[np.argsort(np.abs(zeros))], poles[np.argsort(np.abs(poles))]
            if k == 0:
                exact_poles, exact_zeros = poles, zeros
            dc = n[-1] / d[-1]
            squares = _squared(n), _squared(d)
            found[k, 0] = dc
            found[k, 1:3] = _partners(exact_poles, poles)
            found[k, 3:4] = _partners(exact_zeros, zeros)
            found[k, 4] = _fall(*squares, dc * dc / 2)
            found[k, 5] = _fall(*squares, 1.0)
        return found


def _renamed(coefficients: Any, symbols: Sequence[Any]) -> list[Any]:
    """The coefficients in the loop's own symbols, whatever was assumed of the old ones."""
    own = {symbol.name: symbol for symbol in symbols}
    return [c.xreplace({old: own[old.name] for old in c.free_symbols}) for c in coefficients]


def _apart(c: np.ndarray) -> np.ndarray:
    """Roots as ratios of neighbouring coefficients; c descending."""
    return -c[1:] / c[:-1]


def _monic(roots: np.ndarray) -> np.ndarray:
    """The polynomial that has these roots, descending."""
    return np.atleast_1d(np.poly(roots))


def _squared(c: np.ndarray) -> np.ndarray:
    """|C(jω)|² as a polynomial in x = ω²; c and result descending."""
    signs = (-1.0) ** np.arange(c.size - 1, -1, -1)
    return np.polymul(c, c * signs)[::2] * signs


def _fall(above: np.ndarray, below: np.ndarray, level: float) -> float:
    """The lowest frequency in Hz at which |N|²/|D|² falls through the level; nan where it does not."""
    difference = np.polysub(above, level * below)
    x = np.roots(difference)
    x = np.sort(x.real[(np.abs(x.imag) < 1e-9 * np.abs(x.real)) & (x.real > 0)])
    falling = np.polyval(np.polyder(difference), x) < 0
    first = x[falling]
    return float(np.sqrt(first[0]) / (2 * np.pi)) if first.size else float("nan")


def _partners(exact: np.ndarray, roots: np.ndarray) -> np.ndarray:
    """For each exact root its partner, by the least sum of |log(a/e)|."""
    best, least = np.full(exact.size, np.nan, dtype=complex), np.inf
    padded = [*roots, *[None] * (exact.size - roots.size)]
    for way in permutations(padded, exact.size):
        cost = sum(abs(np.log(complex(a / e))) for a, e in zip(way, exact, strict=True) if a is not None)
        if cost < least:
            least, best = cost, np.array([np.nan if a is None else a for a in way], dtype=complex)
    return best
