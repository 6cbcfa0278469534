"""The command `shorten`: what it prints, its JSON, its plot, what it refuses."""

from __future__ import annotations

from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, answer, run, saved, walk

import symamp


@pytest.fixture
def path(tmp_path: Path) -> str:
    return saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS)


def test_the_formula_and_what_it_rests_on(path: str) -> None:
    result = run("shorten", path, "--within", "10%", "--quantity", "gain.dc")
    assert result.exit_code == 0, result.stderr
    text = result.stdout
    assert "gain.dc" in text
    assert "terms in place of 4, within 10 %" in text
    assert "it rests on" in text
    assert "output conductance is negligible against transconductance" in text
    assert "(proved)" in text
    assert "terms   worst error" in text


def test_the_keys(path: str) -> None:
    found = answer("shorten", path, "--within", "10 %", "--quantity", "gain.dc", "--quantity", "gain.z1")
    assert {"stage", "symbols", "warnings", "remarks", "quantities", "within"} <= found.keys()
    gain = found["quantities"]["gain.dc"]
    assert gain["formula"] == "-gm1*(gm2 + gmb2)/(gds1*gds2)"
    assert gain["terms"] == 3
    assert gain["exact_terms"] == 4
    error = gain["error"]
    assert error["at_bias"] == pytest.approx(-0.24 / (3.9 + 0.62 + 0.24), rel=1e-9)
    assert error["proved"] is True
    assert error["method"].startswith("proved")
    assert error["bounds"][0] <= error["min"] <= error["max"] <= error["bounds"][1]
    assert {"points", "seed", "where_min", "where_max"} <= error.keys()
    assert gain["assumptions"] == ["output conductance is negligible against transconductance"]
    assert gain["tradeoff"][0]["terms"] == 4
    assert all({"terms", "formula", "worst"} <= step.keys() for step in gain["tradeoff"])
    none = found["quantities"]["gain.z1"]
    assert none["formula"] is None
    assert none["why_formula"]


def test_null_comes_with_why(path: str) -> None:
    for place, parent, key in walk(answer("shorten", path, "--within", "10 %")):
        if isinstance(parent, dict) and parent[key] is None:
            assert any(k == "why" or k.startswith("why_") for k in parent), place


def test_without_a_span(tmp_path: Path) -> None:
    path = saved(tmp_path, CASCODE)
    assert (
        "The stage gives no span" in run("shorten", path, "--within", "10%", "--quantity", "gain.dc").stdout
    )
    found = answer("shorten", path, "--within", "10%", "--quantity", "gain.dc")
    assert found["quantities"]["gain.dc"]["error"]["why"] == "the stage gives no span"


def test_a_plot(path: str, tmp_path: Path) -> None:
    target = tmp_path / "tradeoff.svg"
    result = run("shorten", path, "--within", "10%", "--quantity", "gain.dc", "--plot", str(target))
    assert result.exit_code == 0, result.stderr
    assert "<svg" in target.read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--within", "0%"), "within 0 %"),
        (("--within", "5 dB"), "no percentage"),
        (("--within", "-5%"), "negative"),
        (("--within", "5%", "--quantity", "gain.dc.db"), "ask for gain.dc"),
        (("--within", "5%", "--quantity", "gian.dc"), "names no quantity"),
        (("--within", "5%", "--quantity", "gain.px"), "no quantity"),
        (("--within", "5%", "--plot", "x.bmp"), ".svg, .png, .pdf"),
        (("--within", "5%", "--plot", "x.svg"), "a plot is of one quantity"),
    ],
)
def test_what_is_wrong_is_said_and_nothing_printed(
    path: str, arguments: tuple[str, ...], words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    result = run("shorten", path, *arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert words in result.stderr
    assert not list(tmp_path.glob("x.*"))


def test_in_python(path: str) -> None:
    made = symamp.load(path).shorten("gain.dc", within="10 %")
    assert len(made) == 1
    assert made["gain.dc"].terms == 3
    assert [found.name for found in made] == ["gain.dc"]
    assert "terms in place of 4" in str(made)
    assert made.json()["quantities"]["gain.dc"]["terms"] == 3
    with pytest.raises(KeyError, match="gain"):
        made["gain.p1"]
