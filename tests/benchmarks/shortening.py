"""Short formulas of large stages: how long the search takes, how many terms are left, how far off they are."""

from __future__ import annotations

import numpy as np

from symamp.circuit.stage import Stage
from symamp.formula import evaluate, parse
from symamp.judge.shorten import make_shortest

from . import dense
from .record import Row, Sizes, seconds, shown
from .stages import bipolar_opamp, cascode, folded_cascode

_SLOW = np.array([1e-6j])  # rad/s, as good as 0


def shortest(sizes: Sizes) -> list[Row]:
    """The folded cascode and the op amp; at small sizes the cascode."""
    if sizes.runs == 1:
        return [_row("cascode", cascode(), ["gain.dc"], 0.05, 30.0, sizes)]
    return [
        _row("folded cascode: dc and p1", folded_cascode(), ["gain.dc", "gain.p1"], 0.05, 30.0, sizes),
        _row(
            "op amp, 20 bipolar transistors: dc", bipolar_opamp(with_rx=False), ["gain.dc"], 0.10, 60.0, sizes
        ),
    ]


def _row(name: str, stage: Stage, quantities: list[str], within: float, allowed: float, sizes: Sizes) -> Row:
    found = []
    points = max(64, sizes.points // 100)
    spent = seconds(lambda: found.append(make_shortest(stage, within, quantities=quantities, points=points)))
    (made,) = found
    values = {n: float(v) for n, v in stage.bias.items()}
    shape = made.found[0].shape
    assert shape is not None
    exact = dense.response(stage, stage.asked["gain"], _SLOW)[0].real
    error = abs(evaluate(parse(shape.text()), values.__getitem__) / exact - 1)
    terms = ", ".join(str(each.terms) for each in made.found)
    most = max(each.terms or 10**9 for each in made.found)
    return Row(
        f"shortest formula, {name}, within {100 * within:g} %",
        f"< {shown(allowed)}, ≤ 30 terms",
        f"{shown(spent)}; {terms} terms",
        spent / allowed,
        spent < allowed and most <= 30,
        error,
        within,
    )
