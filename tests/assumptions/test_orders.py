"""Each kind's declared order of error, measured: shrink the ratio that it names, and fit the slope of the error.

The ratio is shrunk by its own definition, as a number t in the bias; the error is |approximate − exact|/|exact|.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from typing import Any

import assumed_stages as stages
import numpy as np
import pytest

from symamp.assumptions.apply import Approximator
from symamp.assumptions.kinds import KEYS, KINDS
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage

Change = Callable[[dict[str, Fraction], Fraction], dict[str, Fraction]]
SMALL = [Fraction(1, 10**k) for k in (3, 4, 5, 6)]


def scale(*names: str, power: int = 1) -> Change:
    """The symbols times t**power."""
    return lambda bias, t: {name: bias[name] * t**power for name in names}


def near(name: str, other: Callable[[dict[str, Fraction]], Fraction]) -> Change:
    """The symbol differs from another value by the ratio t."""
    return lambda bias, t: {name: other(bias) * (1 + t)}


# kind → (stage, response, assumption, quantity, how t shrinks the ratio)
ROWS: list[tuple[str, Any, str, dict[str, Any], str, Change]] = [
    (
        "equal",
        stages.cascode,
        "gain",
        {"equal": ["M1", "M2"]},
        "dc",
        lambda b, t: equal(b, t, ("gm", "gds"), 1, 2),
    ),
    (
        "equal",
        stages.differential_pair,
        "gain",
        {"equal": ["M1", "M2"]},
        "dc",
        lambda b, t: equal(b, t, ("gm", "gds"), 1, 2),
    ),
    (
        "equal",
        stages.two_stage,
        "gain",
        {"equal": ["M1", "M6"]},
        "p1",
        lambda b, t: equal(b, t, ("gm", "gds"), 1, 6),
    ),
    (
        "set",
        stages.two_stage,
        "gain",
        {"set_": {"RZ": "0.5/gm6"}},
        "z1",
        near("RZ", lambda b: 1 / (2 * b["gm6"])),
    ),
    ("set", stages.cascode, "gain", {"set_": {"gmb2": "gm2/5"}}, "dc", near("gmb2", lambda b: b["gm2"] / 5)),
    (
        "set",
        stages.follower,
        "gain",
        {"set_": {"RS": "1/gm1"}},
        "bandwidth",
        near("RS", lambda b: 1 / b["gm1"]),
    ),
    ("neglect", stages.cascode, "gain", {"neglect": "gmb"}, "dc", scale("gmb2")),
    ("neglect", stages.common_source, "gain", {"neglect": "gds"}, "dc", scale("gds1")),
    ("neglect", stages.follower, "gain", {"neglect": "cgd"}, "bandwidth", scale("cgd1")),
    ("open", stages.common_source, "gain", {"open_": "RL"}, "dc", scale("RL", power=-1)),
    ("open", stages.degenerated, "gain", {"open_": "RB"}, "at(10 kHz)", scale("RB", power=-1)),
    ("open", stages.follower, "gain", {"open_": "CL"}, "at(1 GHz)", scale("CL")),
    ("short", stages.common_source, "gain", {"short": "RS"}, "bandwidth", scale("RS")),
    ("short", stages.degenerated, "gain", {"short": "CE"}, "at(10 kHz)", scale("CE", power=-1)),
    ("short", stages.two_stage, "gain", {"short": "RZ"}, "z1", scale("RZ")),
    (
        "dominant_capacitor",
        stages.common_source,
        "gain",
        {"dominant_capacitor": "CL"},
        "bandwidth",
        scale("cgs1", "cgd1"),
    ),
    ("dominant_capacitor", stages.cascode, "gain", {"dominant_capacitor": "CL"}, "p1", scale("cdb1", "cgs2")),
    ("dominant_capacitor", stages.two_stage, "gain", {"dominant_capacitor": "CC"}, "p1", scale("C1", "CL")),
    (
        "miller",
        stages.common_source,
        "gain",
        {"miller": {"part": "cgd1", "from": "g", "to": "out"}},
        "p1",
        scale("RS", power=-1),
    ),
    (
        "miller",
        stages.two_stage,
        "gain",
        {"miller": {"part": "CC", "from": "a", "to": "r"}, "short": "RZ"},
        "p1",
        scale("gds1"),
    ),
    (
        "miller",
        stages.follower,
        "gain",
        {"miller": {"part": "cgs1", "from": "g", "to": "out"}},
        "p1",
        scale("RG", power=-1),
    ),
    ("dominance", stages.cascode, "gain", {"small": "gds", "against": "gm"}, "dc", scale("gds1", "gds2")),
    ("dominance", stages.follower, "gain", {"small": "1", "against": "gm1*RS"}, "dc", scale("RS", power=-1)),
    (
        "dominance",
        stages.differential_pair,
        "gain",
        {"small": "gds", "against": "gm"},
        "dc",
        scale("gds1", "gds2", "gds3", "gds4", "gds5"),
    ),
    (
        "dominant_pole",
        stages.common_source,
        "gain",
        {"dominant_pole": True},
        "bandwidth",
        scale("RS", power=-1),
    ),
    ("dominant_pole", stages.cascode, "gain", {"dominant_pole": True}, "p1", scale("cdb1", "cgs2")),
    ("dominant_pole", stages.two_stage, "gain", {"dominant_pole": True}, "p1", scale("gds1")),
    ("poles_far_apart", stages.common_source, "gain", {"poles_far_apart": True}, "p1", scale("RS", power=-1)),
    ("poles_far_apart", stages.cascode, "gain", {"poles_far_apart": True}, "p2", scale("cdb1", "cgs2")),
    ("poles_far_apart", stages.two_stage, "gain", {"poles_far_apart": True}, "p1", scale("gds1")),
    ("band", stages.common_source, "gain", {"band": "1 MHz"}, "at(1 MHz)", scale("RS", "CL", "cgd1")),
    ("band", stages.cascode, "gain", {"band": "100 MHz"}, "at(100 MHz)", scale("gds1", "cdb1", "cgs2")),
    ("band", stages.follower, "gain", {"band": "1 MHz"}, "at(1 MHz)", scale("RG", "CL", "cgs1")),
]


def equal(
    bias: dict[str, Fraction], t: Fraction, parameters: tuple[str, ...], leader: int, other: int
) -> Any:
    """The other part's parameters differ from the leader's by the ratio t."""
    return {f"{p}{other}": bias[f"{p}{leader}"] * (1 + t) for p in parameters}


def error(stage: Stage, bias: dict[str, Fraction], name: str, quantity: str) -> float:
    stage = replace(stage, bias=bias)
    exact = stages.exact(stage, name)
    made = Approximator(exact).under(read_assumptions(stage))
    assert made.response is not None, made.why
    a, e = (r.quantity(quantity).value for r in (made.response, exact))
    return abs(a - e) / abs(e)


def test_every_kind_is_measured_on_three_stages():
    by_kind: dict[str, set[Any]] = {kind: set() for kind in KINDS}
    for kind, make, *_ in ROWS:
        by_kind[kind].add(make)
    assert all(len(found) >= 3 for found in by_kind.values()), by_kind


@pytest.mark.parametrize("row", ROWS, ids=[f"{r[0]}-{r[1].__name__}-{r[4]}" for r in ROWS])
def test_declared_order_is_measured(row):
    kind, make, name, assumption, quantity, change = row
    b = make()
    b.assume("it", **assumption)
    stage = b.stage()
    errors = [error(stage, {**stage.bias, **change(dict(stage.bias), t)}, name, quantity) for t in SMALL]
    slope = np.polyfit(np.log([float(t) for t in SMALL]), np.log(errors), 1)[0]
    assert slope == pytest.approx(KINDS[kind].order, abs=0.1), errors


def test_a_split_capacitor_is_second_order_in_frequency():
    """sC·(A(0) − A(s)) is of order s²: over frequency Miller's theorem gains an order that a pole's error has not."""
    b = stages.common_source()
    b.assume("it", miller={"part": "cgd1", "from": "g", "to": "out"})
    stage = b.stage()
    exact = stages.exact(stage)
    made = Approximator(exact).under(read_assumptions(stage)).response
    hz = np.array([1e3, 1e4, 1e5, 1e6])
    errors = np.abs(made.at(hz) / exact.at(hz) - 1)
    assert np.polyfit(np.log(hz), np.log(errors), 1)[0] == pytest.approx(2, abs=0.1)


def test_records_are_whole():
    for name, kind in KINDS.items():
        assert kind.name == name
        assert kind.step in (1, 2, 3, 4, 5)
        assert kind.order >= 1
        assert kind.statement
        assert kind.ratio
        assert kind.source
        assert all(KEYS[key] is kind for key in kind.keys)
