"""Assumption tables that mean nothing: each is refused with file, line and key, and shown what would be right."""

from __future__ import annotations

import pytest
from refused_tables import FILE, FIRST, refused, stage_with

from symamp.assumptions.read import read_assumptions
from symamp.errors import ReadError, StageError

# table → (line within it, from 1 for [[assumption]]; key; part of the problem; part of the remedy)
BAD: dict[str, tuple[str, int, str, str, str]] = {
    "unknown key": ('name = "a"\nneglects = ["gm"]', 3, "neglects", 'no key "neglects"', "neglect"),
    "no name": ('neglect = ["gm"]', 1, "name", "has no name", "no body effect"),
    "blank name": ('name = "  "\nneglect = ["gm"]', 2, "name", "has no name", "no body effect"),
    "name no text": ('name = 3\nneglect = ["gm"]', 2, "name", "has no name", "no body effect"),
    "says nothing": ('name = "a"', 2, "name", "says nothing", "neglect"),
    "false alone": ('name = "a"\ndominant_pole = false', 2, "name", "says nothing", "neglect"),
    "unknown symbol": ('name = "a"\nneglect = ["gmm1"]', 3, "neglect", '"gmm1" names no symbol', "gm1"),
    "lacking parameter": ('name = "a"\nneglect = ["cgd2"]', 3, "neglect", "M2 has no cgd", "cgd"),
    "product of symbols": (
        'name = "a"\nneglect = ["gm1*gm2"]',
        3,
        "neglect",
        '"gm1*gm2" names no symbol',
        "gm1",
    ),
    "neglected resistor": (
        'name = "a"\nneglect = ["RL"]',
        3,
        "neglect",
        "short or as an open?",
        'short = ["RL"]',
    ),
    "neglected inductor": ('name = "a"\nneglect = ["LX"]', 3, "neglect", "an inductor", 'open = ["LX"]'),
    "neglected turns ratio": ('name = "a"\nneglect = ["T1"]', 3, "neglect", "turns ratio", "without"),
    "empty list": ('name = "a"\nneglect = []', 3, "neglect", "neglect is empty", "gds"),
    "no list": ('name = "a"\nneglect = 3', 3, "neglect", "neglect is 3", "list of names"),
    "list of numbers": ('name = "a"\nshort = [1]', 3, "short", "short is [1]", "list of names"),
    "open of a transconductance": (
        'name = "a"\nopen = ["gm1"]',
        3,
        "open",
        "gm1 is no resistance",
        "neglect",
    ),
    "short of a gain": ('name = "a"\nshort = ["F1"]', 3, "short", "F1 is no resistance", 'neglect = ["F1"]'),
    "both limits": (
        'name = "a"\nopen = ["RL"]\nshort = ["RL"]',
        4,
        "short",
        "to zero and to infinity",
        "keep",
    ),
    "unknown response": (
        'name = "a"\nneglect = ["gm"]\nfor = ["gian"]',
        4,
        "for",
        'no response "gian"',
        "gain",
    ),
    "for nothing": ('name = "a"\nneglect = ["gm"]\nfor = []', 4, "for", "for is empty", "name at least one"),
    "equal of a symbol": ('name = "a"\nequal = ["M1", "gm2"]', 3, "equal", '"gm2" is no part', "M2"),
    "equal of a source": (
        'name = "a"\nequal = ["VIN", "M1"]',
        3,
        "equal",
        '"VIN" is no part that has symbols',
        "M1",
    ),
    "equal of two kinds": ('name = "a"\nequal = ["M1", "RL"]', 3, "equal", "not of one kind", "one kind"),
    "equal of one": ('name = "a"\nequal = ["M1", "M1"]', 3, "equal", "one part alone", "M2"),
    "set of nothing": ('name = "a"\nset = {}', 3, "set", "set is {}", "gm4"),
    "set of an unknown symbol": (
        'name = "a"\nset = { gmm1 = "gm2" }',
        3,
        "set.gmm1",
        '"gmm1" is no symbol',
        "gm1",
    ),
    "set of an alias": ('name = "a"\nset = { ro1 = "1/gm2" }', 3, "set.ro1", "ro1 is an alias", "gds1"),
    "set with an unknown name": (
        'name = "a"\nset = { gm1 = "2*gmm2" }',
        3,
        "set.gm1",
        '"gmm2" is no symbol',
        "gm2",
    ),
    "set with the wrong unit": ('name = "a"\nset = { RL = "gm1" }', 3, "set.RL", "the unit S", "ohm"),
    "set of no unit": ('name = "a"\nset = { RL = "gm1/gm2" }', 3, "set.RL", "no unit", "ohm"),
    "set with unlike terms": ('name = "a"\nset = { RL = "gm1 + RS" }', 3, "set.RL", "", ""),
    "set to a wrong unit": ('name = "a"\nset = { RL = "3 mS" }', 3, "set.RL", "the unit S", "ohm"),
    "set with a root": (
        'name = "a"\nset = { gm1 = "sqrt(gm1*gm2)" }',
        3,
        "set.gm1",
        "is not rational",
        "whole powers",
    ),
    "set with pi": ('name = "a"\nset = { gm1 = "pi*gm2" }', 3, "set.gm1", "is not rational", "whole powers"),
    "set with a half power": (
        'name = "a"\nset = { gm1 = "gm2^0.5*gm1^0.5" }',
        3,
        "set.gm1",
        "is not rational",
        "",
    ),
    "set that cannot be read": ('name = "a"\nset = { gm1 = "2*" }', 3, "set.gm1", "", ""),
    "set to a truth": ('name = "a"\nset = { gm1 = true }', 3, "set.gm1", "gm1 is true", "formula"),
    "set in a ring": (
        'name = "a"\nset = { gm1 = "2*gm2", gm2 = "gm1/2" }',
        1,
        "",
        "gm1 → gm2 → gm1",
        "break it",
    ),
    "set on itself": ('name = "a"\nset = { gm1 = "2*gm1" }', 1, "", "gm1 → gm1", "break it"),
    "dominant of two": (
        'name = "a"\ndominant_capacitor = "M1"',
        3,
        "dominant_capacitor",
        "not one capacitor",
        "CL",
    ),
    "dominant resistor": (
        'name = "a"\ndominant_capacitor = "RL"',
        3,
        "dominant_capacitor",
        "not one capacitor",
        "CL",
    ),
    "dominant unknown": (
        'name = "a"\ndominant_capacitor = "CX"',
        3,
        "dominant_capacitor",
        '"CX" names no',
        "CC",
    ),
    "dominant list": (
        'name = "a"\ndominant_capacitor = ["CC"]',
        3,
        "dominant_capacitor",
        "not one capacitor",
        "CL",
    ),
    "miller no table": ('name = "a"\nmiller = "CC"', 3, "miller", 'miller is "CC"', "part ="),
    "miller without to": (
        'name = "a"\nmiller = { part = "CC", from = "a" }',
        3,
        "miller.to",
        "no to",
        "part =",
    ),
    "miller unknown key": (
        'name = "a"\nmiller = { part = "CC", from = "a", to = "out", end = "from" }',
        3,
        "miller.end",
        'no key "end"',
        "ends",
    ),
    "miller ends": (
        'name = "a"\nmiller = { part = "CC", from = "a", to = "out", ends = "to" }',
        3,
        "miller.ends",
        'ends is "to"',
        '"both" or "from"',
    ),
    "miller wrong node": (
        'name = "a"\nmiller = { part = "CC", from = "in", to = "out" }',
        3,
        "miller.from",
        "CC does not join",
        "it joins a and out",
    ),
    "miller wrong end": (
        'name = "a"\nmiller = { part = "CC", from = "a", to = "gnd" }',
        3,
        "miller.to",
        "CC does not join",
        "it joins a and out",
    ),
    "miller one node": (
        'name = "a"\nmiller = { part = "CC", from = "a", to = "a" }',
        3,
        "miller.to",
        "CC does not join",
        "it joins a and out",
    ),
    "miller of a device": (
        'name = "a"\nmiller = { part = "M1", from = "in", to = "a" }',
        3,
        "miller.part",
        "not one bridging part",
        "cgd1",
    ),
    "miller of a source": (
        'name = "a"\nmiller = { part = "gm1", from = "a", to = "gnd" }',
        3,
        "miller.part",
        "not one bridging part",
        "cgd1",
    ),
    "miller of what is read": (
        'name = "a"\nmiller = { part = "RL", from = "out", to = "gnd" }',
        3,
        "miller.part",
        "controls F1",
        "another",
    ),
    "miller unknown part": (
        'name = "a"\nmiller = { part = "CX", from = "a", to = "out" }',
        3,
        "miller.part",
        '"CX" names no symbol',
        "CC",
    ),
    "small alone": ('name = "a"\nsmall = ["gds"]', 3, "small", "small stands alone", "against"),
    "against alone": ('name = "a"\nagainst = ["gds"]', 3, "against", "against stands alone", "small"),
    "small of nothing": (
        'name = "a"\nsmall = []\nagainst = ["gm"]',
        3,
        "small",
        "small is empty",
        "at least one",
    ),
    "small of a sum": (
        'name = "a"\nsmall = ["gds1+gds2"]\nagainst = ["gm"]',
        3,
        "small",
        "no product",
        "products",
    ),
    "small unknown": (
        'name = "a"\nsmall = ["gdd1"]\nagainst = ["gm"]',
        3,
        "small",
        '"gdd1" names no',
        "gds1",
    ),
    "small of a number": (
        'name = "a"\nsmall = ["2"]\nagainst = ["gm1*RL"]',
        3,
        "small",
        "no product",
        "products",
    ),
    "small against itself": (
        'name = "a"\nsmall = ["gds"]\nagainst = ["gds"]',
        1,
        "",
        "the assumption 'a' contradicts itself",
        "keep the one",
    ),
    "dominant pole no truth": (
        'name = "a"\ndominant_pole = "yes"',
        3,
        "dominant_pole",
        "dominant_pole is",
        "true",
    ),
    "far apart no truth": (
        'name = "a"\npoles_far_apart = 1',
        3,
        "poles_far_apart",
        "poles_far_apart is 1",
        "true",
    ),
    "band without sense": ('name = "a"\nband = "fast"', 3, "band", "", ""),
    "band of zero": ('name = "a"\nband = "0 Hz"', 3, "band", 'band is "0 Hz"', "10 MHz"),
    "band with a wrong unit": ('name = "a"\nband = "3 mS"', 3, "band", "", "Hz"),
    "band beside poles": (
        'name = "a"\nband = "1 MHz"\ndominant_pole = true',
        1,
        "",
        "contradicts itself",
        "keep",
    ),
}


@pytest.mark.parametrize("case", BAD)
def test_refused(case):
    table, line, key, problem, remedy = BAD[case]
    error = refused(table)
    assert isinstance(error, StageError | ReadError)
    assert error.file == FILE
    assert error.line == FIRST + line - 1
    assert error.key == (f"assumption.1.{key}" if key else "assumption.1")
    assert problem in error.problem
    assert remedy in error.remedy
    assert error.remedy or case in ("set that cannot be read", "set with unlike terms")
    assert str(error).startswith(f"{FILE}:{error.line}: {error.key}: ")


@pytest.mark.parametrize(
    ("small", "against", "units"),
    [
        ("gds", "RL", "small is in S and against in ohm"),
        ("1", "gm1", "small is in a pure number and against in S"),
        ("cgd1*RL", "CC", "small is in s and against in F"),
    ],
)
def test_what_cannot_be_compared_is_refused(small: str, against: str, units: str) -> None:
    error = refused(f'name = "it"\nsmall = ["{small}"]\nagainst = ["{against}"]')
    assert units in error.problem
    assert error.line == FIRST + 3


def test_what_can_be_compared_in_part_is_taken() -> None:
    """Of two lists some have one unit: the others say nothing of each other."""
    (made,) = read_assumptions(stage_with('name = "it"\nsmall = ["gds1", "cgd1"]\nagainst = ["gm1", "1/RL"]'))
    assert len(made.pairs) == 4
