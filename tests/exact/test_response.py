"""A response at its bias point: the order of its roots, and refusals in words that fit."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from symamp.circuit.builder import StageBuilder
from symamp.errors import StageError
from symamp.exact.derive import derive
from symamp.exact.resistive import in_resistances


def test_pairs_of_one_magnitude_stay_together() -> None:
    """Two buffered sections, s² + 1.2·s + 1 and s² + 1.6·s + 1: four poles on the unit circle."""
    build = StageBuilder("two sections")
    build.voltage_source("VIN", "in", "gnd")
    for name, below, above, damping in (("A", "in", "a", "1.2 ohm"), ("B", "b", "out", "1.6 ohm")):
        build.resistor(f"R{name}", below, f"x{name}", damping)
        build.inductor(f"L{name}", f"x{name}", above, "1 H")
        build.capacitor(f"C{name}", above, "gnd", "1 F")
    build.vcvs("EB", out=("b", "gnd"), control=("a", "gnd"), value=1)
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    found = derive(stage, stage.asked["gain"]).poles()
    assert found == pytest.approx([-0.6 + 0.8j, -0.6 - 0.8j, -0.8 + 0.6j, -0.8 - 0.6j], rel=1e-15)


def test_an_impedance_that_is_always_zero_is_refused_as_held_by_something() -> None:
    build = StageBuilder("virtual ground")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("RA", "in", "m")
    build.resistor("RB", "m", "out")
    build.opamp("OA", plus="gnd", minus="m", out="out")
    build.response("zin", looking_into="m")
    stage = build.stage()
    with pytest.raises(StageError, match=r"identically zero: no current raises a voltage there; .* op amp"):
        derive(stage, stage.asked["zin"])


def test_coefficients_count_their_units_from_the_one_that_is_made_1() -> None:
    """A capacitor alone, 1/(s·CL): b1 is 1 without a unit, and a0 = 1/CL an ohm per second."""
    build = StageBuilder("integrator")
    build.capacitor("CL", "out", "gnd", "2 pF")
    build.response("zout", looking_into="out")
    stage = build.stage()
    zout = derive(stage, stage.asked["zout"])
    found = {name: zout.quantity(name) for name in ("a0", "a1", "b0", "b1", "b2")}
    assert [one.value for one in found.values()] == [5e11, 0, 0, 1, 0]
    assert [one.unit for one in found.values()] == ["ohm/s", "ohm", "1/s", "", "s"]


def test_another_bias_may_be_given_by_alias() -> None:
    build = StageBuilder("common emitter")
    build.voltage_source("VIN", "in", "gnd")
    build.resistor("RS", "in", "b", "1 kohm")
    build.bjt("Q1", base="b", collector="out", emitter="gnd", gm="40 mS", beta=100, ro="50 kohm")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    gain = derive(stage, stage.asked["gain"])

    def by_hand(gm: float, rpi: float, ro: float) -> float:
        return -gm * ro * rpi / (rpi + 1000)

    assert gain.at(0) == pytest.approx(by_hand(40e-3, 2500, 50e3))
    assert gain.at(0, {"ro1": 20e3, "rpi1": 1000}) == pytest.approx(by_hand(40e-3, 1000, 20e3))
    assert gain.at(0, {"beta1": [50, 200], "gm1": 20e-3}) == pytest.approx(
        [by_hand(20e-3, 2500, 50e3), by_hand(20e-3, 10e3, 50e3)]
    )
    assert in_resistances(gain).at(0, {"ro1": 20e3}) == pytest.approx(by_hand(40e-3, 2500, 20e3))
    with pytest.raises(StageError, match="both set gpi1"):
        gain.at(0, {"beta1": 50, "rpi1": 1000})
    with pytest.raises(StageError, match="'ro2' is no symbol"):
        gain.at(0, {"ro2": 1e3})


def test_a_good_stage_is_derived_without_the_parser_that_finds_lines(tmp_path: Path) -> None:
    """Lines are looked up for messages alone; the parser for it would cost every start its time."""
    path = tmp_path / "one.stage.toml"
    path.write_text(
        '[resistor]\nR1 = ["in", "out"]\n[capacitor]\nC1 = ["out", "gnd"]\n[voltage_source]\nVIN = ["in", "gnd"]\n'
        '[response]\ngain = { from = "VIN", to = "out" }\n',
        encoding="utf-8",
    )
    code = (
        "import sys, symamp; symamp.load(sys.argv[1]).response('gain'); "
        "print([name for name in sys.modules if name.startswith('tree_sitter')])"
    )
    done = subprocess.run([sys.executable, "-c", code, str(path)], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"
