"""A stage for assumption tables that are refused, and the error that they give."""

from __future__ import annotations

from pathlib import Path

import pytest

from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.errors import InputError

FILE = "amp.stage.toml"
STAGE = """\
title = "Two stages"
[mosfet]
M1 = { gate = "in", drain = "a", source = "gnd" }
M2 = { gate = "a", drain = "out", source = "gnd" }
[resistor]
RL = ["out", "gnd"]
RS = ["in0", "in"]
[capacitor]
CC = ["a", "out"]
[inductor]
LX = ["out", "ext"]
[transformer]
T1 = { primary = ["ext", "gnd"], secondary = ["sec", "gnd"] }
[cccs]
F1 = { out = ["sec", "gnd"], control = "RL" }
[voltage_source]
VIN = ["in0", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }
[bias]
M1 = { gm = "1 mS", gds = "10 uS", cgd = "10 fF", cgs = "50 fF" }
M2 = { gm = "5 mS", gds = "60 uS" }
RL = "1 kohm"
RS = "1 kohm"
CC = "1 pF"
LX = "1 nH"
T1 = 1
F1 = 1

"""
FIRST = STAGE.count("\n") + 1  # the line of the first [[assumption]]


def stage_with(*tables: str) -> Stage:
    text = STAGE + "".join(f"[[assumption]]\n{table}\n" for table in tables)
    return parse_stage(text.encode(), file=FILE, folder=Path())


def refused(*tables: str) -> InputError:
    stage = stage_with(*tables)
    with pytest.raises(InputError) as caught:
        read_assumptions(stage)
    return caught.value
