"""The assumptions that a search for a short formula may make (room: judge)."""

from __future__ import annotations

from collections.abc import Iterable

from symamp.assumptions.read import Assumption
from symamp.exact.response import Response
from symamp.judge.examined import Known


class Candidates:
    """Those of the stage file for one response, then those of the catalogue that the bias does not speak against.

    `tables` are the stage file's tables of the latter, by name.
    """

    def __init__(self, known: Known, response: str, exact: Response) -> None:
        self.all: list[Assumption] = [a for a in known.assumptions if a.applies(response)]
        self.tables: dict[str, str] = {}
        names = {a.name for a in known.assumptions}
        for entry in known.entries(response):
            # That two parts are alike is for the stage file to say: a formula in the other one's symbols misleads.
            wanted = entry.plausible and (not entry.assumption.equal or not exact.expanded)
            if wanted and entry.name not in names:
                self.all.append(entry.assumption)
                self.tables[entry.name] = entry.toml

    def in_order(self, made: Iterable[str]) -> tuple[str, ...]:
        """Names with those of the stage file first, as listed there."""
        wanted = set(made)
        return tuple(a.name for a in self.all if a.name in wanted)

    def own_count(self, names: Iterable[str]) -> int:
        """How many of them stand in the stage file."""
        return sum(1 for name in names if name not in self.tables)

    def tables_of(self, names: Iterable[str]) -> tuple[str, ...]:
        """The tables of those that do not."""
        return tuple(self.tables[name] for name in names if name in self.tables)

    def named(self, names: Iterable[str]) -> list[Assumption]:
        """The assumptions of these names, in that order."""
        by_name = {a.name: a for a in self.all}
        return [by_name[name] for name in names]
