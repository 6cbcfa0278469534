"""Open-circuit time constants: by hand, of what a response does not see, and as a sum that is b1."""

from __future__ import annotations

from fractions import Fraction

import pytest
from flint import fmpq_poly

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import derive
from symamp.exact.system import build_system
from symamp.exact.time_constants import TimeConstant, time_constants


def constants(stage: Stage, name: str = "gain") -> dict[str, TimeConstant]:
    return {found.part: found for found in time_constants(stage, stage.asked[name])}


def driven(title: str = "driven") -> StageBuilder:
    build = StageBuilder(title)
    build.voltage_source("VIN", "in", "gnd")
    return build


def test_a_part_that_the_response_does_not_see_sees_its_own_resistance() -> None:
    """A buffer drives the output's RC and another one, whose pole cancels from the gain."""
    build = driven()
    build.vcvs("EB", out=("b", "gnd"), control=("in", "gnd"), value=1)
    build.resistor("RA", "b", "out", "1 kohm")
    build.resistor("RH", "b", "h", "3 kohm")
    build.capacitor("CA", "out", "gnd", "1 pF")
    build.capacitor("CH", "h", "gnd", "1 pF")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    assert len(derive(stage, stage.asked["gain"]).poles()) == 1
    found = constants(stage)
    assert (found["CA"].resistance, found["CA"].seconds, found["CA"].share) == (1000, 1e-9, 0.25)
    assert (found["CH"].resistance, found["CH"].seconds, found["CH"].share) == (3000, 3e-9, 0.75)
    shape = found["CH"].formula
    assert shape is not None
    assert shape.text() == "RH"


def test_capacitors_without_a_path_at_dc_see_an_infinite_resistance() -> None:
    build = driven()
    build.capacitor("CA", "in", "out", "1 pF")
    build.capacitor("CB", "out", "gnd", "2 pF")
    build.response("gain", source="VIN", to="out")
    for found in constants(build.stage()).values():
        assert (found.resistance, found.seconds, found.share) == (None, None, None)
        assert "infinite" in found.why


def test_an_inductor_counts_with_l_over_r() -> None:
    """RS in series with L into RL beside CL: L/(RS + RL), CL·(RS·RL/(RS + RL))."""
    build = driven()
    build.resistor("RS", "in", "a", "100 ohm")
    build.inductor("LA", "a", "out", "2 uH")
    build.resistor("RL", "out", "gnd", "300 ohm")
    build.capacitor("CL", "out", "gnd", "4 pF")
    build.response("gain", source="VIN", to="out")
    found = constants(build.stage())
    assert (found["LA"].resistance, found["LA"].seconds) == (400, 5e-9)
    assert (found["CL"].resistance, found["CL"].seconds) == (75, 3e-10)
    assert found["LA"].share == pytest.approx(50 / 53, rel=1e-15)


def test_a_controlled_source_can_make_a_resistance_negative() -> None:
    build = StageBuilder("negative")
    build.current_source("IS", "gnd", "out")
    build.resistor("RA", "out", "gnd", "1 kohm")
    build.vccs("GX", out=("out", "gnd"), control=("out", "gnd"), value="-2 mS")
    build.capacitor("CA", "out", "gnd", "1 pF")
    build.response("gain", source="IS", to="out")
    assert constants(build.stage())["CA"].resistance == -1000


def test_the_time_constants_of_a_network_add_up_to_its_b1() -> None:
    build = driven()
    build.resistor("RS", "in", "g", "5 kohm")
    build.mosfet(
        "M1", gate="g", drain="x", source="gnd", gm="4 mS", gds="0.2 mS", cgs="30 fF", cgd="5 fF", cdb="7 fF"
    )
    build.mosfet("M2", gate="gnd", drain="out", source="x", gm="3 mS", gds="0.3 mS", gmb=0, csb="9 fF")
    build.bjt("Q3", base="out", collector="gnd", emitter="e", gm="40 mS", beta=90, rx="150 ohm", cpi="2 pF")
    build.resistor("RE", "e", "gnd", "700 ohm")
    build.inductor("LX", "out", "gnd", "3 uH")
    build.response("gain", source="VIN", to="e")
    stage = build.stage()
    graph = ratio_of(build_system(stage), stage.asked["gain"]).graph
    entries = []
    for entry in graph.entries:
        powers = [Fraction(0), Fraction(0)]
        for coefficient, symbol, power, s_power in entry:
            powers[s_power] += coefficient * (stage.bias[symbol] ** power if symbol else 1)
        entries.append(_polynomial(powers))
    _, below = graph.walk(entries, fmpq_poly([1]), fmpq_poly([0]))
    b1 = below[1] / below[0]
    found = constants(stage)
    assert len(found) == 6
    assert sum(one.seconds or 0 for one in found.values()) == pytest.approx(
        float(b1.p) / float(b1.q), rel=1e-12
    )
    assert sum(one.share or 0 for one in found.values()) == pytest.approx(1, rel=1e-12)


def _polynomial(powers: list[Fraction]) -> fmpq_poly:
    whole = powers[0].denominator * powers[1].denominator
    return fmpq_poly([int(p * whole) for p in powers]) / whole
