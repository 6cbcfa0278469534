"""Least and greatest values of many figures while points stream by, and where each was reached.

A figure may be real or complex. Of both kinds the extremes of the real number and of the modulus are kept; which
of the two a figure shows is settled at the end, by whether any point was complex.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

_ROUNDING = 1e-12  # a value better by less than this, relatively, is not better: the earlier point stays


@dataclass(frozen=True)
class Extreme:
    """Least and greatest value of a figure, each with its point (u of a box, or the row of a table)."""

    least: float
    greatest: float
    at_least: np.ndarray
    at_greatest: np.ndarray
    modulus: bool


@dataclass(frozen=True)
class Summary:
    """What figures (rows, P) at P points come to: all that `Extremes` needs of them, whatever their number.

    `best` and `at` are (4, rows): least and greatest signed, least and greatest modulus, and at which of the points;
    not finite for a figure without any value. `missing` counts the points without a value; `complex` says of each
    row whether it was complex anywhere, None where the figures are real numbers.
    """

    best: np.ndarray
    at: np.ndarray
    missing: np.ndarray
    complex: np.ndarray | None

    @classmethod
    def of(cls, figures: np.ndarray) -> Summary:
        """Of figures (rows, P), real or complex."""
        nan = ~np.isfinite(figures)
        whole, signed, size = None, figures, np.abs(figures)
        if np.iscomplexobj(figures):
            whole = (np.where(nan, 0.0, figures).imag != 0).any(axis=1)
            signed = figures.real
        rows = np.arange(figures.shape[0])
        best, places = np.empty((4, len(rows))), np.empty((4, len(rows)), dtype=np.intp)
        for kind, data in enumerate((signed, signed, size, size)):
            least = kind % 2 == 0
            filled = np.where(nan, np.inf if least else -np.inf, data)
            places[kind] = filled.argmin(axis=1) if least else filled.argmax(axis=1)
            best[kind] = filled[rows, places[kind]]
        return cls(best, places, nan.sum(axis=1), whole)


class Extremes:
    """Running extremes of `rows` figures."""

    def __init__(self, rows: int) -> None:
        self._value = np.full((4, rows), np.nan)  # least and greatest signed, least and greatest modulus
        self._place: list[list[np.ndarray | None]] = [[None] * rows for _ in range(4)]
        self._complex = np.zeros(rows, dtype=bool)
        self.missing = np.zeros(rows, dtype=int)
        self.seen = np.zeros(rows, dtype=int)  # points, those without a value too

    @property
    def rows(self) -> int:
        return int(self._value.shape[1])

    def take(self, figures: np.ndarray, places: np.ndarray, rows: np.ndarray | None = None) -> None:
        """Take in figures (rows, P) at places (d, P): of all rows, or of those whose numbers are given."""
        self.merge(Summary.of(figures), places, rows)

    def merge(self, found: Summary, places: np.ndarray, rows: np.ndarray | None = None) -> None:
        """The same with the figures summed up beforehand, wherever that was done.

        Summaries that are merged in the order in which their figures would be taken leave the same bits behind.
        """
        rows = np.arange(self.rows) if rows is None else rows
        self.seen[rows] += places.shape[1]
        self.missing[rows] += found.missing
        if found.complex is not None:
            self._complex[rows] |= found.complex
        for kind, (best, at) in enumerate(zip(found.best, found.at, strict=True)):
            known = self._value[kind, rows]
            margin = _ROUNDING * np.abs(known)
            beats = best < known - margin if kind % 2 == 0 else best > known + margin
            gain = np.isfinite(best) & (np.isnan(known) | beats)
            for k in np.flatnonzero(gain):
                self._value[kind, rows[k]] = best[k]
                self._place[kind][rows[k]] = places[:, at[k]].copy()

    def kinds(self, row: int) -> tuple[int, int]:
        """Which two of the four kinds this figure shows."""
        return (2, 3) if self._complex[row] else (0, 1)

    def place(self, kind: int, row: int) -> np.ndarray | None:
        """Where an extreme was reached; None while the figure has had no value."""
        return self._place[kind][row]

    def result(self, row: int, modulus: bool | None = None) -> Extreme | None:
        """The extremes of a figure, of its modulus if that is asked for; None where it never had a value."""
        use = bool(self._complex[row]) if modulus is None else modulus
        low, high = (2, 3) if use else (0, 1)
        at_low, at_high = self._place[low][row], self._place[high][row]
        if at_low is None or at_high is None:
            return None
        return Extreme(float(self._value[low, row]), float(self._value[high, row]), at_low, at_high, use)

    @property
    def any_complex(self) -> bool:
        """Whether any figure was complex at any point."""
        return bool(self._complex.any())
