"""Room `span`: the range of a ratio of polynomials over a box, proved.

Sides in which the ratio is monotone are fixed at an end first (`symamp.span.monotone`). What is left is bounded by
branch and bound, the piece with the highest bound first, in ball arithmetic: F. Johansson, "Arb: efficient
arbitrary-precision midpoint-radius interval arithmetic", IEEE Trans. Computers 66, 2017 (from memory). Whatever
stops the search, the true extremes lie within the bounds that it reports.
"""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce
from math import inf, isfinite, nextafter

from flint import arb, ctx, fmpz_mpoly

from symamp.exact.formulas import PolyRatio
from symamp.span.bernstein import ball, size_of
from symamp.span.boxes import Interval, NoProof, ProofBox
from symamp.span.monotone import exact_value, face_of_greatest, put_all, reduced, strict_sign
from symamp.span.nested import NestedPiece
from symamp.span.pieces import BernsteinPiece, Piece, Point, Ratio

BITS = 128  # working precision
# Bernstein coefficients of a polynomial above which it is evaluated as a nested sum instead.
COEFFICIENTS = 150_000
WORK = 6_000_000  # balls that a search may work out, about what fits in ten seconds
_MOST_PRODUCTS = 1_000_000  # of terms, when an error is multiplied out
_HELD = 1_000_000  # balls that waiting pieces may hold


@dataclass(frozen=True)
class End:
    """An extreme: it lies between `lower` and `upper`, and near it lies the value where the sides are as in `at`."""

    lower: float
    upper: float
    at: dict[str, Fraction] | None

    @property
    def gap(self) -> float:
        """How far apart the bounds are."""
        return self.upper - self.lower if isfinite(self.upper - self.lower) else inf


@dataclass(frozen=True)
class Proved:
    """The least and greatest value over a box.

    Each lies within the bounds of its `End` whether `finished` or not; `finished` says that these are no further
    apart than the tolerance asked for, and `why` what stopped the search where they are. `boxes` were looked at.
    """

    least: End
    greatest: End
    boxes: int
    finished: bool
    method: str
    why: str = ""


@dataclass(frozen=True)
class Limits:
    """When a search ends: bounds no further apart than `tolerance`, or `relative` times the value; and what it may
    take: `boxes`, `work` (balls worked out: what large polynomials cost), `seconds` (None for any time). A polynomial
    with more than so many `coefficients` in Bernstein form is evaluated as a nested sum.
    """

    tolerance: float = 1e-4
    relative: float = 0.0
    boxes: int = 20_000
    seconds: float | None = None
    work: int = WORK
    coefficients: int = COEFFICIENTS


def prove_range(
    ratio: PolyRatio,
    box: ProofBox,
    *,
    tolerance: float = 1e-4,
    relative: float = 0.0,
    budget: int = 20_000,
    seconds: float | None = None,
) -> Proved:
    """The range over the box of numerator/denominator, polynomials in symbols that the box knows.

    The bounds of each end are to be `tolerance` apart in the ratio's unit, or `relative` times the end, whichever is
    more; `budget` boxes and `seconds` are spent on each at most. Never raises for what cannot be proved: the
    result then says why.
    """
    return _proved(lambda: box.polynomials(ratio), box, Limits(tolerance, relative, budget, seconds))


def prove_error_range(
    formula: PolyRatio,
    exact: PolyRatio,
    box: ProofBox,
    *,
    tolerance: float = 1e-4,
    relative: float = 0.0,
    budget: int = 20_000,
    seconds: float | None = None,
) -> Proved:
    """The range over the box of formula/exact − 1, and all else as in `prove_range`.

    It is multiplied out only after the values of what does not vary have been put in: of two ratios of thousands of
    terms little may be left. Each polynomial may be of a ring of its own.
    """

    def error() -> tuple[fmpz_mpoly, fmpz_mpoly]:
        up, down, exact_up, exact_down = box.polynomials((*formula, *exact))
        if max(len(up) * len(exact_down), len(down) * len(exact_up)) > _MOST_PRODUCTS:
            raise NoProof("the error has too many terms")
        whole = exact_up * down
        if whole.is_zero():
            raise NoProof("the exact value is 0, or the formula has none")
        return up * exact_down - whole, whole

    return _proved(error, box, Limits(tolerance, relative, budget, seconds))


def _proved(made: Callable[[], Sequence[fmpz_mpoly]], box: ProofBox, limits: Limits) -> Proved:
    """The range of the ratio that is made, in the coordinates of the box."""
    with ctx.workprec(BITS):
        try:
            above, below = reduced(*made())
        except NoProof as reason:
            return nothing_proved(str(reason))
        try:
            greatest = greatest_over(above, below, box.domain, limits)
            least = greatest_over(-above, below, box.domain, limits)
        except NoProof as reason:
            return nothing_proved(str(reason))
        return Proved(
            _end(least, box, -1),
            _end(greatest, box, 1),
            greatest.boxes + least.boxes,
            greatest.finished and least.finished,
            _method(greatest, least),
            greatest.why or least.why,
        )


def nothing_proved(why: str) -> Proved:
    """The result where nothing could be proved, and why."""
    nothing = End(-inf, inf, None)
    return Proved(nothing, nothing, 0, False, "", why)


@dataclass(frozen=True)
class Greatest:
    """The greatest value lies between `lower` and `upper` (None: no bound); `at` is where `lower` was seen."""

    lower: arb | None
    upper: arb | None
    at: Point | None
    boxes: int
    finished: bool
    why: str = ""
    fixed: int = 0
    searched: bool = False
    nested: bool = False


def _method(*searches: Greatest) -> str:
    parts = []
    if any(search.fixed for search in searches):
        parts.append("signs of derivatives")
    if any(search.searched for search in searches):
        form = "nested sums" if any(search.nested for search in searches) else "Bernstein coefficients"
        parts.append(f"branch and bound by {form} in ball arithmetic")
    return "proved: " + (" and ".join(parts) or "there is one value")


def _end(found: Greatest, box: ProofBox, sign: int) -> End:
    """An extreme in floats, rounded outward; with sign −1 the least value of the negative."""
    lower = -inf if found.lower is None else float_below(found.lower)
    upper = inf if found.upper is None else float_above(found.upper)
    at = None if found.at is None else box.side_values(found.at)
    return End(lower, upper, at) if sign > 0 else End(-upper, -lower, at)


def float_below(value: arb) -> float:
    """The greatest double, nearly, that is no more than anything in the ball."""
    low = value.lower()
    guess = float(low)
    while not arb(guess) <= low:
        guess = nextafter(guess, -inf)
    return guess


def float_above(value: arb) -> float:
    """The least double, nearly, that is no less than anything in the ball."""
    return -float_below(-value)


def greatest_over(
    above: fmpz_mpoly,
    below: fmpz_mpoly,
    domain: Sequence[Interval],
    limits: Limits,
    *,
    threshold: Fraction | None = None,
) -> Greatest:
    """The greatest value of above/below over a box of coordinates.

    With a `threshold` the search ends as soon as the greatest value is known to lie above or below it. NoProof where
    the denominator vanishes somewhere in the box. Works at the precision that is set around it.
    """
    if below.is_zero():
        raise NoProof("the denominator is zero throughout")
    sides = [i for i, (low, high) in enumerate(domain) if low < high]
    points = {i: low for i, (low, high) in enumerate(domain) if low == high}
    above, below = put_all((above, below), points)
    if below.is_zero():
        raise NoProof("the denominator vanishes within the box")
    fixed: dict[int, Fraction] = {}
    if strict_sign(below, domain) is not None:
        face = face_of_greatest(above, below, domain, sides)
        above, below, fixed = face.above, face.below, dict(face.fixed)
    ends = [(fixed[i], fixed[i]) if i in fixed else interval for i, interval in enumerate(domain)]
    return _Search(limits, threshold, len(fixed)).run(Ratio(above, below), tuple(ends))


def _rounded_up(value: arb) -> arb:
    """Somewhat more than the value: a piece whose bound is no higher need not be split."""
    return value.lower() + abs(value) * arb(2) ** -(BITS // 2)


class _Search:
    """Best-first branch and bound for a greatest value."""

    def __init__(self, limits: Limits, threshold: Fraction | None, fixed: int) -> None:
        self._limits, self._fixed = limits, fixed
        self._threshold = None if threshold is None else ball(threshold)
        self._heap: list[tuple[float, int, Piece]] = []
        self._best: arb | None = None
        self._at: Point | None = None
        self._dropped: arb | None = None  # the highest bound of pieces that were let go
        self._boxes = self._held = self._work = 0
        self._signs: set[int] = set()
        self._nested = self._searched = False

    def run(self, ratio: Ratio, box: tuple[Interval, ...]) -> Greatest:
        self._ratio = ratio
        self._searched = any(low < high for low, high in box)
        self._nested = size_of(ratio.degrees) > self._limits.coefficients
        self._take((NestedPiece if self._nested else BernsteinPiece)(ratio, box))
        end = None if self._limits.seconds is None else time.monotonic() + self._limits.seconds
        while self._heap:
            top = self._heap[0][2]
            if self._settled(top.upper):
                return self._result(True)
            if self._boxes >= self._limits.boxes or self._work >= self._limits.work:
                return self._result(False, f"{self._boxes} boxes were not enough")
            if end is not None and time.monotonic() > end:
                return self._result(False, f"{self._limits.seconds:g} s were not enough")
            heapq.heappop(self._heap)
            self._held -= top.size
            for piece in top.split():
                self._take(piece)
        return self._result(True)

    def _take(self, piece: Piece) -> None:
        self._boxes += 1
        self._work += piece.work
        if piece.sign:
            self._signs.add(piece.sign)
        if piece.vanishes or len(self._signs) > 1:
            raise NoProof("the denominator vanishes within the box")
        if piece.best is not None and (self._best is None or piece.best.lower() > self._best.lower()):
            self._best, self._at = piece.best, piece.at
        if piece.upper is not None and self._best is not None and piece.upper <= _rounded_up(self._best):
            self._dropped = piece.upper if self._dropped is None else self._dropped.max(piece.upper)
            return
        if self._held + piece.size > _HELD:
            piece.forget()
        self._held += piece.size
        order = -inf if piece.upper is None else -float(piece.upper)
        heapq.heappush(self._heap, (order, self._boxes, piece))

    def _settled(self, upper: arb | None) -> bool:
        """Whether the search may end, for no piece has a higher bound."""
        if self._threshold is not None:
            if self._best is not None and self._best > self._threshold:
                return True
            return upper is not None and upper < self._threshold
        if upper is None or self._best is None:
            return False
        gap = upper - self._best.lower()
        return bool(gap <= self._limits.tolerance or gap <= self._limits.relative * abs(self._best))

    def _result(self, finished: bool, why: str = "") -> Greatest:
        lower = None if self._at is None else ball(self._exactly(self._at)).lower()
        # The order of waiting pieces is that of doubles, so that the first need not have the very highest bound.
        waiting = [piece.upper for _, _, piece in self._heap]
        bounds = [upper for upper in (*waiting, self._dropped, lower) if upper is not None]
        unsure = None in waiting
        if unsure:
            why = why and f"{why}, and the sign of the denominator is not sure"
        upper = None if unsure else reduce(lambda a, b: a.max(b), bounds)
        return Greatest(
            lower, upper, self._at, self._boxes, finished, why, self._fixed, self._searched, self._nested
        )

    def _exactly(self, at: Point) -> Fraction:
        """The value at a point, without the rounding of what led to it."""
        above, below = (exact_value(p, at) for p in (self._ratio.above, self._ratio.below))
        return above / below
