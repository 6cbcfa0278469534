"""Two expressions compared: exactly where both are rational, else in 50 digits (room: testing)."""

from __future__ import annotations

import random
from collections import defaultdict
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import pi
from typing import Any

import mpmath
from flint import fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Stage
from symamp.exact.polys import into_ring, lowest_terms
from symamp.exact.shape import Shape, shape_of
from symamp.exact.tape import largest_term, term_dict
from symamp.formula import Node, fold, names
from symamp.judge.balance import PI
from symamp.judge.claimed import NotRational, claimed_ratio, claims_ring
from symamp.testing.bias_point import BiasPoint
from symamp.testing.drawing import Pick, loose_point, sensible_point, span_point
from symamp.testing.expressions import S
from symamp.testing.searching import simplest

PolyRatio = tuple[fmpz_mpoly, fmpz_mpoly]
_Place = tuple[BiasPoint, float | None]

DIGITS = 50
_ALIKE = mpmath.mpf(10) ** -35  # relative; what is equal agrees to some 45 digits
_POINTS = 25
_SEED = 20011
_GAPS = (1e-3, 1e-6, 0.0)  # relative: a difference that one can see is looked for first
_FREQUENCIES = (0.0, 1e6, 1e3, 1e9, 1e5, 1e7, 1e4, 1e8, 1e2, 1e10, 1e1, 1.0)  # Hz, the simplest first


@dataclass(frozen=True)
class Difference:
    """Where two expressions differ: the bias point, the frequency in Hz (None where no s is in them), the values."""

    point: BiasPoint
    hz: float | None
    first: complex
    second: complex


@dataclass(frozen=True)
class Comparison:
    """Two expressions over one stage: a tree, and another tree or a ratio of polynomials."""

    stage: Stage
    first: Node
    second: Node | PolyRatio

    @cached_property
    def _names(self) -> set[str]:
        """The symbols that are in either, aliases resolved, and s where it is."""
        found: set[str] = set()
        for side in (self.first, self.second):
            if isinstance(side, tuple):
                found |= {name for polynomial in side for name in _generators(polynomial)} - {PI}
            else:
                found |= {n for name in names(side) for n in self.stage.aliases.get(name, {name: 1})}
        return found

    @cached_property
    def ratios(self) -> tuple[PolyRatio, PolyRatio] | None:
        """Both as ratios of polynomials in one ring; None where one of them is none."""
        context = claims_ring(self.stage, self._names - {S})
        try:
            first, second = (self._ratio(side, context) for side in (self.first, self.second))
        except NotRational:
            return None
        return first, second

    def _ratio(self, side: Node | PolyRatio, context: fmpz_mpoly_ctx) -> PolyRatio:
        if isinstance(side, tuple):
            return into_ring(side[0], context), into_ring(side[1], context)
        return claimed_ratio(self.stage, side, context)

    @cached_property
    def equal(self) -> bool:
        """Whether they are equal: proved where both are rational, else in 35 digits at random values.

        What has no value anywhere equals nothing.
        """
        if self.ratios is None:
            pairs = [self.at(values) for values in self._random_values()]
            return all(_finite(*pair) and _gap(*pair) <= _ALIKE for pair in pairs)
        (a, b), (c, d) = self.ratios
        return bool(a * d == c * b)

    @property
    def off(self) -> tuple[Shape, Shape | None] | None:
        """first/second − 1 and its leading term; None where they are not rational, or the second is 0.

        Which term leads at the bias point hangs on the frequency where s is in it: then it is None.
        """
        if self.ratios is None or self.ratios[1][0].is_zero():
            return None
        (a, b), (c, d) = self.ratios
        above, below = lowest_terms(a * d - c * b, c * b)
        values = defaultdict(lambda: 1.0, self._bias)
        whole = shape_of(above, below, weights=self._bias)
        if S in self._names:
            return whole, None
        return whole, shape_of(*lowest_terms(largest_term(above, values), largest_term(below, values)))

    @property
    def factor(self) -> Shape | None:
        """first/second where that is a number or one term over another; else None."""
        if self.ratios is None or self.ratios[1][0].is_zero() or self.ratios[0][0].is_zero():
            return None
        (a, b), (c, d) = self.ratios
        above, below = lowest_terms(a * d, c * b)
        return shape_of(above, below) if len(above) == len(below) == 1 else None

    @property
    def _bias(self) -> dict[str, float]:
        return {**{n: float(x) for n, x in self.stage.bias.items()}, PI: pi, S: 1.0}

    def at(self, values: Mapping[str, Any]) -> tuple[Any, Any]:
        """Both at values of the symbols (and of s), in DIGITS digits; nan where a formula has no value."""
        with mpmath.workdps(DIGITS):
            first, second = (_value(self.stage, side, values) for side in (self.first, self.second))
            return first, second

    def _random_values(self) -> list[dict[str, Any]]:
        """Positive values without pattern, so that no two symbols are alike by chance."""
        draw = random.Random(_SEED)
        with mpmath.workdps(DIGITS):
            return [
                {name: mpmath.mpf(draw.getrandbits(160) + 1) / 2**158 for name in sorted(self._names)}
                for _ in range(_POINTS)
            ]

    def difference(self) -> Difference | None:
        """A bias point, and a frequency, where the two differ, with as few changes from the bias as will do.

        None where none is found: two expressions may be unlike and as good as equal at all that is tried.
        """
        chosen = self._names - {S}
        frequencies = _FREQUENCIES if S in self._names else (None,)

        # The frequency is picked first, so that it is moved before the bias point is.
        def in_span(pick: Pick) -> _Place:
            hz = pick(frequencies)
            return span_point(pick, self.stage, chosen), hz

        def anywhere(pick: Pick) -> _Place:
            hz = pick(frequencies)
            return sensible_point(pick, self.stage), hz

        def beyond_sense(pick: Pick) -> _Place:
            hz = pick(frequencies)
            return loose_point(pick, self.stage, chosen), hz

        for make in (in_span, anywhere, beyond_sense):
            for least in _GAPS:
                found = simplest(make, self._differs(least))
                if found is not None:
                    first, second = (complex(x) for x in self.at(self._values(*found)))
                    return Difference(*found, first, second)
        return None

    def _differs(self, least: float) -> Callable[[_Place], bool]:
        return lambda place: bool(self._gap_at(place) > max(least, _ALIKE))

    def _gap_at(self, place: _Place) -> Any:
        """The gap at a place, worked out once: three sizes of gap are looked for at the same places."""
        key = (tuple(place[0].values()), place[1])
        if key not in self._gaps:
            self._gaps[key] = _gap(*self.at(self._values(*place)))
        return self._gaps[key]

    @cached_property
    def _gaps(self) -> dict[Any, Any]:
        return {}

    @staticmethod
    def _values(point: BiasPoint, hz: float | None) -> dict[str, Any]:
        with mpmath.workdps(DIGITS):
            values = {n: mpmath.mpf(x.numerator) / x.denominator for n, x in point.exact().items()}
            if hz is not None:
                values[S] = mpmath.mpc(0, 2 * mpmath.pi * hz)
            return values


def _finite(*values: Any) -> bool:
    return all(bool(mpmath.isfinite(x)) for x in values)


def _gap(first: Any, second: Any) -> Any:
    """|first − second| over the larger; 1 where one of the two alone has a value, 0 where neither has."""
    with mpmath.workdps(DIGITS):
        if not _finite(first, second):
            return mpmath.mpf(_finite(first) != _finite(second))
        size = max(abs(first), abs(second))
        return abs(first - second) / size if size else mpmath.mpf(0)


def _value(stage: Stage, side: Node | PolyRatio, values: Mapping[str, Any]) -> Any:
    try:
        if not isinstance(side, tuple):
            return fold(side, _Digits(stage, values))
        above, below = (_polynomial_value(polynomial, values) for polynomial in side)
        return above / below
    except ZeroDivisionError:
        return mpmath.nan


def _generators(polynomial: fmpz_mpoly) -> set[str]:
    rows = zip(polynomial.context().names(), polynomial.degrees(), strict=True)
    return {name for name, degree in rows if degree > 0}


def _polynomial_value(polynomial: fmpz_mpoly, values: Mapping[str, Any]) -> Any:
    total = mpmath.mpf(0)
    for monomial, coefficient in term_dict(polynomial).items():
        product = mpmath.mpf(coefficient)
        for name, exponent in monomial:
            product *= (+mpmath.pi if name == PI else values[name]) ** exponent
        total += product
    return total


class _Digits:
    """mpmath's numbers, for formulas; complex where s or the root of a negative number makes them so."""

    def __init__(self, stage: Stage, values: Mapping[str, Any]) -> None:
        self.stage, self.values = stage, values

    def number(self, value: Fraction, unit: str) -> Any:
        return mpmath.mpf(value.numerator) / value.denominator

    def pi(self) -> Any:
        return +mpmath.pi

    def name(self, text: str) -> Any:
        if text == S:
            return self.values[S]
        product = mpmath.mpf(1)
        for symbol, power in self.stage.aliases.get(text, {text: 1}).items():
            product *= self.values[symbol] ** power
        return product

    def add(self, a: Any, b: Any) -> Any:
        return a + b

    def subtract(self, a: Any, b: Any) -> Any:
        return a - b

    def multiply(self, a: Any, b: Any) -> Any:
        return a * b

    def divide(self, a: Any, b: Any) -> Any:
        return a / b

    def power(self, base: Any, exponent: Fraction) -> Any:
        if exponent.denominator == 1:
            return base**exponent.numerator
        return mpmath.power(base, mpmath.mpf(exponent.numerator) / exponent.denominator)

    def parallel(self, a: Any, b: Any) -> Any:
        return a * b / (a + b)

    def negate(self, a: Any) -> Any:
        return -a

    def call(self, function: str, argument: Any) -> Any:
        return mpmath.sqrt(argument) if function == "sqrt" else abs(argument)
