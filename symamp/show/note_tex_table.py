"""Tables and lines of text as LaTeX (room: show): columns that wrap where a table is wider than the page.

A table of few rows is one that LaTeX measures itself. A long one runs over several pages; its columns get their widths
from here, so that one run of LaTeX is enough.
"""

from __future__ import annotations

import re
from dataclasses import replace
from math import ceil

from symamp.show.latex_width import math_width, text_width
from symamp.show.note_model import LEFT, POINT, RIGHT, Code, Inline, Math, Piece, Strong, Table, Text
from symamp.show.tex_text import KEPT, LONG_WORD, seen, tex_code, tex_text

_TEXT_WIDTH = 44.4  # em of 10 pt in 160 mm
_BETWEEN = 0.9  # em between two columns
_BOLD = 1.16  # how much wider bold letters are
_SPARE = 1.06  # a column of a set width is a little wider than what is thought to fill it
_FIGURE = 12.0  # em of the longest figure
_STEP = 0.5  # em by which columns are widened
_ONE_PAGE = 22  # rows up to which a table stays on one page


def inline_tex(pieces: Inline) -> str:
    """Pieces in a line of text."""
    return "".join(_piece(piece) for piece in pieces)


def _piece(piece: Piece) -> str:
    match piece:
        case Text():
            return tex_text(piece.text)
        case Strong():
            return rf"\textbf{{{tex_text(piece.text)}}}"
        case Code():
            return tex_code(piece.text)
        case Math():
            return f"${piece.latex}$"


def table_tex(table: Table) -> list[str]:
    """The table as lines of LaTeX."""
    table = _with_words_left(table)
    long = len(table.rows) > _ONE_PAGE
    widths = _widths(table)
    columns, heads = [], []
    for kind, width, cell in zip(table.align, widths, table.header, strict=True):
        head = rf"\bfseries {inline_tex(cell)}"
        columns.append(_column(kind, width, long))
        heads.append(rf"\multicolumn{{2}}{{c}}{{{head}}}" if kind == POINT else head)
    head = rf"{' & '.join(heads)} \\ \hline"
    rows = [
        " & ".join(_cell(cell, kind) for cell, kind in zip(row, table.align, strict=True)) + r" \\"
        for row in table.rows
    ]
    columns_text = f"@{{}}{''.join(columns)}@{{}}"
    before = ["{\\small"] + (
        [rf"{{\raggedright {tex_text(table.caption)}\par\nopagebreak}}"] if table.caption else []
    )
    if long:
        opening = [
            rf"\begin{{longtable}}{{{columns_text}}}",
            rf"\hline {head} \endhead",
            r"\hline \endlastfoot",
        ]
        return [*before, *opening, *rows, r"\end{longtable}}"]
    opening = [rf"\begin{{tabular}}{{{columns_text}}}", rf"\hline {head}"]
    return [*before, *opening, *rows, r"\hline \end{tabular}\par\medskip}"]


def _with_words_left(table: Table) -> Table:
    """The table with columns of figures that hold long words set as words, which may wrap."""
    align = tuple(
        LEFT if max(map(_em, (head, *(row[k] for row in table.rows)))) > _FIGURE else kind
        for k, (kind, head) in enumerate(zip(table.align, table.header, strict=True))
    )
    return replace(table, align=align)


def _column(kind: str, width: tuple[float, ...] | None, long: bool) -> str:
    if kind == POINT:
        if not long or width is None:
            return "r@{}l"
        before, after = width
        return rf">{{\raggedleft\arraybackslash}}p{{{before:.2f}em}}@{{}}p{{{after:.2f}em}}"
    if width is None:
        return "r" if kind == RIGHT else "l"
    side = "left" if kind == RIGHT else "right"
    return rf">{{\ragged{side}\arraybackslash}}p{{{width[0]:.2f}em}}"


def _cell(cell: Inline, kind: str) -> str:
    if kind != POINT:
        return inline_tex(cell)
    before, after = at_point(cell)
    return f"{inline_tex(before)} & {inline_tex(after)}"


def at_point(cell: Inline) -> tuple[Inline, Inline]:
    """A cell before and from its decimal point; without one after its last digit, or all of it before."""
    if len(cell) != 1 or not isinstance(cell[0], Text | Strong):
        return (), cell
    match = re.match(r"[^\d]*\d+", cell[0].text)
    if match is None:
        return (), cell  # words, such as "none", begin where the fraction does
    make = type(cell[0])
    rest = cell[0].text[match.end() :]
    return (make(match[0]),), ((make(rest),) if rest else ())


def _widths(table: Table) -> list[tuple[float, ...] | None]:
    """The width in em of each column, of both halves for figures; None for one that LaTeX may measure itself."""
    long = len(table.rows) > _ONE_PAGE
    columns = [[row[place] for row in table.rows] for place in range(len(table.header))]
    halves: list[tuple[float, ...]] = []
    for kind, head, cells in zip(table.align, table.header, columns, strict=True):
        title = _BOLD * _em(head)
        if kind != POINT:
            halves.append((max(title, *map(_em, cells), 0.0),))
            continue
        parts = [at_point(cell) for cell in cells]
        before, after = (max((_em(part[k]) for part in parts), default=0.0) for k in (0, 1))
        halves.append((max(before, title - after), after))
    room = _TEXT_WIDTH - _BETWEEN * (len(halves) - 1)
    if sum(map(sum, halves)) * (_SPARE if long else 1.0) <= room:
        return [tuple(_SPARE * half + 0.2 for half in each) if long else None for each in halves]
    fixed = [place for place, kind in enumerate(table.align) if kind == POINT]
    room -= sum(sum(halves[place]) for place in fixed)
    wrapping = {place: columns[place] for place in range(len(halves)) if place not in fixed}
    shared = _shared(wrapping, {place: table.header[place] for place in wrapping}, room)
    return [(shared[place],) if place in shared else halves[place] for place in range(len(halves))]


def _shared(columns: dict[int, list[Inline]], heads: dict[int, Inline], room: float) -> dict[int, float]:
    """Widths of columns that wrap, such that the table has as few lines as can be had by widening step by step."""
    cells = {place: [_em(cell) for cell in column] for place, column in columns.items()}
    natural = {place: max([_BOLD * _em(heads[place]), *found]) for place, found in cells.items()}
    widths = {
        place: min(natural[place], max([_BOLD * _longest(heads[place]), *map(_longest, column)]) + 0.3)
        for place, column in columns.items()
    }
    left = room - sum(widths.values())
    if left < 0:  # words of all columns cannot stand whole: all are narrowed alike, and break where they must
        return {place: width * room / sum(widths.values()) for place, width in widths.items()}
    while left > 0 and any(widths[place] < natural[place] for place in widths):
        best = min(
            (place for place in widths if widths[place] < natural[place]),
            key=lambda place: (_lines(cells, widths, place), -natural[place] / widths[place]),
        )
        widths[best] += _STEP
        left -= _STEP
    return widths


def _lines(cells: dict[int, list[float]], widths: dict[int, float], wider: int) -> int:
    """Lines of all rows, with one column made wider by a good step."""
    tried = {place: width + (4 * _STEP if place == wider else 0.0) for place, width in widths.items()}
    rows = zip(*([ceil(em / tried[place]) for em in found] for place, found in cells.items()), strict=True)
    return sum(max(row) for row in rows)


def _longest(cell: Inline) -> float:
    """The widest part that is not broken: a word, or a formula."""
    parts = [
        _piece_em(part)
        for piece in cell
        for part in ([piece] if isinstance(piece, Math) else _pieces_of(piece))
    ]
    return max(parts, default=0.0)


def _pieces_of(piece: Text | Strong | Code) -> list[Piece]:
    words = re.split(r"(?<=[^0-9A-Za-z])" if isinstance(piece, Code) else "[ -]", seen(piece.text))
    return [type(piece)(word if len(word) <= LONG_WORD else word[: KEPT + 9]) for word in words]


def _em(cell: Inline) -> float:
    return sum(map(_piece_em, cell))


def _piece_em(piece: Piece) -> float:
    match piece:
        case Math():
            return math_width(piece.latex)
        case Code():
            return 0.53 * len(seen(piece.text))
        case Strong():
            return _BOLD * text_width(seen(piece.text))
    return text_width(seen(piece.text))
