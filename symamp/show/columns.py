"""Plain tables for the terminal: columns aligned left, right, or on the decimal point."""

from __future__ import annotations

import re
from collections.abc import Sequence

LEFT, POINT = "left", "point"
_NUMBER = re.compile(r"([+−-]?\d*)(\.\d+)?(.*)")
_GAP = "   "


def table_lines(
    headers: Sequence[str], rows: Sequence[Sequence[str]], kinds: Sequence[str], indent: int = 2
) -> list[str]:
    """The lines of a table, its headers first. A `POINT` column aligns its numbers on their decimal points."""
    columns = [_column(header, [row[i] for row in rows], kinds[i]) for i, header in enumerate(headers)]
    lines = []
    for cells in zip(*columns, strict=True):
        lines.append((" " * indent + _GAP.join(cells)).rstrip())
    return lines


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
