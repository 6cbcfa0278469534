"""How cost grows with size: a cascade of N common-source stages, each loaded by R and C, N from 1 to 40."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.system import build_system

from . import dense
from .record import Row, Sizes, median_seconds, shown

LENGTHS = (1, 2, 5, 10, 20, 30, 40)


def cascade(length: int) -> Stage:
    """A cascade of common-source stages; cgd couples each to the next, so that none can be taken apart."""
    builder = StageBuilder(f"Cascade of {length} common-source stages")
    builder.voltage_source("VIN", "n0", "gnd")
    for k in range(1, length + 1):
        node, before = f"n{k}", f"n{k - 1}"
        values = {"gm": "2 mS", "gds": "50 uS", "cgs": "40 fF", "cgd": "9 fF"}
        builder.mosfet(f"M{k}", gate=before, drain=node, source="gnd", body="gnd", **values)  # type: ignore[arg-type]
        builder.resistor(f"R{k}", node, "gnd", f"{4 + k % 3} kohm")
        builder.capacitor(f"C{k}", node, "gnd", f"{50 + 7 * (k % 5)} fF")
    builder.response("gain", source="VIN", to=f"n{length}")
    return builder.stage()


def growth(sizes: Sizes) -> list[Row]:
    """The minors of the longest cascade over those of a quarter of it: 4 where the graph grows linearly."""
    lengths = LENGTHS if sizes.runs > 1 else LENGTHS[:4]
    stages = {n: cascade(n) for n in lengths}
    found = {n: ratio_of(build_system(stage), stage.asked["gain"]) for n, stage in stages.items()}
    spent = {
        n: median_seconds(lambda s=stage: ratio_of(build_system(s), s.asked["gain"]), sizes.runs)  # type: ignore[misc]
        for n, stage in stages.items()
    }
    last, quarter = lengths[-1], next(n for n in lengths if 4 * n >= lengths[-1])
    grown = found[last].graph.minors / found[quarter].graph.minors
    linear = last / quarter
    told = ", ".join(f"{n}: {found[n].graph.minors} minors, {shown(spent[n])}" for n in lengths)
    return [
        Row(
            f"minor graph of a cascade of N stages, N from {quarter} to {last}",
            "minors grow linearly",
            told,
            grown / linear,
            grown <= 1.25 * linear,
            _disagreement(stages[last], sizes),
            1e-8,
        )
    ]


def _disagreement(stage: Stage, sizes: Sizes) -> float:
    form = nested_of(stage, ratio_of(build_system(stage), stage.asked["gain"]))
    s = 2j * np.pi * np.geomspace(1e3, 1e8, sizes.frequencies)
    ours = form.at(s, {symbol: float(value) for symbol, value in stage.bias.items()})
    return float(np.max(np.abs(ours / dense.response(stage, stage.asked["gain"], s) - 1)))


def plot(path: Path, sizes: Sizes) -> None:
    """Minors and time against the number of stages, as a picture."""
    from matplotlib.figure import Figure

    stages = {n: cascade(n) for n in range(1, 41)}
    minors = [ratio_of(build_system(s), s.asked["gain"]).graph.minors for s in stages.values()]
    spent = [
        median_seconds(lambda s=s: ratio_of(build_system(s), s.asked["gain"]), sizes.runs)  # type: ignore[misc]
        for s in stages.values()
    ]
    figure = Figure(figsize=(6.3, 3.6), layout="constrained")
    left, right = figure.subplots(1, 2)
    left.plot(list(stages), minors, ".", color="#2f5d8a")
    left.set_ylabel("minors")
    right.plot(list(stages), [1e3 * t for t in spent], ".", color="#2f5d8a")
    right.set_ylabel("time in ms")
    for axes in (left, right):
        axes.set_xlabel("common-source stages in cascade")
        axes.set_ylim(bottom=0)
    figure.savefig(path)
