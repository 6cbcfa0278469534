"""Room `span`: a piece of a box, what is known of a ratio of polynomials over it, and how it is split."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Protocol

import numpy as np
from flint import arb, fmpz_mpoly

from symamp.span.bernstein import (
    Coefficients,
    coefficients_over,
    corners,
    degrees_of,
    halves,
    index_at,
    size_of,
    value_at,
)
from symamp.span.boxes import Interval, split_part
from symamp.span.monotone import exact_value

Point = tuple[Fraction, ...]


class Piece(Protocol):
    """A piece of a box. `upper` bounds the ratio from above, None where nothing does yet.

    `best` is a ball around the value at `at`, the greatest value seen in the piece. `sign` is that of the ratio's lower
    polynomial over the piece, 0 while it is not sure; `vanishes` says that it is zero somewhere in the piece for sure.
    """

    upper: arb | None
    best: arb | None
    at: Point
    sign: int
    vanishes: bool

    def split(self) -> tuple[Piece, Piece]:
        """Both halves."""
        ...

    def forget(self) -> None:
        """Free memory: what is needed to split is worked out again."""
        ...

    @property
    def size(self) -> int:
        """How many balls are held."""
        ...

    @property
    def work(self) -> int:
        """How many balls were worked out, about."""
        ...


@dataclass(frozen=True)
class Ratio:
    """A ratio of polynomials in coordinates that are nowhere negative."""

    above: fmpz_mpoly
    below: fmpz_mpoly

    @property
    def degrees(self) -> tuple[int, ...]:
        return degrees_of(self.above, self.below)


# Coefficients of both polynomials; None for those of a constant, by which the others are divided then.
Held = tuple[Coefficients, Coefficients | None]


class BernsteinPiece:
    """A piece that is known by Bernstein coefficients of both polynomials."""

    def __init__(
        self,
        ratio: Ratio,
        box: tuple[Interval, ...],
        held: Held | None = None,
    ) -> None:
        self._ratio, self._box, self._degrees = ratio, box, ratio.degrees
        self._held = held
        self.upper: arb | None = None
        self.best: arb | None = None
        self.at: Point = tuple(low for low, _ in box)
        self.sign, self.vanishes = 0, False
        self._look()

    @property
    def size(self) -> int:
        return 0 if self._held is None else self.work

    @property
    def work(self) -> int:
        return size_of(self._degrees) * (1 if self._ratio.below.is_constant() else 2)

    def forget(self) -> None:
        self._held = None

    def _coefficients(self) -> Held:
        if self._held is None:
            above = coefficients_over(self._ratio.above, self._degrees, self._box)
            if self._ratio.below.is_constant():
                constant = arb(self._ratio.below.leading_coefficient())
                self._held = [a / constant for a in above], None
            else:
                self._held = above, coefficients_over(self._ratio.below, self._degrees, self._box)
        return self._held

    def _look(self) -> None:
        above, below = self._coefficients()
        if below is None:
            self.sign = 1 if self._ratio.below.leading_coefficient() > 0 else -1
            ratios = above
        else:
            self.sign = 1 if all(c > 0 for c in below) else -1 if all(c < 0 for c in below) else 0
            if not self.sign:
                self.vanishes = self._is_zero_at_a_corner(below)
                return
            ratios = [a / b for a, b in zip(above, below, strict=True)]
        upper = ratios[0]
        for each in ratios:
            upper = upper.max(each)
        self.upper = upper.upper()
        at_corners = corners(self._degrees)
        place, corner = max(at_corners, key=lambda item: float(ratios[item[0]]))
        self.best, self.at = ratios[place], self._point([Fraction(end) for end in corner])
        sizes = [float(each) for each in ratios]
        top = max(range(len(sizes)), key=sizes.__getitem__)
        if sizes[top] > sizes[place]:
            self._look_inside(top, above, below)

    def _look_inside(self, top: int, above: Coefficients, below: Coefficients | None) -> None:
        """At the point that the greatest coefficient belongs to."""
        index = index_at(top, self._degrees)
        parts = [Fraction(i, max(1, n)) for i, n in zip(index, self._degrees, strict=True)]
        value = value_at(above, self._degrees, parts)
        if below is not None:
            value /= value_at(below, self._degrees, parts)
        assert self.best is not None
        if float(value) > float(self.best):
            self.best, self.at = value, self._point(parts)

    def _is_zero_at_a_corner(self, below: Coefficients) -> bool:
        """Whether the lower polynomial has both signs at corners, or is exactly zero at one."""
        at_corners = corners(self._degrees)
        signs = {int(below[place] > 0) - int(below[place] < 0) for place, _ in at_corners}
        if {1, -1} <= signs:
            return True
        unsure = [corner for place, corner in at_corners if not (below[place] > 0 or below[place] < 0)]
        for corner in unsure:
            value = exact_value(self._ratio.below, self._point([Fraction(end) for end in corner]))
            if value == 0:
                return True
        return False

    def _point(self, parts: Sequence[Fraction]) -> Point:
        # The domain of a box without sides is empty, though its ring has a generator.
        return tuple(low + (high - low) * part for (low, high), part in zip(self._box, parts, strict=False))

    def split(self) -> tuple[BernsteinPiece, BernsteinPiece]:
        above, below = self._coefficients()
        axis = self._axis(above, below)
        low, high = self._box[axis]
        part = split_part(low, high)
        middle = low + (high - low) * part
        first = halves(above, self._degrees, axis, part)
        second = (None, None) if below is None else halves(below, self._degrees, axis, part)
        pairs = zip(first, second, strict=True)
        pieces = [
            BernsteinPiece(self._ratio, (*self._box[:axis], ends, *self._box[axis + 1 :]), pair)
            for ends, pair in zip(((low, middle), (middle, high)), pairs, strict=True)
        ]
        return pieces[0], pieces[1]

    def _axis(self, above: Coefficients, below: Coefficients | None) -> int:
        """Where the bound is loosest: the axis along which second differences are greatest.

        Along axes of degree 1 the bound is no looser than the values at both ends.
        """
        shape = tuple(degree + 1 for degree in self._degrees)
        under = np.ones(shape)
        if below is None:
            slack = np.array([float(a) for a in above])
        elif self.upper is None:
            slack = np.array([float(b) for b in below])
        else:
            under = np.array([float(b) for b in below]).reshape(shape)
            slack = np.array([float(a - self.upper * b) for a, b in zip(above, below, strict=True)])
        slack = slack.reshape(shape)
        best, widest = 0, -1.0
        for axis, degree in enumerate(self._degrees):
            if degree < 2:
                continue
            inner = np.take(under, range(1, degree), axis=axis)
            with np.errstate(all="ignore"):  # beyond the range of doubles any axis will do
                bend = float(np.max(np.abs(np.diff(slack, 2, axis=axis) / inner)))
            if bend > widest:
                best, widest = axis, bend
        if widest > 0:
            return best
        return max(range(len(self._box)), key=lambda i: (self._degrees[i] > 0, _width(*self._box[i])))


def _width(low: Fraction, high: Fraction) -> float:
    return float((high - low) / high) if high else 0.0
