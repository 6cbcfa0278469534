"""Room `span`: polynomials over a box as nested sums with their gradient, in interval arithmetic with balls for ends.

For polynomials whose Bernstein coefficients would be too many. Gradients are worked out backwards through the sums
(A. Griewank and A. Walther, "Evaluating Derivatives", SIAM 2008). A side along which the ratio is monotone is fixed
at an end, and the mean value form is taken besides the plain one: R. E. Moore, R. B. Kearfott and M. J. Cloud,
"Introduction to Interval Analysis", SIAM 2009, chapter 6. (Sources from memory.)

An interval is a pair of balls; the first one's lower end and the second one's upper end are the bounds.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from flint import arb, fmpz, fmpz_mpoly

from symamp.span.bernstein import ball
from symamp.span.boxes import Interval, split_part
from symamp.span.monotone import factored
from symamp.span.pieces import Piece, Point, Ratio

Balls = tuple[arb, arb]
_Terms = dict[tuple[int, ...], fmpz]


def product(a: Balls, b: Balls) -> Balls:
    """All products of a number of one interval and a number of the other."""
    if a[0] >= 0:
        return (
            a[0] * b[0] if b[0] >= 0 else a[1] * b[0],
            a[0] * b[1] if b[1] <= 0 else a[1] * b[1],
        )
    if a[1] <= 0:
        low, high = product((-a[1], -a[0]), b)
        return -high, -low
    if b[0] >= 0 or b[1] <= 0:
        return product(b, a)
    return (a[0] * b[1]).min(a[1] * b[0]), (a[0] * b[0]).max(a[1] * b[1])


def quotient(a: Balls, b: Balls) -> Balls:
    """All quotients; b lies above 0."""
    return (a[0] / (b[1] if a[0] >= 0 else b[0]), a[1] / (b[1] if a[1] <= 0 else b[0]))


class Program:
    """A polynomial as additions and multiplications, the generator that most terms share taken out first."""

    def __init__(self, polynomial: fmpz_mpoly) -> None:
        self._generators = polynomial.context().nvars()
        self._ops: list[tuple[str, int, int]] = []
        self._constants: list[arb] = []
        self._known: dict[object, int] = {}
        self._out = self._polynomial(polynomial)
        self._known.clear()

    @property
    def length(self) -> int:
        """How many operations there are."""
        return len(self._ops)

    def at(self, point: Sequence[arb]) -> arb:
        """The value at a point."""
        values: list[arb] = []
        for code, a, b in self._ops:
            if code == "#":
                values.append(self._constants[a])
            elif code == "@":
                values.append(point[a])
            else:
                values.append(values[a] * values[b] if code == "*" else values[a] + values[b])
        return values[self._out]

    def over(self, box: Sequence[Balls]) -> tuple[Balls, list[Balls]]:
        """The value and its derivative with respect to each generator, over a box."""
        values: list[Balls] = []
        for code, a, b in self._ops:
            if code == "#":
                values.append((self._constants[a], self._constants[a]))
            elif code == "@":
                values.append(box[a])
            elif code == "*":
                values.append(product(values[a], values[b]))
            else:
                values.append((values[a][0] + values[b][0], values[a][1] + values[b][1]))
        return values[self._out], self._gradient(values)

    def _gradient(self, values: Sequence[Balls]) -> list[Balls]:
        zero = arb(0), arb(0)
        weights: list[Balls] = [zero] * len(self._ops)
        weights[self._out] = arb(1), arb(1)
        gradient = [zero] * self._generators
        for i in range(len(self._ops) - 1, -1, -1):
            code, a, b = self._ops[i]
            weight = weights[i]
            if code == "@":
                gradient[a] = weight
            elif code == "+":
                weights[a] = weights[a][0] + weight[0], weights[a][1] + weight[1]
                weights[b] = weights[b][0] + weight[0], weights[b][1] + weight[1]
            elif code == "*":
                for one, other in ((a, b), (b, a)):
                    part = product(weight, values[other])
                    weights[one] = weights[one][0] + part[0], weights[one][1] + part[1]
        return gradient

    def _op(self, code: str, a: int, b: int) -> int:
        key = (code, min(a, b), max(a, b)) if code in "+*" else (code, a, b)
        if key not in self._known:
            self._known[key] = len(self._ops)
            self._ops.append(key)
        return self._known[key]

    def _constant(self, value: fmpz) -> int:
        key = ("#", int(value))
        if key not in self._known:
            self._constants.append(arb(value))
            self._known[key] = self._op("#", len(self._constants) - 1, 0)
        return self._known[key]

    def _polynomial(self, polynomial: fmpz_mpoly) -> int:
        found = factored(polynomial)
        if found is None:
            return self._sum(_terms(polynomial))
        node = self._constant(found[0])
        for factor, power in found[1]:
            part = self._sum(_terms(factor))
            for _ in range(power):
                node = self._op("*", node, part)
        return node

    def _sum(self, terms: _Terms) -> int:
        if not terms:
            return self._constant(fmpz(0))
        key = frozenset((exponents, int(c)) for exponents, c in terms.items())
        if key not in self._known:
            self._known[key] = self._nest(terms)
        return self._known[key]

    def _nest(self, terms: _Terms) -> int:
        counts = Counter(i for exponents in terms for i, e in enumerate(exponents) if e)
        if not counts:
            return self._constant(next(iter(terms.values())))
        i = max(counts, key=lambda g: (counts[g], -g))
        inside = {(*e[:i], e[i] - 1, *e[i + 1 :]): c for e, c in terms.items() if e[i]}
        outside = {e: c for e, c in terms.items() if not e[i]}
        node = self._op("*", self._op("@", i, 0), self._sum(inside))
        return self._op("+", node, self._sum(outside)) if outside else node


def _terms(polynomial: fmpz_mpoly) -> _Terms:
    return {tuple(int(e) for e in exponents): c for exponents, c in polynomial.terms()}


class NestedPiece:
    """A piece that is known by nested sums over it."""

    def __init__(
        self, ratio: Ratio, box: tuple[Interval, ...], programs: tuple[Program, Program] | None = None
    ) -> None:
        self._ratio, self._box = ratio, box
        self._above, self._below = programs or (Program(ratio.above), Program(ratio.below))
        self.upper: arb | None = None
        self.best: arb | None = None
        self.at: Point = tuple(low for low, _ in box)
        self.sign, self.vanishes = 0, False
        self._effects = [0.0] * len(box)
        self._looks = 1
        while self._look():
            self._looks += 1

    @property
    def size(self) -> int:
        return 0

    @property
    def work(self) -> int:
        return 16 * self._looks * (self._above.length + self._below.length)

    def forget(self) -> None:
        """Nothing is held."""

    def _look(self) -> bool:
        """Bound the ratio; True where sides could be fixed, so that another look will find more."""
        balls = [(ball(low), ball(high)) for low, high in self._box]
        below, below_slopes = self._below.over(balls)
        self.sign = 1 if below[0] > 0 else -1 if below[1] < 0 else 0
        if not self.sign:
            self._look_for_zero()
            return False
        above, above_slopes = self._above.over(balls)
        if self.sign < 0:
            above, below = (-above[1], -above[0]), (-below[1], -below[0])
            above_slopes, below_slopes = (
                [(-high, -low) for low, high in each] for each in (above_slopes, below_slopes)
            )
        plain = quotient(above, below)
        slopes = []
        for n, d in zip(above_slopes, below_slopes, strict=False):
            low, high = product(plain, d)
            slopes.append(quotient((n[0] - high, n[1] - low), below))
        if self._fix(slopes):
            return True
        self._bound(plain[1], slopes)
        return False

    def _fix(self, slopes: Sequence[Balls]) -> bool:
        """Fix the sides along which the ratio is monotone at their best ends."""
        box = list(self._box)
        for i, (low, high) in enumerate(self._box):
            if low < high and slopes[i][0] >= 0:
                box[i] = high, high
            elif low < high and slopes[i][1] <= 0:
                box[i] = low, low
        changed = tuple(box) != self._box
        self._box = tuple(box)
        return changed

    def _bound(self, plain: arb, slopes: Sequence[Balls]) -> None:
        """The lower one of the plain bound and that of the mean value form, and values at two points."""
        middle = tuple((low + high) / 2 for low, high in self._box)
        toward = []
        mean = self._value(middle)
        for i, (low, high) in enumerate(self._box):
            half = ball((high - low) / 2)
            steepest = (-slopes[i][0]).max(slopes[i][1]) if low < high else arb(0)
            mean += half * steepest
            self._effects[i] = float(half * steepest) if low < high else -1.0
            toward.append(high if float(slopes[i][0] + slopes[i][1]) > 0 else low)
        self.upper = plain.upper().min(mean.upper())
        values = [(self._value(point), point) for point in (middle, tuple(toward))]
        self.best, self.at = max(values, key=lambda item: float(item[0]))

    def _value(self, point: Point) -> arb:
        balls = [ball(value) for value in point]
        return self._above.at(balls) / self._below.at(balls)

    def _look_for_zero(self) -> None:
        """The lower polynomial has both signs at opposite corners, or is exactly zero at one."""
        values = [self._below.at([ball(ends[k]) for ends in self._box]) for k in (0, 1)]
        signs = {int(value > 0) - int(value < 0) for value in values}
        zero = any(value.is_exact() and value.is_zero() for value in values)
        self.vanishes = {1, -1} <= signs or zero
        self._effects = [float((high - low) / high) if high else 0.0 for low, high in self._box]

    def split(self) -> tuple[Piece, Piece]:
        axis = max(range(len(self._box)), key=self._effects.__getitem__)
        low, high = self._box[axis]
        middle = low + (high - low) * split_part(low, high)
        pieces = [
            NestedPiece(
                self._ratio, (*self._box[:axis], ends, *self._box[axis + 1 :]), (self._above, self._below)
            )
            for ends in ((low, middle), (middle, high))
        ]
        return pieces[0], pieces[1]
