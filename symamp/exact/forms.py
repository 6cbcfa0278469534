"""The two forms of a response: written out in lowest terms (expanded), or its minor graph (nested)."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property
from typing import Any

import numpy as np
from flint import fmpq, fmpq_poly, fmpz_mpoly, fmpz_mpoly_ctx

from symamp.circuit.stage import Symbol
from symamp.exact.cofactors import Ratio, entry_symbols
from symamp.exact.ends import ends_cancel
from symamp.exact.graded import Coefficients, exact_in_limit, scaled_entries, walk_in_powers
from symamp.exact.hidden import without_hidden
from symamp.exact.minors import MinorGraph
from symamp.exact.polys import S, coefficients_of_s, inverted, lowest_terms, ring_of
from symamp.exact.skeleton import Skeleton, skeleton_of
from symamp.exact.tape import Tape, term_dict

Values = Mapping[str, np.ndarray | float]
EXPAND_LIMIT = 40_000  # product terms up to which a response is written out
_NESTED_BLOCK = 1024


@dataclass(frozen=True)
class Expanded:
    """numerator/denominator as coefficients of s, ascending: integer polynomials with nothing common left."""

    numerator: tuple[fmpz_mpoly, ...]
    denominator: tuple[fmpz_mpoly, ...]

    @property
    def context(self) -> fmpz_mpoly_ctx:
        return self.denominator[0].context()

    @property
    def terms(self) -> int:
        """How many product terms are written out in all."""
        return sum(len(c) for c in (*self.numerator, *self.denominator))

    @cached_property
    def _tape(self) -> Tape:
        return Tape([*self.numerator, *self.denominator])

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols that the written-out form holds."""
        names = self.context.names()
        held: set[str] = set()
        for polynomial in (*self.numerator, *self.denominator):
            held.update(name for name, degree in zip(names, polynomial.degrees(), strict=True) if degree > 0)
        return frozenset(held)

    def coefficients(self, values: Values, points: int) -> Coefficients:
        """Coefficients of s at `points` points."""
        arrays = self._tape(values, points)
        split = len(self.numerator)
        return Coefficients(np.array(arrays[:split]), np.array(arrays[split:]))

    def exact_coefficients(self, values: Mapping[str, Fraction]) -> tuple[fmpq_poly, fmpq_poly]:
        """Both polynomials in s with rational coefficients, at one bias point given exactly."""
        return (
            fmpq_poly([_exact_value(c, values) for c in self.numerator]),
            fmpq_poly([_exact_value(c, values) for c in self.denominator]),
        )


def _exact_value(polynomial: fmpz_mpoly, values: Mapping[str, Fraction]) -> fmpq:
    total = Fraction(0)
    for monomial, coefficient in term_dict(polynomial).items():
        product = Fraction(coefficient)
        for name, exponent in monomial:
            product *= values[name] ** exponent
        total += product
    return fmpq(total.numerator, total.denominator)


@dataclass(frozen=True)
class Nested:
    """The minor graph with a value rule for its symbols.

    `computed` gives symbols whose values are worked out from the others (in order), as an assumption may ask.
    """

    graph: MinorGraph
    scale: Fraction
    terms: int
    reactive: frozenset[str] = frozenset()
    computed: tuple[tuple[str, Callable[[Mapping[str, Any]], Any]], ...] = ()
    reference: Mapping[str, float] = field(default_factory=dict)

    keep: tuple[frozenset[int] | None, frozenset[int] | None] = (None, None)
    limits: Mapping[str, int] = field(default_factory=dict)
    valuation: tuple[int, int] = (0, 0)

    @property
    def plain(self) -> bool:
        """Whether the graph's value at a frequency is the response's: no limit taken, no power of s left out."""
        return self.keep == (None, None) and not self.limits

    @cached_property
    def skeleton(self) -> Skeleton:
        """Degrees, powers of s that vanish, and what numerator and denominator share, whatever the values."""
        return skeleton_of(self)

    @cached_property
    def ends_cancel(self) -> bool:
        """Whether the lowest or highest power of s in numerator or denominator vanishes by cancelling."""
        return ends_cancel(self.graph, self.skeleton)

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols whose values are needed: of computed ones those that their rules need."""
        held = set(entry_symbols(self.graph))
        for name, rule in self.computed:
            if name in held:
                held.discard(name)
                held.update(getattr(rule, "needs", ()))
        return frozenset(held)

    def full_values(self, values: Mapping[str, Any]) -> dict[str, Any]:
        """The values with all computed symbols worked out."""
        full = dict(values)
        for name, rule in self.computed:
            full[name] = rule(full)
        return full

    def coefficients(self, values: Values, points: int) -> Coefficients:
        """Coefficients of s/omega by the graph, in blocks; rows are scaled, which numerator and denominator share."""
        full = self.full_values(values)
        omega = self._omega(full)
        blocks_n, blocks_d = [], []
        for start in range(0, points, _NESTED_BLOCK):
            stop = min(points, start + _NESTED_BLOCK)
            block = {
                n: v[start:stop] if isinstance(v, np.ndarray) and v.ndim else v for n, v in full.items()
            }
            entries = scaled_entries(self.graph, block, omega, self.limits)
            n, d = walk_in_powers(self.graph, entries, stop - start, self.valuation)
            blocks_n.append(n)
            blocks_d.append(d)
        numerator = np.concatenate(blocks_n, axis=1) * float(self.scale)
        denominator = np.concatenate(blocks_d, axis=1)
        numerator, denominator = without_hidden(numerator, denominator, self.skeleton)
        # A coefficient that vanishes by cancelling comes from the graph as rounding noise, which would be a root.
        above, below = (
            frozenset(powers) if keep is None else keep
            for powers, keep in zip(self.skeleton.powers, self.keep, strict=True)
        )
        return Coefficients(_kept(numerator, above), _kept(denominator, below), omega)

    def at(self, s: np.ndarray, values: Values) -> np.ndarray:
        """The response at complex frequencies s; symbol values scalars or arrays that broadcast with s."""
        full = self.full_values(values)
        entries = []
        row_scale: dict[int, float] = {}
        raw = [_complex_entry(entry, full, s) for entry in self.graph.entries]
        for value, row in zip(raw, self.graph.entry_rows, strict=True):
            row_scale[row] = max(row_scale.get(row, 0.0), float(np.max(np.abs(value))))
        for value, row in zip(raw, self.graph.entry_rows, strict=True):
            entries.append(value / (row_scale[row] or 1.0))
        numerator, denominator = self.graph.walk(entries, 1.0, 0.0)
        return np.asarray(float(self.scale) * numerator / denominator)

    def exact_coefficients(self, values: Mapping[str, Fraction]) -> tuple[fmpq_poly, fmpq_poly]:
        """Both polynomials in s with rational coefficients, in lowest terms at this one bias point."""
        full = self.full_values(values)
        if self.limits:
            numerator, denominator = exact_in_limit(self.graph, full, self.limits, self.valuation)
        else:
            entries = [_rational_entry(entry, full) for entry in self.graph.entries]
            numerator, denominator = self.graph.walk(entries, fmpq_poly([1]), fmpq_poly([0]))
        numerator = numerator * fmpq(self.scale.numerator, self.scale.denominator)
        common = numerator.gcd(denominator)
        if common.degree() > 0:
            numerator, denominator = numerator / common, denominator / common
        if self.keep == (None, None):
            return numerator, denominator
        numerator, denominator = (
            p if keep is None else fmpq_poly([p[k] if k in keep else 0 for k in range(p.degree() + 1)])
            for p, keep in zip((numerator, denominator), self.keep, strict=True)
        )
        low = min((k for p in (numerator, denominator) for k in range(p.degree() + 1) if p[k] != 0), default=0)
        return numerator.right_shift(low), denominator.right_shift(low)

    def _omega(self, values: Mapping[str, Any]) -> float:
        """A frequency near which conductances and susceptances meet, so that coefficients neither vanish nor burst."""
        logs: dict[bool, list[float]] = {True: [], False: []}
        for name in entry_symbols(self.graph):
            value = np.abs(np.asarray(values[name], dtype=float)).ravel()
            if value.size and value[0] > 0:
                logs[name in self.reactive].append(float(np.log(value[0])))
        return 1e9 if not logs[True] else self._ratio(logs)

    @staticmethod
    def _ratio(logs: dict[bool, list[float]]) -> float:
        conductances = [-abs(x) for x in logs[False]] or [np.log(1e-3)]
        return float(np.exp(np.mean(conductances) - np.mean(logs[True])))


def _complex_entry(entry: Any, values: Mapping[str, Any], s: np.ndarray) -> Any:
    total: Any = 0.0
    for coefficient, symbol, power, s_power in entry:
        value: Any = coefficient
        if symbol is not None:
            value = value * values[symbol] if power > 0 else value / values[symbol]
        total = total + (value * s if s_power else value)
    return total


def _rational_entry(entry: Any, values: Mapping[str, Fraction]) -> fmpq_poly:
    powers = [Fraction(0), Fraction(0)]
    for coefficient, symbol, power, s_power in entry:
        powers[s_power] += coefficient * (values[symbol] ** power if symbol is not None else 1)
    return fmpq_poly([fmpq(p.numerator, p.denominator) for p in powers])


def _kept(coefficients: np.ndarray, powers: frozenset[int]) -> np.ndarray:
    """The coefficients with all powers but these made zero, and no more rows than needed."""
    rows = [k in powers for k in range(coefficients.shape[0])]
    kept = np.where(np.array(rows)[:, None], coefficients, 0.0)
    return kept[: max((k + 1 for k, keep in enumerate(rows) if keep), default=1)]


def write_out(ratio: Ratio, symbols: Mapping[str, Symbol], extra: tuple[str, ...] = ()) -> Expanded:
    """The graph written out in lowest terms. `extra` are generators beyond the stage's symbols (no unit, no value)."""
    numerator, denominator = raw_polynomials(ratio, symbols, extra)
    return expanded_of(*lowest_terms(numerator, denominator))


def expanded_of(numerator: fmpz_mpoly, denominator: fmpz_mpoly) -> Expanded:
    """The expanded form of a ratio that is in lowest terms."""
    return Expanded(coefficients_of_s(numerator), coefficients_of_s(denominator))


def raw_polynomials(
    ratio: Ratio, symbols: Mapping[str, Symbol], extra: tuple[str, ...] = ()
) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """Numerator and denominator as they come from the graph, common factors and all."""
    names = [name for name in entry_symbols(ratio.graph) if name not in extra]
    context = ring_of(symbols, names, extra)
    generator = dict(zip(context.names(), context.gens(), strict=True))
    entries = []
    inverse: set[str] = set()
    for entry in ratio.graph.entries:
        total = context.constant(0)
        for coefficient, symbol, power, s_power in entry:
            product = context.constant(coefficient)
            if symbol is not None:
                product *= generator[symbol]
                if power < 0:
                    inverse.add(symbol)
            total += product * generator[S] if s_power else product
        entries.append(total)
    numerator, denominator = ratio.graph.walk(entries, context.constant(1), context.constant(0))
    numerator, denominator = inverted(numerator, denominator, inverse)
    return numerator * ratio.scale.numerator, denominator * ratio.scale.denominator
