"""How the minor graph gets the values of symbols that assumptions have changed: steps 1 to 3 by value.

A rule takes the values of all symbols: fractions, floats, arrays over points, or residues modulo a prime.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np
from flint import nmod

from symamp.assumptions.algebra import PolyRatio
from symamp.assumptions.bridge import Half
from symamp.assumptions.rewrite import symbols_in
from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE
from symamp.exact.forms import Expanded, Nested
from symamp.exact.graded import PRIME
from symamp.exact.skeleton import images_with
from symamp.exact.tape import Monomial, term_dict

Numbers = Mapping[str, Any]


class ValueRule:
    """A symbol's value as a ratio of polynomials in symbols that no assumption has changed."""

    def __init__(self, ratio: PolyRatio) -> None:
        self._above, self._below = (term_dict(p) for p in ratio)
        self.needs = tuple(symbols_in(*ratio))

    def __call__(self, values: Numbers) -> Any:
        return _worth(self._above, values) / _worth(self._below, values)


class GainRule:
    """The value of a bridge's half: the bridge times 1 − A or 1 − 1/A, A = V(to)/V(from) at s = 0."""

    def __init__(self, half: Half, nature: str, bridge: ValueRule, gain: Nested | Expanded) -> None:
        self._at_start, self._nature, self._bridge, self._gain = half.at_start, nature, bridge, gain
        self.needs = tuple(dict.fromkeys((*bridge.needs, *sorted(gain.symbols))))

    def __call__(self, values: Numbers) -> Any:
        above, below = self._gain_at_dc(values)
        factor = (below - above) / below if self._at_start else (above - below) / above
        bridge = self._bridge(values)
        if self._nature == CAPACITANCE:
            return bridge * factor
        # The half of a conductance is a resistor.
        return 1 / (bridge * factor) if self._nature == CONDUCTANCE else bridge / factor

    def _gain_at_dc(self, values: Numbers) -> tuple[Any, Any]:
        gain = self._gain
        sample = next(iter(values.values()))
        if isinstance(sample, nmod):
            if isinstance(gain, Expanded):
                rows = (gain.numerator[0], gain.denominator[0])
                return _worth(term_dict(rows[0]), values), _worth(term_dict(rows[1]), values)
            above, below = images_with(gain, {n: int(v) for n, v in gain.full_values(values).items()})
            return above[gain.skeleton.low], below[gain.skeleton.low]
        if isinstance(sample, Fraction):
            # What both share whatever the values is gone, so that nothing common is left at s = 0.
            exact = gain.exact_coefficients(values)
            return tuple(Fraction(int(p[0].p), int(p[0].q)) for p in exact)  # type: ignore[return-value]
        points = max((v.size for v in values.values() if isinstance(v, np.ndarray) and v.ndim), default=1)
        found = gain.coefficients(values, points)
        both = found.numerator[0], found.denominator[0]
        return both if points > 1 else (float(both[0][0]), float(both[1][0]))


Rule = ValueRule | GainRule


def _worth(terms: Mapping[Monomial, int], values: Numbers) -> Any:
    """The value of a polynomial."""
    total: Any = 0
    for monomial, coefficient in terms.items():
        product: Any = coefficient
        for name, exponent in monomial:
            product = product * values[name] ** exponent
        total = total + product
    return total if not isinstance(total, int) else _number(total, next(iter(values.values()), 0.0))


def _number(value: int, like: Any) -> Any:
    """A pure number as what the values are."""
    if isinstance(like, nmod):
        return nmod(value, PRIME)
    return Fraction(value) if isinstance(like, Fraction) else float(value)
