"""Room `span`: the range over a box of an error that is no ratio of polynomials, from proofs of bounds on it.

The worst error is looked for in floats. An exact test at the point that was found proves it from one side, and a
proof over the whole box of a bound a little beyond it from the other. A point that refutes the bound is where the
search goes on.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import product
from math import ceil, floor, inf, isfinite, log2
from typing import Protocol

import numpy as np
from flint import fmpz_mpoly

from symamp.exact.tape import Tape
from symamp.span.bounding import End, Limits, Proved, greatest_over
from symamp.span.boxes import Interval, NoProof, ProofBox
from symamp.span.pieces import Point

SIGN_WORK = 1_000_000  # balls that may be worked out for the sign of one polynomial
_CORNERS = 8  # sides up to which all corners are tried, and a draw of 2**_CORNERS of them beyond
_DRAWN = 256  # points that are drawn within the box
_MOVES = 120  # moves of a search at most
_STARTS = 4  # of the worst, around how many the search goes on
_TRIES = 12  # bounds that are tried
_FARTHER = 2  # of these, how many may be farther off because a nearer one was too much work
_SAFE = (1e-12, 1e-9, 1e-7, 1e-5)  # by how much less than found an error is proved at its point


@dataclass(frozen=True)
class Verdict:
    """Whether a bound is proved; a point that seems to refute it, or why nothing came of it."""

    proved: bool
    boxes: int = 0
    against: Point | None = None
    why: str = ""


class Error(Protocol):
    """An error over a box of which bounds can be proved."""

    box: ProofBox

    def at_most(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        """Whether the error is ≤ bound throughout a part of the box."""
        ...

    def at_least(self, bound: Fraction, domain: Sequence[Interval]) -> Verdict:
        """Whether the error is ≥ bound throughout a part of the box."""
        ...

    def sampled(self, values: np.ndarray) -> np.ndarray:
        """The errors where the sides have these values (sides, P), nan where there is none."""
        ...


def nowhere_negative(polynomial: fmpz_mpoly, domain: Sequence[Interval], limits: Limits) -> Verdict:
    """Whether a polynomial is ≥ 0 throughout."""
    one = polynomial.context().constant(1)
    found = greatest_over(-polynomial, one, domain, limits, threshold=Fraction(0))
    if found.upper is not None and found.upper <= 0:
        return Verdict(True, found.boxes)
    if found.lower is not None and found.lower > 0:
        return Verdict(False, found.boxes, found.at)
    return Verdict(False, found.boxes, why=found.why or "the bound is reached")


def above_zero(polynomial: fmpz_mpoly, domain: Sequence[Interval], limits: Limits) -> Verdict:
    """Whether a polynomial is > 0 throughout."""
    one = polynomial.context().constant(1)
    found = greatest_over(-polynomial, one, domain, limits, threshold=Fraction(0))
    proved = found.upper is not None and bool(found.upper < 0)
    return Verdict(proved, found.boxes, None if proved else found.at, found.why)


class Sampler:
    """Polynomials in symbols at arrays of side values."""

    def __init__(self, polynomials: Sequence[fmpz_mpoly], box: ProofBox) -> None:
        self._tape, self._box = Tape(polynomials), box

    def __call__(self, values: np.ndarray) -> list[np.ndarray]:
        """Values at the points (sides, P), each of shape (P,)."""
        symbols = {}
        for name in self._tape.symbols:
            product_ = self._box.symbols[name]
            value = np.full(values.shape[1], float(product_.factor))
            for side, power in zip(values, product_.powers, strict=True):
                if power:
                    value = value * side**power
            symbols[name] = value
        return self._tape(symbols, values.shape[1])


def side_values(box: ProofBox, u: np.ndarray) -> np.ndarray:
    """Values of the sides (sides, P) at points of the unit cube, positive sides spaced geometrically."""
    rows = []
    for side, part in zip(box.sides, u, strict=True):
        low, high = float(side.low), float(side.high)
        value = low * (high / low) ** part if low > 0 else low + (high - low) * part
        rows.append(np.where(part <= 0, low, np.where(part >= 1, high, value)))
    return np.array(rows).reshape(len(box.sides), u.shape[1])


def first_points(box: ProofBox) -> np.ndarray:
    """Points of the unit cube: corners, the middle, and a seeded draw."""
    count, draw = len(box.sides), np.random.default_rng(1)
    if count <= _CORNERS:
        corners = np.array(list(product((0.0, 1.0), repeat=count))).T.reshape(count, -1)
    else:
        corners = draw.integers(0, 2, size=(count, 1 << _CORNERS)).astype(float)
    return np.concatenate([corners, np.full((count, 1), 0.5), draw.random((count, _DRAWN))], axis=1)


def prove_error(
    error: Error,
    *,
    hint: tuple[float, float] | None,
    tolerance: float,
    method: str,
) -> Proved:
    """The least and greatest error over its box, each within bounds `tolerance` apart where the proofs succeed.

    `hint` is the least and greatest error that were seen elsewhere.
    """
    u = first_points(error.box)
    sizes = error.sampled(side_values(error.box, u))
    if not np.isfinite(sizes).all():
        raise NoProof("somewhere in the box there is no such value")
    ends, boxes, whys = [], 0, []
    for sign in (-1, 1):
        seen = -inf if hint is None else sign * hint[0 if sign < 0 else 1]
        search = _OneEnd(error, sign, Fraction(tolerance))
        ends.append(search.run(u, sizes, seen))
        boxes += search.boxes
        whys.append(search.why)
    return Proved(ends[0], ends[1], boxes, not any(whys), method, whys[1] or whys[0])


class _OneEnd:
    """The greatest value of sign·error."""

    def __init__(self, error: Error, sign: int, tolerance: Fraction) -> None:
        self._error, self._sign, self._tolerance = error, sign, tolerance
        self.boxes, self.why = 0, ""

    def run(self, u: np.ndarray, sizes: np.ndarray, seen: float) -> End:
        order = np.argsort(-self._sign * sizes)[:_STARTS]
        best, at = max((self._climb(u[:, i]) for i in order), key=lambda item: item[0])
        margin, farther = self._tolerance * Fraction(3, 4), 0
        for _ in range(_TRIES):
            bound = self._rounded(max(best, seen) + float(margin))
            verdict = self._within(bound)
            self.boxes += verdict.boxes
            if verdict.proved:
                return self._end(best, at, bound)
            if verdict.against is not None:
                found, where = self._climb(self._cube(verdict.against))
                if found > best:
                    best, at = found, where
                    continue
            self.why = verdict.why or "points that seem to refute the bound lie within rounding of it"
            margin *= 16
            farther += 1
            if farther > _FARTHER:
                break
        return self._end(best, at, None)

    def _within(self, bound: Fraction) -> Verdict:
        domain = self._error.box.domain
        return self._error.at_most(bound, domain) if self._sign > 0 else self._error.at_least(-bound, domain)

    def _end(self, best: float, at: np.ndarray, bound: Fraction | None) -> End:
        low, where = -inf, self._point(at)
        for safe in _SAFE:
            tried = Fraction(best - safe * (1 + abs(best)))
            domain = [(t, t) for t in where]
            claim = self._error.at_least if self._sign > 0 else self._error.at_most
            verdict = claim(self._sign * tried, domain)
            if verdict.proved:
                low = _float_below(tried)
                break
        high = inf if bound is None else -_float_below(-bound)
        if bound is not None and isfinite(low):
            near = bound - Fraction(low) <= self._tolerance
            self.why = "" if near else self.why or "the bound was proved at a distance only"
        elif not self.why:
            self.why = "the worst point that was found could not be confirmed"
        values = self._error.box.side_values(where)
        return End(low, high, values) if self._sign > 0 else End(-high, -low, values)

    def _rounded(self, bound: float) -> Fraction:
        """A short number somewhat above, and below −1 never for what lies above −1."""
        scale = 1 << max(3, ceil(log2(8 / float(self._tolerance))))
        return Fraction(ceil(bound * scale), scale)

    def _climb(self, u: np.ndarray) -> tuple[float, np.ndarray]:
        """A compass search from a point of the cube: (sign·error, point)."""
        count = len(u)
        best = float(self._measure(u.reshape(-1, 1))[0])
        step = 0.25
        for _ in range(_MOVES):
            if step < 1e-6:
                break
            moves = np.concatenate([np.eye(count), -np.eye(count)], axis=1) * step
            tried = np.clip(u[:, None] + moves, 0, 1)
            sizes = self._measure(tried) if count else np.array([-inf])
            place = int(np.argmax(sizes))
            if sizes[place] > best:
                best, u, step = float(sizes[place]), tried[:, place], min(0.25, 2 * step)
            else:
                step /= 4
        return best, u

    def _measure(self, u: np.ndarray) -> np.ndarray:
        sizes = self._sign * self._error.sampled(side_values(self._error.box, u))
        return np.where(np.isnan(sizes), -inf, sizes)

    def _point(self, u: np.ndarray) -> Point:
        """The coordinates of a point of the cube, exactly, within the box."""
        values = side_values(self._error.box, u.reshape(-1, 1))[:, 0]
        point = []
        for side, value in zip(self._error.box.sides, values, strict=True):
            exact = min(side.high, max(side.low, Fraction(float(value))))
            if value in (float(side.low), float(side.high)):
                exact = side.low if value == float(side.low) else side.high
            point.append(side.direction * (exact - side.origin))
        return tuple(point)

    def _cube(self, point: Point) -> np.ndarray:
        """A point of the cube from coordinates."""
        box = self._error.box
        u = []
        for side, value in zip(box.sides, box.side_values(point[: len(box.sides)]).values(), strict=True):
            if side.fixed:
                u.append(0.0)
            elif side.low > 0:
                u.append(float(np.log(float(value / side.low)) / np.log(float(side.high / side.low))))
            else:
                u.append(float((value - side.low) / (side.high - side.low)))
        return np.clip(np.array(u), 0, 1)


def _float_below(value: Fraction) -> float:
    """The greatest double that is no more than an exact number."""
    near = float(value)
    return near if Fraction(near) <= value else float(np.nextafter(near, -inf))


def short(value: float) -> Fraction:
    """A short number near a positive one."""
    scale = 64.0 / 2 ** floor(log2(value))
    return Fraction(round(value * scale)) / Fraction(scale)
