"""Many polynomials at many bias points at once: a tape of numpy operations, each shared sum worked out once.

A polynomial is factored and then nested (the symbol that most terms share is taken out first), as one would
write it by hand; equal sub-sums of all polynomials become one. Points are taken in blocks that stay in cache.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence

import numpy as np
from flint import fmpz_mpoly

BLOCK = 8192
_FACTOR_LIMIT = 300  # terms above which factoring costs more than it saves

Monomial = tuple[tuple[str, int], ...]
_Terms = dict[Monomial, int]
# An operation: (code, result, first, second); code "+", "-", "*" on slots, "#" loads a constant, "@" a symbol.
_Op = tuple[str, int, int, int]


def term_dict(polynomial: fmpz_mpoly) -> _Terms:
    """Terms as {((symbol, exponent), …): coefficient}."""
    names = polynomial.context().names()
    return {
        tuple((names[i], int(e)) for i, e in enumerate(exponents) if e): int(coefficient)
        for exponents, coefficient in polynomial.terms()
    }


def term_value(monomial: Monomial, coefficient: int, values: Mapping[str, float]) -> float:
    """A term's value at one bias point."""
    product = float(coefficient)
    for name, exponent in monomial:
        product *= values[name] ** exponent
    return product


def polynomial_value(polynomial: fmpz_mpoly, values: Mapping[str, float]) -> float:
    """A polynomial's value at one bias point, term by term: for one point a tape would not pay."""
    return sum((term_value(m, c, values) for m, c in term_dict(polynomial).items()), start=0.0)


def largest_term(polynomial: fmpz_mpoly, values: Mapping[str, float]) -> fmpz_mpoly:
    """The term that is largest in magnitude at a bias point."""
    context = polynomial.context()
    names = context.names()
    powers, coefficient = max(
        polynomial.terms(),
        key=lambda term: abs(
            term_value(tuple((names[i], int(e)) for i, e in enumerate(term[0]) if e), int(term[1]), values)
        ),
    )
    return context.from_dict({powers: coefficient})


class Tape:
    """Compiled polynomials. `tape(values)` gives one float64 array of shape (P,) for each of them."""

    def __init__(self, polynomials: Sequence[fmpz_mpoly]) -> None:
        self._ops: list[tuple[str, int, int]] = []
        self._known: dict[object, int] = {}
        self._constants: list[float] = []
        self._symbols: list[str] = []
        self._outputs = [self._polynomial(polynomial) for polynomial in polynomials]
        self._schedule()
        self._known.clear()  # of use while building alone, and large

    @property
    def symbols(self) -> tuple[str, ...]:
        """The symbols whose values are needed."""
        return tuple(self._symbols)

    def __call__(self, values: Mapping[str, np.ndarray | float], points: int) -> list[np.ndarray]:
        """Values of all polynomials at `points` points; each symbol is a scalar or an array of shape (points,)."""
        results = [np.empty(points) for _ in self._outputs]
        registers = [np.empty(min(BLOCK, points)) for _ in range(self._registers)]
        for start in range(0, points, BLOCK):
            stop = min(points, start + BLOCK)
            self._block(values, start, stop, registers, results)
        return results

    def _block(
        self,
        values: Mapping[str, np.ndarray | float],
        start: int,
        stop: int,
        registers: list[np.ndarray],
        results: list[np.ndarray],
    ) -> None:
        count = stop - start
        slots: list[np.ndarray | float] = []
        for constant in self._constants:
            slots.append(constant)
        for name in self._symbols:
            value = values[name]
            slots.append(value[start:stop] if isinstance(value, np.ndarray) and value.ndim else float(value))
        views = [register[:count] for register in registers]
        slots.extend(views)
        for code, out, a, b in self._program:
            target = views[out]
            if code == "*":
                np.multiply(slots[a], slots[b], out=target)
            elif code == "+":
                np.add(slots[a], slots[b], out=target)
            else:
                np.subtract(slots[a], slots[b], out=target)
        for result, source in zip(results, self._sources, strict=False):
            result[start:stop] = slots[source]

    # Building: a node is an index into `_ops`, or a leaf.

    def _op(self, code: str, a: int, b: int) -> int:
        if code in "+*" and b < a:
            a, b = b, a
        key = (code, a, b)
        if key not in self._known:
            self._known[key] = len(self._ops)
            self._ops.append(key)
        return self._known[key]

    def _constant(self, value: int) -> int:
        key = ("#", value)
        if key not in self._known:
            self._known[key] = len(self._ops)
            self._ops.append(("#", len(self._constants), 0))
            self._constants.append(float(value))
        return self._known[key]

    def _symbol(self, name: str) -> int:
        key = ("@", name)
        if key not in self._known:
            self._known[key] = len(self._ops)
            self._ops.append(("@", len(self._symbols), 0))
            self._symbols.append(name)
        return self._known[key]

    def _polynomial(self, polynomial: fmpz_mpoly) -> int:
        if not 1 < len(polynomial) <= _FACTOR_LIMIT:
            return self._sum(term_dict(polynomial))
        content, factors = polynomial.factor()
        node = None if content == 1 else self._constant(int(content))
        for factor, power in factors:
            part = self._sum(term_dict(factor))
            for _ in range(power):
                node = part if node is None else self._op("*", node, part)
        assert node is not None
        return node

    def _sum(self, terms: _Terms) -> int:
        if not terms:
            return self._constant(0)
        key = frozenset(terms.items())
        if key not in self._known:
            self._known[key] = self._nest(terms)
        return self._known[key]

    def _nest(self, terms: _Terms) -> int:
        if len(terms) == 1:
            ((monomial, coefficient),) = terms.items()
            return self._product(monomial, coefficient)
        counts = Counter(name for monomial in terms for name, _ in monomial)
        name, most = max(counts.items(), key=lambda item: (item[1], item[0])) if counts else ("", 0)
        if most < 2:
            return self._plain_sum(terms)
        inside = {_divided(m, name): c for m, c in terms.items() if any(n == name for n, _ in m)}
        outside = {m: c for m, c in terms.items() if all(n != name for n, _ in m)}
        product = self._op("*", self._symbol(name), self._sum(inside))
        if not outside:
            return product
        return self._op("+", product, self._sum(outside))

    def _plain_sum(self, terms: _Terms) -> int:
        positive = [self._product(m, c) for m, c in sorted(terms.items()) if c > 0]
        negative = [self._product(m, -c) for m, c in sorted(terms.items()) if c < 0]
        node = positive[0] if positive else self._constant(0)
        for other in positive[1:]:
            node = self._op("+", node, other)
        for other in negative:
            node = self._op("-", node, other)
        return node

    def _product(self, monomial: Monomial, coefficient: int) -> int:
        node = None
        for name, exponent in monomial:
            for _ in range(exponent):
                symbol = self._symbol(name)
                node = symbol if node is None else self._op("*", node, symbol)
        if node is None:
            return self._constant(coefficient)
        return node if coefficient == 1 else self._op("*", self._constant(coefficient), node)

    def _schedule(self) -> None:
        """Give each operation a register, free again after its last use."""
        leaves = {"#": 0, "@": len(self._constants)}
        fixed = len(self._constants) + len(self._symbols)
        last: dict[int, int] = {}
        for i, (code, a, b) in enumerate(self._ops):
            if code not in leaves:
                last[a] = last[b] = i
        for node in self._outputs:
            last[node] = len(self._ops)
        place: dict[int, int] = {}
        free: list[int] = []
        self._registers = 0
        program: list[_Op] = []
        for i, (code, a, b) in enumerate(self._ops):
            if code in leaves:
                place[i] = leaves[code] + a
                continue
            sources = place[a], place[b]
            for node in {a, b}:
                if last[node] == i and self._ops[node][0] not in leaves:
                    free.append(place[node] - fixed)
            if i not in last:
                continue
            if free:
                register = free.pop()
            else:
                register = self._registers
                self._registers += 1
            place[i] = fixed + register
            program.append((code, register, *sources))
        self._program = program
        self._sources = [place[node] for node in self._outputs]


def _divided(monomial: Monomial, name: str) -> Monomial:
    return tuple((n, e - (n == name)) for n, e in monomial if n != name or e > 1)
