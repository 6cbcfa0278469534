"""`derive` as text: expressions, quantities, roots, time constants, and what was dropped."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, run, saved

from symamp.exact import derive as derive_module
from symamp.show import derive_text, running

WIDE = """\
title = "Many in a row"
[mosfet]
M1 = { gate = "in", drain = "a", source = "gnd" }
M2 = { gate = "a", drain = "b", source = "t" }
M3 = { gate = "b", drain = "out", source = "gnd" }
[resistor]
RT = ["t", "gnd"]
R1 = ["a", "gnd"]
R2 = ["b", "gnd"]
[capacitor]
CC = ["out", "a"]
CL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "1 mS", gds = "20 uS", cgd = "5 fF" }
M2 = { gm = "2 mS", gds = "30 uS", gmb = "0.2 mS", cgs = "50 fF" }
M3 = { gm = "4 mS", gds = "50 uS", cgs = "90 fF" }
RT = "1 kohm"
R1 = "20 kohm"
R2 = "10 kohm"
CC = "1 pF"
CL = "5 pF"
[[assumption]]
name = "output conductances are small"
small = ["gds"]
against = ["gm"]
"""


def derived(folder: Path, *texts: str, options: tuple[str, ...] = ()) -> str:
    result = run("derive", saved(folder, *texts), *options)
    assert result.exit_code == 0, result.stderr
    assert result.stderr == ""
    return result.stdout


def test_a_cascode_shows_all_that_is_asked(tmp_path: Path) -> None:
    shown = derived(tmp_path, CASCODE)
    for words in (
        "Cascode into a capacitive load\n\ngain: V(out) / VIN   (written out, ",
        "gm1·(gm2 + gmb2 + gds2)\n  dc = − ─",
        "51.76 dB",
        "rout: impedance at out",
        "open-circuit",
        "share of b1",
    ):
        assert words in shown
    assert re.search(r"  p2   pole +13\.\d+ GHz +real", shown)


def test_what_was_dropped_is_listed_with_its_ratio(tmp_path: Path) -> None:
    shown = derived(tmp_path, CASCODE, ASSUMPTIONS, options=("--assume", "all", "--response", "gain"))
    assert "gain under 'output conductance is negligible" in shown
    assert re.search(r"numerator s\^0 +−gm1·gds2 +−gm1·gm2 +6\.15 %", shown)
    assert "rout" not in shown


def test_of_many_dropped_terms_the_largest_are_listed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    options = ("--assume", "all", "--response", "rout")
    whole = derived(tmp_path, CASCODE, ASSUMPTIONS, options=options)
    rows = re.findall(r"^  (?:numerator|denominator) s.*$", whole, re.MULTILINE)
    assert len(rows) == 4
    monkeypatch.setattr(derive_text, "_DROPPED", 2)
    shown = derived(tmp_path, CASCODE, ASSUMPTIONS, options=options)
    kept = re.findall(r"^  (?:numerator|denominator) s.*$", shown, re.MULTILINE)
    sizes = sorted((float(re.search(r"([\d.]+) %$", row)[1]) for row in rows), reverse=True)  # type: ignore[index]
    assert kept == [row for row in rows if row in kept]
    assert sorted((float(re.search(r"([\d.]+) %$", row)[1]) for row in kept), reverse=True) == sizes[:2]  # type: ignore[index]
    assert f"and 2 more, each at most {sizes[2]:.3g} % of what it fell to; --json lists all" in shown


def test_a_response_at_frequencies(tmp_path: Path) -> None:
    shown = derived(tmp_path, CASCODE, options=("--at", "10 MHz", "--at", "0"))
    number = r"[+−]?[\d.]+"
    assert re.search(
        rf"  at 10 MHz: {number} [+−] j·[\d.]+, magnitude {number}, {number} dB, {number} deg\n", shown
    )
    assert "  at 0 Hz: −387.2, magnitude 387.2, 51.76 dB, 180 deg\n" in shown


def test_without_bias_there_are_formulas_and_no_numbers(tmp_path: Path) -> None:
    shown = derived(tmp_path, CASCODE[: CASCODE.index("[bias]")], options=("--at", "1 MHz"))
    assert "gm1·(gm2 + gmb2 + gds2)" in shown
    assert "has no bias value" in shown
    assert "warning: " in shown or "gmb2" in shown
    assert "infinite" not in shown


def test_a_nested_response_says_how_much_it_stands_for(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(derive_module, "EXPAND_LIMIT", 0)
    shown = derived(tmp_path, CASCODE)
    assert re.search(r"\(nested: \d+ minors? stands? for [\d,]+ product terms\)", shown)
    assert "N(s)" not in shown
    assert "−387.2" in shown


def test_an_approximation_that_is_not_there_is_said_in_words(tmp_path: Path) -> None:
    resistive = CASCODE.replace(
        '[capacitor]\nCL = ["out", "gnd"]', '[resistor]\nRL = ["out", "gnd"]'
    ).replace('CL = "3.3 pF"', 'RL = "1 Mohm"')
    gone = '\n[[assumption]]\nname = "no load"\nneglect = ["gds", "csb"]\nopen = ["RL"]\n'
    shown = derived(tmp_path, resistive, gone, options=("--assume", "all"))
    assert "there is no approximate response: the response grows without bound" in shown


def test_an_assumption_for_another_response_is_said_to_be_none(tmp_path: Path) -> None:
    other = '\n[[assumption]]\nname = "far"\nneglect = ["gmb"]\nfor = ["rout"]\n'
    shown = derived(tmp_path, CASCODE, other, options=("--assume", "far"))
    assert "gain: no assumption made is for this response" in shown


@pytest.mark.parametrize("width", [80, 100, 120])
def test_lines_are_no_wider_than_the_page(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, width: int
) -> None:
    monkeypatch.setattr(running, "console_width", lambda console: width)
    for texts in ((CASCODE, ASSUMPTIONS), (WIDE,)):
        shown = derived(tmp_path, *texts, options=("--assume", "all", "--at", "1 MHz"))
        for line in shown.splitlines():
            assert len(line) <= width, line


def test_minus_is_a_minus_and_never_a_hyphen(tmp_path: Path) -> None:
    shown = derived(tmp_path, WIDE, options=("--assume", "all", "--at", "1 MHz"))
    assert not re.search(r"-[\d(a-z]", shown.replace("open-circuit", ""))


def test_numbers_have_units_with_prefixes(tmp_path: Path) -> None:
    shown = derived(tmp_path, CASCODE)
    assert re.search(r"bandwidth +\d+\.\d kHz", shown)
    assert re.search(r"CL +98\.61 kohm", shown)
    assert re.search(r"\d ns", shown)
