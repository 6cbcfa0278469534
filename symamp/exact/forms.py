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
from symamp.errors import TooLargeError
from symamp.exact.cofactors import Ratio, entry_symbols
from symamp.exact.ends import ends_cancel
from symamp.exact.graded import Coefficients, exact_in_limit, scaled_entries, walk_in_powers
from symamp.exact.hidden import without_hidden
from symamp.exact.minors import MinorGraph
from symamp.exact.polys import S, coefficients_of_s, factors_in_s, held, inverted, lowest_terms, ring_of
from symamp.exact.skeleton import Skeleton, skeleton_of
from symamp.exact.tape import Tape, term_dict

Values = Mapping[str, np.ndarray | float]
Powers = tuple[tuple[int, ...], tuple[int, ...]]
EXPAND_LIMIT = 100_000  # product terms up to which a response is written out
WRITTEN_LIMIT = 12_000  # terms above which what was written out helps nobody, and the graph is quicker
_NESTED_BLOCK = 1024
_SMALL_WORK = 400_000  # products of terms that are tried, about half a second


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
    def powers(self) -> Powers:
        """The powers of s that numerator and denominator have, whatever the values."""
        above, below = (
            tuple(k for k, c in enumerate(row) if not c.is_zero())
            for row in (self.numerator, self.denominator)
        )
        return above, below

    @cached_property
    def _tape(self) -> Tape:
        return Tape([*self.numerator, *self.denominator])

    @cached_property
    def factors(self) -> tuple[list[tuple[fmpz_mpoly, ...]], list[tuple[fmpz_mpoly, ...]]]:
        """The factors in s of numerator and denominator (see `factors_in_s`)."""
        return factors_in_s(self.numerator), factors_in_s(self.denominator)

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols that the written-out form holds."""
        return frozenset(held(*self.numerator, *self.denominator))

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
    powers: dict[tuple[str, int], fmpq] = {}
    total = fmpq(0)
    for monomial, coefficient in term_dict(polynomial).items():
        product = fmpq(coefficient)
        for factor in monomial:
            if factor not in powers:
                value = values[factor[0]] ** factor[1]
                powers[factor] = fmpq(value.numerator, value.denominator)
            product *= powers[factor]
        total += product
    return total


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
    def powers(self) -> Powers:
        """The powers of s that numerator and denominator have, whatever the values."""
        above, below = (
            tuple(k for k in powers if keep is None or k in keep)
            for powers, keep in zip(self.skeleton.powers, self.keep, strict=True)
        )
        return above, below

    @cached_property
    def ends_cancel(self) -> bool:
        """Whether the lowest or highest power of s in numerator or denominator vanishes by cancelling."""
        return ends_cancel(self.graph, self.skeleton)

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols whose values are needed: of computed ones those that their rules need."""
        needed = set(entry_symbols(self.graph))
        for name, rule in self.computed:
            if name in needed:
                needed.discard(name)
                needed.update(getattr(rule, "needs", ()))
        return frozenset(needed)

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
            block = {n: v[start:stop] if isinstance(v, np.ndarray) and v.ndim else v for n, v in full.items()}
            entries = scaled_entries(self.graph, block, omega, self.limits)
            n, d = walk_in_powers(self.graph, entries, stop - start, self.valuation)
            blocks_n.append(n)
            blocks_d.append(d)
        numerator = np.concatenate(blocks_n, axis=1) * float(self.scale)
        denominator = np.concatenate(blocks_d, axis=1)
        numerator, denominator = without_hidden(numerator, denominator, self.skeleton)
        # A coefficient that vanishes by cancelling comes from the graph as rounding noise, which would be a root.
        above, below = self.powers
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
        """Both polynomials in s with rational coefficients, without what they share whatever the values."""
        full = self.full_values(values)
        if self.limits:
            numerator, denominator = exact_in_limit(self.graph, full, self.limits, self.valuation)
        else:
            entries = [_rational_entry(entry, full) for entry in self.graph.entries]
            numerator, denominator = self.graph.walk(entries, fmpq_poly([1]), fmpq_poly([0]))
        numerator = numerator * fmpq(self.scale.numerator, self.scale.denominator)
        # What cancels whatever the values is divided out; what cancels at this point alone stays, as elsewhere.
        if self.skeleton.low + self.skeleton.common > 0:
            common = numerator.gcd(denominator)
            numerator, denominator = numerator / common, denominator / common
        if self.keep == (None, None):
            return numerator, denominator
        numerator, denominator = (
            p if keep is None else fmpq_poly([p[k] if k in keep else 0 for k in range(p.degree() + 1)])
            for p, keep in zip((numerator, denominator), self.keep, strict=True)
        )
        low = min(
            (k for p in (numerator, denominator) for k in range(p.degree() + 1) if p[k] != 0), default=0
        )
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


def _kept(coefficients: np.ndarray, powers: tuple[int, ...]) -> np.ndarray:
    """The coefficients with all powers but these made zero, and no more rows than needed."""
    rows = [k in powers for k in range(coefficients.shape[0])]
    kept = np.where(np.array(rows)[:, None], coefficients, 0.0)
    return kept[: max((k + 1 for k, keep in enumerate(rows) if keep), default=1)]


def write_out(ratio: Ratio, symbols: Mapping[str, Symbol]) -> Expanded:
    """The graph written out in lowest terms."""
    numerator, denominator = raw_polynomials(ratio, symbols)
    return expanded_of(*lowest_terms(numerator, denominator))


def write_out_small(
    ratio: Ratio, symbols: Mapping[str, Symbol], rename: Mapping[str, str] | None = None
) -> Expanded | None:
    """The graph written out where that is small, with symbols made one with others; else None.

    Where symbols are made one, the graph's count of product terms says little: most of them are alike.
    """
    try:
        numerator, denominator = raw_polynomials(ratio, symbols, rename, _SMALL_WORK if rename else None)
    except TooLargeError:
        return None
    if len(numerator) + len(denominator) > WRITTEN_LIMIT:
        return None
    return expanded_of(*lowest_terms(numerator, denominator))


def expanded_of(numerator: fmpz_mpoly, denominator: fmpz_mpoly) -> Expanded:
    """The expanded form of a ratio that is in lowest terms."""
    return Expanded(coefficients_of_s(numerator), coefficients_of_s(denominator))


def raw_polynomials(
    ratio: Ratio,
    symbols: Mapping[str, Symbol],
    rename: Mapping[str, str] | None = None,
    work: int | None = None,
) -> tuple[fmpz_mpoly, fmpz_mpoly]:
    """Numerator and denominator as they come from the graph, common factors and all.

    `rename` makes symbols one with others. Raises TooLargeError after `work` products of terms.
    """
    named = {name: (rename or {}).get(name, name) for name in entry_symbols(ratio.graph)}
    context = ring_of(symbols, named.values())
    generator = dict(zip(context.names(), context.gens(), strict=True))
    entries = []
    inverse: set[str] = set()
    for entry in ratio.graph.entries:
        total = context.constant(0)
        for coefficient, symbol, power, s_power in entry:
            product = context.constant(coefficient)
            if symbol is not None:
                product *= generator[named[symbol]]
                if power < 0:
                    inverse.add(named[symbol])
            total += product * generator[S] if s_power else product
        entries.append(total)
    one, zero = context.constant(1), context.constant(0)
    numerator, denominator = ratio.graph.walk(entries, one, zero, _meter(work))
    numerator, denominator = inverted(numerator, denominator, inverse)
    return numerator * ratio.scale.numerator, denominator * ratio.scale.denominator


def _meter(work: int | None) -> Callable[[Any, Any], None] | None:
    """Counts products of terms, and stops when there have been too many."""
    if work is None:
        return None
    spent = 0

    def count(entry: Any, minor: Any) -> None:
        nonlocal spent
        spent += len(entry) * len(minor)
        if spent > work:
            raise TooLargeError(f"more than {work:,} products of terms")

    return count
