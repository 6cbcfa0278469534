"""Figures of many responses worked out as one where points are few.

A call of numpy costs the same for one point as for some hundred, and a local search asks for a few dozen points at
a time under every set of assumptions. Responses of one shape then stand side by side, as if they were one response
at more points.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from typing import Any

import numpy as np

from symamp.exact.asked_quantity import Quantity
from symamp.exact.figures import Figures

_ENOUGH = 8192  # points at which the arrays fill a processor's cache, so that more at a time gains nothing


class StackedFigures:
    """One response's columns in the figures of several."""

    def __init__(self, whole: _Whole, here: slice) -> None:
        self._whole = whole
        self._here = here

    def value(self, quantity: Quantity) -> np.ndarray:
        """As of the response's own figures."""
        return self._whole.value(quantity)[self._here]

    @property
    def poles(self) -> np.ndarray:
        return self._whole.figures.poles[:, self._here]

    @property
    def zeros(self) -> np.ndarray:
        return self._whole.figures.zeros[:, self._here]


class _Whole:
    """Figures of several responses side by side; each quantity is worked out once."""

    def __init__(self, parts: Sequence[Figures]) -> None:
        self._parts = parts
        self._known: dict[Quantity, np.ndarray] = {}

    @cached_property
    def figures(self) -> Figures:
        parts = self._parts
        found = Figures(
            np.concatenate([part.num for part in parts], axis=1),
            np.concatenate([part.den for part in parts], axis=1),
            parts[0].unit,
            np.concatenate([part.scale for part in parts]),
        )
        if _has_roots(parts[0]):
            zeros, poles = ([getattr(part, name) for part in parts] for name in ("zeros", "poles"))
            found.set_roots(np.concatenate(zeros, axis=1), np.concatenate(poles, axis=1))
        if parts[0].given_rows is not None:
            rows = ([part.rows[k] for part in parts] for k in (0, 1))
            found.set_coefficients(*(np.concatenate(row, axis=1) for row in rows))
        return found

    def value(self, quantity: Quantity) -> np.ndarray:
        if quantity not in self._known:
            self._known[quantity] = np.asarray(self.figures.value(quantity))
        return self._known[quantity]


def stacked(figures: Sequence[Figures]) -> list[Figures | StackedFigures]:
    """The same figures, those of one shape worked out together where they have few points."""
    found: list[Figures | StackedFigures] = list(figures)
    alike: dict[Any, list[int]] = {}
    for k, each in enumerate(figures):
        shape = (each.num.shape, each.den.shape, each.unit, _root_shapes(each), _row_shapes(each), _own(each))
        alike.setdefault(shape, []).append(k)
    for numbers in alike.values():
        points = figures[numbers[0]].points
        together = max(1, _ENOUGH // max(points, 1))
        for start in range(0, len(numbers), together):
            some = numbers[start : start + together]
            if len(some) > 1:
                whole = _Whole([figures[k] for k in some])
                for place, k in enumerate(some):
                    found[k] = StackedFigures(whole, slice(place * points, (place + 1) * points))
    return found


def _own(figures: Figures) -> int | None:
    """What sets figures apart whose roots come from matrices of their own, if they are ever asked for."""
    return None if figures.roots_by is None else id(figures)


def _root_shapes(figures: Figures) -> Any:
    return (figures.zeros.shape, figures.poles.shape) if _has_roots(figures) else None


def _row_shapes(figures: Figures) -> Any:
    return None if figures.given_rows is None else tuple(row.shape for row in figures.given_rows)


def _has_roots(figures: Figures) -> bool:
    """Whether its roots were given to it, or found already."""
    return "poles" in figures.__dict__ and "zeros" in figures.__dict__
