"""From a stage and a response asked for to its exact form."""

from __future__ import annotations

import random
from dataclasses import replace

from symamp.circuit.checks import check_asked
from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE
from symamp.circuit.stage import Asked, Stage
from symamp.circuit.stagefile import locate
from symamp.errors import InputError, NetworkError, StageError
from symamp.exact.cofactors import Ratio, entry_symbols, ratio_of
from symamp.exact.forms import EXPAND_LIMIT, Expanded, Nested, write_out_small
from symamp.exact.modular import PRIME, residue, vanishes
from symamp.exact.response import Response
from symamp.exact.system import System, build_system


def derive(stage: Stage, asked: Asked) -> Response:
    """The exact response. Raises StageError where it is identically zero or infinite, or cannot be had."""
    check_asked(stage, asked)
    system = build_system(stage, asked.without)
    ratio = ratio_of(system, asked)
    _refuse_vanishing(stage, asked, system, ratio)
    return Response(stage, asked, ratio.unit, form_of(stage, ratio))


def dc_alone(exact: Response) -> Response | None:
    """A response of which only the dc value is that of `exact`, and which is written out though `exact` is not.

    Without reactances a large network often has few enough product terms. None where `exact` is written out, where
    there are too many terms even so, or where the value at s = 0 is a limit, 0 or infinite.
    """
    if isinstance(exact.form, Expanded):
        return None
    ratio = ratio_of(build_system(exact.stage, exact.asked.without).at_dc(), exact.asked)
    if any(vanishes(ratio.graph)):
        return None
    form = form_of(exact.stage, ratio)
    return replace(exact, form=form) if isinstance(form, Expanded) else None


def form_of(stage: Stage, ratio: Ratio) -> Expanded | Nested:
    """Written out in lowest terms where the graph's count allows, nested otherwise."""
    small = sum(ratio.graph.count_terms()) <= EXPAND_LIMIT
    written = write_out_small(ratio, stage.symbols) if small else None
    return written or nested_of(stage, ratio)


def nested_of(stage: Stage, ratio: Ratio) -> Nested:
    """The nested form, whatever the graph's count."""
    reactive = frozenset(
        name for name in entry_symbols(ratio.graph) if stage.symbols[name].nature in (CAPACITANCE, INDUCTANCE)
    )
    return Nested(ratio.graph, ratio.scale, sum(ratio.graph.count_terms()), reactive)


def _refuse_vanishing(stage: Stage, asked: Asked, system: System, ratio: Ratio) -> None:
    """StageError, with its place in the file, where the response is zero or infinite whatever the values."""
    error = _vanishing(asked, system, ratio)
    if error is not None:  # the place is looked up for this alone: it takes a parser of its own
        place = locate(stage, ("response", asked.name))
        raise error.at(file=place["file"], line=place["line"], key=place["key"])


def _vanishing(asked: Asked, system: System, ratio: Ratio) -> InputError | None:
    name = f"response {asked.name!r}"
    free = undetermined(system)
    if free:
        return NetworkError(
            f"{name} is identically infinite: nothing sets {' or '.join(free[:4])}",
            "give it a path to ground: a conductance (gds, go), a resistor or a source",
        )
    zero, infinite = vanishes(ratio.graph)
    if infinite:
        what = "what it is divided by" if asked.over else "the current of the source that is looked from"
        return StageError(
            f"{name} is identically infinite: {what} is zero whatever the values",
            "ask for another node, or join it to the drive",
        )
    if zero and not asked.drive:
        return StageError(
            f"{name} is identically zero: no current raises a voltage there",
            "a source, an op amp or a transformer holds it at 0: ask for another node, or take that part off",
        )
    if zero:
        return StageError(
            f"{name} is identically zero: nothing carries {', '.join(asked.drive)} to its output",
            "ask for a node that the drive reaches, or mend the connection",
        )
    return None


def undetermined(system: System) -> list[str]:
    """Unknowns that the network leaves free, in words: where a null vector of its matrix is not zero.

    Values are random modulo a prime, so the answer is that of almost all values of the symbols.
    """
    draw = random.Random(7)
    values = {name: draw.randrange(2, PRIME) for name in system.symbols}
    s = draw.randrange(2, PRIME)
    rows = [{c: residue(entry, values, s) for c, entry in row.items()} for row in system.rows]
    pivots: dict[int, dict[int, int]] = {}
    for row in rows:
        current = {c: v for c, v in row.items() if v}
        while current:
            lead = min(current)
            if lead not in pivots:
                inverse = pow(current[lead], -1, PRIME)
                pivots[lead] = {c: v * inverse % PRIME for c, v in current.items()}
                break
            factor = current[lead]
            for c, v in pivots[lead].items():
                reduced = (current.get(c, 0) - factor * v) % PRIME
                if reduced:
                    current[c] = reduced
                else:
                    current.pop(c, None)
    free = [c for c in range(system.size) if c not in pivots]
    if not free:
        return []
    solution = {c: draw.randrange(1, PRIME) for c in free}
    for lead in sorted(pivots, reverse=True):
        solution[lead] = -sum(v * solution[c] for c, v in pivots[lead].items() if c != lead) % PRIME
    names = system.column_names()
    return [names[c] for c in range(system.size) if solution[c]]
