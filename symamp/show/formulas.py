"""Formulas in the terminal (room: show): stacked fractions, broken at the signs of their sums.

A formula is cut into words, a term with its sign and brackets each; words are set one after the other, and a
new line begins under the first term of the sum that is being continued.
"""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from symamp.exact.shape import VARIABLE, Factor, QuadraticRoot, Shape, shape_of
from symamp.exact.writing import (
    Notation,
    inline_fraction,
    root_parts,
    root_written,
    shape_written,
    term_words,
)

MAX_LINES = 40  # a formula that needs more is shown in part
_WHOLE_RATIO = 34  # columns up to which a ratio is written whole in a table
_SHOWN = 12  # lines of each half of a fraction that is shown in part
_NARROW = 16  # columns; with fewer left beside it, a label stands on a line of its own
_INDENT = 2
_SUPERSCRIPT = {2: "²", 3: "³", 4: "⁴", 5: "⁵", 6: "⁶", 7: "⁷", 8: "⁸", 9: "⁹"}


def _power(base: str, power: int) -> str:
    return base + _SUPERSCRIPT.get(power, f"^{power}")


def _symbol(name: str) -> str:
    return "π" if name == "pi" else name


TERMINAL = Notation(_symbol, _power, inline_fraction, "√({})".format, times="·", minus="−")


def one_line(shape: Shape | QuadraticRoot) -> str:
    """The formula on one line: `−gm1·(gm2 + gds2)/(gds1·gds2)`."""
    if isinstance(shape, QuadraticRoot):
        return root_written(shape, TERMINAL)
    return shape_written(shape, TERMINAL)


def ratio_line(whole: Shape, leading: Shape, most: int = _WHOLE_RATIO) -> str:
    """A ratio on one line: the whole of it where that is short, else ≈ its leading terms."""
    text = one_line(whole)
    return text if whole == leading or len(text) <= most else f"≈ {one_line(leading)}"


def formula_lines(shape: Shape | QuadraticRoot, width: int, *, label: str = "") -> list[str]:
    """The formula as lines of at most `width` columns, a fraction stacked with `label = ` on its bar's line.

    A line is wider only where one term alone is. A formula of more than MAX_LINES lines shows the first ones
    and says how many terms there are. A quadratic root that is too wide is written with the letters a, b and
    c, which follow it. Raises ValueError where `width` is not positive.
    """
    _check_width(width)
    if isinstance(shape, QuadraticRoot):
        return _root_lines(shape, width, label)
    sign = TERMINAL.minus if shape.coefficient < 0 else ""
    above, below = shape.coefficient.as_integer_ratio()
    if not shape.numerator and not shape.denominator:
        return _plain([_Word(one_line(shape))], width, label)
    if below == 1 and not shape.denominator:
        return _plain(_words(abs(above), shape.numerator, before=sign, brackets=bool(sign)), width, label)
    top, bottom = _words(abs(above), shape.numerator), _words(below, shape.denominator)
    return _stacked(top, bottom, f"{sign} " if sign else "", width, label)


def polynomial_lines(
    coefficients: Sequence[Shape | Any], width: int, variable: str = VARIABLE, *, label: str = ""
) -> list[str]:
    """`label = (…) + (…)·s + (…)·s²` from its coefficients, ascending (shapes, or fmpz_mpoly).

    A coefficient that is a tuple of shapes, which add up to it, gives one addend each.

    One line where it fits; else each power begins a line. Width, long formulas and errors as in
    `formula_lines`.
    """
    _check_width(width)
    addends: list[list[_Word]] = []
    for power, each in enumerate(coefficients):
        for part in each if isinstance(each, tuple) else (each,):
            shape = part if isinstance(part, Shape) else shape_of(part)
            if shape.coefficient:
                addends.append(_addend(shape, power, variable, first=not addends))
    every = [word for addend in addends for word in addend] or [_Word("0")]
    head, lead = _head(label, "", width, every)
    room = width - len(lead)
    line = " ".join(_joined(addend) for addend in addends) or "0"
    if len(line) <= room:
        return [*head, lead + line]
    blocks = [_set(addend, room, _INDENT) for addend in addends]
    if sum(map(len, blocks)) > MAX_LINES:
        shown = max(2, MAX_LINES // len(blocks) - 1)
        blocks = [_cut(block, addend, shown, room) for block, addend in zip(blocks, addends, strict=True)]
    return head + _beside(lead, [line for block in blocks for line in block])


@dataclass(frozen=True)
class _Word:
    """What is never broken.

    A word that begins a factor also says how wide the factor is on one line (`extent`), how wide its widest
    word is (`widest`), and after how many columns its first term begins (`anchor`).
    """

    text: str
    begins: bool = False
    is_term: bool = False
    anchor: int = 0
    extent: int = 0
    widest: int = 0


def _check_width(width: int) -> None:
    if width < 1:
        raise ValueError(f"width={width!r} must be at least 1")


def _words(
    number: int, factors: Sequence[Factor], *, before: str = "", after: str = "", brackets: bool = False
) -> list[_Word]:
    """number · factors between `before` and `after`; `brackets` are put round a sum that stands alone too."""
    if len(factors) == 1 and number == 1 and factors[0].power == 1 and not brackets:
        base = factors[0].base
        groups = [(0, term_words(base, TERMINAL) if not isinstance(base, str) else [base])]
    else:
        groups = _factor_groups(number, factors)
    groups[0][1][0] = before + groups[0][1][0]
    groups[0] = (groups[0][0] + len(before), groups[0][1])
    groups[-1][1][-1] += after
    return [word for anchor, texts in groups for word in _group(anchor, texts)]


def _factor_groups(number: int, factors: Sequence[Factor]) -> list[tuple[int, list[str]]]:
    """(anchor, words) of each sum, and of the number and symbols before the first one."""
    groups: list[tuple[int, list[str]]] = []
    if number != 1 or not factors:
        groups.append((0, [str(number)]))
    for factor in factors:
        times = TERMINAL.times if groups else ""
        if isinstance(factor.base, str):
            base = _symbol(factor.base)
            text = times + (_power(base, factor.power) if factor.power > 1 else base)
            if groups:
                groups[-1][1][-1] += text
            else:
                groups.append((0, [text]))
            continue
        words = term_words(factor.base, TERMINAL)
        words[0] = f"{times}({words[0]}"
        words[-1] += _power(")", factor.power) if factor.power > 1 else ")"
        groups.append((len(times) + 1, words))
    return groups


def _group(anchor: int, texts: list[str]) -> list[_Word]:
    extent = sum(map(len, texts)) + len(texts) - 1
    widest = max(len(texts[0]) - anchor, *(len(text) for text in texts[1:]), 0)
    is_term = len(texts) > 1
    first = _Word(texts[0], True, is_term, anchor, extent, widest)
    return [first, *(_Word(text, is_term=True) for text in texts[1:])]


def _addend(shape: Shape, power: int, variable: str, *, first: bool) -> list[_Word]:
    """The words of sign · coefficient · variable^power."""
    sign = TERMINAL.minus if shape.coefficient < 0 else "+"
    before = f"{sign} " if not first else sign if shape.coefficient < 0 else ""
    above, below = abs(shape.coefficient.numerator), shape.coefficient.denominator
    numerator = (*shape.numerator, Factor(variable, power)) if power else shape.numerator
    words = _words(above, numerator, before=before, brackets=True)
    if below == 1 and not shape.denominator:
        return words
    single = len(shape.denominator) + (below != 1) == 1
    opening, closing = ("/", "") if single else ("/(", ")")
    return words + _words(below, shape.denominator, before=opening, after=closing, brackets=True)


def _joined(words: Sequence[_Word]) -> str:
    return "".join(word.text if word.begins else f" {word.text}" for word in words)


def _set(words: Sequence[_Word], room: int, indent: int = 0) -> list[str]:
    """The words as lines of at most `room` columns, no more of them than tell that there are too many.

    A line that begins with a factor is indented by `indent` where that leaves room for it.
    """
    lines: list[str] = []
    line, anchor = "", 0
    for word in words:
        text = word.text if word.begins or not line else f" {word.text}"
        if line and not _fits(word, text, len(line), room):
            lines.append(line)
            if len(lines) > MAX_LINES:
                return lines
            line, text = " " * (_spare(word, room, indent) if word.begins else anchor), word.text
        if word.begins:
            # As far left as the widest word of the sum needs, else under its first term.
            anchor = min(len(line) + word.anchor, max(0, room - word.widest))
        line += text
    return [*lines, line]


def _spare(word: _Word, room: int, indent: int) -> int:
    return indent if indent + word.anchor + word.widest <= room else 0


def _fits(word: _Word, text: str, column: int, room: int) -> bool:
    if not word.begins:
        return column + len(text) <= room
    # A sum that must be broken begins on this line only if half of the line is left for it.
    broken = column <= room // 2 and column + word.anchor + word.widest <= room
    return broken or column + word.extent <= room


def _cut(lines: list[str], words: Sequence[_Word], shown: int, room: int) -> list[str]:
    """The first lines, and how many terms there are in all."""
    if len(lines) <= shown + 1:
        return lines
    terms = sum(word.is_term for word in words)
    return lines[:shown] + textwrap.wrap(f"… {terms} terms in all", room)


def _head(label: str, sign: str, width: int, words: Sequence[_Word]) -> tuple[list[str], str]:
    """(lines before the formula, what stands before it on its own line)."""
    if not label:
        return [], sign
    lead = f"{label} = {sign}"
    widest = max(len(word.text) for word in words)
    needed = max(widest, min(_NARROW, max(max(word.extent, len(word.text)) for word in words)))
    if len(lead) + needed <= width:
        return [], lead
    indent = " " * _INDENT if _INDENT + len(sign) + widest <= width else ""
    return textwrap.wrap(f"{label} =", width), indent + sign


def _beside(lead: str, lines: Sequence[str]) -> list[str]:
    return [(lead if place == 0 else " " * len(lead)) + line for place, line in enumerate(lines)]


def _plain(words: Sequence[_Word], width: int, label: str) -> list[str]:
    """A formula that is no fraction."""
    head, lead = _head(label, "", width, words)
    room = max(1, width - len(lead))
    lines = _set(words, room)
    if len(lines) > MAX_LINES:
        lines = _cut(lines, words, MAX_LINES - 1, room)
    return head + _beside(lead, lines)


def _stacked(top: Sequence[_Word], bottom: Sequence[_Word], sign: str, width: int, label: str) -> list[str]:
    """A fraction: both halves centred on its bar."""
    head, lead = _head(label, sign, width, [*top, *bottom])
    room = max(1, width - len(lead))
    above, below = _set(top, room), _set(bottom, room)
    if len(above) + len(below) + 1 > MAX_LINES:
        above, below = _cut(above, top, _SHOWN, room), _cut(below, bottom, _SHOWN, room)
    bar = min(room, max(map(len, above + below)))
    blank = " " * len(lead)
    return [
        *head,
        *(blank + line for line in _centred(above, bar)),
        lead + "─" * bar,
        *(blank + line for line in _centred(below, bar)),
    ]


def _centred(lines: Sequence[str], bar: int) -> list[str]:
    """The lines as one block in the middle of the bar."""
    margin = " " * (max(0, bar - max(map(len, lines))) // 2)
    return [margin + line for line in lines]


def _root_lines(root: QuadraticRoot, width: int, label: str) -> list[str]:
    above, below = root_parts(root, TERMINAL)
    words = [_Word(piece.text) for piece in (above, below) if piece is not None]
    if max(len(word.text) for word in words) + _INDENT <= width:
        if below is None:
            return _plain(words, width, label)
        return _stacked(words[:1], words[1:], "", width, label)
    sign = "+" if root.branch > 0 else TERMINAL.minus
    top = [_Word("−b", True, True, 0, 18, 16), _Word(f"{sign} √(b² − 4·a·c)", is_term=True)]
    lines = _stacked(top, [_Word("2·a", True)], "", width, label)
    for letter, shape in (("a", root.a), ("b", root.b), ("c", root.c)):
        lines += formula_lines(shape, width, label=letter)
    return lines
