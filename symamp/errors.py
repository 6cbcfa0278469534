"""Every error that symamp raises on purpose, below all rooms of the house.

Each one keeps its facts as fields, and its text names the value, where it stands and the way out.
"""

from __future__ import annotations


class SymampError(Exception):
    """Root of all errors of this package."""


class InputError(SymampError, ValueError):
    """Something that the user wrote is wrong.

    Fields: `problem` (what is wrong), `remedy` (what would be right), and where it is: `file`, `line` (from 1)
    and `key` (dotted, such as `bias.M1.gm`), each None while it is not known.
    """

    def __init__(
        self,
        problem: str,
        remedy: str = "",
        *,
        key: str | None = None,
        file: str | None = None,
        line: int | None = None,
    ) -> None:
        self.problem = problem
        self.remedy = remedy
        self.key = key
        self.file = file
        self.line = line
        super().__init__(problem)

    def __str__(self) -> str:
        place = self.file or ""
        if self.line is not None:
            place = f"{place}:{self.line}" if place else f"line {self.line}"
        head = ": ".join(part for part in (place, self.key or "") if part)
        body = f"{self.problem}; {self.remedy}" if self.remedy else self.problem
        return f"{head}: {body}" if head else body

    def at(self, *, key: str | None = None, file: str | None = None, line: int | None = None) -> InputError:
        """The same error with its place filled in where it was still unknown."""
        return type(self)(
            self.problem,
            self.remedy,
            key=self.key if self.key is not None else key,
            file=self.file if self.file is not None else file,
            line=self.line if self.line is not None else line,
        )


class ReadError(InputError):
    """A value or a formula that cannot be read."""


class StageError(InputError):
    """A stage that means nothing: a wrong part, node, response, bias, span or assumption."""


class NetworkError(StageError):
    """A network with no unique solution: floating nodes, loops of voltage sources, cuts of current sources."""


class TooLargeError(SymampError):
    """An expression too large to be written out, where only a written-out one would do."""


class MissingLibraryError(SymampError, ImportError):
    """An optional library is needed and not installed; the text says how to install it."""
