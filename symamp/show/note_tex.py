"""A document as LaTeX (room: show): it compiles as it is with pdflatex and LaTeX's base packages."""

from __future__ import annotations

import re
from collections.abc import Sequence

from symamp.show.latex_words import display
from symamp.show.note_model import (
    WARNING,
    Block,
    Box,
    Bullets,
    Document,
    Equation,
    Figure,
    Paragraph,
    Section,
    Table,
)
from symamp.show.note_tex_table import inline_tex, table_tex
from symamp.show.tex_text import tex_text

_PREAMBLE = r"""\documentclass[11pt,fleqn]{article}
\usepackage[a4paper,margin=25mm]{geometry}
\usepackage{amsmath}
\usepackage{graphicx}
\usepackage{array}
\usepackage{longtable}
\setlength{\mathindent}{1.5em}
\setlength{\parindent}{0pt}
\setlength{\parskip}{0.5\baselineskip}
\setlength{\emergencystretch}{12em}
\tolerance=1000
\renewcommand{\arraystretch}{1.2}
\setlength{\tabcolsep}{0.45em}
\setlength{\LTpre}{0.2\baselineskip}
\setlength{\LTpost}{0.6\baselineskip}
\setlength{\LTleft}{0pt}
\setlength{\LTright}{0pt plus 1fill}
\allowdisplaybreaks
\raggedbottom
\hyphenpenalty=500
\AtBeginDocument{\setlength{\abovedisplayskip}{0.5\baselineskip}\setlength{\belowdisplayskip}{0.5\baselineskip}%
  \setlength{\abovedisplayshortskip}{0.2\baselineskip}\setlength{\belowdisplayshortskip}{0.5\baselineskip}}
"""
_LEVELS = ("section", "subsection", "subsubsection")


def tex_note(document: Document, folder: str) -> str:
    """The .tex file, in ASCII; its pictures are PDF files in `folder`, which stands beside it."""
    return _Writer(folder).document(document)


class _Writer:
    def __init__(self, folder: str) -> None:
        self._folder = folder
        self._figures = 0

    def document(self, document: Document) -> str:
        lines = [
            _PREAMBLE,
            r"\begin{document}",
            rf"{{\LARGE\bfseries\raggedright {tex_text(document.title)}\par}}",
        ]
        if document.subtitle:
            lines.append(rf"{{\raggedright {inline_tex(document.subtitle)}\par}}")
        lines += self._blocks(document.blocks, 0)
        return "\n".join([*lines, r"\end{document}", ""])

    def _blocks(self, blocks: Sequence[Block], level: int) -> list[str]:
        return [line for block in blocks for line in ("", *self._block(block, level))]

    def _block(self, block: Block, level: int) -> list[str]:
        match block:
            case Section():
                command = _LEVELS[min(level, len(_LEVELS) - 1)]
                head = rf"\{command}*{{\raggedright {inline_tex(block.title)}}}"
                return [head, *self._blocks(block.blocks, level + 1)]
            case Paragraph():
                return [inline_tex(block.pieces)]
            case Equation():
                return [f"% {_comment(block.name)}", display(block.lines)]
            case Bullets():
                items = [rf"\item {inline_tex(item)}" for item in block.items]
                return [r"\begin{itemize}\setlength{\itemsep}{0pt}", *items, r"\end{itemize}"]
            case Box():
                return _box(block)
            case Table():
                return table_tex(block)
            case Figure():
                return self._figure(block)

    def _figure(self, figure: Figure) -> list[str]:
        self._figures += 1
        path = f"{self._folder}/{figure.picture.name}.pdf"
        caption = tex_text(figure.picture.caption)
        return [
            r"\begin{minipage}{\linewidth}",
            rf"\includegraphics[width=0.82\linewidth,height=0.6\textheight,keepaspectratio]{{{path}}}\par",
            rf"\small\raggedright\textbf{{Figure~{self._figures}.}} {caption}",
            r"\end{minipage}",
        ]


def _comment(text: str) -> str:
    return re.sub(r"[^ -~]", "?", text)


def _box(box: Box) -> list[str]:
    word = "Warning" if box.kind == WARNING else "Remark"
    rule = "0.8pt" if box.kind == WARNING else "0.4pt"
    return [
        rf"{{\setlength{{\fboxrule}}{{{rule}}}\setlength{{\fboxsep}}{{0.5em}}%",
        r"\noindent\fbox{\begin{minipage}{\dimexpr\linewidth-2\fboxsep-2\fboxrule\relax}\raggedright",
        rf"\textbf{{{word}.}} {inline_tex(box.pieces)}",
        r"\end{minipage}}\par}",
    ]
