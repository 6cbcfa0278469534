"""What displayed formulas in LaTeX are made of (room: show): words that are not broken, and lines of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from symamp.exact.terms import Factor
from symamp.exact.writing import LATEX, factor_written, term_words
from symamp.show.latex_width import math_width

EQUALS = 1.6  # em of the sign of equality, with a little to spare
_SPACES = 0.45  # em on both sides of a sign between two terms
_SIGN = 1.3  # em of that sign alone, below which lines go on
_ADDEND_INDENT, _FACTOR_INDENT, _TERM_INDENT = r"\quad", r"\qquad", r"\qquad"
_INDENTED = 2.0  # em of the wider of them


@dataclass(frozen=True)
class MathLine:
    """One line of a display: `right` is set flush left at one column, `left` flush right before it."""

    left: str
    right: str

    @property
    def latex(self) -> str:
        """The line with its place of alignment."""
        return f"{self.left} & {self.right}" if self.left else f"& {self.right}"


@dataclass(frozen=True)
class Word:
    """What is not broken. `begins` is a factor, set without a sign before it; `extent` its width to its end."""

    text: str
    width: float
    begins: bool = False
    extent: float = 0.0


def aligned(lines: Sequence[MathLine]) -> str:
    """The lines as one piece of math, for `$$…$$` and equation environments."""
    if len(lines) == 1:
        return f"{lines[0].left} {lines[0].right}".strip()
    rows = " \\\\\n".join(line.latex for line in lines)
    return f"\\begin{{aligned}}\n{rows}\n\\end{{aligned}}"


def display(lines: Sequence[MathLine]) -> str:
    """The lines as a display of their own (amsmath's align*)."""
    rows = " \\\\\n".join(f"  {line.latex}" for line in lines)
    return f"\\begin{{align*}}\n{rows}\n\\end{{align*}}"


def words_of(number: int, factors: Sequence[Factor], *, sign: str = "", brackets: bool = False) -> list[Word]:
    """sign · number · factors; `brackets` are put round a sum that stands alone too."""
    if number == 1 and len(factors) == 1 and factors[0].power == 1 and factors[0].is_sum and not brackets:
        return _group(term_words(terms_of(factors[0]), LATEX), sign)
    words: list[Word] = []
    ahead = [str(number)] if number != 1 or not factors else []
    for factor in factors:
        if not factor.is_sum:
            ahead.append(factor_written(factor, LATEX))
            continue
        if ahead:
            words += _group([" ".join(ahead)], sign if not words else "")
            ahead = []
        texts = term_words(terms_of(factor), LATEX)
        texts[0] = f"({texts[0]}"
        texts[-1] = f"{texts[-1]})" + (f"^{index_written(factor.power)}" if factor.power > 1 else "")
        words += _group(texts, sign if not words else "")
    if ahead and words:  # symbols after a sum, such as s, stay with what they follow
        last = words[-1]
        text = f"{last.text} {' '.join(ahead)}"
        words[-1] = replace(last, text=text, width=width_between(text))
    elif ahead:
        words += _group([" ".join(ahead)], sign)
    return words


def terms_of(factor: Factor) -> Any:
    return factor.base


def _group(texts: list[str], sign: str) -> list[Word]:
    """The words of one factor."""
    texts = [sign + texts[0], *texts[1:]]
    extent = width_between(" ".join(texts))
    first = Word(texts[0], width_between(texts[0]), not sign.strip() or len(sign) < 2, extent)
    return [first, *(Word(text, width_between(text)) for text in texts[1:])]


def joined(words: Sequence[Word]) -> str:
    return " ".join(word.text for word in words)


def width_of(words: Sequence[Word]) -> float:
    return width_between(joined(words))


def set_lines(
    addends: Sequence[Sequence[Word]], label: str, room: float, relation: str = "=", *, apart: bool = False
) -> tuple[MathLine, ...]:
    """`label = addends` as lines; `room` em are left beside the sign of equality.

    An addend begins a line if it does not fit beside the one before it, with `apart` in any case.
    """
    lines: list[list[str]] = [[relation]]
    used = 0.0
    for place, addend in enumerate(addends):
        words = _divided(addend, room - _INDENTED)
        if place and (apart or used + sum(word.width for word in words) > room):
            lines.append([rf"{_ADDEND_INDENT}{{}}"])
            used = 1.0 - _SIGN
        for k, word in enumerate(words):
            # A factor that must be broken begins on this line only if half of the line is left for it.
            wanted = word.width if not word.begins or used <= room / 2 else word.extent
            if len(lines[-1]) > 1 and used + wanted > room and (k or not place):
                opening = rf"{_FACTOR_INDENT}{{}} \times" if word.begins else rf"{_TERM_INDENT}{{}}"
                lines.append([opening])
                used = _INDENTED + (1.2 if word.begins else 0.0) - _SIGN
            lines[-1].append(word.text)
            used += word.width
    heads = [" ".join(line) for line in lines]
    return tuple(MathLine(label if not k else "", text) for k, text in enumerate(heads))


def _divided(words: Sequence[Word], room: float) -> list[Word]:
    """The words, with those that are wider than a line cut between their factors."""
    found: list[Word] = []
    for word in words:
        if word.width <= room:
            found.append(word)
            continue
        piece = ""
        first = True
        for part in _parts(word.text):
            longer = f"{piece} {part}".strip()
            if piece and width_between(longer) > room and piece not in "+-":
                found.append(
                    Word(piece, width_between(piece), word.begins or not first, width_between(piece))
                )
                piece, first = part, False
            else:
                piece = longer
        found.append(Word(piece, width_between(piece), word.begins or not first, width_between(piece)))
    return found


def _parts(text: str) -> list[str]:
    """The text cut at its spaces outside braces."""
    parts, depth = [""], 0
    for character in text:
        depth += {"{": 1, "}": -1}.get(character, 0)
        if character == " " and not depth:
            parts.append("")
        else:
            parts[-1] += character
    return [part for part in parts if part]


def wrapped(words: list[Word], before: str, after: str) -> list[Word]:
    first, last = before + words[0].text, words[-1].text + after
    if len(words) == 1:
        first = last = before + words[0].text + after
    found = [replace(words[0], text=first, width=width_between(first), begins=False), *words[1:]]
    if len(words) > 1:
        found[-1] = replace(found[-1], text=last, width=width_between(last))
    return found


def index_written(k: int) -> str:
    return str(k) if k < 10 else f"{{{k}}}"


def width_between(text: str) -> float:
    """The width of a part of a formula; a sign that leads it stands between two terms, with spaces on both sides."""
    return math_width(text) + (_SPACES if text[:2] in ("+ ", "- ") else 0.0)
