"""What the commands share (room: show): places of errors, pages and JSON on standard output, a progress bar."""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import locate
from symamp.errors import InputError
from symamp.show.page import Page, console_width

_PATIENCE = 2.0  # seconds before a progress bar appears


@contextmanager
def placed(stage: Stage) -> Iterator[None]:
    """Errors that name a key of the stage file alone get its file and line."""
    try:
        yield
    except InputError as error:
        if error.line is not None or error.key is None or error.key.startswith("--"):
            raise
        place = locate(stage, tuple(error.key.split(".")))
        raise error.at(file=place["file"], line=place["line"]) from None


@contextmanager
def printed_page() -> Iterator[Page]:
    """A page as wide as the terminal, to be written; printed when the block ends well, and not at all otherwise."""
    console = Console(highlight=False)
    page = Page(console_width(console))
    yield page
    page.show(console)


def print_json(found: dict[str, Any]) -> None:
    """One JSON object, and nothing else, on standard output."""
    # Whole before any of it is printed, so that a mistake leaves nothing on standard output.
    narrow = (sys.stdout.encoding or "").lower().replace("-", "") != "utf8"
    sys.stdout.write(json.dumps(found, indent=1, ensure_ascii=narrow, allow_nan=False) + "\n")


class Bar:
    """A progress bar that appears after a while, and only where a person watches."""

    def __init__(self) -> None:
        self._watched = sys.stdout.isatty() and sys.stderr.isatty()
        self._start = time.monotonic()
        self._bar: Progress | None = None
        self._task: Any = None

    def __enter__(self) -> Bar:
        return self

    def __exit__(self, *_: object) -> None:
        if self._bar is not None:
            self._bar.stop()

    def advance(self, what: str, done: int, total: int) -> None:
        """So many of so many bias points, or sets of assumptions, are done."""
        if not self._watched or time.monotonic() - self._start < _PATIENCE:
            return
        if self._bar is None:
            columns = (
                TextColumn("{task.description}"),
                BarColumn(),
                TextColumn("{task.completed:,}/{task.total:,}"),
            )
            self._bar = Progress(
                *columns, TimeRemainingColumn(), console=Console(stderr=True), transient=True
            )
            self._task = self._bar.add_task(what, total=total)
            self._bar.start()
        self._bar.update(self._task, description=what, completed=done, total=total)
