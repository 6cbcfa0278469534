"""The commands: read, work out, and only then print, so that a mistake leaves nothing on standard output."""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Sequence
from typing import Any

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import Assumption, chosen, read_assumptions
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import read_stage
from symamp.errors import InputError, StageError
from symamp.exact.derive import derive as derive_response
from symamp.exact.opinion import Opinion, second_opinion
from symamp.exact.time_constants import time_constants
from symamp.judge.ledger import make_ledger
from symamp.show.derive_text import approximation_page, response_page
from symamp.show.json_parts import approximation_json, head, ledger_json, response_json
from symamp.show.ledger_text import ledger_page
from symamp.show.page import Page, console_width
from symamp.values import read_frequency

_PATIENCE = 2.0  # seconds before a progress bar appears


def derive(
    file: str,
    assume: Sequence[str],
    frequencies: Sequence[str],
    responses: Sequence[str],
    with_opinion: bool,
    as_json: bool,
) -> int:
    """`symamp derive`."""
    stage = read_stage(file)
    hertz = [_frequency(text) for text in frequencies]
    assumptions = read_assumptions(stage)
    made = chosen(assumptions, assume) if assume else ()
    wanted = _wanted(stage, responses)
    exact = {name: derive_response(stage, stage.asked[name]) for name in wanted}
    opinions = {name: second_opinion(stage, stage.asked[name]) for name in wanted} if with_opinion else {}
    if as_json:
        _print_json(_derive_json(stage, exact, made, hertz, opinions))
    else:
        console = Console(highlight=False)
        page = Page(console_width(console))
        page.line(stage.title, "bold")
        for name, response in exact.items():
            response_page(page, response, time_constants(stage, response.asked), hertz)
            if assume:
                approximation_page(page, Approximator(response).under(made), response, hertz)
            if name in opinions:
                page.line(f"  second opinion: {opinions[name].words}")
        _notes(page, stage)
        page.show(console)
    return 1 if any(opinion.agrees is False for opinion in opinions.values()) else 0


def _derive_json(
    stage: Stage,
    exact: dict[str, Any],
    made: Sequence[Assumption],
    hertz: Sequence[float],
    opinions: dict[str, Opinion],
) -> dict[str, Any]:
    result = head(stage, stage.warnings, stage.remarks)
    result["responses"] = {}
    for name, response in exact.items():
        constants = time_constants(stage, response.asked)
        found = response_json(response, constants, hertz)
        if made:
            approximation = Approximator(response).under(made)
            result["warnings"] += [w for w in approximation.warnings if w not in result["warnings"]]
            found = approximation_json(approximation, found, constants, hertz)
        if name in opinions:
            opinion = opinions[name]
            found["second_opinion"] = {"agrees": opinion.agrees, "words": opinion.words}
        result["responses"][name] = found
    return result


def ledger(file: str, quantities: Sequence[str], points: int, seed: int, as_json: bool) -> int:
    """`symamp ledger`."""
    stage = read_stage(file)
    with _Bar() as bar:
        made = make_ledger(stage, quantities=quantities, points=points, seed=seed, progress=bar.advance)
    if as_json:
        _print_json(ledger_json(made))
        return 0
    console = Console(highlight=False)
    page = Page(console_width(console))
    ledger_page(page, made)
    page.show(console)
    return 0


def _wanted(stage: Stage, responses: Sequence[str]) -> list[str]:
    for name in responses:
        if name not in stage.asked:
            known = ", ".join(stage.asked)
            raise StageError(f"there is no response {name!r}", f"this stage has {known}", key="--response")
    return list(dict.fromkeys(responses)) or list(stage.asked)


def _frequency(text: str) -> float:
    try:
        return float(read_frequency(text))
    except InputError as error:
        raise error.at(key="--at") from None


def _notes(page: Page, stage: Stage) -> None:
    if stage.warnings or stage.remarks:
        page.line()
        page.notes(stage.warnings, stage.remarks)


def _print_json(found: dict[str, Any]) -> None:
    json.dump(found, sys.stdout, indent=1, ensure_ascii=False, allow_nan=False)
    sys.stdout.write("\n")


class _Bar:
    """A progress bar that appears after a while, and only where a person watches."""

    def __init__(self) -> None:
        self._watched = sys.stdout.isatty() and sys.stderr.isatty()
        self._start = time.monotonic()
        self._bar: Progress | None = None
        self._task: Any = None

    def __enter__(self) -> _Bar:
        return self

    def __exit__(self, *_: object) -> None:
        if self._bar is not None:
            self._bar.stop()

    def advance(self, done: int, total: int) -> None:
        """So many of so many bias points are done."""
        if not self._watched or time.monotonic() - self._start < _PATIENCE:
            return
        if self._bar is None:
            columns = (TextColumn("bias points"), BarColumn(), TextColumn("{task.completed:,}/{task.total:,}"))
            self._bar = Progress(*columns, TimeRemainingColumn(), console=Console(stderr=True), transient=True)
            self._task = self._bar.add_task("", total=total)
            self._bar.start()
        self._bar.update(self._task, completed=done)
