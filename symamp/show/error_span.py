"""An error over the span (room: show): its profile over sampled bias points, or a mark for each row of a table."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from symamp.show.axes import linear_ticks, set_ticks, signed_log_ticks, whole_ticks, widened
from symamp.show.ink import BLACK, GREY, HUE, LIGHT, bare_frame, error_label, new_figure, spread_legend
from symamp.show.maps import level_words
from symamp.show.picture import Picture

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_FAR = 60.0  # times what else there is to see: beyond, the axis is logarithmic on both sides of 0
_MOST_DRAWN = 2000  # points of a profile: more are not told apart in print


@dataclass(frozen=True)
class Errors:
    """The error of one quantity at the bias points of a span: ratios, or in dB or degrees where `unit` says so.

    `values` holds nan where there is none. `rows` are the row numbers of a table, None where the points were
    sampled. `bias` is the error at the bias point, `within` what is allowed; None where there is none.
    """

    values: np.ndarray
    rows: np.ndarray | None = None
    bias: float | None = None
    within: float | None = None
    unit: str = ""
    modulus: bool = False
    what: str = "the approximation"

    def __post_init__(self) -> None:
        if self.values.ndim != 1 or not self.values.size:
            raise ValueError("the errors must be a row of numbers, one at least")
        if self.rows is not None and self.rows.shape != self.values.shape:
            raise ValueError(f"{self.rows.size} row numbers do not go with {self.values.size} errors")


def error_span(given: Errors, *, name: str = "error-span") -> Picture:
    """The error over the span, with its least and greatest value, that at the bias point, and what is allowed."""
    by = "rows of the table" if given.rows is not None else "sampled bias points"
    caption = f"Error of {given.what} over the span, {given.values.size} {by}"
    return Picture(name, caption, f"{caption}. {_said(given)}", partial(_draw, given))


def profile(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The share of the bias points in %, and the error that so many do not exceed: finite values in rising order."""
    known = np.sort(values[np.isfinite(values)])
    if known.size > _MOST_DRAWN:
        kept = np.unique(np.round(np.linspace(0, known.size - 1, _MOST_DRAWN)).astype(int))
    else:
        kept = np.arange(known.size)
    share = 100 * kept / max(known.size - 1, 1)
    return share, known[kept]


def _draw(given: Errors) -> Figure:
    figure = new_figure(height=3.4)
    axes = figure.subplots()
    scale = 1.0 if given.unit else 100.0
    known = given.values[np.isfinite(given.values)] * scale
    handles: list[Any] = []
    if given.within is not None:
        handles.append(_allowed(axes, given, scale))
    bias = None if given.bias is None or not math.isfinite(given.bias) else given.bias * scale
    if bias is not None:
        label = f"at the bias point, {_words(given.bias, given)}"
        handles.append(axes.axhline(bias, color=BLACK, linewidth=1.0, linestyle=(0, (1, 1.5)), label=label))
    shown = [*known, *([] if bias is None else [bias])]
    _error_axis(axes, given, np.array(shown), scale)
    if given.rows is None:
        handles += _sampled(axes, given, scale)
    else:
        handles += _table(axes, given, scale)
    if known.size:
        handles += _ends(axes, given, scale)
    else:
        axes.text(0.5, 0.5, "no value at any of these points", transform=axes.transAxes, ha="center")
    without = given.values.size - known.size
    if without and known.size:
        of = "rows" if given.rows is not None else "points"
        axes.set_title(f"{without} of {given.values.size} {of} have no value.", loc="left", fontsize=8)
    what = "size of the error" if given.modulus else "error"
    axes.set_ylabel(f"{what} in {'degrees' if given.unit == 'deg' else given.unit or '%'}")
    axes.grid(True, axis="y")
    bare_frame(axes)
    spread_legend(figure, handles)
    return figure


def _allowed(axes: Axes, given: Errors, scale: float) -> Any:
    """The band that is allowed."""
    level = (given.within or 0.0) * scale
    low = 0.0 if given.modulus else -level
    axes.axhspan(low, level, facecolor=LIGHT, alpha=0.5, edgecolor="none", zorder=0.5)
    for edge in {low, level} - ({0.0} if given.modulus else set()):
        axes.axhline(edge, color=GREY, linewidth=1.0, linestyle=(0, (6, 3)), zorder=0.6)
    from matplotlib.patches import Patch

    sign = "" if given.modulus else "±"
    words = level_words(given.within or 0.0, given.unit)
    return Patch(
        facecolor=LIGHT, edgecolor=GREY, linewidth=0.8, linestyle="--", label=f"allowed, {sign}{words}"
    )


def _sampled(axes: Axes, given: Errors, scale: float) -> list[Any]:
    share, error = profile(given.values)
    axes.set_xlim(0, 100)
    set_ticks(axes.xaxis, linear_ticks(0, 100, "%", most=11))
    axes.set_xlabel("bias points with no greater error, in %")
    if not error.size:
        return []
    marker = "." if error.size <= 30 else ""
    return axes.plot(
        share, error * scale, color=HUE, linewidth=1.8, marker=marker, label="error, in rising order"
    )


def _table(axes: Axes, given: Errors, scale: float) -> list[Any]:
    rows = np.asarray(given.rows, dtype=float)
    low, high = float(rows.min()), float(rows.max())
    room = max(0.5, 0.02 * (high - low))
    axes.set_xlim(low - room, high + room)
    set_ticks(axes.xaxis, whole_ticks(int(low), int(high)))
    axes.set_xlabel("row of the table")
    seen = np.isfinite(given.values)
    if not seen.any():
        return []
    axes.vlines(rows[seen], 0, given.values[seen] * scale, color=HUE, linewidth=0.8)
    return axes.plot(
        rows[seen],
        given.values[seen] * scale,
        linestyle="none",
        marker="o",
        markersize=4.5 if rows.size <= 60 else 2.5,
        color=HUE,
        label="error of a row",
    )


def _ends(axes: Axes, given: Errors, scale: float) -> list[Any]:
    """Marks at the least and at the greatest error."""
    values = np.where(np.isfinite(given.values), given.values, np.nan)
    places = (int(np.nanargmin(values)), int(np.nanargmax(values)))
    drawn = []
    for k, word, marker, at_share in zip(
        places, ("least", "greatest"), ("v", "^"), (0.0, 100.0), strict=True
    ):
        x = at_share if given.rows is None else float(given.rows[k])
        if given.rows is None and np.isfinite(values).sum() == 1:
            x = 0.0
        drawn += axes.plot(
            [x],
            [values[k] * scale],
            linestyle="none",
            marker=marker,
            markersize=7.5,
            markerfacecolor="white",
            markeredgecolor=BLACK,
            markeredgewidth=1.2,
            label=f"{word}, {_words(float(values[k]), given)}",
            clip_on=False,
            zorder=6,
        )
    return drawn


def _error_axis(axes: Axes, given: Errors, shown: np.ndarray, scale: float) -> None:
    """An even axis, or a logarithmic one on both sides of 0 where the largest error hides all else."""
    level = (given.within or 0.0) * scale
    size = float(np.abs(shown).max(initial=0.0))
    usual = max(level, float(np.median(np.abs(shown))) if shown.size else 0.0)
    edges = [*shown, *([0.0, level] if given.modulus or not level else [-level, 0.0, level])]
    low, high = widened(float(min(edges)), float(max(edges)))
    if usual and size > _FAR * usual:
        _wide_axis(axes, given, low, high, usual)
        return
    room = 0.06 * (high - low)
    low, high = (0.0 if given.modulus else low - room), high + room
    axes.set_ylim(low, high)
    set_ticks(axes.yaxis, linear_ticks(low, high, given.unit or "%"))


def _wide_axis(axes: Axes, given: Errors, low: float, high: float, inner: float) -> None:
    low, high = (
        1.6 * end if abs(end) > inner else end - 0.5 * inner if end < 0 else end for end in (low, high)
    )
    high = max(high, 1.5 * inner)
    axes.set_yscale("symlog", linthresh=inner, linscale=0.7)
    axes.set_ylim(low, high)
    set_ticks(axes.yaxis, signed_log_ticks(low, high, inner, given.unit or "%"))


def _words(error: float | None, given: Errors) -> str:
    return error_label(error, given.unit, modulus=given.modulus)


def _said(given: Errors) -> str:
    """What is to be seen, in words."""
    known = given.values[np.isfinite(given.values)]
    if not known.size:
        return "None of them has a value."
    said = [f"least {_words(float(known.min()), given)}, greatest {_words(float(known.max()), given)}"]
    if given.bias is not None:
        said.append(f"at the bias point {_words(given.bias, given)}")
    if given.within is not None:
        beyond = int((np.abs(known) > given.within).sum())
        said.append(f"{beyond} of {known.size} beyond {level_words(given.within, given.unit)}")
    return ", ".join(said) + "."
