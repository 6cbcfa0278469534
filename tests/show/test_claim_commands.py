"""The commands `check`, `frontier` and `note`: what they print, their JSON, their exit codes, their files."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, run, saved, walk

import symamp
from symamp.show import run_note

RECIPES = Path(__file__).parents[2] / "recipes"
CLAIMS = """
[[claim]]
about = "gain.dc"
formula = "-gm1*gm2*ro1*ro2"
within = "25 %"

[[claim]]
about = "gain.dc"
formula = "gm1*(gm2 + gmb2)*ro1*ro2"
within = "10 %"

[[claim]]
about = "gain.p1.hz"
formula = "1/((gm2 + gmb2)*ro1*ro2*CL)"
within = "20 %"

[[claim]]
about = "gain.phase_margin"
formula = "90 deg"
within = "3 deg"
"""


@pytest.fixture
def path(tmp_path: Path) -> str:
    return saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS, CLAIMS)


def answer(*arguments: str, code: int = 0) -> Any:
    result = run(*arguments, "--json")
    assert result.exit_code == code, result.stderr
    assert result.stderr == ""
    return json.loads(result.stdout)


def test_a_verdict_on_each_claim_and_exit_1(path: str) -> None:
    result = run("check", path)
    assert result.exit_code == 1
    text = result.stdout
    for words in (
        "1  gain.dc = -gm1*gm2*ro1*ro2, within 25 %",
        "holds: −18.1 % at the bias point, and proved to stay within",
        "wrong: its sign is wrong",
        "wrong: it is too large by a factor of 2π: Hz and rad/s are mixed up",
        "holds: −",
        "gmb2/gm2",
        "Of 4 claims 2 hold.",
    ):
        assert words in text, words


def test_the_keys_of_a_verdict(path: str) -> None:
    found = answer("check", path, code=1)
    assert {"stage", "symbols", "warnings", "remarks", "claims"} <= found.keys()
    first, sign, factor, margin = found["claims"]
    assert first["about"] == "gain.dc"
    assert first["formula"] == "-gm1*gm2*ro1*ro2"
    assert first["within"] == 0.25
    assert first["verdict"] == "holds"
    assert first["error"] == pytest.approx(-(0.62 + 0.24) / (3.9 + 0.62 + 0.24), rel=1e-12)
    assert first["error_formula"] == "-(gmb2 + gds2)/(gm2 + gmb2 + gds2)"
    assert [t["ratio"] for t in first["tacit"]] == ["gmb2/gm2", "gds2/gm2"]
    assert first["tacit"][0]["at_bias"] == pytest.approx(0.62 / 3.9)
    assert first["tacit"][0]["largest"] == pytest.approx(0.62 / (3.9 * 0.8))
    span = first["span"]
    assert span["proved"] is True
    assert span["method"].startswith("proved")
    # The worst point by hand: gm2 least, gds2 greatest.
    gm2, gds2 = 3.9 * 0.8, 0.24 * 1.3
    assert span["min"] == pytest.approx(-(0.62 + gds2) / (gm2 + 0.62 + gds2), rel=1e-9)
    assert span["bounds"][0] <= span["min"] <= span["max"] <= span["bounds"][1]
    assert [sign["verdict"], factor["verdict"], margin["verdict"]] == ["wrong", "wrong", "holds"]
    assert margin["span"]["proved"] is False
    assert margin["tacit"] == []


def test_null_comes_with_why(path: str) -> None:
    for name in ("check", "frontier"):
        found = answer(name, path, code=1 if name == "check" else 0)
        for place, parent, key in walk(found):
            if isinstance(parent, dict) and parent[key] is None:
                whys = [k for k in parent if k == "why" or k.startswith("why_")]
                assert whys, place


def test_one_formula_is_judged_without_the_file_being_changed(path: str) -> None:
    before = Path(path).read_bytes()
    result = run(
        "check", path, "--claim", r"gain.dc = -g_{m1} (g_{m2} + g_{mb2}) r_{o1} r_{o2}", "--within", "10%"
    )
    assert result.exit_code == 0
    assert "The claim holds." in result.stdout
    assert Path(path).read_bytes() == before
    assert run("check", path, "--claim", "gain.dc = -gm1*ro1").exit_code == 1


def test_only_what_is_asked_about(path: str) -> None:
    found = answer("check", path, "--about", "gain.phase_margin")
    assert [c["about"] for c in found["claims"]] == ["gain.phase_margin"]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("check", "--claim", "gain.dc"), "is no claim"),
        (("check", "--claim", "gian.dc = 1"), 'no response "gian"'),
        (("check", "--claim", "gain.dx = 1"), "no quantity 'dx'"),
        (("check", "--claim", "gain.dc = -gm7"), 'no symbol "gm7"'),
        (("check", "--claim", "gain.dc = gm1 + CL"), "joins S with F"),
        (("check", "--claim", "gain.dc = 1", "--within", "5 dB"), "no percentage"),
        (("check", "--claim", "gain.dc.db = 52 dB", "--within", "5 %"), "no number of dB"),
        (("check", "--within", "5 %"), "there is no --claim"),
        (("check", "--about", "gain.p9"), "no claim is about gain.p9"),
        (("frontier", "--map", "gm1,gds2"), "a map needs a file"),
        (("frontier", "--map", "gm1", "-o", "m.svg"), "two symbols"),
        (("frontier", "-o", "m.svg"), "-o is where a map goes"),
        (("frontier", "--map", "gm1,gds2", "-o", "m.bmp"), ".svg, .png, .pdf"),
        (("frontier", "--map", "gm1,gds2", "-o", "m.svg"), "a map is of one claim"),
        (("frontier", "--about", "gain.phase_margin", "--map", "gm1,gx", "-o", "m.svg"), "no symbol 'gx'"),
        (("note", "-o", "note.doc"), ".tex, .html or .md"),
    ],
)
def test_what_is_wrong_is_said_and_nothing_printed(
    path: str, arguments: tuple[str, ...], words: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    before = sorted(p.name for p in tmp_path.iterdir())
    result = run(arguments[0], path, *arguments[1:])
    assert result.exit_code == 2, result.stdout
    assert result.stdout == ""
    assert words in result.stderr
    assert sorted(p.name for p in tmp_path.iterdir()) == before


def test_a_stage_without_claims_says_how_to_make_one(tmp_path: Path) -> None:
    result = run("check", saved(tmp_path, CASCODE))
    assert result.exit_code == 2
    assert "[[claim]]" in result.stderr


def test_the_frontier_in_text_and_json(path: str) -> None:
    text = run("frontier", path, "--about", "gain.dc").stdout
    assert "gm2/gmb2 ≥ 3" in text
    assert "the claim is wrong: its sign is wrong" in text
    found = answer("frontier", path, "--claim", "gain.dc = -gm1*(gm2 + gmb2)*ro1*ro2", "--within", "5%")
    (condition,) = found["claims"][0]["conditions"]
    assert condition["ratio"] == "gds2/(gm2 + gmb2)"
    assert condition["limit_formula"] == "(gm2 + gmb2)/gds2 >= 19"
    assert condition["limit_alone"] == pytest.approx(1 / 19, rel=1e-12)
    assert condition["at_bias"] == pytest.approx(0.24 / 4.52)


def test_a_map_is_drawn(path: str, tmp_path: Path) -> None:
    target = tmp_path / "map.svg"
    result = run("frontier", path, "--about", "gain.phase_margin", "--map", "gm1,CL", "-o", str(target))
    assert result.exit_code == 0, result.stderr
    assert target.read_text(encoding="utf-8").lstrip().startswith("<?xml")


@pytest.mark.parametrize("ending", ["tex", "html", "md"])
def test_a_note_is_written(path: str, tmp_path: Path, ending: str) -> None:
    target = tmp_path / f"note.{ending}"
    found = answer("note", path, "-o", str(target))
    files = [Path(name) for name in found["files"]]
    assert files[0] == target
    assert all(file.stat().st_size > 100 for file in files)
    text = target.read_text(encoding="utf-8")
    assert "Cascode into a capacitive load" in text
    assert "local codes and licensed practice" in " ".join(text.split())


def test_in_python_and_in_a_notebook(path: str) -> None:
    stage = symamp.load(path)
    check = stage.check()
    assert len(check) == 4
    assert not check.all_hold
    assert [judged.verdict for judged in check] == ["holds", "wrong", "wrong", "holds"]
    assert check["gain.phase_margin"].verdict == "holds"
    assert "Of 4 claims 2 hold." in str(check)
    assert check.json()["claims"][0]["verdict"] == "holds"
    assert check._repr_html_().count("<table>") == 1 + sum(bool(j.conditions) for j in check)
    with pytest.raises(KeyError, match=r"gain\.p7"):
        check["gain.p7"]
    frontier = stage.frontier("gain.dc = -gm1*(gm2 + gmb2)*ro1*ro2", within="5 %")
    assert frontier["gain.dc"].limits[0].formula == "(gm2 + gmb2)/gds2 >= 19"
    assert "≥ 19" in str(frontier)
    assert "<table>" in frontier._repr_html_()
    assert len(frontier) == 1


def test_pictures_in_python(path: str, tmp_path: Path) -> None:
    stage = symamp.load(path)
    drawn = stage.error_map("gain.dc = -gm1*gm2*ro1*ro2", "gm2", "ro2", within="20 %")
    assert "<svg" in drawn._repr_svg_()
    assert drawn.save(tmp_path / "map.png").read_bytes().startswith(b"\x89PNG")
    gain = stage.response("gain")
    assert "approximate" in gain.bode("no body effect").caption
    assert "approximate" not in gain.bode().caption


@pytest.mark.parametrize(
    ("claim", "within", "words"),
    [
        ("gain.at(10 MHz).db = gm1*gm2*ro1*ro2", "3 dB", "no tacit conditions"),
        ("gain.peak.db = gm1*gm2*ro1*ro2", "3 dB", "no tacit conditions"),
        ("gain.p9 = -1/(ro1*CL)", "10 %", "the exact p9 has no value"),
        ("gain.z7.hz = gm1/(2*pi*CL)", "10 %", "the exact z7.hz has no value"),
        ("gain.hf = gm1*ro1", "10 %", "the exact value is 0"),
    ],
)
def test_claims_about_what_has_no_formula_or_no_value(path: str, claim: str, within: str, words: str) -> None:
    result = run("check", path, "--claim", claim, "--within", within)
    assert result.exit_code in (0, 1)
    assert words in result.stdout


def test_a_plain_number_is_judged_by_its_value(path: str) -> None:
    exact = 4.1 * (3.9 + 0.62 + 0.24) / (0.21 * 0.24)
    found = answer("check", path, "--claim", f"gain.dc = -{exact:.5f}", "--within", "1 %", code=1)
    assert found["claims"][0]["verdict"] == "holds here"
    assert found["claims"][0]["tacit"] == []
    assert answer("check", path, "--claim", "gain.dc = -387", "--within", "99 %", code=1)


def test_a_frontier_says_the_whole_ratio(tmp_path: Path) -> None:
    stage = """
[resistor]
RA = ["in", "out"]
RB = ["out", "gnd"]
RL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
RA = "1 kohm"
RB = "1 kohm"
RL = "7 kohm"
"""
    path = saved(tmp_path, stage)
    claim = ("--claim", "gain.dc = RB/(RA + RB)", "--within", "10 %")
    text = run("frontier", path, *claim).stdout
    assert "RL·(RA + RB)/(RA·RB) ≥ 10" in text  # and not RL/RB, which is 7 while the claim holds
    assert "RA·RB/(RL·(RA + RB))" in run("check", path, *claim).stdout
    wrong = run("check", path, "--claim", "gain.dc = 2*RB/(RA + RB)", "--within", "10 %").stdout
    assert "too large by a factor of 2" in wrong


def test_a_formula_of_another_root_says_so_in_its_verdict() -> None:
    """A newcomer read "holds" beside p1, of a formula that is p2's."""
    file = str(RECIPES / "what-my-formula-assumes" / "opamp.stage.toml")
    result = run(
        "check", file, "--claim", "gain.p1.hz = gm2*CC/(2*pi*(C1*C2 + CC*(C1 + C2)))", "--within", "10 %"
    )
    assert "\n  holds for p2, not p1: " in result.stdout


def test_a_slip_in_a_claim_is_told_before_the_ledger_is_worked_out(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Of a large stage the ledger takes long, and was lost to a missing bracket."""

    def never(*_: object, **__: object) -> None:
        raise AssertionError("the ledger was worked out first")

    monkeypatch.setattr(run_note, "make_ledger", never)
    slip = CLAIMS.replace("-gm1*gm2*ro1*ro2", "-gm1*gm9*ro1*ro2")
    result = run("note", saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS, slip), "-o", str(tmp_path / "a.tex"))
    assert result.exit_code == 2
    assert 'no symbol "gm9"' in result.stderr
    assert not (tmp_path / "a.tex").exists()
