"""Exact: what the quantities of a response are worth, at any number of bias points at once.

From coefficient arrays alone; which quantity is meant is read in `symamp.exact.asked_quantity`, and the
words for a value that does not exist are in `symamp.exact.missing_figures`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from symamp.exact import crossings
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.crossings import Centred, Reals
from symamp.exact.roots import roots
from symamp.exact.simultaneous import Complexes

Values = NDArray[Any]  # float64 or complex128, shape (P,)

_TIE = 1e-12  # magnitudes (squared, relative) this close are one: the lowest frequency is taken as the peak
_HALF_A_TURN = 1.0  # degrees: how near to −180 a phase must be found where the response is real and negative


class Figures:
    """The quantities of one response at P bias points.

    `num`, `den`: coefficients of s ascending, shapes (n + 1, P) and (m + 1, P), in SI units; `unit` that of
    the response, "" for a plain ratio. With `scale` σ (rad/s, a number or shape (P,)) the coefficients are
    those of powers of s/σ, for responses of so high a degree that those of s itself would underflow. Powers
    of s that numerator and denominator have in common at a point are cancelled there.
    """

    def __init__(self, num: Reals, den: Reals, unit: str = "", scale: float | Reals = 1.0) -> None:
        num, den = (np.asarray(c, dtype=float) for c in (num, den))
        num, den = (c[:, None] if c.ndim == 1 else c for c in (num, den))
        points = max(num.shape[1], den.shape[1], np.size(scale))
        num, den = (np.broadcast_to(c, (c.shape[0], points)) for c in (num, den))
        self.num, self.den = crossings.without_common_s(num, den)
        self.given_rows: tuple[Reals, Reals] | None = None
        self.roots_by: Callable[[], tuple[Complexes, Complexes]] | None = None
        self.unit = unit
        self.scale = np.broadcast_to(np.asarray(scale, dtype=float), (points,))

    def set_roots(self, zeros: NDArray[Any], poles: NDArray[Any]) -> None:
        """Take these zeros and poles (rad/s, shape (k, P)), known in a better way than from the coefficients.

        They stand for `zeros` and `poles` and in the phase; magnitudes stay those of the coefficients.
        """
        self.__dict__.update(zeros=np.asarray(zeros, dtype=complex), poles=np.asarray(poles, dtype=complex))

    def find_roots_by(self, how: Callable[[], tuple[Complexes, Complexes]]) -> None:
        """Take zeros and poles from `how`, when they are asked for, as `set_roots` does at once."""
        self.roots_by = how

    @cached_property
    def _found(self) -> tuple[Complexes, Complexes]:
        assert self.roots_by is not None
        return self.roots_by()

    @property
    def points(self) -> int:
        """The number of bias points."""
        return int(self.den.shape[1])

    def value(self, quantity: Quantity) -> Values:
        """The quantity, its face taken, shape (P,): complex for poles, zeros and `at`; nan for no value."""
        with np.errstate(all="ignore"):
            return face(self._whole(quantity), quantity.face, quantity)

    def set_coefficients(self, num: Reals, den: Reals) -> None:
        """Take these for a_k and b_k, where the magnitudes are those of other coefficients."""
        self.given_rows = (num, den)

    @property
    def rows(self) -> tuple[Reals, Reals]:
        """The coefficients that a_k and b_k are read from."""
        return self.given_rows or (self.num, self.den)

    def at_point(self, point: int) -> Figures:
        """The same response at one bias point."""
        here = slice(point, point + 1)
        one = Figures(self.num[:, here], self.den[:, here], self.unit, self.scale[here])
        if self.roots_by is not None:
            one.set_roots(self.zeros[:, here], self.poles[:, here])
        for name in ("zeros", "poles"):
            if name in self.__dict__:  # found or given already
                one.__dict__[name] = self.__dict__[name][:, here]
        if self.given_rows is not None:
            one.set_coefficients(*(row[:, here] for row in self.given_rows))
        return one

    def _whole(self, quantity: Quantity) -> Values:
        """The quantity without its face."""
        if quantity.name == "at":
            assert quantity.frequency is not None
            return self.at(float(quantity.frequency))
        if quantity.index is not None:
            return self._indexed(quantity.name, quantity.index)
        found: Values = getattr(self, quantity.name)  # one of asked_quantity.NAMES, each a property below
        return found

    # Levels, roots and coefficients

    @cached_property
    def dc(self) -> Reals:
        """The response at s = 0; nan where it is infinite."""
        return _finite(self.num[0] / self.den[0])

    @cached_property
    def hf(self) -> Reals:
        """The limit as s grows; nan where it is infinite."""
        every = np.arange(self.points)
        (_, n_high), (_, d_high) = crossings.ends(self.num), crossings.ends(self.den)
        ratio = self.num[n_high, every] / self.den[d_high, every]
        return np.where(n_high < d_high, 0.0, np.where(n_high > d_high, np.nan, _finite(ratio)))

    @cached_property
    def poles(self) -> Complexes:
        """Poles in rad/s, shape (m, P), by increasing magnitude, nan where there are fewer."""
        return roots(self.den) * self.scale if self.roots_by is None else self._found[1]

    @cached_property
    def zeros(self) -> Complexes:
        """Zeros in rad/s, shape (n, P), by increasing magnitude, nan where there are fewer."""
        return roots(self.num) * self.scale if self.roots_by is None else self._found[0]

    def at(self, hertz: float) -> Complexes:
        """The complex response at a frequency in Hz; nan at an undamped pole."""
        omega = 2 * math.pi * hertz / self.scale
        above, below = _on_axis(self.num, omega), _on_axis(self.den, omega)
        return np.where(below == 0, complex(np.nan, np.nan), above / below)

    def _indexed(self, name: str, index: int) -> Values:
        if name in ("p", "z"):
            found = self.poles if name == "p" else self.zeros
            missing = np.full(self.points, complex(np.nan, np.nan))
            return found[index - 1] if index <= found.shape[0] else missing
        rows = self.rows[0 if name == "a" else 1]
        low, _ = crossings.ends(self.rows[1])
        row = rows[index] if index < rows.shape[0] else np.zeros(self.points)
        value = _finite(row / self.den[low, np.arange(self.points)])
        if not (self.scale == 1).all():
            value = value * self.scale ** (low - index)
        return np.where((value == 0) & (row != 0), np.nan, value)  # too small to be a number

    # Frequencies, from polynomials in x = ω², frequency in units of `_centred.unit`

    @cached_property
    def _centred(self) -> Centred:
        return crossings.centred(self.num, self.den)

    @cached_property
    def _squares(self) -> tuple[Reals, Reals]:
        response = self._centred
        return crossings.squared_magnitude(response.num), crossings.squared_magnitude(response.den)

    def _hertz(self, x: Reals) -> Reals:
        return np.sqrt(x) * self._centred.unit * self.scale / (2 * math.pi)

    def _first_fall(self, weight: Reals) -> Reals:
        """The lowest x at which weight·|N|²/|D|² falls through 1."""
        level, x = self._level(weight)
        lowest = crossings.first(x, crossings.falls(level, x))
        return crossings.sharpened(self._centred, weight, lowest)

    def _level(self, weight: Reals) -> tuple[Reals, Reals]:
        """weight·|N|² − |D|² as a polynomial in x, and its positive roots."""
        level = crossings.level_polynomial(*self._squares, weight)
        return level, crossings.confirmed(self._centred, weight, crossings.positive_roots(level))

    @cached_property
    def bandwidth(self) -> Reals:
        """Hz; nan where DC is 0 or infinite, or the magnitude never falls to 1/√2 of it."""
        above, below = self._squares
        weight = 2 * below[0] / above[0]
        usable = (above[0] != 0) & (below[0] != 0)
        return self._hertz(self._first_fall(np.where(usable, weight, np.nan)))

    @cached_property
    def gain_bandwidth(self) -> Reals:
        """|dc| · bandwidth."""
        return np.abs(self.dc) * self.bandwidth

    @cached_property
    def _unity_weight(self) -> Reals:
        return self._centred.gain**2

    @cached_property
    def unity_gain_frequency(self) -> Reals:
        """Hz; nan for a response with a unit, and where the magnitude never falls through 1."""
        if self.unit:
            return np.full(self.points, np.nan)
        return self._hertz(self._first_fall(self._unity_weight))

    @cached_property
    def unity_crossings(self) -> Reals:
        """All frequencies in Hz at which the magnitude passes through 1, shape (k, P), nan between them."""
        _, x = self._level(self._unity_weight)
        return self._hertz(crossings.sharpened(self._centred, self._unity_weight, x))

    # The peak

    @cached_property
    def largest(self) -> tuple[Reals, Reals]:
        """x and |H|²/gain² of the largest magnitude; x infinite where it is only approached as ω grows."""
        response = self._centred
        inner = crossings.positive_roots(crossings.slope_polynomial(response.num, response.den))
        x = np.concatenate([np.zeros((1, self.points)), inner])
        squared = crossings.squared_magnitude_at(response.num, x)
        squared = squared / crossings.squared_magnitude_at(response.den, x)
        far = (self.hf / response.gain) ** 2
        (_, n_high), (_, d_high) = crossings.ends(response.num), crossings.ends(response.den)
        far = np.where(n_high > d_high, np.inf, far)
        x, squared = np.vstack([x, np.full(self.points, np.inf)]), np.vstack([squared, far])
        squared = np.where(np.isnan(squared), -1.0, squared)
        largest = squared.max(axis=0)
        row = (squared >= largest * (1 - _TIE)).argmax(axis=0)
        every = np.arange(self.points)
        largest = np.where(self.undamped.any(axis=0), np.inf, largest)
        return x[row, every], np.where(largest < 0, np.nan, largest)

    @cached_property
    def undamped(self) -> NDArray[np.bool_]:
        """Which poles lie on the imaginary axis, off s = 0, with no zero upon them."""
        axis = np.asarray((self.poles.real == 0) & (self.poles.imag != 0))
        return axis & ~(self.poles[:, None] == self.zeros[None]).any(axis=1)

    @cached_property
    def peak(self) -> Reals:
        """The largest magnitude; nan where it is infinite or only approached as frequency grows."""
        x, squared = self.largest
        value = self._centred.gain * np.sqrt(squared)
        return np.where(np.isfinite(x) & np.isfinite(value), value, np.nan)

    @cached_property
    def peak_frequency(self) -> Reals:
        """Where the peak is, in Hz."""
        return np.where(np.isnan(self.peak), np.nan, self._hertz(self.largest[0]))

    @cached_property
    def _corners(self) -> tuple[Reals, Reals]:
        """x nearest below and above the peak at which the magnitude is 1/√2 of the largest."""
        peak_x, squared = self.largest
        weight = np.where(np.isfinite(squared) & (squared > 0), 2 / squared, np.nan)
        _, x = self._level(weight)
        low = crossings.first(x[::-1], x[::-1] < peak_x)
        high = crossings.first(x, x > peak_x)
        below, above = (crossings.sharpened(self._centred, weight, corner) for corner in (low, high))
        return below, above

    @cached_property
    def low_corner(self) -> Reals:
        """Hz; against the limit as frequency grows where that is the largest magnitude."""
        return self._hertz(self._corners[0])

    @cached_property
    def high_corner(self) -> Reals:
        """Hz."""
        return self._hertz(self._corners[1])

    # Margins

    @cached_property
    def right_half_plane(self) -> NDArray[np.bool_]:
        """Where a pole lies in the right half plane."""
        return np.asarray((self.poles.real > 0).any(axis=0))

    def phase(self, omega: Reals) -> Reals:
        """Σ arg(1 − jω/z) − Σ arg(1 − jω/p) in degrees at ω rad/s, (P,); at DC poles −90°, zeros +90°."""
        return _turn(self.zeros, omega) - _turn(self.poles, omega)

    @cached_property
    def phase_margin(self) -> Reals:
        """Degrees at the unity-gain frequency; nan without one, or with a pole in the right half plane."""
        margin = 180 + self.phase(2 * math.pi * self.unity_gain_frequency)
        return np.where(self.right_half_plane, np.nan, margin)

    @cached_property
    def gain_margin(self) -> Reals:
        """dB where that phase first reaches −180°; nan where it never does, as for `phase_margin`."""
        response = self._centred
        x = crossings.positive_roots(crossings.imaginary_polynomial(response.num, response.den))
        reached = np.full(x.shape, False)
        for row, at in enumerate(x):
            omega = np.sqrt(at) * response.unit * self.scale
            reached[row] = np.abs(self.phase(omega) + 180) < _HALF_A_TURN
        at = crossings.first(x, reached)
        squared = crossings.squared_magnitude_at(response.num, at)
        squared = squared / crossings.squared_magnitude_at(response.den, at)
        margin = _finite(-20 * np.log10(response.gain * np.sqrt(squared)))
        return np.where(self.right_half_plane | bool(self.unit), np.nan, margin)


def face(values: Values, face: str | None, quantity: Quantity) -> Values:
    """One face of values of that quantity: magnitude, hz, db, deg (−180 to 180, −180 left out), re or im.

    Margins and frequencies, already in dB, degrees or Hz, stay as they are; so does everything for None.
    """
    as_it_is = face is None or (face == "hz" and not is_root(quantity))
    if as_it_is or quantity.name in ("phase_margin", "gain_margin"):
        return values
    assert face is not None
    with np.errstate(all="ignore"):
        return _FACES[face](np.asarray(values))


_FACES: dict[str, Callable[[Values], Values]] = {
    "magnitude": np.abs,
    "hz": lambda values: np.abs(values) / (2 * math.pi),
    "db": lambda values: _finite(20 * np.log10(np.abs(values))),
    "deg": lambda values: _degrees(values),
    "re": np.real,
    "im": np.imag,
}


def _degrees(values: Values) -> Reals:
    """The angle; + 0.0 turns an imaginary part of −0 into 0, so that −1 is at 180 and not at −180."""
    angle = np.degrees(np.arctan2(values.imag + 0.0, values.real + 0.0))
    return np.where(values == 0, np.nan, angle)  # 0 points nowhere


def _finite(values: Reals) -> Reals:
    return np.where(np.isfinite(values), values, np.nan)


def _on_axis(c: Reals, omega: Reals) -> Complexes:
    """C(jω), ω in the coefficients' own unit."""
    even, odd = (crossings.evaluate(part, omega * omega) for part in crossings.even_and_odd(c))
    return even + 1j * (omega * odd)


def _turn(found: Complexes, omega: Reals) -> Reals:
    """Σ arg(1 − jω/r) over the roots r in degrees; 90 for one at 0; one on the axis counts as of the left."""
    total = np.zeros(omega.shape)
    for root in found:
        size = np.abs(root)
        u, v = root / size, omega / size
        angle = np.arctan2(-u.real * v + 0.0, 1 - u.imag * v)
        angle = np.where(size == 0, np.pi / 2, np.where(np.isnan(size), 0, angle))
        total += angle
    return np.degrees(np.where(np.isnan(omega), np.nan, total))
