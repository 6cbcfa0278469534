"""A document as one HTML page that opens offline (room: show): equations as MathML, pictures as SVG within it."""

from __future__ import annotations

import html
import re
from collections.abc import Sequence

from symamp.show.latex_words import MathLine
from symamp.show.note_model import (
    POINT,
    RIGHT,
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
    plain,
)
from symamp.show.note_tex_table import at_point

_STYLE = """
:root { color-scheme: light; }
* { box-sizing: border-box; }
body { margin: 0 auto; padding: 1.5rem 1rem 4rem; max-width: 52rem; background: #fff; color: #111;
  font: 1rem/1.5 Georgia, "Times New Roman", serif; overflow-wrap: break-word; }
h1 { font-size: 1.8rem; line-height: 1.2; margin: 0 0 .3rem; }
h2 { font-size: 1.3rem; line-height: 1.25; margin: 2.2rem 0 .6rem; border-bottom: 1px solid #999; }
h3 { font-size: 1.08rem; line-height: 1.3; margin: 1.6rem 0 .4rem; }
p, ul { margin: .6rem 0; }
code { font: .92em/1.4 ui-monospace, Consolas, monospace; }
.subtitle { color: #444; margin-top: 0; }
.wide { overflow-x: auto; overflow-y: hidden; margin: .8rem 0; }
math[display=block] { text-align: left; width: max-content; margin: 0; }
.equation { padding: .3rem 0 .3rem 1.2rem; }
math { font-size: 1.05em; }
mtable { margin: 0; }
mtd { padding: .22em .1em; }
mtd.left { text-align: right; text-align: -webkit-right; }
mtd.right { text-align: left; text-align: -webkit-left; }
table { border-collapse: collapse; border-top: 1px solid #111; border-bottom: 1px solid #111; line-height: 1.35; }
caption { text-align: left; padding: 0 0 .3rem; color: #333; }
th, td { text-align: left; vertical-align: baseline; padding: .22rem .8rem .22rem 0; font-weight: normal; }
thead th { font-weight: bold; border-bottom: 1px solid #111; vertical-align: bottom; }
tbody tr + tr > * { border-top: 1px solid #ddd; }
.right { text-align: right; }
.point { white-space: nowrap; font-variant-numeric: tabular-nums lining-nums; }
.point span { display: inline-block; text-align: right; }
.box { border: 1px solid #777; padding: .5rem .8rem; margin: .8rem 0; }
.warning { border: 2px solid #111; }
figure { margin: 1.2rem 0; break-inside: avoid; }
figure svg { display: block; width: 100%; height: auto; max-height: 46rem; }
figcaption { font-size: .92rem; color: #333; margin-top: .3rem; }
@media print { body { max-width: none; padding: 0; font-size: 10.5pt; } .wide { overflow: visible; }
  h2, h3 { break-after: avoid; } tr, .box { break-inside: avoid; } }
"""
_MATH = '<math xmlns="http://www.w3.org/1998/Math/MathML" display="%s">'


def html_note(document: Document) -> str:
    """The page: nothing in it is fetched from elsewhere."""
    return _Writer().document(document)


class _Writer:
    def __init__(self) -> None:
        self._figures = 0

    def document(self, document: Document) -> str:
        title = html.escape(_clean(document.title))
        head = (
            f'<!DOCTYPE html>\n<html lang="{html.escape(document.language)}">\n<head>\n<meta charset="utf-8">\n'
            '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
            f"<title>{title}</title>\n<style>{_STYLE}</style>\n</head>\n<body>\n<main>\n"
        )
        subtitle = f'<p class="subtitle">{inline_html(document.subtitle)}</p>\n' if document.subtitle else ""
        return (
            f"{head}<h1>{title}</h1>\n{subtitle}{self._blocks(document.blocks, 2)}</main>\n</body>\n</html>\n"
        )

    def _blocks(self, blocks: Sequence[Block], level: int) -> str:
        return "".join(self._block(block, level) + "\n" for block in blocks)

    def _block(self, block: Block, level: int) -> str:
        match block:
            case Section():
                tag = f"h{min(level, 6)}"
                inner = self._blocks(block.blocks, level + 1)
                return f"<section>\n<{tag}>{inline_html(block.title)}</{tag}>\n{inner}</section>"
            case Paragraph():
                return f"<p>{inline_html(block.pieces)}</p>"
            case Equation():
                name = html.escape(_clean(block.name))
                return (
                    f'<div class="wide equation" role="group" aria-label="{name}" tabindex="0">'
                    f"{lines_mathml(block.lines)}</div>"
                )
            case Bullets():
                items = "".join(f"<li>{inline_html(item)}</li>\n" for item in block.items)
                return f"<ul>\n{items}</ul>"
            case Box():
                word = "Warning" if block.kind == WARNING else "Remark"
                extra = " warning" if block.kind == WARNING else ""
                return f'<p class="box{extra}"><strong>{word}.</strong> {inline_html(block.pieces)}</p>'
            case Table():
                return _table(block)
            case Figure():
                return self._figure(block)

    def _figure(self, figure: Figure) -> str:
        self._figures += 1
        drawing = inner_svg(figure.picture.svg(), f"figure{self._figures}-", figure.picture.alt)
        caption = html.escape(_clean(figure.picture.caption))
        number = f"<strong>Figure {self._figures}.</strong>"
        return f"<figure>\n{drawing}\n<figcaption>{number} {caption}</figcaption>\n</figure>"


def inline_html(pieces: Inline) -> str:
    """Pieces in a line of text."""
    return "".join(_piece(piece) for piece in pieces)


def _piece(piece: Piece) -> str:
    match piece:
        case Text():
            return html.escape(_clean(piece.text))
        case Strong():
            return f"<strong>{html.escape(_clean(piece.text))}</strong>"
        case Code():
            return f"<code>{html.escape(_clean(piece.text))}</code>"
        case Math():
            return _mathml(piece.latex)


def _clean(text: str) -> str:
    """The text without the control characters that HTML forbids, and lone surrogates."""
    return re.sub("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\ud800-\udfff\ufffe\uffff]", "\ufffd", text)


def _mathml(latex: str, *, display: bool = False) -> str:
    return f"{_MATH % ('block' if display else 'inline')}{_row(latex)}</math>"


def lines_mathml(lines: Sequence[MathLine]) -> str:
    """A display as MathML: a table of two columns where it has several lines."""
    if len(lines) == 1:
        whole = f"{lines[0].left} {lines[0].right}"
        return _mathml(whole, display=True)
    rows = "".join(
        f'<mtr><mtd class="left">{_row(line.left) if line.left else ""}</mtd>'
        f'<mtd class="right">{_row(line.right)}</mtd></mtr>'
        for line in lines
    )
    return f'{_MATH % "block"}<mtable displaystyle="true" columnalign="right left">{rows}</mtable></math>'


def _row(latex: str) -> str:
    """The MathML of a piece of LaTeX that our own writers made, with signs as what they are."""
    from latex2mathml.converter import convert

    # Upright words are text: of one letter the library would make an italic symbol.
    latex = re.sub(r"\\mathrm\{((?:[^{}\\]|\\.)*)\}", _upright, latex)
    if latex.count(r"\lvert") == latex.count(r"\rvert"):
        latex = latex.replace(r"\lvert", r"\left|").replace(r"\rvert", r"\right|")
    found = re.sub(r"^<math[^>]*>|</math>$", "", convert(latex).strip())
    found = found.replace("<mi>&#x000B1;</mi>", "<mo>&#x000B1;</mo>").replace(
        "<mo>&#x0221E;</mo>", "<mi>&#x0221E;</mi>"
    )
    # A sign that begins a line of a sum stands between two terms all the same.
    return re.sub(r"<mrow ?/><mo>(&#x0002B;|&#x02212;|&#x000D7;)</mo>", r'<mo form="infix">\1</mo>', found)


def _upright(match: re.Match[str]) -> str:
    text = re.sub(r"\\(.)", r"\1", match[1])
    return rf"\text{{{text}}}"


def _table(table: Table) -> str:
    heads = "".join(
        f'<th scope="col"{" class=right" if kind == RIGHT else ""}>{inline_html(cell)}</th>'
        for cell, kind in zip(table.header, table.align, strict=True)
    )
    widths = [
        max((len(plain(at_point(row[k])[0])) for row in table.rows), default=0)
        for k in range(len(table.align))
    ]
    rows = []
    for row in table.rows:
        cells = []
        for k, (cell, kind) in enumerate(zip(row, table.align, strict=True)):
            tag, scope = ("th", ' scope="row"') if k == 0 else ("td", "")
            style = {POINT: ' class="point"', RIGHT: ' class="right"'}.get(kind, "")
            cells.append(f"<{tag}{scope}{style}>{_cell(cell, kind, widths[k])}</{tag}>")
        rows.append(f"<tr>{''.join(cells)}</tr>")
    caption = f"<caption>{html.escape(_clean(table.caption))}</caption>\n" if table.caption else ""
    body = "\n".join(rows)
    return (
        f'<div class="wide" tabindex="0" role="group"><table>\n{caption}<thead><tr>{heads}</tr></thead>\n'
        f"<tbody>\n{body}\n</tbody>\n</table></div>"
    )


def _cell(cell: Inline, kind: str, digits: int) -> str:
    before, after = at_point(cell)
    if kind != POINT or not before:
        return inline_html(cell)
    return f'<span style="min-width:{digits}ch">{inline_html(before)}</span>{inline_html(after)}'


def inner_svg(svg: str, prefix: str, alt: str) -> str:
    """An SVG file as a part of a page: its own ids, and words for those who cannot see it."""
    start = svg.find("<svg")
    if start < 0:
        raise ValueError("the picture is no SVG")
    svg = svg[start:].strip()
    svg = re.sub(r'\bid="([^"]+)"', rf'id="{prefix}\1"', svg)
    svg = re.sub(r"url\(#([^)]+)\)", rf"url(#{prefix}\1)", svg)
    svg = re.sub(r'href="#([^"]+)"', rf'href="#{prefix}\1"', svg)
    svg = re.sub(r"<metadata>.*?</metadata>", "", svg, flags=re.DOTALL)
    label = html.escape(_clean(alt))
    opening = re.sub(r'\s(role|aria-label|aria-labelledby)="[^"]*"', "", svg[: svg.index(">") + 1])
    return opening.replace("<svg", f'<svg role="img" aria-label="{label}"', 1) + svg[svg.index(">") + 1 :]
