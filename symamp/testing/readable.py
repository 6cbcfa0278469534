"""Values that read well, in the order in which a counterexample should prefer them (room: testing)."""

from __future__ import annotations

import math
from collections.abc import Iterator
from fractions import Fraction
from functools import lru_cache

# Preferred numbers of IEC 60063: each series holds the one before it, so the rounder value comes first.
_SERIES: tuple[tuple[int, ...], ...] = (
    (10, 20, 50),
    (10, 15, 22, 33, 47, 68),
    (10, 12, 15, 18, 22, 27, 33, 39, 47, 56, 68, 82),
    (10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91),
)
_ENOUGH = 12  # values in a range; where the series have fewer, decimals of more digits are added
_MOST_DIGITS = 6
_STEPS = 20  # of an evenly spaced range


@lru_cache(maxsize=4096)
def readable_values(low: float, high: float, start: float | None = None) -> tuple[float, ...]:
    """Values from low to high, both ends among them, the simplest first; never empty.

    First `start` where it lies in the range (else the roundest value near the middle), then the rounder before the
    finer, the ends among the round, and of these the nearer to the start first. Geometric where both ends are
    positive or both negative, else evenly spaced.
    """
    if high < 0:
        return tuple(-x for x in readable_values(-high, -low, None if start is None else -start))
    if low == high:
        return (low,)
    even = low <= 0
    ranks: dict[float, int] = {}
    for rank, group in enumerate(_even_groups(low, high) if even else _groups(low, high)):
        for value in group:
            if low <= value <= high:
                ranks.setdefault(value, rank)
    if start is None or not low <= start <= high:
        middle = (low + high) / 2 if even else math.sqrt(low * high)
        wanted = middle if start is None else min(max(start, low), high)
        start = min(ranks, key=lambda x: (ranks[x] > 0, _apart(x, wanted, even)), default=low)
    home = start
    ranks.update(dict.fromkeys((low, high), 0))
    rest = sorted(ranks, key=lambda x: (ranks[x], _apart(x, home, even)))
    return tuple(dict.fromkeys([home, *rest]))


def _apart(a: float, b: float, even: bool) -> float:
    return abs(a - b) if even else abs(math.log(a / b))


def _groups(low: float, high: float) -> Iterator[list[float]]:
    """Values of the preferred series, rounder series first, then decimals of more digits where these are few."""
    first, last = math.floor(math.log10(low)), math.ceil(math.log10(high))
    found: set[float] = set()
    for series in _SERIES:
        group = [_decimal(m, power - 1) for power in range(first, last + 1) for m in series]
        found.update(x for x in group if low <= x <= high)
        yield group
    for digits in range(2, _MOST_DIGITS + 1):
        if len(found) >= _ENOUGH:
            return
        group = _all_decimals(low, high, math.floor(math.log10(high)) - digits + 1)
        found.update(group)
        yield group


def _even_groups(low: float, high: float) -> Iterator[list[float]]:
    """Multiples of round steps, and zero first."""
    yield [0.0]
    step = math.floor(math.log10((high - low) / 2))
    while True:
        group = _all_decimals(low, high, step)
        yield group
        if len(group) >= _STEPS:
            return
        step -= 1


def _all_decimals(low: float, high: float, power: int) -> list[float]:
    """All multiples of 10**power from low to high."""
    unit = Fraction(10) ** power
    return [_decimal(k, power) for k in range(math.ceil(low / unit), math.floor(high / unit) + 1)]


def _decimal(mantissa: int, power: int) -> float:
    """The float nearest to the decimal, so that it prints as that."""
    return float(f"{mantissa}e{power}")
