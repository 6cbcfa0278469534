"""The front for Python: a stage, its responses, ledgers, and how they show themselves."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import sympy

import symamp

CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"

[span]
gds1 = "30 %"

# what a hand formula leaves out
[[assumption]]
name = "gds against gm"
small = ["gds"]
against = ["gm"]

[[assumption]]
name = "no body effect"
neglect = ["gmb"]
"""

GAIN = -4.1e-3 * 4.76e-3 / (0.21e-3 * 0.24e-3)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    file = tmp_path / "cascode.stage.toml"
    file.write_text(CASCODE)
    return file


@pytest.fixture
def stage(path: Path) -> symamp.Stage:
    return symamp.load(path)


def built() -> symamp.StageBuilder:
    """The same stage, part by part."""
    builder = symamp.StageBuilder("Cascode into a capacitive load")
    builder.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS")
    builder.mosfet("M2", gate="gnd", drain="out", source="x", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS")
    builder.capacitor("CL", "out", "gnd", "3.3 pF")
    builder.voltage_source("VIN", "in", "gnd")
    builder.response("gain", source="VIN", to="out")
    builder.response("rout", looking_into="out")
    builder.span_percent("gds1", "30 %")
    builder.assume("gds against gm", small="gds", against="gm")
    builder.assume("no body effect", neglect="gmb")
    return builder


def test_a_stage_says_what_it_has(stage: symamp.Stage) -> None:
    assert stage.title == "Cascode into a capacitive load"
    assert stage.responses == ("gain", "rout")
    assert [a.name for a in stage.assumptions] == ["gds against gm", "no body effect"]
    assert stage.symbols["CL"] == 3.3e-12
    assert list(stage.symbols) == ["gm1", "gds1", "gm2", "gds2", "gmb2", "CL"]
    assert stage.warnings == ()
    assert repr(stage) == "<stage 'Cascode into a capacitive load': responses gain, rout>"


def test_a_response_is_in_sympy(stage: symamp.Stage) -> None:
    gain = stage.response("gain")
    assert gain.numerator is not None
    assert gain.denominator is not None
    assert len(gain.numerator) == 1
    assert len(gain.denominator) == 2
    gm1, gm2, gmb2, gds2 = sympy.symbols("gm1 gm2 gmb2 gds2", positive=True)
    assert sympy.expand(gain.numerator[0] + gm1 * (gm2 + gmb2 + gds2)) == 0
    assert gain.terms == 8
    assert gain.unit == ""
    assert stage.response("rout").unit == "ohm"


def test_a_response_is_worked_out_once(stage: symamp.Stage) -> None:
    assert stage.response("gain") is stage.response("gain")


def test_numbers_of_a_response(stage: symamp.Stage) -> None:
    gain = stage.response("gain")
    assert gain.at(0.0) == pytest.approx(GAIN)
    assert gain.poles() == pytest.approx([-0.21e-3 * 0.24e-3 / (3.3e-12 * 4.97e-3)])
    assert gain.zeros() == []
    hertz = np.geomspace(1e3, 1e9, 7)
    found = gain.at(hertz)
    assert found.shape == (7,)
    assert found[0] == pytest.approx(gain.at(1e3))
    doubled = gain.at(0.0, {"gm1": np.array([4.1e-3, 8.2e-3])})
    assert doubled == pytest.approx([GAIN, 2 * GAIN])


def test_a_quantity_has_formula_latex_value_and_unit(stage: symamp.Stage) -> None:
    dc = stage.response("gain").quantity("dc")
    assert dc.value == pytest.approx(GAIN)
    assert float(
        dc.formula.subs({x: stage.symbols[str(x)] for x in dc.formula.free_symbols})
    ) == pytest.approx(GAIN)
    assert "g_{m1}" in dc.latex
    assert (dc.unit, dc.why) == ("", None)
    missing = stage.response("rout").quantity("unity_gain_frequency")
    assert missing.value is None
    assert missing.why


def test_time_constants(stage: symamp.Stage) -> None:
    (constant,) = stage.response("gain").time_constants()
    assert (constant.part, constant.share) == ("CL", pytest.approx(1.0))
    assert constant.resistance == pytest.approx(4.97e-3 / (0.21e-3 * 0.24e-3))


def test_a_response_under_assumptions(stage: symamp.Stage) -> None:
    gain = stage.response("gain")
    one = gain.under("no body effect")
    assert one.response is not None
    assert one.response.quantity("dc").value == pytest.approx(GAIN * 4.14 / 4.76)
    assert one.dropped == ()
    every = gain.under("all")
    assert every.assumptions == ("gds against gm", "no body effect")
    assert every.response is not None
    assert every.response.quantity("dc").value == pytest.approx(GAIN * 3.9 / 4.76)
    assert {(d.coefficient, d.term) for d in every.dropped} >= {("numerator s^0", "-gm1*gds2")}
    assert gain.quantity("dc").value == pytest.approx(GAIN)  # the exact one is as it was


def test_an_approximate_response_answers_as_an_exact_one_does(stage: symamp.Stage) -> None:
    gain = stage.response("gain")
    every = gain.under("all")
    assert every.quantity("dc").value == pytest.approx(GAIN * 3.9 / 4.76)
    assert [str(c) for c in every.numerator or ()] == ["-gm1*gm2"]
    assert every.response is not None
    assert every.poles() == every.response.poles()
    assert abs(every.at(1e6)) < abs(every.quantity("dc").value)
    assert every._repr_latex_()
    assert "no body effect" in repr(every)


def test_where_nothing_is_left_asking_says_why(stage: symamp.Stage, tmp_path: Path) -> None:
    text = CASCODE + '[[assumption]]\nname = "no loss"\nneglect = ["gds"]\n'
    path = tmp_path / "lossless.stage.toml"
    path.write_text(text + '[[assumption]]\nname = "no load"\nopen = ["CL"]\n', encoding="utf-8")
    nothing = symamp.load(path).response("gain").under("no loss", "no load")
    assert nothing.response is None
    assert nothing.why
    with pytest.raises(symamp.StageError, match="leave no response"):
        nothing.poles()


@pytest.mark.parametrize("name", ["no boy effect", ""])
def test_an_unknown_assumption_is_refused(stage: symamp.Stage, name: str) -> None:
    with pytest.raises(symamp.InputError, match="no assumption named"):
        stage.response("gain").under(name)


def test_an_unknown_response_is_refused_with_those_that_there_are(stage: symamp.Stage) -> None:
    with pytest.raises(symamp.StageError, match="gian") as caught:
        stage.response("gian")
    assert "gain, rout" in str(caught.value)


def test_an_unknown_quantity_is_refused(stage: symamp.Stage) -> None:
    with pytest.raises(symamp.ReadError, match="bandwidth"):
        stage.response("gain").quantity("bandwith")
    with pytest.raises(symamp.InputError):
        stage.ledger(["gain.bandwith"])


def test_the_ledger(stage: symamp.Stage) -> None:
    ledger = stage.ledger(points=16)
    account = ledger["gain.dc"]
    assert account.error == pytest.approx(-0.86 / 4.76)
    assert [a.name for a in ledger.accounts][:2] == ["gain.dc", "gain.p1"]
    assert ledger.json()["quantities"]["gain.dc"]["error"] == account.error
    text = str(ledger)
    assert text.startswith("Cascode into a capacitive load\n")
    assert "−18.1 %" in text
    assert [a.name for a in stage.ledger(["rout.dc"], points=0).accounts] == ["rout.dc"]
    with pytest.raises(KeyError):
        ledger["gain.p9"]


def test_the_ledger_of_one_seed_repeats(stage: symamp.Stage) -> None:
    assert stage.ledger(points=32, seed=3).json() == stage.ledger(points=32, seed=3).json()


def test_notebooks_show_latex_and_html(stage: symamp.Stage) -> None:
    gain = stage.response("gain")
    latex = gain._repr_latex_()
    assert latex is not None
    assert latex.startswith("$")
    assert latex.endswith("$")
    assert "\\frac" in latex
    assert latex.count("{") == latex.count("}")
    quantity = gain.quantity("dc")._repr_latex_()
    assert quantity is not None
    assert "g_{m1}" in quantity
    html = stage.ledger(points=8)._repr_html_()
    assert html.count("<table>") == html.count("</table>") > 0
    assert "gain.dc" in html


def test_a_saved_stage_reads_back_the_same(stage: symamp.Stage, tmp_path: Path) -> None:
    copy = stage.save(tmp_path / "copy.stage.toml")
    assert copy.read_text() == CASCODE  # comments and all
    again = symamp.load(copy)
    assert again.symbols == stage.symbols
    assert again.ledger(points=8).json() == stage.ledger(points=8).json()


def test_a_stage_built_in_python_is_the_one_of_the_file(stage: symamp.Stage, tmp_path: Path) -> None:
    other = built().build()
    assert other.symbols == stage.symbols
    assert other.ledger(points=8).json() == stage.ledger(points=8).json()
    saved = other.save(tmp_path / "built.stage.toml")
    assert symamp.load(saved).ledger(points=8).json() == stage.ledger(points=8).json()


def test_a_stage_that_means_nothing_is_refused_when_it_is_built() -> None:
    builder = built()
    builder.resistor("R9", "nowhere", "else", "1 kohm")
    with pytest.raises(symamp.StageError, match="R9"):
        builder.build()


@pytest.mark.parametrize("kind", [symamp.InputError, symamp.StageError, symamp.SymampError, ValueError])
def test_errors_can_be_caught_by_what_they_are(tmp_path: Path, kind: type[Exception]) -> None:
    (tmp_path / "x.stage.toml").write_text("title = 'nothing'\n")
    with pytest.raises(kind):
        symamp.load(tmp_path / "x.stage.toml")


def test_a_stage_reads_its_assumptions_when_they_are_first_asked_for(path: Path) -> None:
    path.write_text(CASCODE.replace('neglect = ["gmb"]', 'neglect = ["CLL"]'))
    stage = symamp.load(path)
    assert stage.response("gain").poles()
    with pytest.raises(symamp.InputError, match="CLL"):
        _ = stage.assumptions


def test_text_will_do_for_one_quantity_and_for_a_frequency(stage: symamp.Stage) -> None:
    made = stage.ledger("gain.dc")
    assert [account.name for account in made] == ["gain.dc"]
    assert len(made) == 1
    with pytest.raises(KeyError, match="this ledger has gain"):
        made["gain.p1"]
    gain = stage.response("gain")
    assert gain.at("1 MHz") == gain.at(1e6)
    with pytest.raises(symamp.InputError):
        gain.at("1 mH")
