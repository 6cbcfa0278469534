"""Bode plots (room: show): magnitude and phase over frequency, exact against approximate, poles and zeros marked."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from symamp.exact.response import Response
from symamp.show.axes import linear_ticks, log_ticks, set_ticks, widened
from symamp.show.curve import Curve, curve_of, frequency_range
from symamp.show.ink import BLACK, HUE, bare_frame, new_figure, spread_legend
from symamp.show.picture import Picture
from symamp.show.words import value_words

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

_TALL = 4.3  # inches
_HIDDEN = 0.05  # of an undamped root's frequency: what lies so near says nothing about the panel's height
_MOST_LISTED = 6
_OHM = {"ohm": "Ω"}


def bode(exact: Curve, approximate: Curve | None = None, *, name: str = "bode", title: str = "") -> Picture:
    """Two panels over frequency in Hz: the exact curve solid, the approximate one dashed.

    × and ∘ mark poles and zeros on their curve, at |root|/2π; a root at 0 Hz stands at the left edge, one
    outside the frequencies shown is left out. The approximate phase is moved by whole turns to where it lies near
    the exact one. `title` says what response it is, for the words beside the picture.
    """
    if exact.hz.size < 2:
        raise ValueError("a curve needs two frequencies or more")
    what = title or "the response"
    caption = f"Bode plot of {what}" + (", exact and approximate" if approximate else "")
    return Picture(name, caption, _alt(what, exact, approximate), partial(_draw, exact, approximate))


def bode_of(exact: Response, approximate: Response | None = None) -> Picture:
    """The Bode plot of a response at the bias point, over what frequencies both have something to show."""
    both = [exact] if approximate is None else [exact, approximate]
    low, high = frequency_range(*both)
    curves = [curve_of(response, low, high) for response in both]
    return bode(*curves, name=f"{exact.name}-bode", title=exact.name)


def _draw(exact: Curve, approximate: Curve | None) -> Figure:
    figure = new_figure(height=_TALL)
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[1.25, 1])
    curves = [exact] if approximate is None else [exact, turned(approximate, exact)]
    height = _height(curves)
    handles: list[Any] = []
    styles: list[dict[str, Any]] = [
        {"color": BLACK, "linestyle": "-", "linewidth": 1.4, "zorder": 3},
        {"color": HUE, "linestyle": (0, (5, 2.5)), "linewidth": 1.8, "zorder": 3.5},
    ]
    for curve, style, word in zip(curves, styles, ("exact", "approximate"), strict=False):
        db = np.where(np.isinf(curve.db), np.sign(curve.db) * 1e5, curve.db)
        handles += upper.plot(curve.hz, db, label=word, **style)
        lower.plot(curve.hz, curve.deg, label=word, **style)
    _frequency_axis(upper, lower, curves)
    upper.set_ylim(*height)
    # The approximate marks are drawn larger and lighter, so that both are seen where they coincide.
    for curve, word in reversed(list(zip(curves, ("exact", "approximate"), strict=False))):
        handles += _marks(upper, curve, word, only=approximate is None)
    set_ticks(upper.yaxis, linear_ticks(*height, "decibels"))
    turn = _turn(curves)
    lower.set_ylim(*turn)
    set_ticks(lower.yaxis, linear_ticks(*turn, "degrees", most=6))
    upper.set_ylabel(
        "magnitude in dB" + (f" over 1 {_OHM.get(exact.unit, exact.unit)}" if exact.unit else "")
    )
    lower.set_ylabel("phase in degrees")
    lower.set_xlabel("frequency in Hz")
    for axes in (upper, lower):
        axes.grid(True, which="major")
        bare_frame(axes)
    figure.align_ylabels([upper, lower])
    if all(np.isneginf(curve.db).all() for curve in curves):
        upper.text(0.5, 0.5, "the response is 0", transform=upper.transAxes, ha="center", va="center")
    order = ["exact", "approximate"]
    handles.sort(key=lambda h: (" of " in h.get_label(), *(w not in h.get_label() for w in order)))
    spread_legend(figure, handles)
    return figure


def turned(curve: Curve, other: Curve) -> Curve:
    """The curve with its phase moved by whole turns, so that over most frequencies it lies near the other's.

    An inverting stage starts from 180°, and behind a coupling capacitor from −90°: without this they would lie a
    turn apart where they are the same.
    """
    known = np.isfinite(other.deg)
    if not known.any() or not np.isfinite(curve.deg).any():
        return curve
    beside = np.interp(np.log(curve.hz), np.log(other.hz[known]), other.deg[known])
    turns = round(float(np.nanmedian(beside - curve.deg)) / 360)
    return replace(curve, deg=curve.deg + 360 * turns)


def _frequency_axis(upper: Axes, lower: Axes, curves: Sequence[Curve]) -> None:
    low, high = (float(f(curve.hz[k] for curve in curves)) for f, k in ((min, 0), (max, -1)))
    for axes in (upper, lower):
        axes.set_xscale("log")
        axes.set_xlim(low, high)
    set_ticks(lower.xaxis, log_ticks(low, high, "Hz", most=9))
    set_ticks(upper.xaxis, log_ticks(low, high, "Hz", most=9))
    upper.tick_params(axis="x", which="both", labelbottom=False)


def _height(curves: Sequence[Curve]) -> tuple[float, float]:
    """The magnitudes that the panel shows: without the peaks of undamped roots, which have no end."""
    kept: list[np.ndarray] = []
    for curve in curves:
        seen = np.isfinite(curve.db)
        for hz in curve.undamped:
            seen &= np.abs(curve.hz / hz - 1) > _HIDDEN
        kept.append(curve.db[seen])
    values = np.concatenate(kept)
    if not values.size:
        return -20.0, 20.0
    low, high = float(values.min()), float(values.max())
    room = max(0.07 * (high - low), 3.0 if high - low < 20 else 0.0)
    return low - room, high + room


def _turn(curves: Sequence[Curve]) -> tuple[float, float]:
    values = np.concatenate([curve.deg[np.isfinite(curve.deg)] for curve in curves])
    if not values.size:
        return -180.0, 180.0
    low, high = widened(float(values.min()), float(values.max()))
    room = max(0.06 * (high - low), (20 - (high - low)) / 2)
    return low - room, high + room


def _marks(axes: Axes, curve: Curve, word: str, only: bool) -> list[Line2D]:
    """× and ∘ on the magnitude of a curve."""
    drawn: list[Line2D] = []
    exact = word == "exact"
    colour, size = (BLACK, 6.5) if exact else (HUE, 9.5)
    kinds = (("pole", "x", curve.poles, colour), ("zero", "o", curve.zeros, "none"))
    for kind, marker, roots, face in kinds:
        places = mark_places(curve, roots, axes.get_ylim())
        if not places:
            continue
        at_left = any(root == 0 for root in roots)
        label = f"{kind}s" if len(places) > 1 else kind
        label += "" if only else f" of the {word}"
        label += " (0 Hz: left edge)" if at_left else ""
        drawn += axes.plot(
            [x for x, _ in places],
            [y for _, y in places],
            linestyle="none",
            marker=marker,
            markersize=size,
            markeredgewidth=1.4 if exact else 1.0,
            markeredgecolor=colour,
            markerfacecolor=face,
            label=label,
            clip_on=False,
            zorder=5,
        )
    return drawn


def mark_places(
    curve: Curve, roots: Sequence[float], height: tuple[float, float]
) -> list[tuple[float, float]]:
    """Where the marks of roots stand, in Hz and dB: on the curve, or at the panel's edge where it leaves it."""
    low, high = float(curve.hz[0]), float(curve.hz[-1])
    found = []
    db = np.where(np.isnan(curve.db), height[0], np.clip(curve.db, *height))
    for root in roots:
        if root == 0 or low <= root <= high:
            x = max(root, low)
            y = float(np.interp(math.log(x), np.log(curve.hz), db))
            if any(abs(x / hz - 1) < _HIDDEN / 10 for hz in curve.undamped):
                y = _edge(curve, x, height)
            found.append((x, y))
    return found


def _edge(curve: Curve, hz: float, height: tuple[float, float]) -> float:
    """Up for an undamped pole, down for an undamped zero."""
    up = min((abs(p - hz) for p in curve.poles), default=math.inf)
    down = min((abs(z - hz) for z in curve.zeros), default=math.inf)
    return height[1] if up <= down else height[0]


def _alt(what: str, exact: Curve, approximate: Curve | None) -> str:
    span = f"from {_words(exact.hz[0])} to {_words(exact.hz[-1])}"
    parts = [f"Magnitude and phase of {what} {span}."]
    for curve, word in ((exact, "exact"), (approximate, "approximate")):
        if curve is None:
            continue
        over = f" over 1 {curve.unit}" if curve.unit else ""
        ends = [value_words(float(x), "dB", 3) for x in (curve.db[0], curve.db[-1])]
        if np.isneginf(curve.db).all():
            parts.append(f"The {word} response is 0.")
            continue
        parts.append(f"The {word} magnitude goes from {ends[0]}{over} to {ends[1]}.")
        for kind, roots in (("pole", curve.poles), ("zero", curve.zeros)):
            if roots:
                more = f" and {len(roots) - _MOST_LISTED} more" if len(roots) > _MOST_LISTED else ""
                listed = _listed(roots[:_MOST_LISTED])
                are = f"{kind} is" if len(roots) == 1 else f"{kind}s are"
                parts.append(f"Its {are} at {listed}{more}.")
    return " ".join(parts)


def _listed(roots: Sequence[float]) -> str:
    """Frequencies, those that come more than once with how often."""
    counts = Counter(_words(hz) for hz in roots)
    return ", ".join(hz if n == 1 else f"{hz} ({n} of them)" for hz, n in counts.items())


def _words(hz: float) -> str:
    return value_words(float(hz), "Hz", 3)
