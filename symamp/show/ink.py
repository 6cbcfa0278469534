"""What pictures are drawn with (room: show): one hue and greys, sizes for half a page, and words as labels.

All of it stays readable in grey print: what differs in hue differs in line or shape too.
"""

from __future__ import annotations

import math
import textwrap
from functools import cache
from typing import TYPE_CHECKING, Any

from symamp.circuit.latex_names import latex_name
from symamp.show.words import error_words

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.legend import Legend
    from matplotlib.text import Text

BLACK = "#111111"
GREY = "#6b6b6b"
LIGHT = "#d4d4d4"
WHITE = "#ffffff"
HUE = "#2f5d8a"  # the one hue; a middle grey when printed without colour
WIDTH = 6.3  # inches: the text of an A4 page with its usual margins
HEIGHT = 3.9
SMALL = 8.0
_LETTER, _BESIDE = 4.6, 40.0  # points: a letter of a legend on average, and what stands beside its words
MISSING = "\ufffd"

SETTINGS: dict[str, Any] = {
    "font.family": ["DejaVu Sans"],  # comes with the plotting library, so pictures look alike everywhere
    "mathtext.fontset": "dejavusans",
    "font.size": 9.0,
    "axes.labelsize": 9.0,
    "axes.titlesize": 9.0,
    "xtick.labelsize": SMALL,
    "ytick.labelsize": SMALL,
    "legend.fontsize": SMALL,
    "legend.frameon": False,
    "axes.linewidth": 0.7,
    "axes.edgecolor": GREY,
    "axes.labelcolor": BLACK,
    "xtick.color": GREY,
    "ytick.color": GREY,
    "xtick.labelcolor": BLACK,
    "ytick.labelcolor": BLACK,
    "text.color": BLACK,
    "axes.axisbelow": True,
    "grid.color": LIGHT,
    "grid.linewidth": 0.5,
    "lines.linewidth": 1.5,
    "hatch.linewidth": 0.7,
    "figure.facecolor": WHITE,
    "savefig.facecolor": WHITE,
    "svg.hashsalt": "symamp",
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
}


def new_figure(width: float = WIDTH, height: float = HEIGHT) -> Figure:
    """An empty figure of that size in inches, in which labels make room for themselves."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), layout="constrained")
    engine: Any = figure.get_layout_engine()
    engine.set(w_pad=0.06, h_pad=0.06)
    return figure


def symbol_label(symbol: str) -> str:
    """A symbol as the trade writes it, as a label; the plain name where it cannot be set."""
    label = f"${latex_name(symbol)}$"
    return label if symbol and _can_be_set(label) and drawable(symbol) == symbol else drawable(symbol)


def drawable(words: str) -> str:
    """Words with a sign for each character that the font lacks, and no line breaks."""
    known = _characters()
    return "".join(c if ord(c) in known else MISSING for c in " ".join(words.split()))


def error_label(error: float | None, unit: str, *, modulus: bool = False) -> str:
    """An error with its sign: "−5.04 %", "+0.12 dB", "+2.00°"; `unit` is "" for a ratio."""
    if error is None or math.isnan(error):
        return "none"
    if math.isinf(error):
        return "infinite" if error > 0 else "−infinite"
    return error_words(error, unit or "%", absolute=bool(unit), modulus=modulus).replace(" deg", "°")


def wrapped(words: str, width: int) -> str:
    """Words in lines of at most so many characters; a longer word is broken."""
    return "\n".join(textwrap.wrap(drawable(words), width)) or " "


def plain_text(words: Text) -> None:
    """A dollar sign in these words is a dollar sign."""
    words.set_parse_math(False)


def spread_legend(figure: Figure, handles: list[Any]) -> Legend | None:
    """A legend below all panels, in as few lines as the width takes; none where there is nothing to explain."""
    if not handles:
        return None
    widths = [_BESIDE + _LETTER * len(handle.get_label()) for handle in handles]
    room = 72 * figure.get_figwidth() - 10
    columns = next(n for n in range(len(widths), 0, -1) if n == 1 or _columns_width(widths, n) <= room)
    return figure.legend(
        handles=handles, loc="outside lower center", ncols=columns, handlelength=2.4, columnspacing=1.6
    )


def _columns_width(widths: list[float], columns: int) -> float:
    """Points that so many columns take; they are filled one after the other, the first ones fuller."""
    full, more = divmod(len(widths), columns)
    total, start = 0.0, 0
    for k in range(columns):
        end = start + full + (k < more)
        total += max(widths[start:end])
        start = end
    return total


def bare_frame(axes: Axes) -> None:
    """No line at the top and at the right."""
    axes.spines["top"].set_visible(False)
    axes.spines["right"].set_visible(False)


@cache
def _characters() -> frozenset[int]:
    from matplotlib.font_manager import findfont, get_font

    return frozenset(get_font(findfont("DejaVu Sans", fallback_to_default=False)).get_charmap())


@cache
def _can_be_set(label: str) -> bool:
    from matplotlib.mathtext import MathTextParser

    try:
        MathTextParser("path").parse(label)
    except ValueError:
        return False
    return True
