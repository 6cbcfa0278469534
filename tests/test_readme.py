"""The README: its examples are run, its stage files read, and its install lines are those that are gone through."""

from __future__ import annotations

import re
from pathlib import Path

from examples import ROOT, blocks, copy_of, counted, hold, rendered

from symamp.circuit.stagefile import parse_stage
from symamp.exact.derive import derive

README = ROOT / "README.md"
PAGE = README.read_text(encoding="utf-8")


def test_the_page_says_what_comes_of_it(tmp_path: Path) -> None:
    folder = tmp_path / "clone"
    copy_of(ROOT / "recipes", folder / "recipes")
    hold(README, folder)


def test_examples_are_counted() -> None:
    assert counted(PAGE) == {"console": 7, "pycon": 22}


def test_the_worked_example_is_the_recipe(tmp_path: Path) -> None:
    recipe = ROOT / "recipes" / "cascode-neglects" / "cascode.stage.toml"
    assert blocks(PAGE, "toml")[0].text == recipe.read_text(encoding="utf-8")


def test_the_stage_file_in_short_is_one(tmp_path: Path) -> None:
    text = blocks(PAGE, "toml")[1].text
    stage = parse_stage(text.encode(), file="README.md", folder=tmp_path)
    assert stage.warnings == ()
    assert set(stage.asked) == {"gain", "rout"}


def rows(heading: str) -> list[str]:
    """The rows of the table below a heading, its head first."""
    section = PAGE.split(f"\n### {heading}\n")[1].split("\n#")[0]
    return [line for line in section.splitlines() if line.startswith("| ") and "---" not in line]


def test_the_responses_of_the_table_are_read(tmp_path: Path) -> None:
    written = [re.findall(r"`([^`]+)`", row)[0] for row in rows("Responses")[1:]]
    assert len(written) == 8
    network = """
        [voltage_source]
        VIN = ["in", "gnd"]
        VP = ["p", "gnd"]
        VN = ["n", "gnd"]
        VB = ["b", "gnd"]
        [resistor]
        RSIG = ["in", "a"]
        RA = ["a", "out"]
        RB = ["out", "b"]
        RP = ["p", "out"]
        RN = ["n", "out"]
        [response]
    """
    asked = "\n".join(f"r{i} = {text}" for i, text in enumerate(written))
    stage = parse_stage((network + asked).encode(), file="README.md", folder=tmp_path)
    assert len(stage.asked) == 8
    for one in stage.asked.values():
        derive(stage, one)


def test_the_table_of_the_page_is_read(tmp_path: Path) -> None:
    head, *cells = (row.replace("`", "").strip("| ").replace(" | ", ", ") for row in rows("A table as span"))
    (tmp_path / "corners.csv").write_text("\n".join([head, *cells]), encoding="utf-8")
    text = blocks(PAGE, "toml")[0].text
    stage = parse_stage(text.encode(), file="README.md", folder=tmp_path)
    assert stage.span.table is not None
    assert stage.span.table.columns == ("gm1", "RL")
    assert len(stage.span.table.rows) == 2


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
