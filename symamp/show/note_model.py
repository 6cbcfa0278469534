"""A document as plain data (room: show): what a note says, apart from how LaTeX, HTML or Markdown write it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Protocol

from symamp.show.latex_lines import MathLine

LEFT, RIGHT, POINT = "left", "right", "point"  # how a column stands; POINT: figures on their decimal point
ALIGNMENTS = (LEFT, RIGHT, POINT)
REMARK, WARNING = "remark", "warning"


class Drawing(Protocol):
    """A picture that can be saved as vectors; `name` is a file's name without ending, `alt` what it shows."""

    @property
    def name(self) -> str: ...
    @property
    def caption(self) -> str: ...
    @property
    def alt(self) -> str: ...
    def svg(self) -> str: ...
    def pdf(self) -> bytes: ...


@dataclass(frozen=True)
class Text:
    """Plain words, any characters."""

    text: str


@dataclass(frozen=True)
class Strong:
    """Words that decide."""

    text: str


@dataclass(frozen=True)
class Code:
    """What is typed: a formula in the grammar of stage files, a file's name."""

    text: str


@dataclass(frozen=True)
class Math:
    """A short formula in LaTeX."""

    latex: str


Piece = Text | Strong | Code | Math
Inline = tuple[Piece, ...]


def inline(*pieces: Piece | str) -> Inline:
    """Pieces, text for strings."""
    return tuple(Text(piece) if isinstance(piece, str) else piece for piece in pieces if piece != "")


@dataclass(frozen=True)
class Paragraph:
    pieces: Inline


@dataclass(frozen=True)
class Equation:
    """A displayed formula; `name` says in words what it is, for those who hear the page."""

    lines: tuple[MathLine, ...]
    name: str

    def __post_init__(self) -> None:
        if not self.lines:
            raise ValueError(f"the equation {self.name!r} has no lines")


@dataclass(frozen=True)
class Table:
    """Rows under a header. `align` holds one of ALIGNMENTS a column; the first column names its row."""

    caption: str
    header: tuple[Inline, ...]
    rows: tuple[tuple[Inline, ...], ...]
    align: tuple[str, ...]

    def __post_init__(self) -> None:
        if not self.header:
            raise ValueError(f"the table {self.caption!r} has no columns")
        if len(self.align) != len(self.header) or set(self.align) - set(ALIGNMENTS):
            raise ValueError(f"align={self.align!r} must hold one of {ALIGNMENTS} for each column")
        for row in self.rows:
            if len(row) != len(self.header):
                raise ValueError(f"a row of {self.caption!r} has {len(row)} cells, not {len(self.header)}")


@dataclass(frozen=True)
class Figure:
    picture: Drawing


@dataclass(frozen=True)
class Bullets:
    items: tuple[Inline, ...]


@dataclass(frozen=True)
class Box:
    """A remark or a warning that stands apart."""

    kind: str
    pieces: Inline

    def __post_init__(self) -> None:
        if self.kind not in (REMARK, WARNING):
            raise ValueError(f"kind={self.kind!r} must be {REMARK!r} or {WARNING!r}")


@dataclass(frozen=True)
class Section:
    """A title and what stands under it, sections of the next level too."""

    title: Inline
    blocks: tuple[Block, ...]


Block = Paragraph | Equation | Table | Figure | Bullets | Box | Section


@dataclass(frozen=True)
class Document:
    """A whole note."""

    title: str
    subtitle: Inline
    blocks: tuple[Block, ...]
    language: str = field(default="en")


def plain(pieces: Inline) -> str:
    """The pieces as plain text."""
    return "".join(piece.latex if isinstance(piece, Math) else piece.text for piece in pieces)


def every(blocks: tuple[Block, ...]) -> Iterator[Block]:
    """All blocks in order, those of sections after their section."""
    for block in blocks:
        yield block
        if isinstance(block, Section):
            yield from every(block.blocks)


def pictures_of(document: Document) -> tuple[Drawing, ...]:
    """The pictures in order. Raises ValueError where two of them have one name."""
    found = [block.picture for block in every(document.blocks) if isinstance(block, Figure)]
    names = [picture.name for picture in found]
    if len(set(names)) != len(names):
        raise ValueError(f"two pictures have one name: {names}")
    return tuple(found)
