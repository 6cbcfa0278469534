"""`derive --latex`: expressions alone, ready to be pasted."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from noted import compiled, nested_text, overfull, stage_of
from shown import ASSUMPTIONS, CASCODE, run, saved
from test_latex_lines import TWO_STAGE

from symamp.exact.derive import derive
from symamp.show.derive_latex import Shown, latex_page


def pasted(folder: Path, text: str) -> str:
    """The log of an article, as it comes, with this text in it."""
    head = r"\documentclass{article}\usepackage{amsmath}\allowdisplaybreaks\begin{document}"
    (folder / "note.tex").write_text(f"{head}\n{text}\n\\end{{document}}\n", encoding="utf-8")
    return compiled(folder)[1]


def test_every_response_is_printed_alone(tmp_path: Path) -> None:
    result = run("derive", saved(tmp_path, CASCODE), "--latex")
    assert result.exit_code == 0
    assert result.stdout.startswith(
        "% these displays need the package amsmath\n\n% gain: V(out) / VIN\n\\begin{align*}"
    )
    assert "% rout: impedance at out\n" in result.stdout
    for line in result.stdout.splitlines():
        assert not line or line.startswith(("%", "\\begin{align*}", "\\end{align*}", "  ")), line
    assert (
        "  H_{\\mathrm{gain}}(0) & = -\\frac{g_{m1} (g_{m2} + g_{mb2} + g_{ds2})}{g_{ds1} g_{ds2}}\n"
        in result.stdout
    )
    assert "% p1, p2\n" in result.stdout
    assert overfull(pasted(tmp_path, result.stdout)) == []


def test_with_assumptions_it_is_the_approximate_ones(tmp_path: Path) -> None:
    result = run(
        "derive", saved(tmp_path, CASCODE, ASSUMPTIONS), "--latex", "--assume", "all", "--response", "gain"
    )
    assert result.exit_code == 0
    assert (
        "under 'output conductance is negligible against transconductance', 'no body effect', 'one pole'"
        in result.stdout
    )
    assert r"H_{\mathrm{gain}}(0) & \approx -\frac{g_{m1} g_{m2}}{g_{ds1} g_{ds2}}" in result.stdout
    assert "rout" not in result.stdout
    assert " & = " not in result.stdout


def test_resistances_may_stand_for_conductances(tmp_path: Path) -> None:
    result = run("derive", saved(tmp_path, CASCODE), "--latex", "--ro")
    assert "r_{o1}" in result.stdout
    assert "g_{ds1}" not in result.stdout


def test_an_assumption_for_another_response_leaves_the_exact_one(tmp_path: Path) -> None:
    text = ASSUMPTIONS.replace('neglect = ["gmb"]', 'neglect = ["gmb"]\nfor = ["rout"]')
    result = run(
        "derive",
        saved(tmp_path, CASCODE, text),
        "--latex",
        "--assume",
        "no body effect",
        "--response",
        "gain",
    )
    assert "exact: no assumption made is for it" in result.stdout
    assert r"\approx" not in result.stdout


def test_long_expressions_fit_where_they_are_pasted(tmp_path: Path) -> None:
    result = run("derive", saved(tmp_path, TWO_STAGE), "--latex")
    assert result.stdout.count("\\begin{align*}") == result.stdout.count("\\end{align*}") >= 4
    assert re.search(r"% no formula: p1, p2", result.stdout)
    assert overfull(pasted(tmp_path, result.stdout)) == []


def test_json_and_latex_are_not_both_printed(tmp_path: Path) -> None:
    result = run("derive", saved(tmp_path, CASCODE), "--latex", "--json")
    assert result.exit_code == 2
    assert result.stdout == ""
    assert "--latex: --latex and --json print different things; give one of them" in result.stderr


def test_a_nested_response_says_so() -> None:
    stage = stage_of(nested_text())
    page = latex_page([Shown(derive(stage, asked)) for asked in stage.asked.values()])
    assert "product terms are not written out" in page
    assert "\\begin" not in page


@pytest.mark.parametrize("name", ["no body\neffect", "\\end{document}"])
def test_a_name_stays_within_its_comment(tmp_path: Path, name: str) -> None:
    text = ASSUMPTIONS.replace('"no body effect"', repr(name).replace("'", '"'))
    result = run("derive", saved(tmp_path, CASCODE, text), "--latex", "--assume", "all")
    assert result.exit_code == 0, result.stderr
    pasted(tmp_path, result.stdout)
