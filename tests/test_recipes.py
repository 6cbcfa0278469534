"""Recipes: every command and session on their pages is run, and every stage file is read."""

from __future__ import annotations

from pathlib import Path

import pytest
from examples import ROOT, blocks, copy_of, counted, hold

import symamp

RECIPES = ROOT / "recipes"

# Commands and Python statements on each page: a recipe that runs nothing is found out.
COUNTS = {
    "bias-resistor-and-coupling-capacitor": {"console": 4, "pycon": 0},
    "cascode-neglects": {"console": 4, "pycon": 0},
    "does-my-formula-hold": {"console": 3, "pycon": 0},
    "keep-a-derivation-true": {"console": 5, "pycon": 0},
    "latex-for-a-design-note": {"console": 3, "pycon": 0},
    "the-shortest-formula": {"console": 4, "pycon": 0},
    "what-my-formula-assumes": {"console": 3, "pycon": 0},
}


def test_every_recipe_is_counted() -> None:
    assert sorted(path.name for path in RECIPES.iterdir() if path.is_dir()) == sorted(COUNTS)


@pytest.mark.parametrize("name", COUNTS)
def test_the_page_says_what_comes_of_it(name: str, tmp_path: Path) -> None:
    page = RECIPES / name / "README.md"
    assert counted(page.read_text(encoding="utf-8")) == COUNTS[name]
    hold(page, copy_of(RECIPES / name, tmp_path / name))


@pytest.mark.parametrize("name", COUNTS)
def test_the_page_shows_the_stage_file_itself(name: str) -> None:
    (path,) = (RECIPES / name).glob("*.stage.toml")
    stage_file = path.read_text(encoding="utf-8")
    shown = blocks((RECIPES / name / "README.md").read_text(encoding="utf-8"), "toml")
    assert shown
    assert all(block.text in stage_file for block in shown)


@pytest.mark.parametrize("path", sorted(RECIPES.rglob("*.stage.toml")), ids=lambda path: path.name)
def test_stage_files_read_without_a_warning(path: Path) -> None:
    stage = symamp.load(path)
    assert stage.assumptions or stage.data.claims
    assert stage.warnings == ()


def test_every_recipe_is_in_the_readme() -> None:
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    for name in COUNTS:
        assert f"(recipes/{name}/README.md)" in readme
