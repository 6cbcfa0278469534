"""The tables of errors that a ledger is made of (room: judge), one response after the other.

Of a response that is not written out the dc value has a table of its own where it can be written out alone: with
capacitances open and inductances short a large network often has few enough product terms for dominance, formulas
and proofs.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import Assumption
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.asked_quantity import Quantity, parse_quantity
from symamp.exact.derive import dc_alone, derive
from symamp.exact.response import Response
from symamp.judge.errors_at import ErrorTable, Progress
from symamp.judge.lost_roots import lost_and_new
from symamp.judge.sets import Plan
from symamp.judge.sure_roots import unsure_roots
from symamp.judge.ways_ground import without_roots
from symamp.values import show_value

_DC = Quantity("dc")


@dataclass
class Notes:
    """What is to be said beside a ledger."""

    warnings: list[str] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)


def tables_of(
    stage: Stage,
    name: str,
    made: Sequence[Assumption],
    wanted: tuple[Quantity, ...] | None,
    notes: Notes,
    progress: Progress | None,
) -> list[ErrorTable]:
    """The tables of a response's quantities, or of its default ones; `notes` hears what is to be said of them."""
    exact = _exact(stage, name)
    quantities = wanted or default_quantities(exact)
    at_dc = [quantity for quantity in quantities if quantity.name == "dc"]
    alone = dc_alone(exact) if at_dc else None
    if alone is None or not _same_at_dc(exact, alone, made):
        return [_table(exact, made, quantities, notes, progress)]
    others = [quantity for quantity in quantities if quantity.name != "dc"]
    parts = [(alone, at_dc), (exact, others)]
    return [_table(response, made, asked, notes, progress) for response, asked in parts if asked]


def _same_at_dc(exact: Response, alone: Response, made: Sequence[Assumption]) -> bool:
    """Whether the dc value alone comes to the same under every set: not where s cancels in a limit, or of a band.

    Dominance leaves the largest term of each coefficient, so only what stands before it can make a difference.
    """
    made = [each for each in made if each.applies(exact.name)]
    if any(each.band is not None for each in made):
        return False
    frames = [frame for each in made if (frame := without_roots(each)) is not None]
    engines = Approximator(exact), Approximator(alone)
    for mask in Plan(len(frames)).masks:
        taken = [frame for k, frame in enumerate(frames) if mask >> k & 1]
        whole, here = (_dc_value(engine.under(taken).response) for engine in engines)
        if not np.isclose(whole, here, rtol=1e-9, atol=0.0, equal_nan=True):
            return False
    return True


def _dc_value(response: Response | None) -> float:
    return math.nan if response is None else float(response.bias_figures.value(_DC)[0])


def default_quantities(exact: Response) -> tuple[Quantity, ...]:
    """dc, the poles and zeros, bandwidth, and unity-gain frequency where the response has one."""
    names = ["dc"]
    if exact.quantity("dc").value == 0:  # a response without a dc is known by its band
        names += ["peak", "low_corner", "high_corner"]
    names += [f"p{k}" for k in range(1, len(exact.poles()) + 1)]
    names += [f"z{k}" for k in range(1, len(exact.zeros()) + 1)]
    names += [
        name for name in ("bandwidth", "unity_gain_frequency") if exact.quantity(name).value is not None
    ]
    return tuple(parse_quantity(name) for name in names)


def _exact(stage: Stage, name: str) -> Response:
    exact = derive(stage, stage.asked[name])
    if exact.missing:
        raise StageError(
            f"the ledger needs a bias value for {', '.join(exact.missing)}",
            f'give it in [bias], such as {exact.missing[0]} = "…"',
            key="bias",
            file=stage.file,
        )
    return exact


def _table(
    exact: Response,
    made: Sequence[Assumption],
    quantities: Sequence[Quantity],
    notes: Notes,
    progress: Progress | None,
) -> ErrorTable:
    name = exact.name
    table = ErrorTable(exact, made, quantities, progress)
    full = table.approximations[table.plan.masks[-1]]
    notes.warnings.extend(table.warnings)
    notes.remarks.extend(f"{name}: {remark}" for remark in full.remarks)
    if full.response is None:
        notes.remarks.append(f"{name}: under all assumptions there is no response left: {full.why}")
    notes.remarks.extend(_new_root_words(name, table))
    notes.warnings.extend(unsure_roots(exact, table.quantities))
    return table


def _new_root_words(name: str, table: ErrorTable) -> list[str]:
    """Roots that the assumptions bring and the exact response does not have, where no account names them."""
    words: list[str] = []
    approximate = table.approximations[table.plan.masks[-1]].response
    for letter, word in (("p", "pole"), ("z", "zero")):
        if approximate is None or any(quantity.name == letter for quantity in table.quantities):
            continue  # the accounts of such roots name new ones
        for root in lost_and_new(table.exact, approximate, letter)[1]:
            words.append(f"{name}: under all assumptions a new {word} appears at {show_value(root.hz, 'Hz')}")
    return words
