"""Values of text books and open course notes, as stages and as numbers to meet (`examples.json`).

A circuit there has parts `[kind, label, nodes, value]` in SI units. A value has what is meant (`response`),
what its source prints (`published`, within `tolerance`), by which hand method (`assumption`), what nodal
analysis of the parts gives (`exact`), and its `source`; `from_memory` where it was recalled and not seen.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path
from typing import Any

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import GROUND, Stage
from symamp.exact.derive import derive
from symamp.exact.response import Response

# Labels that mean something else in a stage: a bare parameter's name, or a sign that no label has.
RENAMED = {"gm": "gmx", "ro": "Ro", "rpi": "Rpi", "rx": "Rx", "gmb": "gmbx", "Rs+rbb": "Rsrbb"}

IMPEDANCES = ("rin", "rout", "rcap", "zout_real", "zout_series_l")

Parts = list[tuple[str, str, list[str], float]]


@dataclass(frozen=True)
class Value:
    """One value of one circuit."""

    id: str
    circuit: str
    what: Mapping[str, Any]
    input: str
    output: str
    published: float
    tolerance: float
    method: str
    exact: float
    source: str
    from_memory: bool

    @property
    def said_by(self) -> str:
        """Where the value is from, for messages."""
        return f"{self.source}{' (from memory)' if self.from_memory else ''}"


@cache
def circuits() -> dict[str, Parts]:
    """The parts of every circuit, labels renamed where they must be."""
    return {
        circuit["circuit"]: [
            (kind, RENAMED.get(label, label), nodes, value) for kind, label, nodes, value in circuit["parts"]
        ]
        for circuit in _data()
    }


@cache
def values() -> dict[str, Value]:
    """Every value by its id."""
    found = {}
    for circuit in _data():
        for raw in circuit["values"]:
            found[raw["id"]] = Value(
                raw["id"], circuit["circuit"], raw["response"], raw["input"], raw["output"], raw["published"],
                raw["tolerance"], raw["assumption"], raw["exact"], raw["source"], raw["from_memory"],
            )  # fmt: skip
    return found


def _data() -> list[dict[str, Any]]:
    return json.loads(Path(__file__).with_name("examples.json").read_text(encoding="utf-8"))


@cache
def stage_of(value_id: str) -> Stage:
    """The value's circuit as a stage that asks for the one response the value is about, named `asked`."""
    return _stage(values()[value_id])


def gain_stage_of(value_id: str) -> Stage:
    """The same circuit as a stage that asks for the gain from its drive to its output."""
    return _stage(replace(values()[value_id], what={"type": "dc_gain"}))


def _stage(value: Value) -> Stage:
    parts = circuits()[value.circuit]
    build = StageBuilder(value.circuit)
    for kind, label, nodes, size in parts:
        _add_part(build, kind, label, nodes, size)
    build.response("asked", **_asked(value, parts))
    return build.stage()


def _add_part(build: StageBuilder, kind: str, label: str, nodes: list[str], size: float) -> None:
    add = getattr(build, kind)
    if len(nodes) == 4:
        add(label, out=tuple(nodes[:2]), control=tuple(nodes[2:]), value=size)
    elif kind.endswith("_source"):
        add(label, *nodes)  # what it drives with stands in the response
    else:
        add(label, *nodes, size)


def _asked(value: Value, parts: Parts) -> dict[str, Any]:
    what = value.what
    if what["type"] == "rcap":
        across = next(nodes for _, label, nodes, _ in parts if label == what["cap"])
        capacitors = [label for kind, label, _, _ in parts if kind == "capacitor"]
        return {"looking_into": tuple(across), "without": capacitors}
    if what["type"] == "rin":
        return {"looking_into": value.input}
    node = what.get("node") or what.get("output") or value.output
    if what["type"] in IMPEDANCES:
        beside = what.get("minus_parallel_ohm")
        taken_off = [
            label
            for kind, label, nodes, size in parts
            if kind == "resistor" and set(nodes) == {node, GROUND} and size == beside
        ]
        return {"looking_into": node, "without": taken_off[:1]}
    drives = {label: size for kind, label, _, size in parts if kind.endswith("_source") and size}
    return {"source": drives, "to": node}


@cache
def exact_response(value_id: str) -> Response:
    """The exact response that the value is about."""
    stage = stage_of(value_id)
    return derive(stage, stage.asked["asked"])


def figure(value: Value, response: Response) -> float:
    """The value's number, read off a response that stands for its circuit."""
    return READ[value.what["type"]](response, value.what)


Reader = Callable[[Response, Mapping[str, Any]], float]


def number(response: Response, quantity: str) -> complex:
    """A quantity's value at the bias point; it must have one."""
    found = response.quantity(quantity)
    assert found.value is not None, f"{quantity}: {found.why}"
    return found.value


def _of(quantity: str, scale: float = 1.0) -> Reader:
    return lambda response, what: scale * number(response, quantity).real


def _root(kind: str, face: str) -> Reader:
    return lambda response, what: number(response, f"{kind}{what['index'] + 1}.{face}").real


def _resistance(response: Response, what: Mapping[str, Any]) -> float:
    return number(response, "dc").real - what.get("minus_ohm", 0.0)


def _at(response: Response, what: Mapping[str, Any]) -> complex:
    return response.at(what["hz"])


def _cmrr(response: Response, what: Mapping[str, Any]) -> float:
    of_difference = next(v.id for v in values().values() if v.circuit == what["dm_circuit"])
    differential = number(exact_response(of_difference), "dc")
    return 20 * math.log10(abs(differential / number(response, "dc")))


READ: dict[str, Reader] = {
    "dc_gain": _of("dc"),
    "abs_dc_gain": lambda response, what: abs(number(response, "dc")),
    "pole_hz": _root("p", "hz"),
    "pole_rad": _root("p", "magnitude"),
    "zero_hz": _root("z", "hz"),
    "zero_rad": _root("z", "magnitude"),
    "f3db_hz": _of("bandwidth"),
    "w3db_rad": _of("bandwidth", 2 * math.pi),
    "ft_hz": _of("unity_gain_frequency"),
    "pm_deg": _of("phase_margin"),
    "b1_s": _of("b1"),
    "b2_s2": _of("b2"),
    "rin": _resistance,
    "rout": _resistance,
    "rcap": _resistance,
    "zout_real": lambda response, what: _at(response, what).real,
    "zout_series_l": lambda response, what: _at(response, what).imag / (2 * math.pi * what["hz"]),
    "cmrr_db": _cmrr,
}


def with_assumptions(stage: Stage, tables: list[dict[str, Any]]) -> Stage:
    """The stage with these assumptions, written as in a stage file; each gets a name."""
    named = tuple({"name": f"step {i}", **table} for i, table in enumerate(tables, 1))
    return replace(stage, assumptions=named)
