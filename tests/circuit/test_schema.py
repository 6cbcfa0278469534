"""The JSON Schema accepts the stage files that the design shows and refuses those with a wrong shape."""

from __future__ import annotations

import copy
import tomllib
from typing import Any

import jsonschema
import pytest

from symamp.circuit.kinds import KINDS
from symamp.circuit.schema import ASSUMPTION_KEYS, stage_schema

# The example of the design's section 3.
CASCODE = """
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
mid  = { from = "VIN", to = "x" }
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
name = "output conductance is negligible against transconductance"
small = ["gds"]
against = ["gm"]

[[assumption]]
name = "no body effect"
neglect = ["gmb"]

[[claim]]
about = "gain.dc"
formula = "-gm1*gm2*ro1*ro2"
within = "10 %"
"""


@pytest.fixture(scope="module")
def validator() -> jsonschema.Draft202012Validator:
    schema = stage_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


@pytest.fixture
def document() -> dict[str, Any]:
    return tomllib.loads(CASCODE)


def test_the_designs_example_is_valid(
    validator: jsonschema.Draft202012Validator, document: dict[str, Any]
) -> None:
    assert [error.message for error in validator.iter_errors(document)] == []


PARTS = {
    "resistor": ["a", "b"],
    "capacitor": ["a", "b"],
    "inductor": ["a", "b"],
    "voltage_source": ["a", "b"],
    "current_source": ["a", "b"],
    "mosfet": {"gate": "a", "drain": "b", "source": "gnd"},
    "bjt": {"base": "a", "collector": "b", "emitter": "gnd"},
    "vccs": {"out": ["a", "b"], "control": ["c", "gnd"]},
    "vcvs": {"out": ["a", "b"], "control": ["c", "gnd"]},
    "cccs": {"out": ["a", "b"], "control": "RS"},
    "ccvs": {"out": ["a", "b"], "control": ["c", "d"]},
    "opamp": {"plus": "a", "minus": "b", "out": "c"},
    "transformer": {"primary": ["a", "b"], "secondary": ["c", "d"]},
}


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_has_its_section(validator: jsonschema.Draft202012Validator, kind: str) -> None:
    part = PARTS[kind]
    assert validator.is_valid({kind: {"XY": part}})
    assert not validator.is_valid({kind: {"X": part}})  # a label of one letter
    assert not validator.is_valid({kind: {"XY": "a"}})
    assert not validator.is_valid({kind: {"XY": ["a", "b", "c"]}})
    if isinstance(part, dict):
        assert not validator.is_valid({kind: {"XY": {**part, "other": "a"}}})
        first = next(iter(part))
        assert not validator.is_valid({kind: {"XY": {k: v for k, v in part.items() if k != first}}})


def test_the_body_alone_may_be_left_out(validator: jsonschema.Draft202012Validator) -> None:
    assert validator.is_valid({"mosfet": {"M1": {**PARTS["mosfet"], "body": "b"}}})  # type: ignore[dict-item]


ASSUMPTIONS: dict[str, Any] = {
    "equal": ["M1", "M2"],
    "set": {"Rz": "1/gm2", "gm4": "2*gm3"},
    "neglect": ["gmb"],
    "open": ["RB"],
    "short": ["CB"],
    "dominant_capacitor": "CL",
    "miller": {"part": "CC", "from": "g", "to": "out", "ends": "both"},
    "small": ["gds"],
    "against": ["gm"],
    "dominant_pole": True,
    "poles_far_apart": True,
    "band": "10 MHz",
}


@pytest.mark.parametrize("entry", ASSUMPTION_KEYS, ids=lambda entry: entry.key)
def test_every_assumption_key(validator: jsonschema.Draft202012Validator, entry: Any) -> None:
    written = {"name": "n", "for": ["gain"], entry.key: ASSUMPTIONS[entry.key]}
    if entry.partner:
        assert not validator.is_valid({"assumption": [written]})
        written[entry.partner] = ASSUMPTIONS[entry.partner]
    assert validator.is_valid({"assumption": [written]})
    assert not validator.is_valid({"assumption": [{**written, entry.key: {"x": {}}}]})
    assert not validator.is_valid({"assumption": [{k: v for k, v in written.items() if k != "name"}]})
    for other in entry.excludes:
        assert not validator.is_valid({"assumption": [{**written, other: ASSUMPTIONS[other]}]})


def change(document: dict[str, Any], path: tuple[Any, ...], value: Any) -> dict[str, Any]:
    changed = copy.deepcopy(document)
    place = changed
    for key in path[:-1]:
        place = place[key]
    place[path[-1]] = value
    return changed


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("mosfets",), {}),
        (("title",), 3),
        (("response", "gain"), {"from": "VIN"}),
        (("response", "gain"), {"to": "out"}),
        (("response", "gain"), {"from": "VIN", "to": "out", "looking_into": "out"}),
        (("response", "gain"), {"from": {}, "to": "out"}),
        (("response", "gain"), {"from": "VIN", "to": "out", "without": "RL"}),
        (("bias", "M1"), {"gn": "4.1 mS"}),
        (("bias", "CL"), ["3.3 pF"]),
        (("bias", "CL"), "much"),
        (("bias", "M1"), {}),
        (("response", "gain"), {"from": "VIN", "to": "out put"}),
        (("span", "gm1"), ["2 mS"]),
        (("span", "gm1"), "30"),
        (("span", "gm1"), {"follow": "gm2"}),
        (("span", "table"), "corners.csv"),  # beside box sides
        (("assumption", 0), {"name": "nothing assumed"}),
        (("assumption", 0), {"name": "n", "dominant_pole": False}),
        (("assumption", 0), {"name": "n", "miller": {"part": "CC", "from": "g", "to": "o", "ends": "to"}}),
        (("claim", 0), {"about": "gain.dc", "formula": "1"}),
        (("claim", 0), {"about": "gain.dc", "formula": "1", "within": "1 %", "by": "x"}),
    ],
)
def test_a_wrong_shape_is_refused(
    validator: jsonschema.Draft202012Validator, document: dict[str, Any], path: tuple[Any, ...], value: Any
) -> None:
    assert not validator.is_valid(change(document, path, value))


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("response", "gain"), {"from": {"VP": 0.5, "VN": -0.5}, "to": ["a", "b"], "without": ["RL"]}),
        (("response", "rout"), {"looking_into": ["a", "b"], "without": []}),
        (("bias", "M1"), {"gm": 0.004, "ro": "5 kohm"}),
        (("span",), {"table": "corners.csv"}),
        (("span", "gm1"), [0.002, 0.008]),
    ],
)
def test_other_right_shapes(
    validator: jsonschema.Draft202012Validator, document: dict[str, Any], path: tuple[Any, ...], value: Any
) -> None:
    assert validator.is_valid(change(document, path, value))


def test_each_call_gives_a_schema_of_its_own() -> None:
    stage_schema()["properties"].clear()
    assert "mosfet" in stage_schema()["properties"]
