"""A stage that prints as its stage file (room: testing)."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

from symamp.circuit.stage import Stage


class PrintedStage(Stage):
    """A stage whose failing test shows its file: the path where there is one, else the text, to be saved and tried."""

    @classmethod
    def of(cls, stage: Stage) -> PrintedStage:
        """The same stage, printed so."""
        return cls(**{each.name: getattr(stage, each.name) for each in fields(stage)})

    def __repr__(self) -> str:
        return "\n".join(self._lines)

    @property
    def _lines(self) -> list[str]:
        if self.file is not None:
            return [f"<stage of {self.file}>"]
        text = (self.source or b"").decode().strip()
        return ["<stage", *(f"  {line}".rstrip() for line in text.splitlines()), ">"]

    def _repr_pretty_(self, printer: Any, cycle: bool) -> None:
        """For Hypothesis and notebooks, which else print a record field by field."""
        first, *rest = self._lines
        printer.text(first)
        for line in rest:
            printer.break_()
            printer.text(line)
