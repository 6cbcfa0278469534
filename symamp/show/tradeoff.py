"""Terms against error (room: show): how short a formula may be for what it may be off."""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import partial
from typing import TYPE_CHECKING, Any

from symamp.show.axes import log_ticks, set_ticks, whole_ticks
from symamp.show.ink import BLACK, HUE, WHITE, bare_frame, new_figure, spread_legend
from symamp.show.maps import level_words
from symamp.show.picture import Picture

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_LEAST = 1e-30  # an error that is not 0 is drawn as this at least, and as its inverse at most
_WIDE = 40  # times the fewest terms: beyond, the axis of terms is logarithmic


def tradeoff(
    steps: Sequence[tuple[int, float]],
    within: float,
    *,
    unit: str = "",
    name: str = "tradeoff",
    title: str = "",
) -> Picture:
    """Number of terms against the worst error without its sign, and the line of what is allowed.

    `steps` are (terms, worst error), in any order, an error a ratio or in dB or degrees; 0 is an exact formula,
    nan and infinity are left out. The shortest formula that is allowed is marked. Raises ValueError where nothing is
    left, and for terms below 1.
    """
    if any(terms < 1 for terms, _ in steps):
        raise ValueError("a formula has one term at least")
    kept = tuple(sorted((int(n), _bounded(abs(float(e)))) for n, e in steps if math.isfinite(e)))
    if not kept:
        raise ValueError("there is no formula with a worst error to draw")
    chosen = min(((n, e) for n, e in kept if e <= within), default=None)
    about = f" of {title}" if title else ""
    caption = f"Terms of the formula{about} against its worst error"
    said = "; ".join(f"{n} {'term' if n == 1 else 'terms'} {level_words(e, unit)}" for n, e in kept[:12]) + (
        "; …" if len(kept) > 12 else ""
    )
    end = (
        f"The shortest within {level_words(within, unit)} has {chosen[0]} {'term' if chosen[0] == 1 else 'terms'}."
        if chosen
        else f"None stays within {level_words(within, unit)}."
    )
    return Picture(name, caption, f"{caption}: {said}. {end}", partial(_draw, kept, within, unit, chosen))


def _draw(
    steps: tuple[tuple[int, float], ...], within: float, unit: str, chosen: tuple[int, float] | None
) -> Figure:
    figure = new_figure(height=3.4)
    axes = figure.subplots()
    scale = 1.0 if unit else 100.0
    low, high = error_ends([e * scale for _, e in steps], within * scale)
    axes.set_yscale("log")
    axes.set_ylim(low, high)
    set_ticks(axes.yaxis, log_ticks(low, high, unit or "%"))
    _terms_axis(axes, [n for n, _ in steps])
    terms = [n for n, _ in steps]
    heights = [max(e * scale, low) for _, e in steps]
    handles: list[Any] = []
    if within > 0:
        label = f"allowed, {level_words(within, unit)}"
        handles.append(
            axes.axhline(within * scale, color=BLACK, linewidth=1.1, linestyle=(0, (6, 3)), label=label)
        )
    axes.step(terms, heights, where="post", color=HUE, linewidth=1.0)
    found = [(n, h) for (n, e), h in zip(steps, heights, strict=True) if e > 0]
    if found:
        handles += axes.plot(*zip(*found, strict=True), "o", color=HUE, markersize=5, label="formula")
    exact = [n for n, e in steps if e == 0]
    if exact:
        label = "exact formula, at the bottom edge"
        marks: dict[str, Any] = {
            "markerfacecolor": WHITE,
            "markeredgecolor": HUE,
            "markersize": 6,
            "clip_on": False,
        }
        handles += axes.plot(exact, [low] * len(exact), "s", label=label, zorder=5, **marks)
    if chosen:
        label = f"shortest that is allowed, {chosen[0]} {'term' if chosen[0] == 1 else 'terms'}"
        marks = {"markerfacecolor": "none", "markeredgecolor": BLACK, "markersize": 11, "clip_on": False}
        place = ([chosen[0]], [max(chosen[1] * scale, low)])
        handles += axes.plot(*place, "o", label=label, zorder=6, **marks)
    axes.set_xlabel("number of terms")
    axes.set_ylabel(f"worst error in {'degrees' if unit == 'deg' else unit or '%'}")
    axes.grid(True)
    bare_frame(axes)
    spread_legend(figure, handles)
    return figure


def error_ends(errors: Sequence[float], level: float) -> tuple[float, float]:
    """The ends of the axis of errors: all that is not 0, and the level, with half a decade's room below."""
    seen = [e for e in (*errors, level) if e > 0] or [1.0]
    low, high = min(seen), max(seen)
    room = max((high / low) ** 0.06, 1.5)
    return low / (room * (1.6 if 0 in errors else 1.0)), high * room


def _bounded(error: float) -> float:
    return min(max(error, _LEAST), 1 / _LEAST) if error else 0.0


def _terms_axis(axes: Axes, terms: Sequence[int]) -> None:
    """Whole numbers, evenly, or in decades where they lie far apart."""
    low, high = min(terms), max(terms)
    if high > _WIDE * low:
        ends = (low / 1.3, high * 1.3)
        axes.set_xscale("log")
        axes.set_xlim(*ends)
        set_ticks(axes.xaxis, log_ticks(*ends, "", most=11))
        return
    room = max(0.6, 0.04 * (high - low))
    axes.set_xlim(low - room, high + room)
    set_ticks(axes.xaxis, whole_ticks(low, high))
