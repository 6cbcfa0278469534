"""Stages that the tests of the testing room share; all values invented."""

from __future__ import annotations

import importlib.util
from fractions import Fraction
from pathlib import Path
from types import ModuleType

from symamp.circuit.stage import Asked, Stage
from symamp.circuit.stagefile import parse_stage

COMMON_SOURCE = """\
title = "Common-source stage"

[mosfet]
M1 = { gate = "in", drain = "out", source = "gnd" }

[resistor]
RL = ["out", "gnd"]

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
"""

COMMON_SOURCE_BIAS = """
[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
RL = "1.2 kohm"
CL = "3.3 pF"
"""

COMMON_SOURCE_SPAN = """
[span]
gm1 = ["2 mS", "8 mS"]
gds1 = ["0.1 mS", "1 mS"]
"""

CASCODE = """\
title = "Cascode"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
M1 = { gm = "4 mS", gds = "0.2 mS" }
M2 = { gm = "4 mS", gds = "0.25 mS", gmb = "0.6 mS" }
CL = "3.3 pF"
"""

CASCODE_SPAN = """
[span]
gm1  = ["2 mS", "8 mS"]
ro1  = ["2 kohm", "20 kohm"]
gds2 = { follows = "gds1" }
gmb2 = "50 %"
"""

# A bipolar stage with capacitances, whose span is in the words of a data sheet.
COMMON_EMITTER = """\
title = "Common-emitter stage"

[bjt]
Q1 = { base = "b", collector = "out", emitter = "gnd" }

[resistor]
RS = ["in", "b"]
RC = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
Q1 = { gm = "40 mS", beta = "160", ro = "90 kohm" }
RS = "2.2 kohm"
RC = "6.8 kohm"

[span]
gm1   = ["20 mS", "60 mS"]
beta1 = ["100", "250"]
"""


def stage_of(text: str, folder: Path = Path()) -> Stage:
    """The plain stage of a stage file's text."""
    return parse_stage(text.encode(), file=None, folder=folder)


def common_source(span: bool = True) -> Stage:
    """A common-source stage with a bias, and a span if asked for."""
    return stage_of(COMMON_SOURCE + COMMON_SOURCE_BIAS + (COMMON_SOURCE_SPAN if span else ""))


def solved_by_tableau(stage: Stage, asked: Asked, omega: Fraction) -> complex:
    """The response at s = jω by the independent solver that the tests of `exact` have."""
    tableau = _tableau()
    with tableau.digits(tableau.DIGITS):
        return complex(tableau.Tableau(stage, asked).response(omega))


def _tableau() -> ModuleType:
    path = Path(__file__).resolve().parents[1] / "exact" / "tableau.py"
    spec = importlib.util.spec_from_file_location("tableau_for_testing", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module
