"""What is off about a wrong claim: factors in words and as formulas, signs, symbols, units.

Each factor is put back: the claim multiplied by what the answer says is a limit of the exact expression, and no
longer wrong.
"""

from __future__ import annotations

import math
import random
from fractions import Fraction

import pytest
from judged import CASCODE, COMMON_SOURCE, stage_of
from random_claims import dc_claim, exact_of, pole_claim, random_stage

from symamp.circuit.stage import Stage
from symamp.formula import Dimension
from symamp.judge.check import examine, make_check
from symamp.judge.claim_reading import claim_of
from symamp.judge.examined import Examined, Known
from symamp.judge.off import factor_words, unit_words
from symamp.judge.verdict import Judged


def examined(stage: Stage, claim: str, within: str = "10 %") -> Examined:
    return examine(stage, [claim_of(stage, claim, within)])[0]


def judged(stage: Stage, claim: str, within: str = "10 %") -> Judged:
    return make_check(stage, claims=[claim_of(stage, claim, within)], prove=False, points=16).claims[0]


GAIN = "-gm1*gm2*ro1*ro2"
# Claim, the factor by hand that makes it a limit of the exact expression, and words of the answer.
FACTORS = (
    (CASCODE, "gain.dc", f"2*{GAIN}".replace("*-", "*(0-1)*"), 0.5, "too large by a factor of 2"),
    (CASCODE, "gain.dc", f"{GAIN}/3", 3, "too small by a factor of 3"),
    (CASCODE, "gain.dc", f"{GAIN}*10000", 1e-4, "too large by a factor of 10000"),
    (CASCODE, "gain.dc", f"{GAIN}/2000", 2000, "too small by a factor of 2000"),
    (CASCODE, "gain.dc", f"{GAIN}*123456.789", 1 / 123456.789, "too large by a factor of 1.235e5"),
    (CASCODE, "gain.dc", f"{GAIN}/1.2345678", 1.2345678, "too small by a factor of 1.235"),
    (CASCODE, "gain.dc", f"{GAIN}*2*pi", 1 / (2 * math.pi), "too large by a factor of 2π"),
    (CASCODE, "gain.dc", f"{GAIN}/pi", math.pi, "too small by a factor of π"),
    (CASCODE, "gain.dc", f"{GAIN}*4*pi^2", 1 / (4 * math.pi**2), "too large by a factor of 4π²"),
    (CASCODE, "gain.dc", "-gm1*ro1*gm2*ro2*gds1*ro2", 0.24 / 0.21, "gds2 and gds1 would have to be equal"),
    (CASCODE, "gain.dc", "gm1*gm2*ro1*ro2", -1, "its sign is wrong"),
    (CASCODE, "gain.dc", "2*gm1*gm2*ro1*ro2", -0.5, "its sign is wrong and it is too large by a factor of 2"),
    (CASCODE, "gain.p1.hz", "gds1*gds2/(gm2*CL)", 1 / (2 * math.pi), "Hz and rad/s are mixed up"),
    (CASCODE, "gain.gain_bandwidth", "gm1/CL", 1 / (2 * math.pi), "Hz and rad/s are mixed up"),
    # Of a quadratic: 1/b1 of the loop taken twice too large or too small
    (COMMON_SOURCE, "gain.p1", "-2/(RS*(cgs1 + cgd1*(1 + gm1*RL)))", 0.5, "too large by a factor of 2"),
    (COMMON_SOURCE, "gain.p1", "-1/(3*RS*(cgs1 + cgd1*(1 + gm1*RL)))", 3, "too small by a factor of 3"),
    (
        COMMON_SOURCE, "gain.p1.magnitude", "2*pi/(RS*(cgs1 + cgd1*(1 + gm1*RL)))", 1 / (2 * math.pi),
        "too large by a factor of 2π",
    ),
)  # fmt: skip


@pytest.mark.parametrize(
    ("text", "about", "formula", "factor", "words"), FACTORS, ids=[f"{r[1]} = {r[2]}" for r in FACTORS]
)
def test_the_factor_put_back(text: str, about: str, formula: str, factor: float, words: str) -> None:
    stage = stage_of(text)
    found = examined(stage, f"{about} = {formula}", "0.1 %")
    assert found.off is not None
    assert words in found.off.words
    by = examined(stage, f"gain.dc = {found.off.factor}")  # the factor read back as a formula
    # A factor that holds symbols is of whole claims whatever the values; at the bias point it has this value.
    assert by.claimed == pytest.approx(factor, rel=1e-5)
    again = judged(stage, f"{about} = ({formula})*({found.off.factor})", "0.1 %")
    if len(found.off.factor) < 12 and "e" not in found.off.factor and "." not in found.off.factor:
        assert again.verdict != "wrong", again.why
        assert again.conditions or again.error == 0


def test_large_factors_are_not_rounded_to_none() -> None:
    """10⁴ too large is to be multiplied by 1/10000, and 1.2345678 is no 100/81."""
    stage = stage_of(CASCODE)
    assert examined(stage, f"gain.dc = {GAIN}*10000").off.factor == "1/10000"
    assert examined(stage, f"gain.dc = {GAIN}*3/7").off.factor == "7/3"
    assert examined(stage, f"gain.dc = {GAIN}/1.2345678").off.factor == "1.23457"


SYMBOLS = (
    ("gain.dc = -gm1*gm2*ro1*ro2*gm1*ro1", "the factor gm1 is too much|gds1 is missing|gm1 where"),
    ("gain.dc = -gm1*ro1*gm1*ro2", "gm2 and gm1 would have to be equal, and gm2/gm1 is 0.9512"),
    ("gain.p1 = -1/(gm2*ro1*ro1*CL)", "gds2 and gds1 would have to be equal, and gds2/gds1 is 1.143"),
)


@pytest.mark.parametrize(("claim", "words"), SYMBOLS, ids=[row[0] for row in SYMBOLS])
def test_symbols(claim: str, words: str) -> None:
    found = judged(stage_of(CASCODE), claim)
    assert found.verdict == "wrong"
    assert any(each in found.why for each in words.split("|")), found.why


@pytest.mark.parametrize(
    ("constant", "words"),
    [
        (2, "too small by a factor of 2"),
        (0.5, "too large by a factor of 2"),
        (2 * math.pi, "too small by a factor of 2π: Hz and rad/s are mixed up"),
        (0.5 / math.pi, "too large by a factor of 2π: Hz and rad/s are mixed up"),
        (math.pi, "too small by a factor of π"),
        (1e-4, "too large by a factor of 10000"),
    ],
)
def test_words_for_a_constant(constant: float, words: str) -> None:
    assert factor_words(constant) == f"it is {words}"


@pytest.mark.parametrize(
    ("claimed", "wanted", "unit", "words"),
    [
        (Dimension(Fraction(1)), Dimension(), "", "in S, and the quantity is a pure number; a factor of a resistance"),
        (
            Dimension(), Dimension(Fraction(-1)), "ohm",
            "a pure number, and the quantity is in ohm; a factor of a resistance",
        ),
        (
            Dimension(seconds=Fraction(1)), Dimension(seconds=Fraction(-1)), "rad/s",
            "in s, and the quantity is in rad/s",
        ),
        (
            Dimension(Fraction(1), seconds=Fraction(1)), Dimension(seconds=Fraction(1)), "s",
            "in F, and the quantity is in s; a factor of a resistance",
        ),
    ],
)  # fmt: skip
def test_words_for_units(claimed: Dimension, wanted: Dimension, unit: str, words: str) -> None:
    assert unit_words(claimed, wanted, unit).startswith(f"the formula is {words}")


# Equal RC sections: 1 + 3·s·RC + (s·RC)², p1 = −(3 − √5)/(2RC) whatever the values.
ALIKE = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "out"]
capacitor.C1 = ["a", "gnd"]
capacitor.C2 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { R1 = 1e3, R2 = 1e3, C1 = 1e-9, C2 = 1e-9 }
assumption = [{ name = "alike", set = { R2 = "R1", C2 = "C1" } }]
"""
EXACT = (3 - math.sqrt(5)) / 2


@pytest.mark.parametrize(
    ("number", "within", "verdict"),
    [
        ("1/3", "20 %", "holds"),
        ("1/3", "10 %", "wrong"),
        ("0.382", "1 %", "holds"),
        ("1/2", "20 %", "wrong"),
        ("1/2", "31 %", "holds"),
    ],
)
def test_a_constant_in_a_root_is_off_by_what_it_is_off(number: str, within: str, verdict: str) -> None:
    """Section 7: for a root the terms give the conditions only, the error and verdict come from the root."""
    found = judged(stage_of(ALIKE), f"gain.p1 = -{number}/(R1*C1)", within)
    value = float(Fraction(number))
    assert found.error == pytest.approx(value / EXACT - 1, rel=1e-9)
    assert found.verdict == verdict
    assert all(c.assumption == "alike" for c in found.conditions)
    if verdict == "wrong":
        words = {"1/3": "too small by a factor of 1.146", "1/2": "too large by a factor of 1.309"}[number]
        assert words in found.why
    else:
        assert any("the same whatever the values" in remark for remark in found.remarks)


def test_two_symbols_that_would_have_to_be_equal_in_a_sum() -> None:
    """zin = RA + RB as 2·RA: no factor of 2, but RA = RB; and beside a term that is left over."""
    text = """
resistor.RA = ["in", "out"]
resistor.RB = ["out", "a"]
resistor.RC = ["a", "gnd"]
inductor.LX = ["a", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.zin = { looking_into = "VIN" }
response.hin = { looking_into = "VIN", without = ["LX"] }
bias = { RA = 1e3, RB = 800, RC = 50, LX = 1e-6 }
"""
    for about in ("zin", "hin"):
        found = judged(stage_of(text), f"{about}.dc = 2*RA")
        assert found.verdict == "wrong"
        assert found.why == "RA and RB would have to be equal, and RA/RB is 1.25"
    assert judged(stage_of(text), "hin.dc = 2*(RA + RB)").why.startswith("it is too large by a factor of 2")


@pytest.mark.parametrize("pole", [False, True])
def test_random_claims_taken_twice(pole: bool) -> None:
    """What only drops terms is never wrong; the same twice too large is, and the answer says by how much."""
    seen = 0
    for seed in range(50):
        pick, stage = random.Random(seed), random_stage(seed)
        exact = exact_of(stage)
        for k in range(1, len(exact.form.denominator)) if pole else (0,):
            formula = pole_claim(pick, exact, k) if k else dc_claim(pick, exact)
            about = f"gain.p{k}" if k else "gain.dc"
            plain, twice = (
                Examined(Known(stage, ()), claim_of(stage, f"{about} = {text}", "1 %"), with_ways=False)
                for text in (formula.text, f"({formula.text})*2")
            )
            assert plain.off is None, (seed, formula.text)
            balance = twice.balanced.balance
            # Of more common terms no direction is looked for.
            if balance is not None and len(balance.comparison.common) <= 60 and abs(twice.error) > 0.01:
                if not plain.balanced.balance.comparison.is_limit:
                    continue  # what it keeps can never outweigh what it drops
                assert twice.off is not None, (seed, formula.text)
                seen += "too large by a factor of 2" in twice.off.words
    assert seen >= (40 if pole else 30)


def test_conditions_that_contradict_one_another_are_conditions() -> None:
    """1 + 2·x + x² as 2·x takes x and 1/x to be small, which cannot be: it fails, and is not wrong."""
    text = """
resistor.R1 = ["in", "a"]
resistor.R2 = ["a", "gnd"]
vcvs.E1 = { out = ["b", "gnd"], control = ["a", "gnd"] }
resistor.R3 = ["b", "out"]
resistor.R4 = ["out", "gnd"]
voltage_source.VIN = ["in", "gnd"]
response.gain = { from = "VIN", to = "out" }
bias = { R1 = 1e3, R2 = 1e3, R3 = 1e3, R4 = 1e3, E1 = 1 }
assumption = [{ name = "alike", set = { R3 = "R1", R4 = "R2" } }]
"""
    found = judged(stage_of(text), "gain.dc = E1*R2/(2*R1)")
    assert found.error == pytest.approx(1.0, rel=1e-12)
    assert found.verdict == "fails"
    assert {c.ratio.text() for c in found.conditions if not c.assumption} == {"R1/(2*R2)", "R2/(2*R1)"}
