"""Claims read from stage files and from options: what each error names, where, and the way out."""

from __future__ import annotations

import pytest
from judged import CASCODE, stage_of

from symamp.circuit.stage import Stage
from symamp.errors import InputError, ReadError, StageError
from symamp.judge.check import make_check
from symamp.judge.claim_reading import claim_of, read_claims

STAGE = stage_of(CASCODE)


def with_claim(*lines: str) -> Stage:
    return stage_of(CASCODE, "\n[[claim]]\n", "\n".join(lines), "\n")


def test_claim_as_the_design_writes_it() -> None:
    (claim,) = read_claims(with_claim('about = "gain.dc"', 'formula = "-gm1*gm2*ro1*ro2"', 'within = "10 %"'))
    assert claim.about == "gain.dc"
    assert claim.formula == "-gm1*gm2*ro1*ro2"
    assert (claim.within, claim.within_unit, claim.decibels, claim.key) == (0.1, "", False, "claim.1")


@pytest.mark.parametrize(
    ("about", "within", "amount", "unit"),
    [
        ("gain.dc", '"10 %"', 0.1, ""),
        ("gain.dc", '"0.1%"', 0.001, ""),
        ("gain.dc", "0.05", 0.05, ""),
        ("gain.p1", '"100 %"', 1.0, ""),
        ("gain.dc.db", '"0.5 dB"', 0.5, "dB"),
        ("gain.dc.deg", '"2 deg"', 2.0, "deg"),
        ("gain.dc.deg", '"2°"', 2.0, "deg"),
        ("gain.phase_margin", '"3 deg"', 3.0, "deg"),
        ("gain.gain_margin", '"1 dB"', 1.0, "dB"),
    ],
)
def test_within(about: str, within: str, amount: float, unit: str) -> None:
    formula = {"gain.dc.db": "40 dB", "gain.gain_margin": "40 dB", "gain.p1": "-1/(ro1*CL)"}.get(
        about, "90 deg"
    )
    formula = "-gm1*ro1" if unit == "" and about == "gain.dc" else formula
    (claim,) = read_claims(with_claim(f'about = "{about}"', f'formula = "{formula}"', f"within = {within}"))
    assert claim.within == pytest.approx(amount, rel=1e-12)
    assert claim.within_unit == unit


GOOD = {"about": '"gain.dc"', "formula": '"-gm1*ro1"', "within": '"10 %"'}
# What is put in place of the good line (None: left out), the key named, words of the problem and of the way out.
BAD = [
    ({"about": None}, None, "without about", "about"),
    ({"formula": None}, None, "without formula", "formula"),
    ({"within": None}, None, "without within", "within"),
    ({"tolerance": '"5 %"'}, "tolerance", 'no key "tolerance"', "within"),
    ({"formulae": '"gm1"'}, "formulae", 'no key "formulae"', "formula"),
    ({"about": '"gian.dc"'}, "about", 'no response "gian"', "gain"),
    ({"about": '"gain"'}, "about", "no quantity", "gain.dc"),
    ({"about": '"gain.cd"'}, "about", "cd", "dc"),
    ({"about": '"gain.p0"'}, "about", "p0", ""),
    ({"about": '"gain.bandwith"'}, "about", "bandwith", "bandwidth"),
    ({"about": '"gain.dc.hz"'}, "about", "hz", ""),
    ({"about": '""'}, "about", "about is", "gain.dc"),
    ({"about": "3"}, "about", "about is", "gain.dc"),
    ({"formula": '"-gm1*ro9"'}, "formula", "ro9", "ro1"),
    ({"formula": '"-gm1*ro1 +"'}, "formula", "", ""),
    ({"formula": '"-gm1*ro1*ro2 || ro1"'}, "formula", "", "bracket"),
    ({"formula": '""'}, "formula", "", ""),
    ({"formula": r'"-\frac{g_{m1}}{C_L}"'}, "formula", "control character", "single quotes"),
    ({"formula": r'"gm1 \times ro1"'}, "formula", "control character", "single quotes"),
    ({"formula": r'"\left(gm1\right)"'}, None, "Unescaped", "single quotes"),
    ({"formula": "true"}, "formula", "true", "text"),
    ({"formula": "[1]"}, "formula", "formula is", "text"),
    ({"formula": '"40 dB"'}, "formula", "not in dB", "gain.dc.db"),
    ({"formula": '"180 deg"'}, "formula", "not in deg", "gain.dc.deg"),
    ({"about": '"gain.bandwidth"', "formula": '"90 deg"'}, "formula", "not in deg", "unit of bandwidth"),
    ({"about": '"gain.phase_margin"', "formula": '"60 dB"'}, "formula", "not in dB", "in deg"),
    ({"about": '"gain.dc.db"', "formula": '"60 deg"', "within": '"1 dB"'}, "formula", "not in deg", "in dB"),
    ({"about": '"gain.gain_margin"', "formula": '"9 deg"', "within": '"1 dB"'}, "formula", "not in deg", "in dB"),
    ({"within": '"0 %"'}, "within", "no rounding", ""),
    ({"within": "0"}, "within", "no rounding", ""),
    ({"within": '"-5 %"'}, "within", "", ""),
    ({"within": "-0.1"}, "within", "no rounding", ""),
    ({"within": "true"}, "within", "", "10 %"),
    ({"within": '"0.5 dB"'}, "within", "dB", "%"),
    ({"within": '"ten"'}, "within", "ten", "%"),
    ({"within": "nan"}, "within", "", ""),
    ({"within": "inf"}, "within", "", ""),
    ({"about": '"gain.dc.db"', "formula": '"40 dB"'}, "within", "dB", "0.5 dB"),
    ({"about": '"gain.dc.db"', "formula": '"40 dB"', "within": '"0.5"'}, "within", "dB", "0.5 dB"),
    ({"about": '"gain.dc.db"', "formula": '"40 dB"', "within": '"1 deg"'}, "within", "dB", "0.5 dB"),
    ({"about": '"gain.dc.db"', "formula": '"40"', "within": '"1 dB"'}, "formula", "two ways", "40 dB"),
    ({"about": '"gain.phase_margin"', "formula": '"60 deg"', "within": '"1 dB"'}, "within", "deg", "2 deg"),
    ({"about": '"gain.phase_margin"', "formula": '"60 deg"', "within": '"-1 deg"'}, "within", "no rounding", ""),
]  # fmt: skip


@pytest.mark.parametrize(("changed", "key", "problem", "remedy"), BAD, ids=[str(row[0]) for row in BAD])
def test_bad_claims(changed: dict, key: str | None, problem: str, remedy: str) -> None:
    lines = {**GOOD, **changed}
    stage_text = [f"{name} = {value}" for name, value in lines.items() if value is not None]
    with pytest.raises(InputError) as caught:
        read_claims(with_claim(*stage_text))
    error = caught.value
    assert isinstance(error, StageError | ReadError)
    assert problem in error.problem, error.problem
    assert remedy in error.remedy, error.remedy
    assert error.remedy
    assert error.file == "my.stage.toml"
    assert error.line is not None
    if key is not None:
        assert error.key is not None
        assert error.key.endswith(key), error.key


def test_the_second_claim_is_named() -> None:
    good = '[[claim]]\nabout = "gain.dc"\nformula = "-gm1*ro1"\nwithin = "5 %"\n'
    stage = stage_of(CASCODE, "\n", good, good.replace("ro1", "ro7"))
    with pytest.raises(InputError) as caught:
        read_claims(stage)
    lines = (CASCODE + "\n" + good + good.replace("ro1", "ro7")).splitlines()
    assert "ro7" in lines[caught.value.line - 1]


@pytest.mark.parametrize("text", ["gain.dc", "gain.dc =", "= gm1", "", "  =  "])
def test_an_option_that_is_no_claim(text: str) -> None:
    with pytest.raises(StageError) as caught:
        claim_of(STAGE, text, "5 %")
    assert caught.value.key == "--claim"
    assert "gain.dc = -gm1*ro1" in caught.value.remedy


@pytest.mark.parametrize(
    ("text", "within", "key"),
    [
        ("gane.dc = gm1", "5 %", "--claim"),
        ("gain.dc = gm1*ro7", "5 %", "--claim"),
        ("gain.dc = gm1 = ro1", "5 %", "--claim"),
        ("gain.dc = -gm1*ro1", "5 dB", "--within"),
        ("gain.dc = -gm1*ro1", "0 %", "--within"),
        ("gain.dc.db = 40 dB", "5 %", "--within"),
    ],
)
def test_errors_of_options(text: str, within: str, key: str) -> None:
    with pytest.raises(InputError) as caught:
        claim_of(STAGE, text, within)
    assert caught.value.key == key


def test_a_stage_without_claims() -> None:
    assert read_claims(STAGE) == ()
    with pytest.raises(StageError, match="makes no claim") as caught:
        make_check(STAGE)
    assert "[[claim]]" in caught.value.remedy


def test_a_claim_needs_bias_values() -> None:
    bare = stage_of(CASCODE.split("[bias]")[0])
    with pytest.raises(StageError, match="bias value for") as caught:
        make_check(bare, claims=[claim_of(bare, "gain.dc = -gm1*ro1", "5 %")])
    assert "gm1" in str(caught.value)
    with_gain = CASCODE.replace('CL = "3.3 pF"\n', "").replace(
        "[capacitor]", '[capacitor]\nC9 = ["x", "gnd"]'
    )
    stage = stage_of(with_gain)
    with pytest.raises(StageError, match="bias value for C"):
        make_check(stage, claims=[claim_of(stage, "gain.p1 = -1/(ro1*C9)", "5 %")])
