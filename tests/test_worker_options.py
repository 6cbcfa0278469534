"""`--workers` and `--scheduler`: the same text, wrong options in words, and Ctrl-C as a terminal sends it."""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from click.testing import CliRunner
from test_interrupts import STAGE, saved

from symamp.cli import cli

CLAIM = """
[[claim]]
about = "gain.dc"
formula = "-gm1*ro1"
within = "1 %"
"""


@pytest.fixture
def stage(tmp_path: Path) -> str:
    path = tmp_path / "claimed.stage.toml"
    path.write_text(STAGE + CLAIM)
    return str(path)


@pytest.mark.parametrize("command", ["ledger", "check"])
def test_any_number_of_workers_prints_the_same(command: str, stage: str) -> None:
    asked = [command, stage, "--points", "20000", "--json"]
    alone = CliRunner().invoke(cli, asked)
    assert (alone.exit_code, alone.stderr) == (0, "")
    assert json.loads(alone.stdout)
    for workers in ("1", "2"):
        many = CliRunner().invoke(cli, [*asked, "--workers", workers])
        assert (many.exit_code, many.stderr) == (0, "")
        assert many.stdout == alone.stdout


def test_a_note_takes_workers_too(stage: str, tmp_path: Path) -> None:
    alone, many = tmp_path / "alone" / "note.md", tmp_path / "many" / "note.md"
    for path, options in ((alone, []), (many, ["--workers", "2"])):
        path.parent.mkdir()
        made = CliRunner().invoke(cli, ["note", stage, "-o", str(path), *options])
        assert (made.exit_code, made.stderr) == (0, "")
    assert many.read_text() == alone.read_text()


@pytest.mark.parametrize("command", ["ledger", "check", "note"])
@pytest.mark.parametrize("number", ["0", "-1", "257", "two", "1.5"])
def test_a_wrong_number_of_workers(command: str, number: str, stage: str, tmp_path: Path) -> None:
    output = ["-o", str(tmp_path / "note.md")] if command == "note" else []
    made = CliRunner().invoke(cli, [command, stage, *output, "--workers", number])
    assert (made.exit_code, made.stdout) == (2, "")
    assert "--workers" in made.stderr
    assert number in made.stderr


def test_both_are_too_many(stage: str) -> None:
    made = CliRunner().invoke(cli, ["check", stage, "--workers", "2", "--scheduler", "tcp://127.0.0.1:1"])
    assert (made.exit_code, made.stdout) == (2, "")
    assert made.stderr == (
        "--scheduler: --workers starts processes here, and --scheduler names workers elsewhere; "
        "give one of them\n"
    )


def test_without_the_library_the_way_to_install_it(stage: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    made = CliRunner().invoke(cli, ["ledger", stage, "--scheduler", "tcp://127.0.0.1:1"])
    assert (made.exit_code, made.stdout) == (2, "")
    assert made.stderr == '--scheduler needs dask.distributed: pip install "symamp[cluster]"\n'


@pytest.mark.skipif(os.name != "posix", reason="signals as on POSIX systems")
@pytest.mark.parametrize("after", [0.15, 0.35, 1.5])
def test_an_interrupt_reaches_all_and_one_answers(after: float, tmp_path: Path) -> None:
    """A terminal sends Ctrl-C to the run and to its workers, while these start or while they work."""
    announced = Path(__file__).with_name("announced.py")
    process = subprocess.Popen(
        [
            sys.executable,
            str(announced),
            "ledger",
            saved(tmp_path),
            "--points",
            "100000000",
            "--workers",
            "2",
        ],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
        preexec_fn=lambda: signal.signal(signal.SIGINT, signal.default_int_handler),
    )
    try:
        assert process.stderr is not None
        assert process.stderr.readline() == "begun\n"
        time.sleep(after)
        os.killpg(process.pid, signal.SIGINT)
        out, err = process.communicate(timeout=20)
    finally:
        process.kill()
    assert process.returncode in (130, -signal.SIGINT)
    assert out == ""
    assert re.fullmatch(r"interrupted: (none|[\d,]+) of 100,000,003 bias points w.*\n", err), err
    for _ in range(100):
        if not living(process.pid):
            return
        time.sleep(0.05)
    pytest.fail(f"{living(process.pid)} outlived the run")


def living(group: int) -> list[int]:
    """The processes of a group that still do something (who waits for the dead is none of ours)."""
    found = []
    for path in Path("/proc").glob("[0-9]*/stat"):
        try:
            state, _, of = path.read_text().rpartition(")")[2].split()[:3]
        except OSError:  # gone meanwhile
            continue
        if int(of) == group and state != "Z":
            found.append(int(path.parent.name))
    return found
