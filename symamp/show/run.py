"""The commands: read, work out, and only then print, so that a mistake leaves nothing on standard output."""

from __future__ import annotations

import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import Assumption, chosen, read_assumptions
from symamp.circuit.schema import stage_schema
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import read_stage
from symamp.errors import InputError, StageError
from symamp.exact.derive import derive as derive_response
from symamp.exact.opinion import Opinion, second_opinion
from symamp.exact.resistive import in_resistances, resistance_names
from symamp.exact.response import Response
from symamp.exact.time_constants import TimeConstant, time_constants
from symamp.judge.ledger import make_ledger
from symamp.show.derive_latex import Shown, latex_page
from symamp.show.derive_text import approximation_page, response_page
from symamp.show.json_parts import approximation_json, head, ledger_json, response_json
from symamp.show.ledger_text import ledger_page
from symamp.show.page import Page
from symamp.show.running import Bar, placed, print_json, printed_page
from symamp.span.workers import workers_of
from symamp.values import read_frequency


@dataclass(frozen=True)
class _Derived:
    """What `derive` shows of one response: exact, and under the assumptions asked for."""

    exact: Response
    approximation: Approximation | None
    constants: tuple[TimeConstant, ...]
    opinion: Opinion | None


def derive(
    file: str,
    assume: Sequence[str],
    frequencies: Sequence[str],
    responses: Sequence[str],
    resistances: bool,
    with_opinion: bool,
    as_latex: bool,
    as_json: bool,
) -> int:
    """`symamp derive`."""
    if as_latex and as_json:
        raise InputError("--latex and --json print different things", "give one of them", key="--latex")
    stage = read_stage(file)
    hertz = [_frequency(text) for text in frequencies]
    assumptions = read_assumptions(stage)
    made = chosen(assumptions, assume, "--assume") if assume else None
    rename = resistance_names(stage) if resistances else {}
    wanted = _wanted(stage, responses)
    with placed(stage):
        found = {name: _derived(stage, name, made, rename, with_opinion) for name in wanted}
    if as_json:
        print_json(_derive_json(stage, found, hertz))
    elif as_latex:
        sys.stdout.write(latex_page([Shown(each.exact, each.approximation) for each in found.values()]))
    else:
        _show_derived(stage, found, hertz)
    return 1 if any(each.opinion and each.opinion.agrees is False for each in found.values()) else 0


def _derived(
    stage: Stage,
    name: str,
    made: Sequence[Assumption] | None,
    rename: Mapping[str, str],
    with_opinion: bool,
) -> _Derived:
    asked = stage.asked[name]
    exact = derive_response(stage, asked)
    approximation = None
    if made is not None:
        approximation = Approximator(exact).under(made)
        if approximation.response is not None and rename:
            approximation = replace(approximation, response=in_resistances(approximation.response))
    opinion = second_opinion(stage, asked) if with_opinion else None
    shown = in_resistances(exact) if rename else exact
    return _Derived(shown, approximation, time_constants(stage, asked, rename), opinion)


def _show_derived(stage: Stage, found: Mapping[str, _Derived], hertz: Sequence[float]) -> None:
    with printed_page() as page:
        page.line(stage.title, "bold")
        for each in found.values():
            response_page(page, each.exact, each.constants, hertz)
            if each.approximation is not None:
                approximation_page(page, each.approximation, each.exact, hertz)
            if each.opinion is not None:
                page.line(f"  second opinion: {each.opinion.words}")
        _notes(page, stage)


def _derive_json(stage: Stage, found: Mapping[str, _Derived], hertz: Sequence[float]) -> dict[str, Any]:
    result = head(stage, stage.warnings, stage.remarks)
    result["responses"] = {}
    for name, each in found.items():
        shown = response_json(each.exact, each.constants, hertz)
        if each.approximation is not None:
            result["warnings"] += [w for w in each.approximation.warnings if w not in result["warnings"]]
            shown = approximation_json(each.approximation, shown, each.constants, hertz)
        if each.opinion is not None:
            shown["second_opinion"] = {"agrees": each.opinion.agrees, "words": each.opinion.words}
        result["responses"][name] = shown
    return result


def ledger(
    file: str,
    quantities: Sequence[str],
    points: int,
    seed: int,
    as_json: bool,
    workers: int | None = None,
    scheduler: str | None = None,
) -> int:
    """`symamp ledger`."""
    stage = read_stage(file)
    with placed(stage), workers_of(workers, scheduler) as engine, Bar() as bar:
        made = make_ledger(
            stage, quantities=quantities, points=points, seed=seed, progress=bar.advance, executor=engine
        )
    if as_json:
        print_json(ledger_json(made))
        return 0
    with printed_page() as page:
        ledger_page(page, made)
    return 0


def print_schema() -> int:
    """`symamp start --schema`."""
    print_json(stage_schema())
    return 0


def _wanted(stage: Stage, responses: Sequence[str]) -> list[str]:
    for name in responses:
        if name not in stage.asked:
            known = ", ".join(stage.asked)
            raise StageError(f"there is no response {name!r}", f"this stage has {known}", key="--response")
    return list(dict.fromkeys(responses)) or list(stage.asked)


def _frequency(text: str) -> float:
    try:
        hertz = float(read_frequency(text))
    except InputError as error:
        raise error.at(key="--at") from None
    if hertz < 0:
        raise InputError(f"a frequency cannot be negative, and {text!r} is", "such as 10 MHz", key="--at")
    return hertz


def _notes(page: Page, stage: Stage) -> None:
    if stage.warnings or stage.remarks:
        page.line()
        page.notes(stage.warnings, stage.remarks)
