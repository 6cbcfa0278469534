"""Plain tables for the terminal: columns aligned left, right, or on the decimal point."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Sequence

LEFT, POINT = "left", "point"
_NUMBER = re.compile(r"([+−-]?\d*)(\.\d+)?(.*)")
_GAP = "   "
_DEEPER = 4  # columns by which what stands under its row is set in


def table_lines(
    headers: Sequence[str],
    rows: Sequence[Sequence[str]],
    kinds: Sequence[str],
    indent: int = 2,
    *,
    width: int | None = None,
) -> list[str]:
    """The lines of a table, its headers first. A `POINT` column aligns its numbers on their decimal points.

    Where a row is wider than `width`, its last cell stands under it, on lines of its own.
    """
    return [line for lines in table_groups(headers, rows, kinds, indent, width=width) for line in lines]


def table_groups(
    headers: Sequence[str],
    rows: Sequence[Sequence[str]],
    kinds: Sequence[str],
    indent: int = 2,
    *,
    width: int | None = None,
) -> list[list[str]]:
    """The lines of a table, those of the headers and of each row together; as `table_lines`."""
    columns = [_column(header, [row[i] for row in rows], kinds[i]) for i, header in enumerate(headers)]
    cells = list(zip(*columns, strict=True))
    lines = [(" " * indent + _GAP.join(row)).rstrip() for row in cells]
    if width is None or kinds[-1] != LEFT:
        return [[line] for line in lines]
    wide = [len(line) > width and len(headers) > 1 for line in lines[1:]]
    groups = [
        _under(row, headers[-1], indent, width) if under else [line]
        for line, row, under in zip(lines[1:], cells[1:], wide, strict=True)
    ]
    # A last column of which nothing is left in its place has no header either.
    stays = any(row[-1].strip() and not under for row, under in zip(cells[1:], wide, strict=True))
    return [[lines[0] if stays else _without_last(cells[0], indent)], *groups]


def _under(row: Sequence[str], header: str, indent: int, width: int) -> list[str]:
    """A row, and its last cell with its header on lines below it, broken between words."""
    deep = indent + _DEEPER
    text = f"{header}: {row[-1].strip()}" if header else row[-1].strip()
    below = textwrap.wrap(text, max(width - deep, 1), break_long_words=False, break_on_hyphens=False)
    return [_without_last(row, indent), *(" " * deep + line for line in below)]


def _without_last(row: Sequence[str], indent: int) -> str:
    return (" " * indent + _GAP.join(row[:-1])).rstrip()


def _column(header: str, cells: Sequence[str], kind: str) -> list[str]:
    if kind == LEFT:
        width = max(len(text) for text in (header, *cells))
        return [text.ljust(width) for text in (header, *cells)]
    split = [_split(text) for text in cells]
    before = max((len(a) for a, _, number in split if number), default=0)
    aligned = [a.rjust(before) + b if number else a + b for a, b, number in split]
    width = max(len(text) for text in (header, *aligned))
    # A header as wide as its numbers stands over them from the left, as in a written table.
    return [header.ljust(width), *(text.ljust(width) for text in aligned)]


def _split(text: str) -> tuple[str, str, bool]:
    """(what stands before the decimal point, the rest, whether it is a number)."""
    match = _NUMBER.match(text)
    if match is None or not any(ch.isdigit() for ch in match[1]):
        return text, "", False
    return match[1], (match[2] or "") + match[3], True
