"""What a benchmark reports, how large it runs, and how it takes the time."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Row:
    """One line of the table.

    `ratio` is the figure that the target speaks of, or what was measured over what was allowed; `disagreement` the
    largest relative difference between our result and theirs, and `tolerance` what it may be.
    """

    what: str
    target: str
    measured: str
    ratio: float
    met: bool
    disagreement: float
    tolerance: float

    @property
    def agrees(self) -> bool:
        """Whether ours and theirs are the same result."""
        return self.disagreement <= self.tolerance


@dataclass(frozen=True)
class Sizes:
    """How much is run: bias points, points of the Python loop, frequencies, polynomials, repetitions."""

    points: int
    loop_points: int
    many_points: int
    frequencies: int
    polynomials: int
    runs: int
    patience: float = 300.0  # seconds that another process is given


FULL = Sizes(
    points=100_000, loop_points=2_000, many_points=1_000_000, frequencies=1_000, polynomials=300, runs=9
)
QUICK = Sizes(points=500, loop_points=3, many_points=1_000, frequencies=20, polynomials=4, runs=1)


def median_seconds(action: Callable[[], Any], runs: int) -> float:
    """The median time of an action, after one run that is not counted."""
    action()
    return statistics.median(seconds(action) for _ in range(runs))


def seconds(action: Callable[[], Any]) -> float:
    """The time of one run."""
    start = time.perf_counter()
    action()
    return time.perf_counter() - start


def shown(duration: float) -> str:
    """A duration with its unit, to three digits."""
    for factor, unit in ((1.0, "s"), (1e3, "ms"), (1e6, "µs")):
        if duration * factor >= 1:
            return f"{duration * factor:.3g} {unit}"
    return f"{duration * 1e9:.3g} ns"
