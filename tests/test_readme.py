"""The README: its examples are run, its stage files read, and its install lines are those that are gone through."""

from __future__ import annotations

from pathlib import Path

from examples import ROOT, blocks, copy_of, counted, hold, rendered

from symamp.circuit.stagefile import parse_stage

README = ROOT / "README.md"
PAGE = README.read_text(encoding="utf-8")


def test_the_page_says_what_comes_of_it(tmp_path: Path) -> None:
    folder = tmp_path / "clone"
    copy_of(ROOT / "recipes", folder / "recipes")
    hold(README, folder)


def test_examples_are_counted() -> None:
    assert counted(PAGE) == {"console": 5, "pycon": 20}


def test_the_worked_example_is_the_recipe(tmp_path: Path) -> None:
    recipe = ROOT / "recipes" / "cascode-neglects" / "cascode.stage.toml"
    assert blocks(PAGE, "toml")[0].text == recipe.read_text(encoding="utf-8")


def test_the_stage_file_in_short_is_one(tmp_path: Path) -> None:
    text = blocks(PAGE, "toml")[1].text
    stage = parse_stage(text.encode(), file="README.md", folder=tmp_path)
    assert stage.warnings == ()
    assert set(stage.asked) == {"gain", "rout"}


def test_two_install_lines() -> None:
    """One line each, ready to paste; `.ci/run` takes the second from here."""
    job, tests = (block.text.strip() for block in blocks(PAGE, "sh"))
    assert "\n" not in job
    assert "\n" not in tests
    assert job.endswith(".venv/bin/symamp ledger recipes/cascode-neglects/cascode.stage.toml")
    assert tests.endswith(".venv/bin/python -m pytest -q")


def test_the_gate_runs_the_line_of_the_page() -> None:
    gate = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    assert "## Run its tests" in PAGE
    assert "## Run its tests" in gate
    assert "pytest -q" not in gate


def test_a_wrong_page_is_found_out(tmp_path: Path) -> None:
    page = "```console\n$ echo one; exit 3\ntwo\n$ echo $?\n0\n```\n```pycon\n>>> print(1 + 1)\n3\n```\n"
    right = "```console\n$ echo one; exit 3\none\n$ echo $?\n3\n```\n```pycon\n>>> print(1 + 1)\n2\n```\n"
    folder = tmp_path / "folder"
    folder.mkdir()
    assert rendered(page, folder) == right
    assert rendered(right, folder) == right
