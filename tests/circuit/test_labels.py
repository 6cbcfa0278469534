"""Selectors: what names, bare names and products of names mean on a stage."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from symamp.circuit.labels import remark_of, select, select_monomials, select_symbols, unit_of
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.errors import ReadError

CASCODE = """\
[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x", body = "gnd" }
[capacitor]
CL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
"""
BIAS = """\
[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"
"""


def read(text: str, folder: Path = Path()) -> Stage:
    return parse_stage(text.encode(), file="my.stage.toml", folder=folder)


@pytest.mark.parametrize(
    ("text", "monomials"),
    [
        ("gds1", ({"gds1": 1},)),
        ("ro1", ({"gds1": -1},)),
        ("M1", ({"gm1": 1}, {"gds1": 1})),
        ("CL", ({"CL": 1},)),
        ("gds", ({"gds1": 1}, {"gds2": 1})),
        ("ro", ({"gds1": -1}, {"gds2": -1})),
        ("gmb", ({"gmb2": 1},)),
        ("cgd", ()),
        ("1", ({},)),
        ("gm1*CL", ({"gm1": 1, "CL": 1},)),
        ("gm1/gds1", ({"gm1": 1, "gds1": -1},)),
        ("gm1*ro1*gds1", ({"gm1": 1},)),
        ("gm1**2/CL", ({"gm1": 2, "CL": -1},)),
        ("gm1^(1/2)", ({"gm1": Fraction(1, 2)},)),
        ("gm*ro", ({"gm1": 1, "gds1": -1}, {"gm2": 1, "gds2": -1})),
        ("gm*gmb", ({"gm2": 1, "gmb2": 1},)),
        ("gm*CL", ({"gm1": 1, "CL": 1}, {"gm2": 1, "CL": 1})),
        ("gm*cgd", ()),
    ],
)
def test_products_of_selectors(text: str, monomials: tuple[dict[str, int], ...]) -> None:
    stage = read(CASCODE + BIAS)
    assert select_monomials(stage, text) == monomials
    assert bool(remark_of(stage, text)) == (not monomials)


def test_symbols_that_selectors_name() -> None:
    stage = read(CASCODE + BIAS)
    assert select_symbols(stage, "ro") == ("gds1", "gds2")
    assert select_symbols(stage, "M2") == ("gm2", "gds2", "gmb2")
    assert select_symbols(stage, "csb") == ()
    assert "csb" in select(stage, "csb").remark


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("gsd1", "nearest known one is gds1"),
        ("gm_1", "nearest known one is gm1"),
        ("cgd1", "M1 has no cgd"),
        ("VIN", "without small-signal parameters"),
        ("M1*CL", "several symbols"),
        ("gm1 + gm2", "no product"),
        ("2*gm1", "no product"),
        ("", "empty"),
    ],
)
def test_what_selects_nothing_is_an_error(text: str, words: str) -> None:
    with pytest.raises(ReadError) as caught:
        select_monomials(read(CASCODE + BIAS), text)
    assert words in str(caught.value)


def test_an_alias_of_two_symbols_is_no_symbol() -> None:
    stage = read(
        '[bjt]\nQ1 = { base = "b", collector = "c", emitter = "gnd" }\n[resistor]\nRB = ["b", "gnd"]\n'
        'RC = ["c", "gnd"]\n[response]\nr = { looking_into = "c" }\n'
    )
    with pytest.raises(ReadError, match="gm1 and gpi1"):
        select_symbols(stage, "beta")
    assert unit_of(stage, "beta1") == ""
    assert unit_of(stage, "rpi1") == "ohm"
    assert unit_of(stage, "RC") == "ohm"


def test_a_vccs_that_is_called_like_a_parameter_is_not_in_it() -> None:
    text = CASCODE.replace(
        "[capacitor]", '[vccs]\ngm9 = { out = ["out", "gnd"], control = ["x", "gnd"] }\n[capacitor]'
    )
    stage = read(text)
    assert select_symbols(stage, "gm") == ("gm1", "gm2")
    assert select_symbols(stage, "gm9") == ("gm9",)
