"""A local search from the worst points found: compass search, in batches.

Kolda, Lewis, Torczon, "Optimization by direct search", SIAM Review 45, 2003: from each point a step is tried both
ways along every side; where none is better the step is halved. All figures see all points that any of them tries.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from symamp.span.extremes import Extremes

_FIRST_STEP = 0.25
_HALVINGS = 8
_REPEATS = 4  # rounds with one step before it is halved all the same
_STARTS = 24  # places from which a round searches
Take = Callable[[np.ndarray], None]


def compass_search(extremes: list[Extremes], take: Take, dimensions: int) -> int:
    """Search from the extremes of all figures; `take` puts points (d, P) to all of them. Returns points tried."""
    tried = 0
    seen: set[bytes] = set()
    step = _FIRST_STEP
    for _ in range(_HALVINGS):
        for _ in range(_REPEATS):
            points = _around(places_of(extremes), step, dimensions, seen)
            if points.shape[1] == 0:
                break
            tried += points.shape[1]
            take(points)
        step /= 2
    return tried


def places_of(extremes: list[Extremes]) -> list[np.ndarray]:
    """The places of the extremes, each once; those of the errors of all, row 0, come first."""
    found: dict[bytes, np.ndarray] = {}
    for row in range(max((e.rows for e in extremes), default=0)):
        for each in extremes:
            if row < each.rows:
                for kind in each.kinds(row):
                    place = each.place(kind, row)
                    if place is not None:
                        found.setdefault(np.round(place, 6).tobytes(), place)
    return list(found.values())


def _around(starts: list[np.ndarray], step: float, dimensions: int, seen: set[bytes]) -> np.ndarray:
    """Points one step away along each side, within the box, not tried before: (d, P).

    No more than around _STARTS places; one around which all has been tried leaves its turn to the next.
    """
    found: list[np.ndarray] = []
    for start in starts:
        if len(found) >= 2 * _STARTS * dimensions:
            break
        inside = np.clip(start, 0.0, 1.0)
        for axis in range(dimensions):
            for sign in (-1.0, 1.0):
                moved = inside.copy()
                moved[axis] = min(1.0, max(0.0, moved[axis] + sign * step))
                key = np.round(moved, 9).tobytes()
                if moved[axis] != start[axis] and key not in seen:
                    seen.add(key)
                    found.append(moved)
    return np.array(found).T if found else np.empty((dimensions, 0))
