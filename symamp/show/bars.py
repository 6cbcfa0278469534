"""Shares as plain signed bars (room: show): one colour, negative ones hatched, each with its value."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING

from symamp.show.axes import linear_ticks, set_ticks
from symamp.show.ink import (
    BLACK,
    GREY,
    HUE,
    WHITE,
    WIDTH,
    bare_frame,
    error_label,
    new_figure,
    plain_text,
    wrapped,
)
from symamp.show.picture import Picture

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_LETTERS = 30  # of a label's line
_LETTER = 5.2  # points that one takes
_LINE, _ROW = 0.155, 0.3  # inches: a further line of a label, and a row
_THICK = 0.62
_MOST_SHOWN = 1e15  # % and more are drawn as this much


@dataclass(frozen=True)
class Bar:
    """A bar: what it stands for, and its value, a ratio or in dB or degrees; None where there is none."""

    label: str
    value: float | None


def bars(
    rows: Sequence[Bar],
    *,
    unit: str = "",
    total: Bar | None = None,
    axis: str = "share of the error",
    name: str = "shares",
    title: str = "",
) -> Picture:
    """Signed bars, the first on top. `unit` is "" for ratios, which are shown in %, or "dB" or "deg".

    `total` stands below a line; its bar is an outline, because it is no further part. `axis` says what the values
    are. Raises ValueError where there is no row.
    """
    if not rows:
        raise ValueError("there is nothing to draw bars of")
    kept = tuple(_checked(row) for row in rows)
    last = None if total is None else _checked(total)
    said = [f"{row.label} {error_label(row.value, unit)}" for row in (*kept, *([last] if last else []))]
    caption = f"{axis[:1].upper()}{axis[1:]}" + (f" of {title}" if title else "")
    alt = f"Signed bars, {axis}{f' of {title}' if title else ''}: {'; '.join(said)}."
    return Picture(name, caption, alt, partial(_draw, kept, last, unit, axis))


def _draw(rows: tuple[Bar, ...], total: Bar | None, unit: str, axis: str) -> Figure:
    every = (*rows, *([total] if total else []))
    labels = [wrapped(row.label, _LETTERS) for row in every]
    heights = [max(_ROW, 0.12 + _LINE * (label.count("\n") + 1)) for label in labels]
    figure = new_figure(WIDTH, sum(heights) + 0.65)
    axes = figure.subplots()
    places, edge = [], 0.0
    for height in heights:
        places.append(edge + height / 2)
        edge += height
    scale = 1.0 if unit else 100.0
    values = [_bounded(row.value, scale) for row in every]
    for k, (place, value) in enumerate(zip(places, values, strict=True)):
        _bar(axes, place, value, whole=total is not None and k == len(rows))
        axes.annotate(
            error_label(every[k].value, unit),
            (value, place),
            xytext=(-4 if value < 0 else 4, 0),
            textcoords="offset points",
            ha="right" if value < 0 else "left",
            va="center",
            fontsize=8,
        )
    _ends(axes, values, [error_label(row.value, unit) for row in every], labels, unit)
    axes.set_ylim(edge, 0)
    axes.axvline(0, color=BLACK, linewidth=0.8)
    if total is not None:
        axes.axhline(edge - heights[-1], color=GREY, linewidth=0.7)
    axes.set_yticks(places, labels)
    for label in axes.get_yticklabels():
        plain_text(label)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel(f"{axis} in {'degrees' if unit == 'deg' else unit or '%'}")
    axes.grid(True, axis="x")
    bare_frame(axes)
    axes.spines["left"].set_visible(False)
    return figure


def _bar(axes: Axes, place: float, value: float, whole: bool) -> None:
    """One bar: full for what adds, hatched for what takes away, an outline for the whole."""
    hatch = "/////" if value < 0 else None
    face = WHITE if value < 0 or whole else HUE
    edge = BLACK if whole else HUE
    axes.barh(place, value, _THICK * _ROW, color=face, edgecolor=edge, linewidth=1.0, hatch=hatch, zorder=2)


def _ends(
    axes: Axes, values: Sequence[float], words: Sequence[str], labels: Sequence[str], unit: str
) -> None:
    """Room for the values beside the longest bars, whichever way they go."""
    low, high = min(0.0, *values), max(0.0, *values)
    if low == high:
        high = 1.0
    width = 72 * WIDTH - 25 - _LETTER * max(len(line) for label in labels for line in label.split("\n"))
    beside = [10 + _LETTER * len(word) for word in words]
    left = max((b for b, v in zip(beside, values, strict=True) if v < 0), default=4.0) / width
    right = max((b for b, v in zip(beside, values, strict=True) if v >= 0), default=4.0) / width
    size = (high - low) / max(1 - left - right, 0.2)
    low, high = low - left * size, high + right * size
    axes.set_xlim(low, high)
    set_ticks(axes.xaxis, linear_ticks(low, high, unit or "%", most=6))


def _bounded(value: float | None, scale: float) -> float:
    return 0.0 if value is None else max(-_MOST_SHOWN, min(_MOST_SHOWN, value * scale))


def _checked(row: Bar) -> Bar:
    value = row.value
    return Bar(row.label, None if value is None or math.isnan(value) else float(value))
