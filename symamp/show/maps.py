"""Maps of an error over two symbols (room: show): one hue, darker for larger, the frontier as a labelled line."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from symamp.show.axes import linear_ticks, log_ticks, set_ticks, tick_label
from symamp.show.ink import BLACK, GREY, WHITE, new_figure, spread_legend, symbol_label, wrapped
from symamp.show.picture import Picture
from symamp.show.words import value_words

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from symamp.judge.error_map import ErrorMap

# Bands of |error|, in multiples of what is allowed; the last one has no end.
BANDS = (0.0, 0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0)
_SHADES = ("#ffffff", "#eaf0f5", "#d3dfea", "#b8cbdd", "#8fadca", "#6a90b5", "#47729d", "#264b70")
_FAR = 1e3  # multiples of what is allowed that stand for all above
_WORDS = np.array([0.13, 0.08])  # what the words at a line take of the panel
_SHORT = 0.2  # of a line, in parts of the panel: too short for words
_MEASURE = {"dB": "dB", "deg": "degrees"}


@dataclass(frozen=True)
class Side:
    """A side of a map: a symbol or alias, its unit, its values ascending, and its value at the bias point."""

    name: str
    unit: str
    values: np.ndarray
    bias: float

    @property
    def log(self) -> bool:
        """Whether its values are spaced evenly in their logarithms rather than in themselves."""
        if self.values[0] <= 0 or self.values.size < 3:
            return False
        ratios, steps = np.diff(np.log(self.values)), np.diff(self.values)
        return bool(np.ptp(ratios) / ratios.mean() < np.ptp(steps) / steps.mean())


@dataclass(frozen=True)
class Map:
    """`error[j, i]` at x.values[i], y.values[j]: a ratio, or in dB or degrees where `unit` says so; nan where
    there is none. `within` is what is allowed, in the same unit. `modulus` says that the error has no sign."""

    x: Side
    y: Side
    error: np.ndarray
    within: float
    unit: str = ""
    modulus: bool = False
    what: str = "the claim"

    def __post_init__(self) -> None:
        for side, count in ((self.x, self.error.shape[1]), (self.y, self.error.shape[0])):
            if side.values.shape != (count,) or count < 2 or not (np.diff(side.values) > 0).all():
                raise ValueError(
                    f"{side.name} needs two ascending values or more, one for each line of the error"
                )
        if not (math.isfinite(self.within) and self.within >= 0):
            raise ValueError(f"within={self.within!r} must be 0 or more")


def draw_map(given: Map, *, name: str = "map") -> Picture:
    """The map of an error over two symbols.

    Shades are bands of |error| in multiples of what is allowed; lines are the frontier, where the error is what
    is allowed; hatched is where there is no value. What cannot be seen on it is said below it.
    """
    over = f"{given.x.name} and {given.y.name}"
    allowed = level_words(given.within, given.unit)
    caption = f"Error of {given.what} over {over}, and the frontier where it is {allowed}"
    alt = f"Map of the error of {given.what} over {over}. {' '.join(_said(given))}"
    return Picture(name, caption, alt, partial(_draw, given))


def map_of(found: ErrorMap) -> Picture:
    """The picture of a claim's error map."""
    sides = [Side(side.name, side.unit, side.values, side.bias) for side in (found.x, found.y)]
    claim = found.claim
    what = f"{claim.about} = {claim.formula}"
    given = Map(sides[0], sides[1], found.error, claim.within, claim.within_unit, found.modulus, what)
    return draw_map(given, name=f"{claim.about}-{found.x.name}-{found.y.name}")


def frontier(given: Map) -> list[tuple[float, np.ndarray]]:
    """The lines (n, 2) on which the error is +within or −within, each with that level; none where within is 0."""
    from contourpy import contour_generator

    if not given.within:
        return []
    x, y = (np.log(side.values) if side.log else side.values for side in (given.x, given.y))
    generator = contour_generator(x, y, np.ma.masked_invalid(_without_jumps(given)))
    found = []
    for sign in (1.0,) if given.modulus else (1.0, -1.0):
        for line in generator.lines(sign * math.asinh(1.0)):
            points = np.array(line, dtype=float)
            for k, side in enumerate((given.x, given.y)):
                points[:, k] = np.exp(points[:, k]) if side.log else points[:, k]
            found.append((sign * given.within, points))
    return found


def level_words(level: float, unit: str) -> str:
    """An error as it is written at a line: "5 %", "−0.5 dB", "2°"."""
    scaled = level if unit else 100 * level
    mantissa, power = f"{scaled:.2e}".split("e")
    return (
        tick_label(round(float(mantissa) * 100), int(power) - 2, unit or "%")
        if scaled
        else f"0 {unit or '%'}"
    )


def _multiples(given: Map) -> np.ndarray:
    """The error in multiples of what is allowed (of the largest, where that is nothing), cut off far out."""
    size = np.abs(given.error[np.isfinite(given.error)])
    unit = given.within or (float(size.max()) / BANDS[-1] if size.size and size.max() else 1.0)
    with np.errstate(over="ignore", invalid="ignore"):
        return np.clip(given.error / unit, -_FAR, _FAR)


def _without_jumps(given: Map) -> np.ndarray:
    """asinh of the multiples, nan on both sides of where the error goes through infinity.

    asinh is even about 0 and slow far out, so that a line between two values is placed well whichever they are.
    """
    values = _multiples(given)
    struck = np.zeros(values.shape, dtype=bool)
    for axis in (0, 1):
        jump = _through_infinity(np.moveaxis(values, axis, 0))
        view = np.moveaxis(struck, axis, 0)
        view[:-1] |= jump
        view[1:] |= jump
    return np.where(struck, np.nan, np.arcsinh(values))


def _through_infinity(values: np.ndarray) -> np.ndarray:
    """Whether the error changes its sign between a line and the next by way of infinity: it grows towards there.

    Where it changes its sign through 0 it shrinks on at least one of the two sides.
    """
    size = np.abs(values)
    edge = np.full((1, values.shape[1]), np.nan)
    before, after = np.concatenate((edge, size[:-2])), np.concatenate((size[2:], edge))
    with np.errstate(invalid="ignore"):
        turns = (values[:-1] * values[1:] < 0) & (np.minimum(size[:-1], size[1:]) > 1)
        shrinks = (size[:-1] < before) | (size[1:] < after)
    known = np.isfinite(before) | np.isfinite(after)
    return turns & known & ~shrinks


def _draw(given: Map) -> Figure:
    from matplotlib.patches import Patch, Rectangle

    figure = new_figure(height=4.2)
    axes = figure.subplots()
    _sides(axes, given)
    handles: list[Any] = []
    if np.isnan(given.error).any():
        blank: dict[str, Any] = {"facecolor": WHITE, "edgecolor": "#9a9a9a", "hatch": "xxx", "linewidth": 0.0}
        axes.add_patch(Rectangle((0, 0), 1, 1, transform=axes.transAxes, zorder=0.5, **blank))
        handles.append(Patch(label="no value", **blank))
    _shades(figure, axes, given)
    handles = _lines(axes, given) + _bias(axes, given) + handles
    if handles:
        spread_legend(figure, handles)
    words = [line for line in _said(given) if line not in _plain(given)]
    if words:
        axes.set_title("\n".join(wrapped(line, 76) for line in words), loc="left", fontsize=8)
    return figure


def _sides(axes: Axes, given: Map) -> None:
    axes.set_xscale("log" if given.x.log else "linear")
    axes.set_yscale("log" if given.y.log else "linear")
    for side, axis in ((given.x, axes.xaxis), (given.y, axes.yaxis)):
        ends = float(side.values[0]), float(side.values[-1])
        set_ticks(axis, (log_ticks if side.log else linear_ticks)(*ends, side.unit))
    axes.set_xlim(given.x.values[0], given.x.values[-1])
    axes.set_ylim(given.y.values[0], given.y.values[-1])
    axes.set_xlabel(symbol_label(given.x.name), fontsize=10.5)
    axes.set_ylabel(symbol_label(given.y.name), fontsize=10.5)


def _shades(figure: Figure, axes: Axes, given: Map) -> None:
    """Bands of |error|, and the bar that says what they are."""
    from matplotlib.colors import BoundaryNorm, ListedColormap

    edges = np.arcsinh([*BANDS, 2 * _FAR])
    colours = ListedColormap(list(_SHADES))
    size = np.ma.masked_invalid(np.arcsinh(np.abs(_multiples(given))))
    kept = size if size.count() else np.ma.zeros(size.shape)
    shown = axes.contourf(
        given.x.values,
        given.y.values,
        kept,
        levels=edges,
        cmap=colours,
        norm=BoundaryNorm(edges, len(_SHADES)),
    )
    if not size.count():
        shown.set_visible(False)
    largest = float(np.abs(given.error[np.isfinite(given.error)]).max(initial=0.0))
    if not (given.within or largest):
        return  # one shade, and nothing to measure it by
    bar: Any = figure.colorbar(shown, ax=axes, spacing="uniform", pad=0.02, aspect=24, drawedges=True)
    unit = given.within or largest / BANDS[-1]
    labels = [level_words(multiple * unit, given.unit) for multiple in BANDS]
    bar.set_ticks([*edges[:-1]], labels=labels)
    bar.ax.minorticks_off()
    bar.ax.tick_params(length=0)
    bar.outline.set_linewidth(0.6)
    bar.dividers.set_linewidth(0.4)
    bar.dividers.set_color(GREY)
    bar.set_label(f"size of the error in {_MEASURE.get(given.unit, '%')}")


def _lines(axes: Axes, given: Map) -> list[Any]:
    """The frontier, each line with its level where there is room for it."""
    from matplotlib.lines import Line2D

    lines = frontier(given)
    bias = np.array([[given.x.bias, given.y.bias]])
    with np.errstate(divide="ignore"):
        taken = [*axes.transLimits.transform(axes.transScale.transform(bias))] if _bias_is_seen(given) else []
    for level, points in lines:
        style: Any = "-" if level > 0 else (0, (6, 2))
        axes.plot(points[:, 0], points[:, 1], color=BLACK, linewidth=1.5, linestyle=style, gid="frontier")
        place = _room(axes, points, taken)
        if place is not None:
            box: Any = {"facecolor": WHITE, "edgecolor": "none", "pad": 1.2, "alpha": 0.85}
            x, y = (float(part) for part in points[place])
            words = _signed(level, given)
            axes.text(x, y, words, fontsize=8, ha="center", va="center", bbox=box, clip_on=True)
    handles = []
    for sign, style in ((1, "-"), (-1, (0, (6, 2)))):
        if any(level * sign > 0 for level, _ in lines):
            label = f"frontier, error {_signed(sign * given.within, given)}"
            handles.append(Line2D([], [], color=BLACK, linewidth=1.5, linestyle=style, label=label))
    return handles


def _signed(level: float, given: Map) -> str:
    return ("+" if level > 0 and not given.modulus else "") + level_words(level, given.unit)


def _room(axes: Axes, points: np.ndarray, taken: list[np.ndarray]) -> int | None:
    """The point of a line, near its middle as it is seen, where words have room; None for none.

    `taken` are the places of other words, in parts of the panel; the one found is added.
    """
    seen = axes.transLimits.transform(axes.transScale.transform(points))
    way = np.concatenate(([0.0], np.cumsum(np.hypot(*np.diff(seen, axis=0).T))))
    free = ((seen > 0.08) & (seen < 0.92)).all(axis=1)
    for place in taken:
        free &= (np.abs(seen - place) > _WORDS).any(axis=1)
    if way[-1] < _SHORT or not free.any():
        return None
    found = int(np.argmin(np.where(free, np.abs(way - way[-1] / 2), np.inf)))
    taken.append(seen[found])
    return found


def _bias(axes: Axes, given: Map) -> list[Any]:
    if not _bias_is_seen(given):
        return []
    return axes.plot(
        [given.x.bias],
        [given.y.bias],
        linestyle="none",
        marker="o",
        markersize=7,
        markerfacecolor=BLACK,
        markeredgecolor=WHITE,
        markeredgewidth=1.4,
        label="bias point",
        clip_on=False,
        zorder=6,
    )


def _bias_is_seen(given: Map) -> bool:
    slack = 1e-9
    return all(
        side.values[0] - slack * abs(side.values[0])
        <= side.bias
        <= side.values[-1] + slack * abs(side.values[-1])
        for side in (given.x, given.y)
    )


def _plain(given: Map) -> list[str]:
    """What the picture shows anyway."""
    return [_range_words(given), _bias_words(given)] if frontier(given) else [_bias_words(given)]


def _said(given: Map) -> list[str]:
    """What is to be seen, in words."""
    size = np.abs(given.error[np.isfinite(given.error)])
    allowed = level_words(given.within, given.unit)
    found = []
    if not size.size:
        found.append("There is no value in this window.")
    elif not size.any():
        found.append("The error is 0 everywhere in this window.")
    elif not frontier(given):
        largest, least = (level_words(float(x), given.unit) for x in (size.max(), size.min()))
        if size.max() <= given.within:
            found.append(f"No frontier in this window: the error stays within {allowed}, at most {largest}.")
        elif size.min() > given.within:
            found.append(
                f"No frontier in this window: the error is beyond {allowed} everywhere, at least {least}."
            )
        else:
            found.append(f"No frontier is drawn; the error goes from {least} to {largest}.")
    else:
        found.append(_range_words(given))
    found.append(_bias_words(given) if _bias_is_seen(given) else "The bias point lies outside this window.")
    return found


def _range_words(given: Map) -> str:
    size = np.abs(given.error[np.isfinite(given.error)])
    ends = (level_words(float(x), given.unit) for x in (size.min(initial=np.inf), size.max(initial=0.0)))
    return "Without its sign it goes from {} to {}.".format(*ends) if size.size else ""


def _bias_words(given: Map) -> str:
    places = ", ".join(f"{side.name} {value_words(side.bias, side.unit, 3)}" for side in (given.x, given.y))
    return f"The bias point is at {places}."
