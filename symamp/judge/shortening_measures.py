"""What a short formula is measured by (room: judge): a quantity over a sample, or a response over frequency too."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any, Protocol

import numpy as np

from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.forms import Expanded
from symamp.exact.formulas import PolyRatio, band_ratio, rational_of
from symamp.exact.polys import S, from_coefficients
from symamp.exact.response import Response
from symamp.exact.tape import Tape
from symamp.judge.balance import PI
from symamp.judge.error_formula import partner_ratio
from symamp.judge.errors_at import error_of
from symamp.judge.response_errors import Band, ratio_on
from symamp.judge.sample import Sample


class Measure(Protocol):
    """How far an approximate response is off, as a ratio of polynomials.

    Terms are looked at on a grid of `points`. `through` says whether a response that has no formula may lead to one
    that has.
    """

    points: int
    through: bool

    @property
    def values(self) -> Mapping[str, Any]:
        """The values of the symbols on the grid."""

    def ratio(self, response: Response) -> PolyRatio | None:
        """The formula under some assumptions; None where there is none."""

    def worst(self, ratio: PolyRatio) -> float:
        """The largest modulus of its error over the sample; infinite where it has no value somewhere."""

    def off(self, found: np.ndarray) -> float:
        """The same of a formula's values on the grid."""


class OfQuantity:
    """The relative error of a quantity at the points of a sample."""

    through = True

    def __init__(self, exact: Response, quantity: Quantity, sample: Sample) -> None:
        self._exact, self._quantity = exact, quantity
        self.values = {**sample.values, PI: math.pi}
        self.points = sample.points
        with np.errstate(all="ignore"):
            self._wanted = self._exact_values(sample)

    def _exact_values(self, sample: Sample) -> np.ndarray:
        figures = self._exact.figures(sample.values, sample.points)
        if not is_root(self._quantity):
            return np.asarray(figures.value(self._quantity))
        roots = figures.poles if self._quantity.name == "p" else figures.zeros
        return np.asarray(roots[(self._quantity.index or 1) - 1])

    def ratio(self, response: Response) -> PolyRatio | None:
        if response is self._exact:
            return rational_of(response, self._quantity) or band_ratio(response, self._quantity)
        return partner_ratio(self._exact, response, self._quantity)

    def worst(self, ratio: PolyRatio) -> float:
        if ratio[1].is_zero():
            return math.inf
        above, below = Tape(list(ratio))(self.values, self.points)
        with np.errstate(all="ignore"):
            return self.off(above / below)

    def off(self, found: np.ndarray) -> float:
        with np.errstate(all="ignore"):
            return _largest(error_of(self._quantity, found, self._wanted))


class OfResponse:
    """The largest |Ha/H − 1| over a band of frequencies, of a response as N(s)/D(s)."""

    through = False

    def __init__(self, exact: Response, sample: Sample) -> None:
        self._exact, self._sample = exact, sample
        self._band = Band.of(exact, sample.values, sample.points)
        rows = self._band.s.shape[0]
        self.values = {name: np.tile(value, rows) for name, value in sample.values.items()}
        self.values[S] = self._band.s.ravel()
        self.points = rows * sample.points

    def ratio(self, response: Response) -> PolyRatio | None:
        form = response.form
        if response.apart or not isinstance(form, Expanded):
            return None
        return from_coefficients(form.numerator), from_coefficients(form.denominator)

    def worst(self, ratio: PolyRatio) -> float:
        if ratio[1].is_zero():
            return math.inf
        return _largest(self._band.errors(ratio_on(ratio, self._sample.values, self._band.s)))

    def off(self, found: np.ndarray) -> float:
        return _largest(self._band.errors(found.reshape(self._band.s.shape)))


def _largest(errors: np.ndarray) -> float:
    found = np.abs(errors)
    return float(found.max()) if np.isfinite(found).all() else math.inf
