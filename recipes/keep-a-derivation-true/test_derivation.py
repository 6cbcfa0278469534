"""The derivation in the design note, held against the stage file."""

from pathlib import Path

from hypothesis import given

import symamp
from symamp.testing import assert_derivation, bias_points

stage = symamp.load(Path(__file__).with_name("hydrophone.stage.toml"))


def test_gain():
    assert_derivation(stage, "gain.dc", "-gm1*RD/(1 + gm1*RS + gds1*(RD + RS))")


def test_output_resistance():
    assert_derivation(stage, "rout.dc", "RD || (ro1 + RS + gm1*ro1*RS)")


def test_response():
    assert_derivation(
        stage,
        "gain",
        "-gm1*RD/(1 + gm1*RS + gds1*(RD + RS) + s*CL*RD*(1 + gm1*RS + gds1*RS))",
    )


@given(point=bias_points(stage))
def test_gain_stays_below_the_ratio_of_resistors(point):
    gain = stage.response("gain").at(0, bias=point)
    assert abs(gain) < point["RD"] / point["RS"]
