"""Step 5: one pole, poles far apart, both together, and one frequency."""

from __future__ import annotations

import math

import assumed_stages as stages
import numpy as np
import pytest

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder

BOTH = pytest.mark.parametrize("nested", [False, True], ids=["written", "nested"])


def put(b: StageBuilder, name: str = "gain", nested: bool = False) -> Approximation:
    stage = b.stage()
    return Approximator(stages.exact(stage, name, nested=nested)).under(read_assumptions(stage))


def with_words(b: StageBuilder, *, single: bool = False, apart: bool = False, **kwargs) -> Approximation:
    if single:
        b.assume("single", dominant_pole=True)
    if apart:
        b.assume("apart", poles_far_apart=True)
    return put(b, **kwargs)


@BOTH
def test_one_pole_loses_the_others_and_keeps_the_first_zero(nested):
    made = with_words(stages.common_source(), single=True, nested=nested)
    response = made.response
    assert response.single_pole
    assert not response.apart
    assert len(response.poles()) == 1
    assert response.zeros() == [pytest.approx(2e-3 / 15e-15)]
    p1 = response.quantity("p1").value
    assert response.quantity("bandwidth").value == pytest.approx(abs(p1) / (2 * math.pi), rel=1e-12)
    assert response.quantity("p2").value is None
    assert response.at(1e30) == pytest.approx(0, abs=1e-15)  # the numerator is a0 for all but z1


@BOTH
def test_a_zero_at_dc_says_so(nested):
    made = with_words(stages.degenerated(), single=True, nested=nested)
    assert made.response is None
    assert made.why == "a zero lies at DC, so a dominant pole does not apply"


@BOTH
def test_a_pole_at_dc_is_the_dominant_one(nested):
    b = stages.cascode()
    b.assume("none", neglect="gds")
    made = with_words(b, single=True, nested=nested)
    assert made.response.poles() == [0]
    # gm1·(gm2 + gmb2)/(s·CL·(gm2 + gmb2)): unity gain where ω = gm1/CL
    found = made.response.quantity("unity_gain_frequency").value
    assert found == pytest.approx(4.1e-3 / 3.3e-12 / (2 * math.pi), rel=1e-12)
    assert made.response.quantity("bandwidth").value is None


@BOTH
def test_several_poles_at_dc_say_so(nested):
    b = StageBuilder("two integrators")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="x", source="gnd", gm="1 mS")
    b.capacitor("C1", "x", "gnd", "1 pF")
    b.mosfet("M2", gate="x", drain="out", source="gnd", gm="1 mS")
    b.capacitor("C2", "out", "gnd", "1 pF")
    b.response("gain", source="VIN", to="out")
    made = with_words(b, single=True, nested=nested)
    assert made.why == "several poles lie at DC, so a dominant pole does not apply"


def resonator() -> StageBuilder:
    b = StageBuilder("without loss")
    b.current_source("IIN", "gnd", "x")
    b.inductor("L1", "x", "y", "1 uH")
    b.capacitor("C1", "y", "gnd", "1 nF")
    b.capacitor("C2", "x", "gnd", "1 nF")
    b.response("share", source="IIN", to="x", over="y")
    b.response("back", source="IIN", to="y", over="x")
    return b


@BOTH
def test_a_coefficient_that_is_zero_leaves_no_neighbours(nested):
    made = with_words(resonator(), apart=True, name="back", nested=nested)
    assert made.why == "b1 is zero, so the poles are no ratios of neighbouring coefficients"
    made = with_words(resonator(), apart=True, name="share", nested=nested)
    assert made.why == "a1 is zero, so the zeros are no ratios of neighbouring coefficients"
    made = with_words(resonator(), single=True, name="back", nested=nested)
    assert (
        made.why
        == "the denominator has no term in s, so a dominant pole does not apply: its poles come in pairs"
    )


@BOTH
def test_far_apart_every_root_is_a_ratio_of_neighbours(nested):
    b = stages.two_stage()
    exact = stages.exact(b.stage())
    made = with_words(b, apart=True, nested=nested)
    response = made.response
    b0, b1, b2, b3 = (float(c) for c in coefficients(exact, "denominator"))
    a0, a1 = (float(c) for c in coefficients(exact, "numerator"))
    assert response.poles() == pytest.approx([-b0 / b1, -b1 / b2, -b2 / b3], rel=1e-9)
    assert response.zeros() == pytest.approx([-a0 / a1], rel=1e-9)
    # All else is that of the response with these roots.
    s = 2j * math.pi * 1e7
    expected = a0 / b0 * (1 + a1 / a0 * s) / ((1 + b1 / b0 * s) * (1 + b2 / b1 * s) * (1 + b3 / b2 * s))
    assert response.at(1e7) == pytest.approx(expected, rel=1e-9)
    if not nested:
        assert response.quantity("p2").text is not None
        assert response.quantity("b1").text is not None
    # The coefficients stay those from whose ratios the roots are taken.
    assert response.quantity("b1").value == pytest.approx(b1 / b0, rel=1e-9)


def coefficients(response, which):
    above, below = response.exact_coefficients
    polynomial = above if which == "numerator" else below
    return [float(polynomial[k].p) / float(polynomial[k].q) for k in range(polynomial.degree() + 1)]


def test_roots_come_by_magnitude_even_where_they_are_not_far_apart():
    made = with_words(stages.follower(), apart=True)
    sizes = [abs(p) for p in made.response.poles()]
    assert sizes == sorted(sizes)
    for k in (1, 2):
        found = made.response.quantity(f"p{k}")
        assert stages.formula_value(found.text, made.response.bias_values) == pytest.approx(found.value.real)


@BOTH
def test_both_words_together(nested):
    b = stages.two_stage()
    alone = with_words(stages.two_stage(), apart=True, nested=nested).response
    single = with_words(stages.two_stage(), single=True, nested=nested).response
    response = with_words(b, single=True, apart=True, nested=nested).response
    assert (response.single_pole, response.apart) == (True, True)
    assert response.poles() == pytest.approx(alone.poles())
    assert response.zeros() == pytest.approx(alone.zeros())
    p1 = response.quantity("p1").value
    assert response.quantity("bandwidth").value == pytest.approx(abs(p1) / (2 * math.pi), rel=1e-12)
    for name in (
        "dc",
        "hf",
        "bandwidth",
        "unity_gain_frequency",
        "gain_bandwidth",
        "at(1 MHz)",
        "a0",
        "b1",
        "b2",
    ):
        one, other = response.quantity(name), single.quantity(name)
        assert one.value == pytest.approx(other.value, rel=1e-12), name
        assert one.text == other.text, name
    # The phase margin counts all poles.
    assert response.quantity("phase_margin").value < single.quantity("phase_margin").value


@BOTH
def test_both_words_at_many_points(nested):
    response = with_words(stages.two_stage(), single=True, apart=True, nested=nested).response
    values = {n: float(v) * np.linspace(0.5, 2, 5) for n, v in response.stage.bias.items()}
    figures = response.figures(values, 5)
    np.testing.assert_allclose(figures.bandwidth, np.abs(figures.poles[0]) / (2 * math.pi), rtol=1e-9)
    assert figures.poles.shape[0] == 3


@BOTH
@pytest.mark.parametrize(
    ("hz", "power", "slope"),
    [(0.01, "10 mHz", 2), (1e4, "10 kHz", 0), (1e12, "1 THz", -1)],
    ids=["below", "within", "above"],
)
def test_band_is_the_asymptote_of_a_bode_plot(nested, hz, power, slope):
    b = stages.degenerated()
    exact = stages.exact(b.stage())
    b.assume("it", band=power)
    made = put(b, nested=nested)
    ratio = made.response.at(10 * hz) / made.response.at(hz)
    assert math.log10(abs(ratio)) == pytest.approx(slope, abs=1e-9)
    assert abs(made.response.at(hz)) == pytest.approx(abs(exact.at(hz)), rel=0.7)


@BOTH
def test_band_needs_a_bias(nested):
    b = StageBuilder("no bias")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="out", source="gnd")
    b.capacitor("CL", "out", "gnd")
    b.response("gain", source="VIN", to="out")
    b.assume("it", band="1 kHz")
    made = put(b, nested=nested)
    assert made.response is None
    assert made.why == "a band is judged at the bias point, and gm1, gds1, CL have no value"


def test_a_response_without_poles_stays():
    b = StageBuilder("divider")
    b.voltage_source("VIN", "in", "gnd")
    b.resistor("R1", "in", "out", "1 kohm")
    b.resistor("R2", "out", "gnd", "2 kohm")
    b.response("gain", source="VIN", to="out")
    made = with_words(b, single=True, apart=True)
    assert made.response.quantity("dc").text == "R2/(R2 + R1)"
    assert made.response.poles() == []
