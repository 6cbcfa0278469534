"""A page for the terminal: lines with a style each, printed plain where there is no terminal."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Iterable
from dataclasses import dataclass, field

from rich.console import Console
from rich.text import Text

WIDEST = 120
_CONTROL = re.compile(r"[\x00-\x1f\x7f-\x9f]")


@dataclass
class Page:
    """Lines of text. `heading` and `strong` are bold; colour only ever supports a word that is there anyway."""

    width: int = 100
    lines: list[tuple[str, str]] = field(default_factory=list)

    def line(self, text: str = "", style: str = "") -> None:
        """One line; control characters in it, which a terminal would obey, become spaces."""
        self.lines.append((_CONTROL.sub(" ", text), style))

    def block(self, lines: Iterable[str], indent: int = 0, style: str = "") -> None:
        """Several lines, indented."""
        for text in lines:
            self.line((" " * indent + text).rstrip(), style)

    def prose(self, text: str, style: str = "", *, indent: int = 0) -> None:
        """A sentence, broken between words where the page is too narrow for it."""
        deeper = " " * (indent + 2)
        for line in textwrap.wrap(
            text,
            self.width,
            initial_indent=" " * indent,
            subsequent_indent=deeper,
            break_long_words=False,
            break_on_hyphens=False,
        ):
            self.line(line, style)

    def heading(self, text: str) -> None:
        """A heading, with an empty line above it unless it opens the page."""
        if self.lines:
            self.line()
        self.prose(text, "bold")

    def notes(self, warnings: Iterable[str], remarks: Iterable[str]) -> None:
        """Warnings and remarks, each with its word in front."""
        for text in warnings:
            self.prose(f"warning: {text}", "yellow")
        for text in remarks:
            self.prose(f"remark: {text}")

    def text(self) -> str:
        """All lines without styles."""
        return "\n".join(text for text, _ in self.lines) + "\n"

    def show(self, console: Console) -> None:
        """Print, each line as it is: nothing is wrapped any more, or read as markup."""
        encoding = console.encoding
        try:
            for text, style in self.lines:
                console.print(Text(readable(text, encoding), style=style), soft_wrap=True, highlight=False)
        except SystemExit:  # what rich makes of a reader that has gone
            raise BrokenPipeError from None


_PLAIN = str.maketrans(
    {
        "−": "-",
        "·": "*",
        "─": "-",
        "µ": "u",
        "²": "^2",
        "³": "^3",
        "√": "sqrt",
        "π": "pi",
        "ζ": "zeta",
        "…": "...",
    }
)


def readable(text: str, encoding: str) -> str:
    """The text as the encoding can have it: signs that it lacks become those that are typed for them."""
    try:
        text.encode(encoding)
    except (UnicodeEncodeError, LookupError):
        return text.translate(_PLAIN).encode("ascii", "replace").decode("ascii")
    return text


def console_width(console: Console) -> int:
    """The width to lay a page out for: the terminal's, WIDEST at most; WIDEST where there is no terminal."""
    return min(console.width, WIDEST) if console.is_terminal else WIDEST
