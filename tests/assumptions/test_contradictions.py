"""Assumptions that cannot stand together: each pair is refused at the later one, and both are named."""

from __future__ import annotations

import pytest
from refused_tables import FILE, FIRST, refused, stage_with

from symamp.assumptions.read import read_assumptions

GOOD = 'name = "first"\nneglect = ["cgs"]'
PAIRS: dict[str, tuple[str, str, str]] = {
    "open and short": (
        'name = "o"\nopen = ["RL"]',
        'name = "s"\nshort = ["RL"]',
        "one takes RL to zero, the other to infinity",
    ),
    "open and short of parts that are one": (
        'name = "o"\nopen = ["RL"]\nequal = ["RL", "RS"]',
        'name = "s"\nshort = ["RS"]',
        "one takes RL to zero, the other to infinity",
    ),
    "neglected and shorted": (
        'name = "n"\nneglect = ["CC"]',
        'name = "s"\nshort = ["CC"]',
        "one takes CC to zero, the other to infinity",
    ),
    "dominant and another": (
        'name = "d"\ndominant_capacitor = "cgd1"',
        'name = "s"\nshort = ["CC"]',
        "one takes CC to zero, the other to infinity",
    ),
    "two formulas": (
        'name = "one"\nset = { gm1 = "gm2" }',
        'name = "two"\nset = { gm1 = "2*gm2" }',
        "they set gm1 to two formulas",
    ),
    "two ways to split": (
        'name = "one"\nmiller = { part = "CC", from = "a", to = "out" }',
        'name = "two"\nmiller = { part = "CC", from = "a", to = "out", ends = "from" }',
        "both split CC, in two ways",
    ),
    "opposite dominance": (
        'name = "one"\nsmall = ["gds1"]\nagainst = ["gm1"]',
        'name = "two"\nsmall = ["gm1"]\nagainst = ["gds1"]',
        "together they take a ratio and its inverse to be small",
    ),
    "opposite dominance after equal": (
        'name = "one"\nsmall = ["gds1"]\nagainst = ["gm1"]\nequal = ["M1", "M2"]',
        'name = "two"\nsmall = ["gm2"]\nagainst = ["gds2"]',
        "together they take a ratio and its inverse to be small",
    ),
    "band and one pole": (
        'name = "b"\nband = "1 MHz"',
        'name = "p"\ndominant_pole = true',
        "a band keeps one power of s",
    ),
    "band and poles far apart": (
        'name = "p"\npoles_far_apart = true',
        'name = "b"\nband = "1 MHz"',
        "a band keeps one power of s",
    ),
    "two bands": ('name = "b"\nband = "1 MHz"', 'name = "c"\nband = "2 MHz"', "a band keeps one power of s"),
    "a ring over two": (
        'name = "one"\nset = { gm1 = "2*gm2" }',
        'name = "two"\nset = { gm2 = "3*gm1" }',
        "run in a ring",
    ),
    "a ring by equal": (
        'name = "one"\nset = { gm1 = "2*gm2" }',
        'name = "two"\nequal = ["M1", "M2"]',
        "run in a ring",
    ),
}


@pytest.mark.parametrize("case", PAIRS)
def test_pairs_that_contradict(case):
    first, second, problem = PAIRS[case]
    error = refused(GOOD, first, second)
    names = [table.split('"')[1] for table in (first, second)]
    assert problem in error.problem
    if "ring" not in problem:
        assert all(repr(name) in error.problem for name in names)
    assert error.file == FILE
    assert error.key == "assumption.3"
    assert error.line == FIRST + 1 + GOOD.count("\n") + 1 + first.count("\n") + 1 + 1
    assert error.remedy
    # Each for a response of its own, they stand.
    read_assumptions(stage_with(first + '\nfor = ["gain"]', second + '\nfor = ["rout"]'))


def test_opposite_dominance_by_aliases():
    """ro1 ≪ RL is 1 ≪ gds1·RL; its opposite is gds1·RL ≪ 1."""
    first = 'name = "one"\nsmall = ["ro1"]\nagainst = ["RL"]'
    second = 'name = "two"\nsmall = ["gds1*RL"]\nagainst = ["1"]'
    assert "'one' and 'two' contradict" in refused(first, second).problem


def test_three_that_contradict_are_all_named():
    tables = [
        f'name = "{name}"\nsmall = ["{small}"]\nagainst = ["{against}"]'
        for name, small, against in (("a", "gds1", "gds2"), ("b", "gds2", "gm1"), ("c", "gm1", "gds1"))
    ]
    error = refused(GOOD, *tables)
    assert "'a' and 'b' and 'c' contradict one another" in error.problem
    assert error.key == "assumption.4"


def test_two_of_one_name():
    error = refused(GOOD, GOOD)
    assert (error.key, error.problem) == ("assumption.2.name", 'two assumptions are named "first"')
    assert error.line == FIRST + 1 + GOOD.count("\n") + 1 + 1


def test_what_may_stand_together():
    made = read_assumptions(
        stage_with(
            'name = "a"\ndominant_pole = true\npoles_far_apart = true',
            'name = "b"\nneglect = ["cgs", "gmb"]\nopen = ["CC"]',
            'name = "c"\nneglect = ["CC"]',
            'name = "d"\nset = { RL = "ro1 || 3 kohm", CC = 0 }',
        )
    )
    assert [a.name for a in made] == ["a", "b", "c", "d"]
    assert made[0].kinds == ("dominant_pole", "poles_far_apart")
    assert made[1].orders == {"cgs1": 1, "CC": 1}
    assert made[1].remarks == ("no device of this stage has gmb: it has no effect",)
