"""The map of a real claim: drawn from a stage, its frontier checked against the claim's error at single points."""

from __future__ import annotations

from fractions import Fraction

import pytest

from symamp.circuit.builder import StageBuilder
from symamp.exact.derive import derive
from symamp.judge.check import examine
from symamp.judge.claim_reading import claim_of
from symamp.judge.error_map import error_map
from symamp.show.maps import map_of
from tests.show.drawn import assert_whole, legend_words, words_on


def cascode() -> StageBuilder:
    b = StageBuilder("Cascode")
    b.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS")
    b.mosfet("M2", gate="gnd", drain="out", source="x", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS")
    b.voltage_source("VIN", "in", "gnd")
    b.response("gain", source="VIN", to="out")
    return b


def test_a_claim_over_two_symbols() -> None:
    stage = cascode().stage()
    (found,) = examine(stage, [claim_of(stage, "gain.dc = -gm1*gm2*ro1*ro2", "10 %")])
    picture = map_of(error_map(found, "gm2", "gds2", 41))
    assert_whole(picture)
    assert picture.name == "gain.dc-gm2-gds2"
    figure = picture.figure()
    assert legend_words(figure) == ["frontier, error −10 %", "bias point"]
    assert "−10 %" in words_on(figure)
    (line,) = (line for line in figure.axes[0].get_lines() if line.get_gid() == "frontier")
    exact = derive(stage, stage.asked["gain"])
    for gm2, gds2 in line.get_xydata()[::10]:
        true = exact.at(0, {"gm2": gm2, "gds2": gds2}).real
        claimed = -float(stage.bias["gm1"] / stage.bias["gds1"]) * gm2 / gds2
        assert claimed / true - 1 == pytest.approx(-0.1, abs=5e-4)
        # The same in closed form: −(gmb2 + gds2)/(gm2 + gmb2 + gds2).
        more = float(stage.bias["gmb2"]) + gds2
        assert -more / (gm2 + more) == pytest.approx(-0.1, abs=5e-4)
    assert stage.bias["gmb2"] == Fraction(62, 100000)
