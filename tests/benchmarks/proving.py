"""Proofs of DC-gain errors over boxes, of a loaded cascode and of a two-stage op amp, against sampling of the same."""

from __future__ import annotations

import numpy as np

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity
from symamp.exact.derive import derive
from symamp.exact.formulas import PolyRatio, rational_of
from symamp.exact.polys import held, into_ring, lowest_terms, ring_of
from symamp.exact.tape import Tape
from symamp.span.bounding import Proved, prove_range
from symamp.span.boxes import ProofBox
from symamp.span.points import Box

from .record import Row, Sizes, median_seconds, shown

_ROUNDING = 1e-9  # what doubles may be off where they sample an error


def proofs(sizes: Sizes) -> list[Row]:
    """Every assumption of a stage by itself, then all together; the slowest proof counts."""
    return [
        _stage("a loaded cascode, six sides", loaded_cascode(), 1e-4, 0.2, 100, sizes),
        _stage("a two-stage op amp, ten symbols", two_stage_opamp(), 1e-3, 5.0, None, sizes),
    ]


def _stage(what: str, stage: Stage, tolerance: float, allowed: float, most: int | None, sizes: Sizes) -> Row:
    box, slowest, boxes, outside, finished = ProofBox.of(stage), 0.0, 0, 0.0, True
    for ratio in dc_gain_errors(stage):
        found = prove_range(ratio, box, tolerance=tolerance)
        finished &= found.finished
        boxes = max(boxes, found.boxes)
        outside = max(outside, _outside(found, ratio, stage, sizes.points))
        slowest = max(
            slowest,
            median_seconds(lambda r=ratio: prove_range(r, box, tolerance=tolerance), sizes.runs),  # type: ignore[misc]
        )
    few = most is None or boxes < most
    limit = "" if most is None else f", fewer than {most} boxes"
    return Row(
        f"proof of the DC-gain errors of {what}, to {tolerance:g}, against {sizes.points:,} sampled points",
        f"< {shown(allowed)}{limit}",
        f"{shown(slowest)}, {boxes} boxes",
        slowest / allowed,
        finished and few and slowest < allowed,
        outside if finished else float("inf"),
        _ROUNDING,
    )


def dc_gain_errors(stage: Stage) -> list[PolyRatio]:
    """(a − e)/e in lowest terms under every assumption by itself and under all of them."""
    exact = derive(stage, stage.asked["gain"])
    approximator, assumptions = Approximator(exact), read_assumptions(stage)
    errors = []
    for made in (*((assumption,) for assumption in assumptions), assumptions):
        response = approximator.under(made).response
        assert response is not None
        e, a = (rational_of(r, Quantity("dc")) for r in (exact, response))
        assert e is not None
        assert a is not None
        ring = ring_of(stage.symbols, held(*e, *a))
        (en, ed), (an, ad) = (tuple(into_ring(p, ring) for p in ratio) for ratio in (e, a))
        errors.append(lowest_terms(an * ed - en * ad, en * ad))
    return errors


def _outside(found: Proved, ratio: PolyRatio, stage: Stage, points: int) -> float:
    """By how much sampled errors lie outside what was proved."""
    box, tape = Box.of(stage), Tape(ratio)
    worst = 0.0
    for u in box.blocks(points, 1):
        above, below = tape(box.values(u), u.shape[1])
        errors = above / below
        beyond = float(np.max(errors)) - found.greatest.upper, found.least.lower - float(np.min(errors))
        worst = max(worst, *beyond)
    return worst


def loaded_cascode() -> Stage:
    """A cascode with a resistor for a load: sides from 4:1 to 10:1."""
    build = StageBuilder("loaded cascode")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="4 mS", gds="0.2 mS")
    build.mosfet("M2", gate="gnd", drain="out", source="x", gm="4 mS", gds="0.2 mS", gmb="0.6 mS")
    build.resistor("RL", "out", "gnd", "50 kohm")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    build.span("gm1", "2 mS", "8 mS")
    build.span("gm2", "2 mS", "8 mS")
    build.span("gmb2", "0.2 mS", "1 mS")
    build.span("ro1", "2 kohm", "20 kohm")
    build.span("gds2", "0.05 mS", "0.5 mS")
    build.span("RL", "10 kohm", "100 kohm")
    build.assume("no body effect", neglect="gmb")
    build.assume("output conductance is negligible", small="gds", against="gm")
    build.assume("an ideal second device", neglect="gds2")
    return build.stage()


def two_stage_opamp() -> Stage:
    """A differential pair with a mirror, and a common-source stage: ten sides, none of the pair or mirror matched."""
    build = StageBuilder("two-stage operational amplifier")
    build.mosfet("M1", gate="inp", drain="x", source="t", gm="1 mS", gds="20 uS")
    build.mosfet("M2", gate="inn", drain="y", source="t", gm="1 mS", gds="20 uS")
    build.mosfet("M3", gate="x", drain="x", source="gnd", gm="0.5 mS", gds="20 uS")
    build.mosfet("M4", gate="x", drain="y", source="gnd", gm="0.5 mS", gds="20 uS")
    build.mosfet("M5", gate="gnd", drain="t", source="gnd", gm="1 mS", gds="10 uS")
    build.mosfet("M6", gate="y", drain="out", source="gnd", gm="5 mS", gds="0.1 mS")
    build.mosfet("M7", gate="gnd", drain="out", source="gnd", gm="5 mS", gds="0.1 mS")
    build.voltage_source("VP", "inp", "gnd")
    build.voltage_source("VN", "inn", "gnd")
    build.response("gain", source={"VP": 0.5, "VN": -0.5}, to="out")
    for name in ("gm1", "gm2"):
        build.span(name, "0.5 mS", "2 mS")
    for name in ("gm3", "gm4"):
        build.span(name, "0.2 mS", "1 mS")
    build.span("gm6", "2 mS", "8 mS")
    for name in ("gds1", "gds2", "gds3", "gds4"):
        build.span(name, "5 uS", "50 uS")
    build.span("gds6", "50 uS", "200 uS")
    build.follows("gds7", "gds6")
    pair, mirror = ["gds1", "gds2", "gds3", "gds4"], ["gm1", "gm2", "gm3", "gm4"]
    build.assume("output conductance is negligible", small=pair, against=mirror)
    build.assume("an ideal tail", neglect="gds5")
    build.assume("an ideal left half", neglect=["gds1", "gds3"])
    return build.stage()
