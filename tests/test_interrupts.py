"""A run that is interrupted, and one whose reader has gone: an exit code, no traceback, no file half written."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from click.testing import CliRunner

from symamp import cli as cli_module
from symamp.circuit.builder import StageBuilder
from symamp.cli import cli
from symamp.show import run as run_module

STAGE = """\
title = "One transistor"

[mosfet]
M1 = { gate = "in", drain = "out", source = "gnd" }

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS", cgd = "10 fF", cdb = "30 fF" }

[span]
gm1 = ["2 mS", "8 mS"]

[[assumption]]
name = "no feedthrough"
neglect = ["cgd"]
"""


def saved(folder: Path) -> str:
    (folder / "my.stage.toml").write_text(STAGE)
    return str(folder / "my.stage.toml")


def test_an_interrupt_ends_with_130_and_one_word(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def pressed(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(run_module, "make_ledger", pressed)
    result = CliRunner().invoke(cli, ["ledger", saved(tmp_path)])
    assert (result.exit_code, result.stdout, result.stderr) == (130, "", "interrupted\n")


# The command, which says on standard error when its long work begins.
ANNOUNCED = """
import sys
from symamp.cli import main
from symamp.show import run
made = run.make_ledger
def announced(*given, **named):
    print("begun", file=sys.stderr, flush=True)
    return made(*given, **named)
run.make_ledger = announced
main()
"""


@pytest.mark.skipif(os.name != "posix", reason="signals as on POSIX systems")
@pytest.mark.parametrize("after", [0.0, 0.5])
def test_a_signal_ends_a_long_ledger(tmp_path: Path, after: float) -> None:
    path = saved(tmp_path)
    # A shell's background process ignores the signal, and so would its children: it is put back first.
    process = subprocess.Popen(
        [sys.executable, "-c", ANNOUNCED, "ledger", path, "--points", "100000000", "--json"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        preexec_fn=lambda: signal.signal(signal.SIGINT, signal.default_int_handler),
    )
    try:
        assert process.stderr is not None
        assert process.stderr.readline() == "begun\n"
        time.sleep(after)
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=20)
    finally:
        process.kill()
    # Python may also end itself by the signal; a shell shows 130 for that too.
    assert process.returncode in (130, -signal.SIGINT)
    assert out == ""
    assert re.fullmatch(r"interrupted(: .*bias points w.*)?\n", err)
    assert [p.name for p in tmp_path.iterdir()] == ["my.stage.toml"]


def test_an_interrupt_waits_until_modules_are_brought_in(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    steps: list[str] = []

    def slow_import(name: str) -> None:
        os.kill(os.getpid(), signal.SIGINT)
        time.sleep(0.01)
        steps.append(name)

    monkeypatch.setattr(signal, "getsignal", lambda _: signal.default_int_handler)
    monkeypatch.setattr(cli_module, "import_module", slow_import)
    result = CliRunner().invoke(cli, ["ledger", saved(tmp_path)])
    assert (result.exit_code, result.stdout, result.stderr) == (130, "", "interrupted\n")
    assert steps == ["symamp.show.run"]


def test_a_save_that_is_interrupted_leaves_the_old_file_and_no_other(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    builder = StageBuilder("one resistor")
    builder.resistor("RL", "out", "gnd", "1 kohm")
    path = builder.save(tmp_path / "my.stage.toml")
    old = path.read_text()

    def pressed(*_: object) -> None:
        raise KeyboardInterrupt

    builder.resistor("R2", "out", "gnd", "2 kohm")
    for name in ("fsync", "replace"):
        with monkeypatch.context() as patched:
            patched.setattr(os, name, pressed)
            try:
                builder.save(path)
            except KeyboardInterrupt:
                assert path.read_text() == old
        assert [p.name for p in tmp_path.iterdir()] == ["my.stage.toml"]
    assert path.read_text() in (old, builder.toml())


def test_nobody_reading_is_no_error(tmp_path: Path) -> None:
    path = saved(tmp_path)
    for options in ((), ("--json",)):
        process = subprocess.Popen(
            [sys.executable, "-m", "symamp", "derive", path, *options],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
        )
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.close()
        err = process.stderr.read()
        process.stderr.close()
        assert (process.wait(20), err) == (0, b"")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="the system has no device that is always full")
def test_a_full_disk_is_said_in_words(tmp_path: Path) -> None:
    path = tmp_path / "one.stage.toml"
    path.write_text(STAGE, encoding="utf-8")
    with Path("/dev/full").open("w") as full:
        done = subprocess.run(
            [sys.executable, "-m", "symamp", "derive", str(path)],
            stdout=full,
            stderr=subprocess.PIPE,
            text=True,
            check=False,
        )
    assert done.returncode == 2
    assert done.stderr.startswith("nothing more can be written: ")
    assert "Traceback" not in done.stderr
