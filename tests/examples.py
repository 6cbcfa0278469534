"""The examples in a Markdown page: run, and written out anew with what comes of them.

A `console` block holds commands after `$ ` and what they print; `$ echo $?` prints the last exit code, and
without it a command must succeed. A `pycon` block is a Python session; the sessions of a page share their names.
"""

from __future__ import annotations

import contextlib
import difflib
import doctest
import io
import os
import re
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
UPDATE = "SYMAMP_UPDATE_EXAMPLES"  # set to 1: pages are rewritten with what comes of their examples
LIMIT = 120  # seconds for one command

_BLOCK = re.compile(r"^```(?P<kind>[a-z]+)\n(?P<text>.*?)^```$", re.MULTILINE | re.DOTALL)
_LAST_CODE = "echo $?"
_TRIED = re.compile(r"[\d,]+(?= bias points, seed)")


@dataclass(frozen=True)
class Block:
    """A fenced block of a page: what follows the fence ("console", "pycon", "toml", "sh"), and its lines."""

    kind: str
    text: str

    @property
    def runs(self) -> list[str]:
        """What is run in it: commands (without the look at the exit code), or Python statements."""
        if self.kind == "console":
            lines = [line[2:] for line in self.text.splitlines() if line.startswith("$ ")]
            return [line for line in lines if line != _LAST_CODE]
        return [example.source for example in doctest.DocTestParser().get_examples(self.text)]


def blocks(page: str, kind: str) -> list[Block]:
    """The page's blocks of one kind, in order."""
    return [Block(kind, found["text"]) for found in _BLOCK.finditer(page) if found["kind"] == kind]


def counted(page: str) -> dict[str, int]:
    """How many commands and Python statements a page runs."""
    return {kind: sum(len(block.runs) for block in blocks(page, kind)) for kind in ("console", "pycon")}


def rendered(page: str, folder: Path) -> str:
    """The page with every example run in `folder` and its output put in the place of the one printed."""
    names: dict[str, object] = {"__name__": "__example__"}
    environment = _environment(folder)

    def run(found: re.Match[str]) -> str:
        if found["kind"] == "console":
            text = _console(found["text"], folder, environment)
        elif found["kind"] == "pycon":
            with contextlib.chdir(folder):
                text = _session(found["text"], names)
        else:
            return found[0]
        return f"```{found['kind']}\n{text}```"

    return _BLOCK.sub(run, page)


def hold(path: Path, folder: Path) -> None:
    """Assert that a page says what its examples print; or, in update mode, make it say so.

    How many points a local search tries hangs on the last bit of a double, so that number is not compared.
    """
    page = path.read_text(encoding="utf-8")
    found = rendered(page, folder)
    if os.environ.get(UPDATE) == "1":
        path.write_text(found, encoding="utf-8")
        return
    told, printed = (_TRIED.sub("N", text).splitlines() for text in (page, found))
    difference = list(difflib.unified_diff(told, printed, "the page", "what is printed", lineterm=""))
    assert not difference, "\n".join([f"{path.name} is out of date; {UPDATE}=1 rewrites it", *difference])


def copy_of(folder: Path, target: Path) -> Path:
    """A copy to run examples in, so that they leave nothing behind."""
    return Path(shutil.copytree(folder, target))


def _environment(folder: Path) -> dict[str, str]:
    """That of a plain terminal 100 columns wide, with this checkout's `symamp` first on the path."""
    tools = folder.parent / f"{folder.name}-bin"
    tools.mkdir(exist_ok=True)
    command = tools / "symamp"
    command.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m symamp "$@"\n', encoding="utf-8")
    command.chmod(0o755)
    kept = {k: v for k, v in os.environ.items() if k not in ("COLUMNS", "FORCE_COLOR", "NO_COLOR")}
    path = os.pathsep.join([str(tools), str(Path(sys.executable).parent), os.environ.get("PATH", os.defpath)])
    return kept | {"PATH": path, "PYTHONPATH": str(ROOT), "PYTHONUTF8": "1", "TERM": "dumb"}


def _console(text: str, folder: Path, environment: dict[str, str]) -> str:
    """A console block with its commands run."""
    commands = [line[2:] for line in text.splitlines() if line.startswith("$ ")]
    assert commands, "a console block without a command"
    written: list[str] = []
    code = 0
    for index, command in enumerate(commands):
        written.append(f"$ {command}")
        if command == _LAST_CODE:
            written.append(str(code))
            continue
        done = subprocess.run(
            ["sh", "-c", command],
            cwd=folder,
            env=environment,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            timeout=LIMIT,
            check=False,
        )
        code = done.returncode
        output = done.stdout.decode("utf-8")
        shown = commands[index + 1 : index + 2] == [_LAST_CODE]
        assert code == 0 or shown, f"{command}: exit {code}\n{output}"
        written += [line.rstrip() for line in output.splitlines()]
    return "\n".join(written) + "\n"


def _session(text: str, names: dict[str, object]) -> str:
    """A Python session with its statements run; a statement that raises fails the test."""
    examples = doctest.DocTestParser().get_examples(text)
    assert examples, "a Python session without a statement"
    written: list[str] = []
    for example in examples:
        first, *more = example.source.splitlines()
        written += [f">>> {first}", *(f"... {line}" for line in more)]
        output = io.StringIO()
        with contextlib.redirect_stdout(output):
            exec(compile(example.source, "<page>", "single"), names)  # noqa: S102 (our own page)
        written += [line.rstrip() for line in output.getvalue().splitlines()]
    return "\n".join(written) + "\n"
