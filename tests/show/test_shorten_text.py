"""What `shorten` shows of whole responses, and of stages that are not written out."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, answer, run, saved, walk

import symamp
from symamp.circuit.writer import save_stage

sys.path.append(str(Path(__file__).resolve().parents[1] / "exact"))


@pytest.fixture
def path(tmp_path: Path) -> str:
    return saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS)


def test_a_response_by_powers_of_s(path: str) -> None:
    result = run("shorten", path, "--within", "10%", "--response", "gain")
    assert result.exit_code == 0, result.stderr
    text = " ".join(result.stdout.split())
    assert "gain = N(s)/D(s)" in text
    assert "N(s) = −gm1·(gm2 + gmb2)" in text
    assert "·s" in text
    assert "largest error at the bias point" in text
    assert "over the span at most" in text
    assert "(sampled), worst at" in text
    assert "up to the unity-gain frequency" in text
    assert "Sampled, not proved" in text
    assert "gain.dc" not in text


def test_the_worst_point_has_its_units(path: str) -> None:
    """A symbol that follows another is no side of the box, and was shown without one."""
    text = " ".join(run("shorten", path, "--within", "10%", "--response", "gain").stdout.split())
    place = text.partition("worst at ")[2].partition(" it rests")[0]
    assert "gds2" not in place
    assert all(part.strip().endswith(("S", "F", "…")) for part in place.split(","))


def test_a_response_beside_a_quantity(path: str) -> None:
    found = answer("shorten", path, "--within", "10%", "--response", "gain", "--quantity", "rout.dc")
    assert list(found["quantities"]) == ["rout.dc"]
    assert list(found["responses"]) == ["gain"]


def test_the_keys_of_a_response(path: str) -> None:
    found = answer("shorten", path, "--within", "10%", "--response", "gain")
    gain = found["responses"]["gain"]
    assert gain["numerator"] == ["-gm1*gm2 - gm1*gmb2"]
    assert len(gain["denominator"]) == 2
    assert gain["formula"].startswith("-gm1*(gm2 + gmb2)/(")
    assert gain["terms"] < gain["exact_terms"]
    error = gain["error"]
    assert error["proved"] is False
    assert error["method"].startswith("sampled")
    assert 0 <= error["min"] <= error["at_bias"] <= error["max"] <= 0.10
    assert {"where_min", "where_max", "points", "seed"} <= error.keys()
    assert [each["name"] for each in gain["ledger"]] == gain["assumptions"]
    assert "unity-gain" in gain["measure"]
    steps = gain["tradeoff"]
    assert steps[0]["worst"] == 0
    assert steps[0]["terms"] == gain["exact_terms"]
    assert gain["terms"] in [step["terms"] for step in steps]


@pytest.mark.parametrize("parts", [(CASCODE, SPAN, ASSUMPTIONS), (CASCODE,)])
def test_null_comes_with_why(tmp_path: Path, parts: tuple[str, ...]) -> None:
    stage = saved(tmp_path, *parts)
    given = ("--within", "5%", "--response", "gain", "--response", "rout", "--quantity", "gain.hf")
    for place, parent, key in walk(answer("shorten", stage, *given)):
        if isinstance(parent, dict) and parent[key] is None:
            assert any(k == "why" or k.startswith("why_") for k in parent), place


def test_the_plot_of_a_response(path: str, tmp_path: Path) -> None:
    target = tmp_path / "gain.svg"
    result = run("shorten", path, "--within", "10%", "--response", "gain", "--plot", str(target))
    assert result.exit_code == 0, result.stderr
    assert "<svg" in target.read_text(encoding="utf-8")
    both = ("--response", "gain", "--quantity", "gain.dc", "--plot", str(target))
    assert run("shorten", path, "--within", "10%", *both).exit_code == 2


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--response", "gian"), "nearest known one is gain"),
        (("--quantity", "gain.phase_margin"), "in dB or degrees"),
    ],
)
def test_what_is_wrong_is_said(path: str, arguments: tuple[str, ...], words: str) -> None:
    result = run("shorten", path, "--within", "5%", *arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert words in result.stderr


def test_in_python(path: str) -> None:
    made = symamp.load(path).shorten(within="10 %", responses="gain")
    assert [each.name for each in made] == ["gain"]
    assert made["gain"].terms == made.json()["responses"]["gain"]["terms"]
    assert "gain = N(s)/D(s)" in str(made)


def test_a_large_stage_rests_on_named_limits(tmp_path: Path) -> None:
    """Each limit that a stage file can say is given as its lines, and these read back."""
    from big_stages import folded_cascode

    file = tmp_path / "large.stage.toml"
    save_stage(folded_cascode(), file)
    found = answer("shorten", str(file), "--within", "5%", "--quantity", "gain.dc", "--points", "16")
    dc = found["quantities"]["gain.dc"]
    assert dc["terms"] <= 30
    assert dc["toml"]
    assert all(any(f'name = "{name}"' in lines for name in dc["assumptions"]) for lines in dc["toml"])
    assert [step["terms"] for step in dc["tradeoff"]] == sorted(
        (step["terms"] for step in dc["tradeoff"]), reverse=True
    )
    assert dc["terms"] in [step["terms"] for step in dc["tradeoff"]]
    file.write_text(file.read_text(encoding="utf-8") + "\n" + "\n".join(dc["toml"]), encoding="utf-8")
    names = [assumption.name for assumption in symamp.load(file).assumptions]
    assert set(names) <= set(dc["assumptions"])
    assert len(names) == len(dc["toml"])
