"""Common practice, no source: a cascode into a capacitive load, and rules of thumb on two real poles."""

from __future__ import annotations

import pytest
from published_values import number

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.derive import derive
from symamp.exact.response import Response


def cascode() -> StageBuilder:
    """Ideal current source for a load; gm2 + gmb2 = 7.5 mS."""
    build = StageBuilder("cascode")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="6.7 mS", gds="0.35 mS")
    build.mosfet("M2", gate="gnd", drain="out", source="x", gm="6.2 mS", gmb="1.3 mS", gds="0.35 mS")
    build.capacitor("CL", "out", "gnd", "10 pF")
    build.voltage_source("VIN", "in", "gnd")
    build.response("inner", source="VIN", to="x")
    build.response("gain", source="VIN", to="out")
    build.response("rout", looking_into="out")
    return build


def exact(stage: Stage, name: str) -> Response:
    return derive(stage, stage.asked[name])


def decibels(response: Response, quantity: str) -> float:
    return number(response, f"{quantity}.db").real


def test_inner_node_of_a_cascode() -> None:
    inner = exact(cascode().stage(), "inner")
    assert decibels(inner, "dc") == pytest.approx(25.6, abs=0.05)
    assert decibels(inner, "hf") == pytest.approx(-1.75, abs=0.006)  # −1.7549
    assert len(inner.poles()) == len(inner.zeros()) == 1
    assert number(inner, "p1.hz") == pytest.approx(244e3, rel=0.03)
    assert number(inner, "z1.hz") == pytest.approx(5.6e6, rel=0.03)


def test_output_of_a_cascode_has_the_same_pole_and_no_zero() -> None:
    stage = cascode().stage()
    gain = exact(stage, "gain")
    assert decibels(gain, "dc") == pytest.approx(52, abs=1)  # "about": 52.66 by the next line
    assert number(gain, "dc") == pytest.approx(-6.7 / 0.35 * (7.5 + 0.35) / 0.35)
    assert gain.poles() == exact(stage, "inner").poles()
    assert gain.zeros() == []


def test_inner_node_at_high_frequency_without_body_effect_and_output_conductance() -> None:
    """Its gain is −gm1/gm2 then, which is 0 dB where both devices are taken to have one gm."""
    build = cascode()
    build.assume("one gm", equal=["M1", "M2"])
    build.assume("no body effect", neglect="gmb")
    build.assume("high intrinsic gain", small="gds", against="gm")
    stage = build.stage()
    made = Approximator(exact(stage, "inner")).under(read_assumptions(stage))
    assert made.response is not None, made.why
    assert made.response.quantity("hf").text == "-1"
    assert decibels(made.response, "hf") == 0
    unequal = read_assumptions(stage)[1:]
    left = Approximator(exact(stage, "inner")).under(unequal).response
    assert left is not None
    assert left.quantity("hf").text == "-gm1/gm2"


def test_bias_resistor_of_a_thousand_output_resistances() -> None:
    """Between input and output it moves the gain by about a thousandth."""
    plain = cascode().stage()
    resistance = number(exact(plain, "rout"), "dc").real
    build = cascode()
    build.resistor("RB", "in", "out", 1000 * resistance)
    moved = number(exact(build.stage(), "gain"), "dc").real / number(exact(plain, "gain"), "dc").real - 1
    assert moved == pytest.approx(-0.001, rel=0.01)


# Two real poles, p2 = k·p1 and no zeros: errors in percent (GM 7.3.1 gives the rule; figures are computed).
K = (1, 2, 4, 5, 8, 10, 20, 50, 100)
P1_IS_THE_BANDWIDTH = (55, 19, 5.8, 3.8, 1.5, 1.0, 0.2, 0, 0)
BANDWIDTH_BY_B1 = (-22, -20, -15, -13.5, -9.8, -8.2, -4.5, -1.9, -1.0)
P1_BY_B1 = (-50, -33, -20, -17, -11, -9.1, -4.8, -2.0, -1.0)
P2_BY_B1_OVER_B2 = (100, 50, 25, 20, 12.5, 10, 5, 2, 1)


def by_ratio(row: tuple[float, ...]) -> list[tuple[int, float]]:
    return list(zip(K, row, strict=True))


def two_sections(k: int, **assumption: object) -> Stage:
    """Two RC sections with a buffer between them, the second k times as fast."""
    build = StageBuilder("two poles")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("R1", "in", "a", "1 kohm")
    build.capacitor("C1", "a", "gnd", f"{k} nF")
    build.vcvs("E1", out=("b", "gnd"), control=("a", "gnd"), value=1)
    build.resistor("R2", "b", "out", "1 kohm")
    build.capacitor("C2", "out", "gnd", "1 nF")
    build.response("gain", source="VIN", to="out")
    build.assume("rule", **assumption)  # type: ignore[arg-type]
    return build.stage()


def error(k: int, quantity: str, **assumption: object) -> float:
    """The quantity's error in percent under that assumption alone."""
    stage = two_sections(k, **assumption)
    response = exact(stage, "gain")
    made = Approximator(response).under(read_assumptions(stage))
    assert made.response is not None, made.why
    ratio = number(made.response, quantity) / number(response, quantity)
    return 100 * (ratio.real - 1)


def rounding(printed: float) -> float:
    """Half of the last digit: these rows have one decimal below 10 % or where they print one, else none."""
    return 0.05 if abs(printed) < 10 or printed != round(printed) else 0.5


@pytest.mark.parametrize(("k", "printed"), by_ratio(P1_IS_THE_BANDWIDTH))
def test_bandwidth_taken_as_the_lower_pole(k: int, printed: float) -> None:
    assert error(k, "bandwidth", dominant_capacitor="C1") == pytest.approx(printed, abs=rounding(printed))


@pytest.mark.parametrize(("k", "printed"), by_ratio(BANDWIDTH_BY_B1))
def test_bandwidth_by_open_circuit_time_constants(k: int, printed: float) -> None:
    assert error(k, "bandwidth", dominant_pole=True) == pytest.approx(printed, abs=rounding(printed))


@pytest.mark.parametrize(("k", "printed"), by_ratio(P1_BY_B1))
def test_lower_pole_by_open_circuit_time_constants(k: int, printed: float) -> None:
    found = error(k, "p1", dominant_pole=True)
    assert found == pytest.approx(printed, abs=rounding(printed))
    assert found == pytest.approx(-100 / (1 + k))


@pytest.mark.parametrize(("k", "printed"), by_ratio(P2_BY_B1_OVER_B2))
def test_upper_pole_as_a_ratio_of_coefficients(k: int, printed: float) -> None:
    found = error(k, "p2", poles_far_apart=True)
    assert found == pytest.approx(printed, abs=rounding(printed))
    assert found == pytest.approx(100 / k)
