"""Poles and zeros in the ledger: partners, roots that are lost or new, and complex errors."""

from __future__ import annotations

from math import pi

import pytest
from judged import CASCODE, COMMON_SOURCE, NO_R2, RESONATOR, stage_of

from symamp.circuit.builder import StageBuilder
from symamp.judge.ledger import Ledger, LostRoot, make_ledger

GDS2, GDS1, GM2, GMB2 = 0.24e-3, 0.21e-3, 3.9e-3, 0.62e-3
TWO_CAPACITORS = CASCODE.replace('gmb = "0.62 mS"', 'gmb = "0.62 mS", csb = "60 fF"')


def ledger(*texts: str, quantities: tuple[str, ...] = ()) -> Ledger:
    return make_ledger(stage_of(*texts), quantities=quantities, points=32)


def test_an_approximate_root_is_the_partner_of_the_nearest_whatever_its_index() -> None:
    # Without CL all that is left is the pole at node x, which is p2: p1 is lost.
    unloaded = '\n[[assumption]]\nname = "no load"\nneglect = ["CL"]\n'
    resistive = TWO_CAPACITORS.replace(
        "[capacitor]", '[resistor]\nRL = ["out", "gnd"]\n\n[capacitor]'
    ).replace('CL = "3.3 pF"', 'CL = "3.3 pF"\nRL = "2 kohm"')
    found = ledger(resistive, unloaded, quantities=("gain.p1", "gain.p2"))
    first, second = found["gain.p1"], found["gain.p2"]
    assert first.error is None
    assert first.lost == second.lost
    ((name, hz),) = [(root.name, root.hz) for root in first.lost]
    assert (name, hz) == ("p1", pytest.approx(abs(first.exact or 0) / (2 * pi)))
    assert first.new == ()
    at_x = (GM2 + GMB2 + GDS2) / (1 + GDS2 * 2e3) + GDS1
    assert second.approximate == pytest.approx(-at_x / 60e-15)
    assert second.formula_approximate is not None
    assert second.error_formula is None or "RL" in second.error_formula.shape.text()


def test_a_root_that_goes_is_named_lost() -> None:
    gone = '\n[[assumption]]\nname = "no feedthrough"\nneglect = ["cgd"]\n'
    found = ledger(COMMON_SOURCE, gone, quantities=("gain.z1", "gain.p1"))
    zero = found["gain.z1"]
    assert zero.exact == pytest.approx(5e-3 / 0.1e-12)
    assert zero.lost == (LostRoot("z1", pytest.approx(5e-3 / 0.1e-12 / (2 * pi))),)
    assert zero.why == "z1, at 7.958 GHz, is lost: it has no partner"
    assert found["gain.p1"].lost == ()


def test_a_root_that_appears_is_named_new() -> None:
    # One bridging capacitor gives one pole; split in two it gives one at the gate and one at the output.
    bridge = COMMON_SOURCE.replace('cgs = "0.4 pF", ', "").replace('[capacitor]\nCL = ["out", "gnd"]\n\n', "")
    bridge = bridge.replace('CL = "0.7 pF"\n', "")
    split = '\n[[assumption]]\nname = "cgd by Miller"\nmiller = { part = "cgd1", from = "g", to = "out" }\n'
    account = ledger(bridge, split, quantities=("gain.p1",))["gain.p1"]
    gain = -5e-3 / (0.2e-3 + 1 / 4e3)
    at_output = (0.2e-3 + 1 / 4e3) / (0.1e-12 * (1 - 1 / gain))
    assert account.approximate == pytest.approx(-1 / (20e3 * 0.1e-12 * (1 - gain)))
    assert account.new == (LostRoot("p2", pytest.approx(at_output / (2 * pi))),)
    assert account.lost == ()


def test_figures_of_complex_poles_are_of_the_modulus_over_the_span() -> None:
    span = '\n[span]\nR1 = ["100 ohm", "400 ohm"]\n'
    account = ledger(RESONATOR, span, NO_R2, quantities=("gain.p1",))["gain.p1"]
    assert account.modulus
    assert isinstance(account.error, float)  # real at the bias point, where the poles are
    assert account.span is not None
    assert account.span.modulus
    assert 0 <= account.span.least <= abs(account.error) <= account.span.greatest
    assert all(s.span[f].modulus for s in account.assumptions for f in s.span)


def test_a_span_without_complex_poles_keeps_signs() -> None:
    span = '\n[span]\nR1 = ["300 ohm", "400 ohm"]\n'
    account = ledger(RESONATOR, span, NO_R2, quantities=("gain.p2",))["gain.p2"]
    assert not account.modulus
    assert account.span is not None
    assert account.span.least < account.span.greatest < 0


def test_the_error_of_a_pole_that_is_complex_at_the_bias_point_is_complex() -> None:
    near = RESONATOR.replace('R1 = "300 ohm"', 'R1 = "150 ohm"')
    account = ledger(near, NO_R2, quantities=("gain.p1",))["gain.p1"]
    assert account.modulus
    real, imag = -180 / 20e-6, (1e14 - (180 / 20e-6) ** 2) ** 0.5
    exact, approximate = complex(real, imag), complex(-150 / 20e-6, (1e14 - (150 / 20e-6) ** 2) ** 0.5)
    assert account.exact == pytest.approx(exact)
    assert account.error == pytest.approx((approximate - exact) / exact)


def test_a_double_root_that_is_lost_is_named_as_two() -> None:
    twin = """\
title = "Two equal poles"
[vccs]
G1 = { out = ["a", "gnd"], control = ["in", "gnd"] }
G2 = { out = ["b", "gnd"], control = ["a", "gnd"] }
[resistor]
R1 = ["a", "gnd"]
R2 = ["b", "gnd"]
[capacitor]
C1 = ["a", "gnd"]
C2 = ["b", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "b" }
[bias]
G1 = "1 mS"
G2 = "1 mS"
R1 = "1 kohm"
R2 = "1 kohm"
C1 = "1 pF"
C2 = "1 pF"
[[assumption]]
name = "no capacitance"
neglect = ["C1", "C2"]
"""
    found = ledger(twin, quantities=("gain.p1", "gain.p2"))
    for name in ("p1", "p2"):
        account = found[f"gain.{name}"]
        assert [root.name for root in account.lost] == ["p1", "p2"]
        assert account.why == f"{name}, at 159.2 MHz, is lost: it has no partner"


def test_a_new_root_that_no_account_names_is_a_remark() -> None:
    """A nulling resistor of 1/G2 puts the zero at infinity; shorting it brings the zero G2/CC back."""
    b = StageBuilder("two stages and a nulling resistor")
    b.vccs("G1", out=("x", "gnd"), control=("in", "gnd"), value="0.5 mS")
    b.vccs("G2", out=("o", "gnd"), control=("x", "gnd"), value="2 mS")
    b.resistor("R1", "x", "gnd", "100 kohm")
    b.resistor("R2", "o", "gnd", "50 kohm")
    b.resistor("RZ", "x", "z", "500 ohm")
    b.capacitor("CC", "z", "o", "4 pF")
    b.capacitor("CL", "o", "gnd", "5 pF")
    b.voltage_source("VIN", "in", "gnd")
    b.response("gain", source="VIN", to="o")
    b.assume("no nulling resistor", short=["RZ"])
    made = make_ledger(b.stage())
    assert "gain: under all assumptions a new zero appears at 79.58 MHz" in made.remarks
    assert not make_ledger(b.stage(), quantities=["gain.z1"]).remarks
