"""Formulas in the terminal (room: show): stacked fractions, broken at the signs of their sums.

A formula is cut into words, a term with its sign and brackets each; words are set one after the other, and a
new line begins under the first term of the sum that is being continued.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from symamp.exact.shape import VARIABLE, Factor, QuadraticRoot, Shape, shape_of
from symamp.exact.writing import (
    PRODUCT,
    Notation,
    Written,
    bracketed,
    factor_written,
    inline_fraction,
    parts_written,
    root_parts,
    root_written,
    shape_written,
    term_words,
)

MAX_LINES = 40  # a formula that needs more is shown in part
_SHOWN = 12  # lines of each part of a formula that is too long
_NARROW = 16  # columns; with fewer left beside it, a label stands on a line of its own
_INDENT = 2
_SUPERSCRIPT = {2: "²", 3: "³", 4: "⁴", 5: "⁵", 6: "⁶", 7: "⁷", 8: "⁸", 9: "⁹"}


def _power(base: str, power: int) -> str:
    return base + _SUPERSCRIPT.get(power, f"^{power}")


TERMINAL = Notation(
    symbol=str,
    power=_power,
    fraction=inline_fraction,
    root="√({})".format,
    times="·",
    minus="−",
)


def one_line(shape: Shape | QuadraticRoot) -> str:
    """The formula on one line: `−gm1·(gm2 + gds2)/(gds1·gds2)`."""
    if isinstance(shape, QuadraticRoot):
        return root_written(shape, TERMINAL)
    return shape_written(shape, TERMINAL)


def formula_lines(shape: Shape | QuadraticRoot, width: int, *, label: str = "") -> list[str]:
    """The formula as lines of at most `width` columns, a fraction stacked with `label = ` on its bar's line.

    A line is wider only where one term alone is. A formula of more than MAX_LINES lines shows the first ones
    and says how many terms there are. A quadratic root that is too wide is written with the letters a, b and
    c, which follow.
    """
    if width < 1:
        raise ValueError(f"width={width!r} must be at least 1")
    if isinstance(shape, QuadraticRoot):
        return _root_lines(shape, width, label)
    above, below = parts_written(shape, TERMINAL)
    sign = TERMINAL.minus if shape.coefficient < 0 else ""
    if below is None or _is_number(shape):
        words = _signed_words(shape, sign) if below is None else [_Word(sign + one_line(abs_of(shape)))]
        return _labelled(words, width, label)
    top = _words(abs(shape.coefficient.numerator), shape.numerator)
    bottom = _words(shape.coefficient.denominator, shape.denominator)
    head, lead = _head(label, sign and f"{sign} ", width, _longest([*top, *bottom]))
    room = width - len(lead)
    return head + _stacked(_set(top, room, MAX_LINES), _set(bottom, room, MAX_LINES), lead, room)
