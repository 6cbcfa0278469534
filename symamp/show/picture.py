"""A drawn picture that can be had as SVG, PNG or PDF (room: show): what all plots are.

The same picture gives the same bytes at any time: no dates, no random names, settings of our own whatever
the user's are.
"""

from __future__ import annotations

import os
import re
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

from symamp.circuit.writer import replace_file
from symamp.errors import InputError, MissingLibraryError
from symamp.show.ink import SETTINGS

if TYPE_CHECKING:
    from matplotlib.figure import Figure

ENDINGS = (".svg", ".png", ".pdf")
DPI = 200  # of a PNG: half a page wide, sharp enough to be printed
_LEAST_DPI, _MOST_DPI = 10, 2400
_SETTINGS_ARE_TAKEN = threading.RLock()  # the plotting library keeps its settings for all threads together


@dataclass(frozen=True)
class Picture:
    """A picture: `name` is a file's name without ending, `caption` says what it is, `alt` what is to be seen on it.

    A name that no system or LaTeX would take as a file's is made plain.
    Nothing is drawn before one of the formats is asked for. Text in SVG is drawn as outlines, so that symbols
    with subscripts look the same everywhere, fonts or not; the words are in its title and description. In PDF
    the fonts are embedded, and text can be searched.
    """

    name: str
    caption: str
    alt: str
    draw: Callable[[], Figure] = field(repr=False)

    def __post_init__(self) -> None:
        plain = re.sub(r"[^A-Za-z0-9._-]+", "-", self.name).strip("-.") or "picture"
        object.__setattr__(self, "name", plain)  # a file's name on every system, and in LaTeX

    def figure(self) -> Figure:
        """The figure afresh, for those who want to change it. Raises MissingLibraryError without matplotlib."""
        with _settled():
            return self.draw()

    def svg(self) -> str:
        """The picture as the text of an SVG file."""
        text = self._bytes("svg", metadata={"Date": None, "Creator": None}).decode("utf-8")
        words = f"<title>{_xml(self.caption)}</title>\n <desc>{_xml(self.alt)}</desc>\n"
        return re.sub(r"(<svg\b[^>]*)>\n", lambda found: f'{found[1]} role="img">\n {words}', text, count=1)

    def png(self, dpi: float = DPI) -> bytes:
        """The picture as a PNG file with so many pixels an inch, 10 to 2400; ValueError for others."""
        if not _LEAST_DPI <= dpi <= _MOST_DPI:
            raise ValueError(f"dpi={dpi!r} must lie between {_LEAST_DPI} and {_MOST_DPI}")
        return self._bytes("png", dpi=dpi, metadata={"Software": None})

    def pdf(self) -> bytes:
        """The picture as a PDF file of one page of its own size."""
        return self._bytes("pdf", metadata={"CreationDate": None, "Creator": None, "Producer": None})

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Write the picture by the ending of `path`, whole or not at all; the path.

        Raises InputError for another ending and where the place cannot be written to.
        """
        ending = checked_ending(path)
        data = {".svg": lambda: self.svg().encode("utf-8"), ".png": self.png, ".pdf": self.pdf}[ending]()
        try:
            replace_file(Path(path), data)
            return Path(path)
        except OSError as error:
            raise InputError(
                f"{os.fspath(path)!r} cannot be written: {error.strerror or error}",
                "name a file in a folder that can be written to",
            ) from None

    def _repr_svg_(self) -> str:
        return self.svg()

    def _bytes(self, kind: str, **options: Any) -> bytes:
        with _settled():
            written = BytesIO()
            self.draw().savefig(written, format=kind, **options)
        return written.getvalue()


def checked_ending(path: str | os.PathLike[str]) -> str:
    """The ending of a picture's file: .svg, .png or .pdf. Raises InputError for all else."""
    ending = Path(path).suffix.lower()
    if ending not in ENDINGS:
        raise InputError(
            f"{os.fspath(path)!r} is not the name of a picture", f"let it end in {', '.join(ENDINGS)}"
        )
    return ending


@contextmanager
def _settled() -> Iterator[None]:
    """Our own settings while something is drawn, and the user's again after it."""
    try:
        import matplotlib
    except ImportError:
        raise MissingLibraryError("plots need matplotlib: pip install matplotlib") from None
    with _SETTINGS_ARE_TAKEN, matplotlib.rc_context():
        matplotlib.rcdefaults()
        settings: Any = matplotlib.rcParams
        settings.update(SETTINGS)
        yield


def _xml(words: str) -> str:
    """Words inside an XML element; what XML cannot hold is shown as missing."""
    return escape("".join(c if c.isprintable() else "\ufffd" if c.strip() else " " for c in words))
