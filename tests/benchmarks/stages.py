"""The stages that are measured: the cascode here, the large ones as the tests of `exact` have them."""

from __future__ import annotations

import sys
from collections.abc import Callable
from importlib.util import module_from_spec, spec_from_file_location
from pathlib import Path
from typing import Any

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage

QUANTITIES = ("dc", "p1", "p2", "z1", "bandwidth", "unity_gain_frequency")


def _cascode() -> StageBuilder:
    """Two MOSFETs with all their capacitances into a capacitive load, five assumptions and a box."""
    build = StageBuilder("cascode with all its capacitances")
    first: dict[str, Any] = {"gm": "4.1 mS", "gds": "0.21 mS", "gmb": "0.7 mS"}
    second: dict[str, Any] = {"gm": "3.9 mS", "gds": "0.24 mS", "gmb": "0.62 mS"}
    first |= {"cgs": "30 fF", "cgd": "9 fF", "cdb": "12 fF", "csb": "10 fF"}
    second |= {"cgs": "28 fF", "cgd": "8 fF", "cdb": "11 fF", "csb": "10 fF"}
    build.mosfet("M1", gate="in", drain="x", source="gnd", **first)
    build.mosfet("M2", gate="gnd", drain="out", source="x", **second)
    build.capacitor("CL", "out", "gnd", "0.3 pF")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    build.span("gm1", "2 mS", "8 mS")
    build.span("gm2", "2 mS", "8 mS")
    build.span_percent("gds1", "30 %")
    build.follows("gds2", "gds1")
    build.span("CL", "0.1 pF", "1 pF")
    build.assume("output conductance is negligible", small="gds", against="gm")
    build.assume("no body effect", neglect="gmb")
    build.assume("no feedforward", neglect="cgd1")
    build.assume("the load outweighs the drain", small=["cgd2", "cdb2"], against="CL")
    build.assume("poles lie far apart", poles_far_apart=True)
    return build


def cascode() -> Stage:
    """The cascode."""
    return _cascode().stage()


def cascode_file() -> str:
    """The text of the cascode's stage file."""
    return _cascode().toml()


def bipolar_opamp(*, with_rx: bool) -> Stage:
    """An op amp of 20 bipolar transistors."""
    stage: Stage = _large().bipolar_opamp(with_rx=with_rx)
    return stage


def folded_cascode() -> Stage:
    """A single-ended folded-cascode amplifier of 10 MOSFETs."""
    stage: Stage = _large().folded_cascode()
    return stage


# What one process alone is asked for, by name.
STAGES: dict[str, Callable[[], Stage]] = {"cascode": cascode, "folded cascode": folded_cascode}


def _large() -> Any:
    """tests/exact/big_stages.py, by its path, so that it makes no odds from where the benchmarks are started."""
    name = "symamp_big_stages"
    if name not in sys.modules:
        path = Path(__file__).parents[1] / "exact" / "big_stages.py"
        spec = spec_from_file_location(name, path)
        assert spec is not None
        assert spec.loader is not None
        sys.modules[name] = module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]
