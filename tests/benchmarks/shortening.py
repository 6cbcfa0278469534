"""Short formulas of large stages: how long the search takes, how many terms are left, how far off they are."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.circuit.writer import save_stage
from symamp.formula import Node, evaluate, parse
from symamp.judge.shorten import make_shortest
from symamp.span.points import Box

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
        _row("op amp, 20 transistors: dc", bipolar_opamp(with_rx=False), ["gain.dc"], 0.10, 60.0, sizes),
        _row("the same, each current by 20 %: dc", _with_currents(), ["gain.dc"], 0.10, 60.0, sizes),
    ]


def _with_currents() -> Stage:
    """The op amp over a box: each device's current by 20 %, matched ones together; gpi and go go with gm."""
    stage = bipolar_opamp(with_rx=False)
    matched = {"gm2": "gm1", "gm4": "gm3", "gm6": "gm5", "gm9": "gm8"}
    lines = ["", "[span]"]
    for name in (n for n in stage.symbols if n.startswith("gm")):
        lines.append(f'{name} = {{ follows = "{matched[name]}" }}' if name in matched else f'{name} = "20 %"')
        lines += [f'{other}{name[2:]} = {{ follows = "{name}" }}' for other in ("gpi", "go")]
    with TemporaryDirectory() as folder:
        path = save_stage(stage, Path(folder) / "opamp.stage.toml")
        text = path.read_text(encoding="utf-8") + "\n".join(lines) + "\n"
    return parse_stage(text.encode(), file=None, folder=Path())


def _worst(stage: Stage, formula: Node) -> float:
    """The largest error of a dc gain's formula by dense nodal analysis: at 1,000 bias points where there is a span."""
    points = [{n: float(v) for n, v in stage.bias.items()}]
    if not stage.span.empty:
        box = Box.of(stage)
        drawn = box.values(np.random.default_rng(2).uniform(size=(box.dimensions, 1000)))
        points += [
            {n: float(np.ravel(v)[k] if np.ndim(v) else v) for n, v in drawn.items()} for k in range(1000)
        ]
    errors = []
    for values in points:
        here = replace(stage, bias={n: Fraction(v) for n, v in values.items()})
        exact = dense.response(here, stage.asked["gain"], _SLOW)[0].real
        errors.append(abs(evaluate(formula, values.__getitem__) / exact - 1))
    return max(errors)


def _row(name: str, stage: Stage, quantities: list[str], within: float, allowed: float, sizes: Sizes) -> Row:
    found = []
    points = max(64, sizes.points // 100)
    spent = seconds(lambda: found.append(make_shortest(stage, within, quantities=quantities, points=points)))
    (made,) = found
    shape = made.found[0].shape
    assert shape is not None
    error = _worst(stage, parse(shape.text()))
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
