"""A document as Markdown (room: show): formulas between dollar signs, pictures as SVG files beside it."""

from __future__ import annotations

import re
from collections.abc import Sequence
from urllib.parse import quote

from symamp.show.latex_words import aligned
from symamp.show.note_model import (
    LEFT,
    WARNING,
    Block,
    Box,
    Bullets,
    Code,
    Document,
    Equation,
    Figure,
    Inline,
    Math,
    Paragraph,
    Piece,
    Section,
    Strong,
    Table,
    Text,
)

_MARKS = re.compile(r"([\\`*_{}\[\]<>#|$~!&^=])")
_CONTROL = re.compile("[\x00-\x1f\x7f-\x9f\ud800-\udfff\u2028\u2029]+")


def markdown_note(document: Document, folder: str) -> str:
    """The .md file; its pictures are SVG files in `folder`, which stands beside it."""
    return _Writer(folder).document(document)


class _Writer:
    def __init__(self, folder: str) -> None:
        self._folder = folder
        self._figures = 0

    def document(self, document: Document) -> str:
        lines = [f"# {markdown_text(document.title)}"]
        if document.subtitle:
            lines += ["", inline_markdown(document.subtitle)]
        lines += self._blocks(document.blocks, 2)
        return "\n".join(lines).rstrip() + "\n"

    def _blocks(self, blocks: Sequence[Block], level: int) -> list[str]:
        return [line for block in blocks for line in ("", *self._block(block, level))]

    def _block(self, block: Block, level: int) -> list[str]:
        match block:
            case Section():
                head = f"{'#' * min(level, 6)} {inline_markdown(block.title)}"
                return [head, *self._blocks(block.blocks, level + 1)]
            case Paragraph():
                return [_from_line_start(inline_markdown(block.pieces))]
            case Equation():
                return ["$$", aligned(block.lines), "$$"]
            case Bullets():
                return [f"- {_from_line_start(inline_markdown(item))}" for item in block.items]
            case Box():
                word = "Warning" if block.kind == WARNING else "Remark"
                return [f"> **{word}.** {inline_markdown(block.pieces)}"]
            case Table():
                return _table(block)
            case Figure():
                self._figures += 1
                path = quote(f"{self._folder}/{block.picture.name}.svg")
                caption = markdown_text(block.picture.caption)
                return [
                    f"![{markdown_text(block.picture.alt)}]({path})",
                    "",
                    f"**Figure {self._figures}.** {caption}",
                ]


def inline_markdown(pieces: Inline) -> str:
    """Pieces in a line of text."""
    return "".join(_piece(piece) for piece in pieces)


def markdown_text(text: str) -> str:
    """Text in which no character is read as a mark."""
    text = _CONTROL.sub(" ", text)
    text = _MARKS.sub(r"\\\1", text)
    return re.sub(r"(?<=\w)([:.])(?=//|\w*@)", r"\\\1", text)  # no link is made of what only looks like one


def _piece(piece: Piece) -> str:
    match piece:
        case Text():
            return markdown_text(piece.text)
        case Strong():
            return f"**{markdown_text(piece.text)}**" if piece.text.strip() else piece.text
        case Code():
            return _code(piece.text)
        case Math():
            return f"${piece.latex}$"


def _code(text: str) -> str:
    """Code between as many backticks as it needs; a bar would end the cell of a table."""
    text = _CONTROL.sub(" ", text)
    if not text.strip():
        return text
    longest = max((len(run) for run in re.findall("`+", text)), default=0)
    fence = "`" * (longest + 1)
    pad = " " if text[0] == "`" or text[-1] == "`" or longest else ""
    return f"{fence}{pad}{text}{pad}{fence}"


def _from_line_start(text: str) -> str:
    """The text such that its beginning is no list, quotation or heading."""
    return re.sub(r"^(\s*)(\d+)([.)])(\s|$)|^(\s*)([-+])", _unmarked, text)


def _unmarked(match: re.Match[str]) -> str:
    if match[2]:
        return f"{match[1]}{match[2]}\\{match[3]}{match[4]}"
    return f"{match[5]}\\{match[6]}"


def _table(table: Table) -> list[str]:
    rules = ["---" if kind == LEFT else "---:" for kind in table.align]
    rows = [_row(table.header), f"| {' | '.join(rules)} |", *map(_row, table.rows)]
    return [f"*{markdown_text(table.caption)}*", "", *rows] if table.caption else rows


def _row(cells: Sequence[Inline]) -> str:
    # A bar in code is the one that is not yet escaped.
    written = [re.sub(r"(?<!\\)\|", r"\\|", inline_markdown(cell)) for cell in cells]
    return f"| {' | '.join(written)} |"
