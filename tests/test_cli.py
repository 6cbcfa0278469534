"""The command line: what it answers, its exit codes, and that it starts at once."""

from __future__ import annotations

import json
import subprocess
import sys
from importlib.metadata import entry_points
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

import symamp
from symamp.cli import cli
from symamp.show import run as run_module

STAGE = """\
title = "Source degeneration"

[mosfet]
M1 = { gate = "in", drain = "out", source = "s" }

[resistor]
RS = ["s", "gnd"]
RL = ["out", "gnd"]

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }

[bias]
M1 = { gm = "5 mS", gds = "50 uS", gmb = "1 mS" }
RS = "1 kohm"
RL = "10 kohm"
CL = "1 pF"

[[assumption]]
name = "no body effect"
neglect = ["gmb"]

[[assumption]]
name = "ideal transistor"
neglect = ["gds"]
"""


@pytest.fixture
def path(tmp_path: Path) -> str:
    (tmp_path / "my.stage.toml").write_text(STAGE)
    return str(tmp_path / "my.stage.toml")


def command(*arguments: str) -> Result:
    result = CliRunner().invoke(cli, list(arguments), catch_exceptions=False)
    assert result.stderr == ""
    return result


@pytest.mark.parametrize("arguments", [("--help",), ("-h",), ("derive", "-h"), ("ledger", "--help")])
def test_help_is_given(arguments: tuple[str, ...]) -> None:
    result = command(*arguments)
    assert result.exit_code == 0
    assert "--help" in result.stdout


def test_the_version_is_that_of_the_package() -> None:
    assert symamp.__version__ in command("--version").stdout


def test_help_and_version_bring_in_none_of_the_heavy_libraries() -> None:
    script = (
        "import sys\n"
        "from symamp.cli import cli\n"
        "cli(['--help'], standalone_mode=False)\n"
        "heavy = {'numpy', 'scipy', 'sympy', 'flint', 'rich', 'tree_sitter'} & set(sys.modules)\n"
        "assert not heavy, heavy\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr


def test_a_run_needs_neither_sympy_nor_scipy(path: str) -> None:
    script = (
        "import sys\n"
        "from symamp.cli import cli\n"
        "try:\n"
        f"    cli(['ledger', {path!r}, '--quantity', 'gain.dc'], standalone_mode=False)\n"
        "except SystemExit:\n"
        "    heavy = {'scipy', 'sympy', 'matplotlib'} & set(sys.modules)\n"
        "    assert not heavy, heavy\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr


def test_the_module_runs_as_the_command_does(path: str) -> None:
    line = [sys.executable, "-m", "symamp", "derive", path, "--response", "gain"]
    done = subprocess.run(line, capture_output=True, text=True, timeout=60, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout == command("derive", path, "--response", "gain").stdout
    assert "\x1b" not in done.stdout  # no colour where nobody watches
    assert "bias points" not in done.stderr


def test_the_installed_command_is_main() -> None:
    found = [e.value for e in entry_points(group="console_scripts") if e.name == "symamp"]
    assert found in ([], ["symamp.cli:main"])  # not there where the package is run from its folder
    text = (Path(symamp.__file__).parents[1] / "pyproject.toml").read_text()
    assert 'symamp = "symamp.cli:main"' in text


@pytest.mark.parametrize("made", [("no body effect",), ("ideal transistor", "no body effect"), ("all",)])
def test_assumptions_are_made_as_asked(path: str, made: tuple[str, ...]) -> None:
    options = [word for name in made for word in ("--assume", name)]
    found = json.loads(command("derive", path, "--json", *options).stdout)
    names = found["responses"]["gain"]["assumptions"]
    assert set(names) == ({"no body effect", "ideal transistor"} if made == ("all",) else set(made))


def test_all_assumptions_are_those_one_by_one(path: str) -> None:
    every = command("derive", path, "--assume", "all").stdout
    one_by_one = command("derive", path, "--assume", "no body effect", "--assume", "ideal transistor").stdout
    assert every == one_by_one


def test_only_the_responses_asked_for_are_answered_and_each_once(path: str) -> None:
    found = json.loads(command("derive", path, "--json", "--response", "rout", "--response", "rout").stdout)
    assert list(found["responses"]) == ["rout"]


def test_only_the_quantities_asked_for_are_accounted_for(path: str) -> None:
    found = json.loads(
        command("ledger", path, "--json", "--quantity", "rout.dc", "--quantity", "gain.p1.hz").stdout
    )
    assert set(found["quantities"]) == {"rout.dc", "gain.p1.hz"}


def test_quantities_without_any_asked_for_are_those_of_every_response(path: str) -> None:
    found = json.loads(command("ledger", path, "--json").stdout)
    names = [
        "gain.dc",
        "gain.p1",
        "gain.bandwidth",
        "gain.unity_gain_frequency",
        "rout.dc",
        "rout.p1",
        "rout.bandwidth",
    ]
    assert list(found["quantities"]) == names


def test_points_and_seed_are_as_asked(path: str, tmp_path: Path) -> None:
    (tmp_path / "span.stage.toml").write_text(STAGE + '\n[span]\ngm1 = "50 %"\n')
    spanned = str(tmp_path / "span.stage.toml")
    one, again, other = (
        json.loads(command("ledger", spanned, "--json", "--points", "50", "--seed", seed).stdout)
        for seed in ("7", "7", "8")
    )
    assert one == again
    span = other["quantities"]["gain.dc"]["span"]["error"]
    assert span["seed"] == 8
    assert span["points"] >= 50


def test_resistances_on_request(path: str) -> None:
    plain, resistive = command("derive", path).stdout, command("derive", path, "--ro").stdout
    assert "ro1" in resistive
    assert "ro1" not in plain


def test_the_schema_is_json(path: str) -> None:
    schema = json.loads(command("start", "--schema").stdout)
    assert schema["type"] == "object"


def test_text_and_json_leave_the_file_alone(path: str) -> None:
    for asked in ("derive", "ledger"):
        command(asked, path)
        command(asked, path, "--json")
    assert Path(path).read_text() == STAGE
    assert [p.name for p in Path(path).parent.iterdir()] == ["my.stage.toml"]


def test_what_the_command_returns_is_the_exit_code(path: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(run_module, "ledger", lambda *_: 1)
    assert command("ledger", path).exit_code == 1


def test_a_mistake_of_the_program_is_no_mistake_of_the_input(
    path: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object) -> int:
        raise ZeroDivisionError

    monkeypatch.setattr(run_module, "ledger", broken)
    with pytest.raises(ZeroDivisionError):
        command("ledger", path)


def test_warnings_are_in_text_and_json(tmp_path: Path) -> None:
    text = STAGE.replace(', gmb = "1 mS"', "").replace('neglect = ["gmb"]', 'neglect = ["cgs"]')
    (tmp_path / "w.stage.toml").write_text(text)
    path = str(tmp_path / "w.stage.toml")
    for asked in ("derive", "ledger"):
        assert "warning: " in command(asked, path).stdout
        assert any(
            "gmb" in warning for warning in json.loads(command(asked, path, "--json").stdout)["warnings"]
        )
