"""The command `note` (room: show): a design note, by the ending of its file."""

from __future__ import annotations

from concurrent.futures import Executor
from pathlib import Path
from typing import Any

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import read_stage
from symamp.judge.check import make_check
from symamp.judge.claim_reading import read_claims
from symamp.judge.errors_at import Progress
from symamp.judge.ledger import POINTS, SEED, make_ledger
from symamp.show.json_parts import head
from symamp.show.note_content import note_document
from symamp.show.note_files import check_ending, write_note
from symamp.show.note_model import Document
from symamp.show.note_pictures import note_pictures
from symamp.show.running import Bar, placed, print_json, printed_page
from symamp.span.executing import Engine
from symamp.span.workers import workers_of


def note(
    file: str,
    output: str,
    points: int,
    seed: int,
    as_json: bool,
    workers: int | None = None,
    scheduler: str | None = None,
) -> int:
    """`symamp note`."""
    check_ending(output)
    stage = read_stage(file)
    with placed(stage), workers_of(workers, scheduler) as engine, Bar() as bar:
        document = document_of(stage, points=points, seed=seed, progress=bar.advance, executor=engine)
    written = write_note(document, output)
    if as_json:
        result: dict[str, Any] = head(stage, stage.warnings, stage.remarks)
        result["files"] = [str(path) for path in written]
        print_json(result)
        return 0
    with printed_page() as page:
        page.prose(_words(written))
        page.notes(stage.warnings, stage.remarks)
    return 0


def document_of(
    stage: Stage,
    *,
    points: int = POINTS,
    seed: int = SEED,
    progress: Progress | None = None,
    executor: Executor | Engine | None = None,
) -> Document:
    """The note of a stage with all that there is to say: its ledger, its verdicts, its pictures.

    Errors as `make_ledger` and `make_check` raise them.
    """
    ledger = check = None
    claims = read_claims(stage)  # before the ledger, which may take long: a slip in a claim is told at once
    if stage.assumptions:
        ledger = make_ledger(stage, points=points, seed=seed, progress=progress, executor=executor)
    if claims:
        check = make_check(
            stage, claims=claims, points=points, seed=seed, progress=progress, executor=executor
        )
    pictures = note_pictures(stage, ledger=ledger, check=check)
    return note_document(stage, ledger=ledger, check=check, pictures=pictures)


def _words(written: tuple[Path, ...]) -> str:
    if len(written) == 1:
        return f"The note is in {written[0]}."
    pictures = len(written) - 1
    what = "its picture" if pictures == 1 else f"its {pictures} pictures"
    return f"The note is in {written[0]}, {what} in {written[1].parent}."
