"""Minor graphs of large stages: how long they take, how many terms they stand for, and what they evaluate to."""

from __future__ import annotations

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.system import build_system

from . import dense
from .record import Row, Sizes, median_seconds, shown
from .stages import bipolar_opamp, folded_cascode


def graphs(sizes: Sizes) -> list[Row]:
    """The folded cascode, and the op amp without and with base resistance."""
    return [
        _graph("folded cascode, 10 MOSFETs", folded_cascode(), 0.020, sizes),
        _graph("op amp, 20 bipolar transistors", bipolar_opamp(with_rx=False), 0.050, sizes),
        _graph("op amp, 20 bipolar transistors with rx", bipolar_opamp(with_rx=True), 2.0, sizes),
    ]


def _graph(name: str, stage: Stage, allowed: float, sizes: Sizes) -> Row:
    asked = stage.asked["gain"]
    system = build_system(stage)
    spent = median_seconds(lambda: ratio_of(build_system(stage), asked), sizes.runs)
    ratio = ratio_of(system, asked)
    terms = sum(ratio.graph.count_terms())
    elements = len(system.symbols)
    return Row(
        f"minor graph: {name}, {len(system.node)} nodes, {elements} elements",
        f"< {shown(allowed)}",
        f"{shown(spent)}; {terms:.3g} terms in {ratio.graph.minors:,} minors",
        spent / allowed,
        spent < allowed,
        _disagreement(stage, sizes),
        1e-8,
    )


def responses(sizes: Sizes) -> list[Row]:
    """The response over frequency from the graph, against a dense solve at each frequency."""
    rows = []
    for name, with_rx in (("op amp", False), ("op amp with rx", True)):
        stage = bipolar_opamp(with_rx=with_rx)
        asked = stage.asked["gain"]
        form = nested_of(stage, ratio_of(build_system(stage), asked))
        values = {symbol: float(value) for symbol, value in stage.bias.items()}
        s = _frequencies(sizes)
        ours = median_seconds(lambda f=form, v=values, s=s: f.at(s, v), sizes.runs)  # type: ignore[misc]
        theirs = median_seconds(lambda t=stage, a=asked, s=s: dense.response(t, a, s), sizes.runs)  # type: ignore[misc]
        difference = _disagreement(stage, sizes)
        rows.append(
            Row(
                f"{name}: response at {s.size:,} frequencies from the graph, against dense nodal analysis",
                "agrees to 1e-8",
                f"{shown(ours)} against {shown(theirs)}; off by {difference:.1e}",
                ours / theirs,
                difference <= 1e-8,
                difference,
                1e-8,
            )
        )
    return rows


def _frequencies(sizes: Sizes) -> np.ndarray:
    return 2j * np.pi * np.geomspace(1e-1, 1e9, sizes.frequencies)


def _disagreement(stage: Stage, sizes: Sizes) -> float:
    """The largest relative difference over frequency between the graph's response and the dense one."""
    asked = stage.asked["gain"]
    form = nested_of(stage, ratio_of(build_system(stage), asked))
    values = {symbol: float(value) for symbol, value in stage.bias.items()}
    s = _frequencies(sizes)
    ours, theirs = form.at(s, values), dense.response(stage, asked, s)
    return float(np.max(np.abs(ours / theirs - 1)))
