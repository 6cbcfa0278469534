"""Writes a document into files (room: show): all of them whole, or none."""

from __future__ import annotations

import hashlib
import os
import re
import shutil
import tempfile
from collections.abc import Callable
from functools import partial
from pathlib import Path

from symamp.errors import InputError
from symamp.show.note_html import html_note
from symamp.show.note_md import markdown_note
from symamp.show.note_model import Document, Drawing, pictures_of
from symamp.show.note_tex import tex_note

ENDINGS = (".tex", ".html", ".md")


def check_ending(path: str | Path) -> str:
    """The ending of a note's path. Raises InputError for one that is none of ours."""
    ending = Path(path).suffix.lower()
    if ending not in ENDINGS:
        found = f"ends in {ending!r}" if ending else "has no ending"
        problem = f"{str(path)!r} {found}, and a note is written by its ending"
        raise InputError(problem, f"let it end in {', '.join(ENDINGS[:-1])} or {ENDINGS[-1]}", key="--output")
    return ending


def write_note(document: Document, path: str | Path) -> tuple[Path, ...]:
    """Write the document by the ending of `path`; the files written, the note first.

    Pictures of .tex and .md stand in a folder beside it that is called like the note, with `-figures`. Raises
    InputError for another ending, and where the place cannot be written to.
    """
    ending = check_ending(path)
    target = Path(path)
    pictures = pictures_of(document)
    folder = figures_folder(target)
    text, files = _contents(document, ending, folder, pictures)
    try:
        return _placed(target, text, folder, files)
    except OSError as error:
        what = error.strerror or str(error)
        raise InputError(
            f"{str(target)!r} cannot be written: {what}",
            "name a file in a folder that can be written to",
            key="--output",
        ) from None


def figures_folder(target: Path) -> str:
    """The folder of a note's pictures; a name that LaTeX would trip over is made plain, and told apart by a sum."""
    plain = re.sub(r"[^A-Za-z0-9._-]+", "-", target.stem).strip(".-") or "note"
    if plain != target.stem:
        plain += "-" + hashlib.sha256(target.stem.encode("utf-8", "surrogatepass")).hexdigest()[:6]
    return f"{plain}-figures"


def _contents(
    document: Document, ending: str, folder: str, pictures: tuple[Drawing, ...]
) -> tuple[str, dict[str, bytes]]:
    if ending == ".html":
        return html_note(document), {}
    if ending == ".tex":
        return tex_note(document, folder), {f"{p.name}.pdf": p.pdf() for p in pictures}
    files = {f"{p.name}.svg": p.svg().encode("utf-8") for p in pictures}
    return markdown_note(document, folder), files


def _placed(target: Path, text: str, folder: str, files: dict[str, bytes]) -> tuple[Path, ...]:
    """Everything is written beside its place first, and then moved there; a failure puts back what was there."""
    parent = target.parent
    if target.is_dir():
        raise IsADirectoryError(21, "it is a folder")
    place = parent / folder
    targets = [target, *(place / name for name in files)]
    undo: list[Callable[[], object]] = []
    work = Path(tempfile.mkdtemp(prefix=".note-", dir=parent))
    try:
        for number, content in enumerate([text.encode("utf-8"), *files.values()]):
            (work / f"new{number}").write_bytes(content)
        if files and not place.exists():
            place.mkdir()
            undo.append(place.rmdir)
        for number, each in enumerate(targets):
            _move(work / f"new{number}", each, work / f"old{number}", undo)
    except BaseException:
        for step in reversed(undo):
            step()
        raise
    finally:
        shutil.rmtree(work, ignore_errors=True)
    return tuple(targets)


def _move(new: Path, place: Path, old: Path, undo: list[Callable[[], object]]) -> None:
    """`new` is put at `place`, what was there at `old`; `undo` gets the step back."""
    if place.exists():
        place.rename(old)
        undo.append(partial(os.replace, old, place))
    else:
        undo.append(partial(place.unlink, missing_ok=True))
    new.rename(place)
