"""Axes in engineering units (room: show): where the ticks stand, and what they say.

`Ticks` are plain data, worked out in whole numbers and powers of ten so that no label shows a rounding error.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from decimal import Decimal
from itertools import pairwise
from typing import TYPE_CHECKING

from symamp.values import PREFIXES, UNITS

if TYPE_CHECKING:
    from matplotlib.axis import Axis

MOST = 7  # labels on an axis of half a page
_LETTER = {power: letter for letter, power in PREFIXES.items()} | {0: "", -6: "µ"}
_PREFIXED = {*UNITS.values(), "rad/s"}
_SHOWN = {"ohm": "Ω", "deg": "°"}
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_DECIMAL_STEPS = ((1, 0), (2, 0), (25, -1), (5, 0))
_ROUND_ANGLES = (1, 2, 5, 10, 15, 30, 45, 90, 180, 360)
_WITHIN_A_DECADE = ((1, 2, 3, 4, 6, 8), (1, 2, 5), (1, 3), (1,))
_STRIDES = (2, 3, 6, 12, 30, 60, 120)
_SLACK = 1e-9


@dataclass(frozen=True)
class Ticks:
    """Where an axis has its marks: `at` with `labels`, `minor` without."""

    at: tuple[float, ...]
    labels: tuple[str, ...]
    minor: tuple[float, ...] = ()


def log_ticks(low: float, high: float, unit: str, most: int = MOST) -> Ticks:
    """Ticks of a logarithmic axis from `low` to `high`, both positive, in SI units: 10 kHz, 1 MHz.

    Labels stand a `most`-th of the axis apart or more. Raises ValueError where the ends are no range.
    """
    if not 0 < low < high < math.inf:
        raise ValueError(f"low={low!r} and high={high!r} must be positive and ascending")
    length = math.log(high) - math.log(low)
    best: tuple[tuple[int, int], ...] = ()
    for candidate in _on_log(low, high, most):
        apart = [(math.log(_value(b)) - math.log(_value(a))) / length for a, b in pairwise(candidate)]
        if len(candidate) > most or min(apart, default=1.0) < 1 / (most + 1):
            continue
        if len(candidate) > len(best):
            best = candidate
        if len(best) >= 3:
            break
    minor: tuple[tuple[int, int], ...] = ()
    decades = length / math.log(10)
    if decades <= 12:
        minor = _marks(low, high, range(1, 10), 1)
    elif decades <= 60:
        minor = _marks(low, high, (1,), 1)
    taken = {_value(m) for m in best}
    return Ticks(
        tuple(_value(m) for m in best),
        tuple(tick_label(*m, unit) for m in best),
        tuple(v for v in map(_value, minor) if v not in taken),
    )


def _on_log(low: float, high: float, most: int) -> Iterator[tuple[tuple[int, int], ...]]:
    """Sets of ticks of a logarithmic axis, the fullest first."""
    if high / low < 12:
        for step in range(3):
            yield _even(low, high, most, step)
    for leading in _WITHIN_A_DECADE:
        yield _marks(low, high, leading, 1)
    for stride in _STRIDES:
        yield _marks(low, high, (1,), stride)


def _marks(low: float, high: float, leading: Sequence[int], stride: int) -> tuple[tuple[int, int], ...]:
    """All m·10^k within the ends, m one of `leading`, k a multiple of `stride`."""
    first = math.floor(math.log10(low)) - 1
    last = math.ceil(math.log10(high)) + 1
    found = [(m, k) for k in range(first, last + 1) if k % stride == 0 for m in leading]
    low, high = low * (1 - _SLACK), high * (1 + _SLACK)
    return tuple((m, k) for m, k in found if low <= _value((m, k)) <= high)


def linear_ticks(low: float, high: float, unit: str, most: int = MOST) -> Ticks:
    """Ticks of an even axis in SI units, all with one prefix: 0, 0.5 mS, 1 mS.

    Degrees are told in angles that people know. Raises ValueError where the ends are no range.
    """
    if not -math.inf < low < high < math.inf or not math.isfinite(high - low):
        raise ValueError(f"low={low!r} and high={high!r} must be finite and ascending")
    marks = _angles(low, high, most) if unit == "degrees" else _even(low, high, most, 0)
    largest = max((abs(Decimal(m).scaleb(p)) for m, p in marks), default=Decimal(0))
    third = _third(largest, unit)
    return Ticks(tuple(map(_value, marks)), tuple(tick_label(*m, unit, third) for m in marks))


def whole_ticks(low: int, high: int, most: int = 12) -> Ticks:
    """Ticks of an even axis of counts, which have no halves."""
    found = _even(low - 0.5, high + 0.5, most, 0)
    whole = [int(Decimal(m).scaleb(p)) for m, p in found if not _value((m, p)) % 1]
    return Ticks(tuple(map(float, whole)), tuple(str(n).replace("-", "−") for n in whole))


def signed_log_ticks(low: float, high: float, inner: float, unit: str, most: int = MOST) -> Ticks:
    """Ticks of an axis that is even between −inner and inner and logarithmic outside: 0 and decades of both signs."""
    first, last = math.ceil(math.log10(inner)), math.floor(math.log10(max(-low, high)) + _SLACK)
    powers = range(first, max(first, last) + 1)
    sides = (low < 0) + (high > 0)
    stride = max(1, math.ceil(len(powers) * sides / most))
    found = [(0, 0)]
    for k in range(last - (last - first) // stride * stride, last + 1, stride):
        found += [(sign, k) for sign in (-1, 1) if low <= sign * _value((1, k)) <= high]
    found.sort(key=_value)
    minor = [sign * 10.0**k for k in powers for sign in (-1, 1)] if len(powers) <= 30 else []
    taken = {_value(m) for m in found}
    return Ticks(
        tuple(map(_value, found)),
        tuple(tick_label(*m, unit) for m in found),
        tuple(v for v in minor if low <= v <= high and v not in taken),
    )


def _even(low: float, high: float, most: int, coarser: int) -> tuple[tuple[int, int], ...]:
    """Multiples of the smallest round step that gives at most so many, or of one so much coarser."""
    size = math.floor(math.log10(high - low)) - math.ceil(math.log10(most)) - 1
    steps = [(m, p + power) for power in range(size, size + 6) for m, p in _DECIMAL_STEPS]
    found = (_multiples(low, high, *step) for step in steps)
    fitting = [marks for marks in found if len(marks) <= most]
    return fitting[min(coarser, len(fitting) - 1)]


def _angles(low: float, high: float, most: int) -> tuple[tuple[int, int], ...]:
    for step in _ROUND_ANGLES:
        marks = _multiples(low, high, step, 0)
        if 3 <= len(marks) <= most:
            return marks
    return _even(low, high, most, 0)


def _multiples(low: float, high: float, step: int, power: int) -> tuple[tuple[int, int], ...]:
    size = _value((step, power))
    slack = (high - low) * _SLACK
    first, last = math.ceil((low - slack) / size), math.floor((high + slack) / size)
    return tuple((n * step, power) for n in range(first, last + 1))


def _value(mark: tuple[int, int]) -> float:
    return float(f"{mark[0]}e{mark[1]}")  # rounded once, as a number that is typed


def _third(value: Decimal, unit: str) -> int | None:
    """The power of a prefix's ten for such values; None where there is none or the unit takes none."""
    if unit not in _PREFIXED or not value:
        return None
    power = 3 * (value.adjusted() // 3)
    return power if power in _LETTER else None


def tick_label(mantissa: int, power: int, unit: str, third: int | None = None) -> str:
    """The value mantissa·10^power with its prefix and unit: "10 kHz", "−5 %", "10⁻²⁴ F".

    `third` is the power of the prefix that the whole axis has; without one the value has its own.
    """
    value = Decimal(mantissa).scaleb(power)
    if not value:
        return "0"
    shown = _SHOWN.get(unit, "" if unit in ("degrees", "decibels") else unit)
    third = _third(abs(value), unit) if third is None else third
    if third is not None:
        return f"{_figures(value.scaleb(-third))} {_LETTER[third]}{shown}"
    space = "" if shown in ("", "°") else " "
    if -4 <= value.adjusted() < 5:
        return f"{_figures(value)}{space}{shown}"
    figure = value.scaleb(-value.adjusted())
    times = "−" if figure == -1 else "" if figure == 1 else f"{_figures(figure)}·"
    return f"{times}10{str(value.adjusted()).translate(_RAISED)}{space}{shown}"


def _figures(value: Decimal) -> str:
    text = f"{value:f}"
    text = text.rstrip("0").rstrip(".") if "." in text else text
    return text.replace("-", "−")


def widened(low: float, high: float, least: float = 1e-6) -> tuple[float, float]:
    """The ends, drawn apart where they are the same or nearly so."""
    size = max(abs(low), abs(high))
    if high - low > least * size:
        return low, high
    apart = 0.05 * size or 1.0
    return low - apart, high + apart


def set_ticks(axis: Axis, ticks: Ticks) -> None:
    """Put the ticks on an axis of a figure."""
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullFormatter

    axis.set_major_locator(FixedLocator(list(ticks.at)))
    axis.set_major_formatter(FixedFormatter(list(ticks.labels)))
    axis.set_minor_locator(FixedLocator(list(ticks.minor)))
    axis.set_minor_formatter(NullFormatter())
