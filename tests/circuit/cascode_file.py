"""The stage file that the tests of reading begin from."""

from __future__ import annotations

from pathlib import Path

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage

CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x", body = "gnd" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
late = { from = "VIN", to = "out", over = "x" }
rout = { looking_into = "out" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"

[span]
gm1  = ["2 mS", "8 mS"]
gds1 = "30 %"
gds2 = { follows = "gds1" }

[[assumption]]
name = "no body effect"
neglect = ["gmb"]

[[claim]]
about = "gain.dc"
formula = "-gm1*gm2*ro1*ro2"
within = "10 %"
"""

NO_BIAS = CASCODE[: CASCODE.index("[bias]")]


def read(text: str, folder: Path = Path()) -> Stage:
    return parse_stage(text.encode(), file="my.stage.toml", folder=folder)
