"""Assumptions as a stage file writes them, read into records: names resolved, contradictions refused."""

from __future__ import annotations

from collections.abc import Sequence
from difflib import get_close_matches

from symamp.assumptions.record import Assumption, Miller
from symamp.assumptions.refuse import refuse_contradictions
from symamp.assumptions.table import TableReader
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import locate
from symamp.errors import InputError, StageError
from symamp.values import quoted

__all__ = ["Assumption", "Miller", "chosen", "read_assumptions"]


def read_assumptions(stage: Stage) -> tuple[Assumption, ...]:
    """All assumptions of a stage, in listed order.

    Raises StageError or ReadError, with file, line and key, for the first table that means nothing, for a name
    that is given twice, and for assumptions that contradict one another.
    """
    found: list[Assumption] = []
    for index, raw in enumerate(stage.assumptions):
        try:
            assumption = TableReader(stage, raw).read()
            if any(assumption.name == other.name for other in found):
                problem = f"two assumptions are named {quoted(assumption.name)}"
                raise StageError(problem, "give each a name of its own", key="name")
        except InputError as error:
            path = ("assumption", index, *(error.key.split(".") if error.key else ()))
            raise type(error)(error.problem, error.remedy, **locate(stage, path)) from None
        found.append(assumption)
    refuse_contradictions(stage, found)
    return tuple(found)


def chosen(
    assumptions: Sequence[Assumption], wanted: Sequence[str], key: str | None = None
) -> tuple[Assumption, ...]:
    """The assumptions of these names, in listed order; "all" means every one.

    Raises StageError for an unknown name, its key the one given: where the names were written.
    """
    if "all" in wanted and all(a.name != "all" for a in assumptions):
        return tuple(assumptions)
    known = {assumption.name: assumption for assumption in assumptions}
    for name in wanted:
        if name not in known:
            near = get_close_matches(name, known, n=1)
            listed = ", ".join(repr(n) for n in known) or "this stage has none"
            raise StageError(
                f"there is no assumption named {quoted(name)}",
                f"did you mean {near[0]!r}?" if near else f"its assumptions: {listed}",
                key=key,
            )
    return tuple(a for a in assumptions if a.name in set(wanted))
