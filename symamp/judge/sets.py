"""Sets of assumptions and the figures of a ledger as weighted sums over them.

With e(S) the error when just the set S is made, alone, added, last and share of each assumption and the error of
all are linear in the e(S): a matrix of weights times the errors. A set is a bit mask over the listed assumptions.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from math import factorial

import numpy as np

SHARES_LIMIT = 12  # assumptions up to which shares are worked out, by all 2**n sets

_ROUNDING = 1e-13  # a weighted sum below this, beside 1 or its largest part, is the rounding of its parts
_SMALL_PRODUCT = 200_000  # multiplications of a product that one thread does alone
_LEAST_COLUMNS = 64

FIGURES = ("alone", "added", "last", "share")


@dataclass(frozen=True)
class Plan:
    """Which sets are needed for n assumptions, and the rows of figures over them."""

    count: int
    with_shares: bool = True

    @property
    def shares(self) -> bool:
        """Whether shares are worked out."""
        return self.with_shares and self.count <= SHARES_LIMIT

    @property
    def without_shares(self) -> Plan:
        """The same but for shares, which alone need more than some three sets an assumption."""
        return Plan(self.count, False)

    def places_in(self, other: Plan) -> np.ndarray:
        """For each row of figures the number that it has in another plan."""
        place = {row: number for number, row in enumerate(other.rows, start=1)}
        return np.array([0, *(place[row] for row in self.rows)])

    @cached_property
    def masks(self) -> tuple[int, ...]:
        """The sets, the empty one first and the full one last."""
        everything = (1 << self.count) - 1
        if self.shares:
            return tuple(range(1 << self.count))
        needed = {0, everything}
        for k in range(self.count):
            needed |= {1 << k, (1 << (k + 1)) - 1, everything ^ (1 << k)}
        return tuple(sorted(needed))

    @cached_property
    def rows(self) -> tuple[tuple[int, str], ...]:
        """(assumption, figure) of each row after the first, which is the error of all (assumption −1)."""
        names = FIGURES if self.shares else FIGURES[:3]
        return tuple((k, name) for k in range(self.count) for name in names)

    @cached_property
    def weights(self) -> np.ndarray:
        """(1 + rows, sets): row 0 is e(all); e of the empty set is 0 and has weight 0 throughout."""
        column = {mask: i for i, mask in enumerate(self.masks)}
        everything = (1 << self.count) - 1
        matrix = np.zeros((1 + len(self.rows), len(self.masks)))
        matrix[0, column[everything]] = 1.0
        for row, (k, figure) in enumerate(self.rows, start=1):
            bit = 1 << k
            if figure == "alone":
                matrix[row, column[bit]] = 1.0
            elif figure == "added":
                matrix[row, column[(bit << 1) - 1]] += 1.0
                matrix[row, column[bit - 1]] -= 1.0
            elif figure == "last":
                matrix[row, column[everything]] += 1.0
                matrix[row, column[everything ^ bit]] -= 1.0
            else:
                self._share(matrix[row], column, bit)
        matrix[:, column[0]] = 0.0
        return matrix

    def _share(self, row: np.ndarray, column: dict[int, int], bit: int) -> None:
        """The Shapley value (Shapley, "A value for n-person games", 1953): the mean increment over all orders."""
        n = self.count
        for mask in self.masks:
            if not mask & bit:
                size = mask.bit_count()
                weight = factorial(size) * factorial(n - size - 1) / factorial(n)
                row[column[mask | bit]] += weight
                row[column[mask]] -= weight

    def figures(self, errors: np.ndarray) -> np.ndarray:
        """(1 + rows, P) from errors of shape (sets, P); nan where a set that a figure needs has no value."""
        missing = _missing(errors)
        known = errors if missing is None else np.where(missing, 0.0, errors)
        if np.iscomplexobj(known) and not known.imag.any():
            known = np.ascontiguousarray(known.real)
        found = self._weighted(known)
        scale = np.maximum(1.0, np.abs(known).max(axis=0)) if len(known) else 1.0
        found[np.abs(found) < _ROUNDING * scale] = 0.0
        if missing is not None:
            found[self._lacking(missing)] = np.nan
        return found

    def _lacking(self, missing: np.ndarray) -> np.ndarray:
        """Which figures need a set that is missing: (1 + rows,) where that is so at all points, else with P."""
        needs = self.weights != 0
        throughout = missing.all(axis=1)
        if np.array_equal(throughout, missing.any(axis=1)):
            return np.asarray(needs[:, throughout].any(axis=1))
        lacking = np.zeros((needs.shape[0], missing.shape[1]), dtype=bool)
        for column in np.flatnonzero(missing.any(axis=1)):
            lacking[needs[:, column]] |= missing[column]
        return lacking

    def _weighted(self, errors: np.ndarray) -> np.ndarray:
        """weights · errors, a few columns at a time.

        The products stay below the size at which a BLAS spreads one over threads: these would wait for one another
        on a busy machine, and gain nothing on an idle one.
        """
        columns = max(_LEAST_COLUMNS, _SMALL_PRODUCT // self.weights.size)
        found = np.empty((self.weights.shape[0], errors.shape[1]), dtype=errors.dtype)
        for start in range(0, errors.shape[1], columns):
            np.matmul(self.weights, errors[:, start : start + columns], out=found[:, start : start + columns])
        return found

    def smallest_missing(self, row: int, errors: np.ndarray) -> int | None:
        """The smallest set, listed order first, that a row needs and whose error is nan; errors (sets,)."""
        needed = [
            mask
            for mask, weight, error in zip(self.masks, self.weights[row], errors, strict=True)
            if weight and np.isnan(error)
        ]
        return min(needed, key=lambda mask: (mask.bit_count(), mask), default=None)


def _missing(errors: np.ndarray) -> np.ndarray | None:
    """Where errors are nan; None where none is, which their sum tells at less cost."""
    with np.errstate(all="ignore"):
        if not np.isnan(errors.sum()):
            return None
    missing = np.isnan(errors)
    return missing if missing.any() else None


def names_of(mask: int, names: Sequence[str]) -> tuple[str, ...]:
    """The assumptions of a set."""
    return tuple(name for k, name in enumerate(names) if mask >> k & 1)
