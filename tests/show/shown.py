"""Stages and the command line, as the tests of what is shown use them."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from click.testing import CliRunner, Result

from symamp.cli import cli

CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
rout = { looking_into = "out" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS", csb = "60 fF" }
CL = "3.3 pF"
"""

SPAN = """
[span]
gm1  = ["2 mS", "8 mS"]
gds1 = "30 %"
gds2 = { follows = "gds1" }
gm2  = "20 %"
"""

ASSUMPTIONS = """
[[assumption]]
name = "output conductance is negligible against transconductance"
small = ["gds"]
against = ["gm"]

[[assumption]]
name = "no body effect"
neglect = ["gmb"]

[[assumption]]
name = "one pole"
dominant_pole = true
"""


def run(*arguments: str) -> Result:
    """`symamp` with these arguments; an error that is not caught fails the test that asked."""
    return CliRunner().invoke(cli, list(arguments), catch_exceptions=False)


def saved(folder: Path, *texts: str) -> str:
    """A stage file of these texts; its path."""
    path = folder / "my.stage.toml"
    path.write_text("".join(texts), encoding="utf-8")
    return str(path)


def answer(*arguments: str) -> Any:
    """The one JSON object that the command prints."""
    result = run(*arguments, "--json")
    assert result.exit_code == 0, result.stderr
    assert result.stderr == ""
    return json.loads(result.stdout, parse_constant=_no_constant)


def _no_constant(text: str) -> None:
    raise AssertionError(f"{text} is no strict JSON")


def walk(found: Any, place: str = "") -> Iterator[tuple[str, Any, Any]]:
    """(place, object or list, key or index) of every value in a JSON tree."""
    items = found.items() if isinstance(found, dict) else enumerate(found) if isinstance(found, list) else ()
    for key, value in items:
        yield f"{place}.{key}", found, key
        yield from walk(value, f"{place}.{key}")
