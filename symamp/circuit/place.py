"""Room `circuit`: where in a stage file something stands, and errors that say so."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

from symamp.circuit.positions import line_of
from symamp.errors import InputError, StageError

Path = tuple[str | int, ...]


def dotted(path: Path) -> str:
    """A path as one key: `bias.M1.gm`; members of arrays are counted from 1, as people count: `claim.1`."""
    return ".".join(str(step + 1) if isinstance(step, int) else step for step in path)


@dataclass(frozen=True)
class Place:
    """A stage file's name and bytes, both None for a stage that was not read from a file."""

    file: str | None = None
    source: bytes | None = None

    def line(self, path: Path) -> int | None:
        """The line of a path, from 1, or None where there is no file."""
        return line_of(self.source, path) if self.source is not None and path else None

    def error(self, path: Path, problem: str, remedy: str = "") -> StageError:
        """The error to raise about what stands at a path."""
        return StageError(problem, remedy, key=dotted(path) or None, file=self.file, line=self.line(path))

    @contextmanager
    def at(self, path: Path) -> Iterator[None]:
        """Errors that leave this context without a place of their own are about that path."""
        try:
            yield
        except InputError as error:
            if error.file is not None or error.line is not None:
                raise
            raise error.at(key=dotted(path) or None, file=self.file, line=self.line(path)) from None
