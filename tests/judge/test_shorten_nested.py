"""Short formulas of a stage that is not written out, over a span: measured again by nodal analysis."""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np
import pytest
from nodal import Nodal

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.circuit.writer import document_of, stage_toml
from symamp.formula import evaluate, parse
from symamp.judge.shorten import make_shortest
from symamp.span.points import Box

sys.path.append(str(Path(__file__).resolve().parents[1] / "exact"))


def spanned() -> Stage:
    """The folded cascode over 30 % of what its current and its load may do."""
    from big_stages import folded_cascode

    lines = ["", "[span]"] + [f'{name} = "30 %"' for name in ("gm1", "gm6", "gds4", "CL")]
    text = stage_toml(document_of(folded_cascode())) + "\n".join(lines) + "\n"
    return parse_stage(text.encode(), file=None, folder=Path())


@pytest.mark.parametrize("about", ["dc", "p1", "bandwidth", "gain_bandwidth"])
def test_the_error_at_a_thousand_bias_points(about: str) -> None:
    stage = spanned()
    found = make_shortest(stage, 0.05, quantities=[f"gain.{about}"], points=128).found[0]
    assert found.shape is not None
    assert found.judged is not None
    assert found.terms is not None
    assert found.terms <= 30
    assert found.exact_terms > 10**6
    assert len(found.changes) == len(found.assumptions)
    node = parse(found.shape.text())
    box = Box.of(stage)
    points = box.values(np.random.default_rng(4).uniform(size=(box.dimensions, 1000)))
    worst = 0.0
    for k in range(1000):
        values = {n: float(np.ravel(v)[k] if np.ndim(v) else v) for n, v in points.items()}
        solved = Nodal(stage, stage.asked["gain"], values)
        exact = _exact(solved, about)
        worst = max(worst, abs(evaluate(node, values.__getitem__) / exact - 1))
    assert worst <= 0.05


def _exact(solved: Nodal, about: str) -> float:
    if about == "dc":
        return solved.dc()
    if about == "p1":
        return float(solved.poles()[0].real)
    half = _half_power(solved)
    return half if about == "bandwidth" else abs(solved.dc()) * half


def _half_power(solved: Nodal) -> float:
    """The frequency in Hz at which the magnitude falls through 1/√2 of dc, by bisection from around the first pole."""
    level = abs(solved.dc()) / math.sqrt(2)
    low, high = (abs(solved.poles()[0]) * by for by in (0.2, 5.0))
    for _ in range(45):
        middle = math.sqrt(low * high)
        found = np.linalg.solve(solved.constant + 1j * middle * solved.with_s, solved.right)[solved.out]
        low, high = (middle, high) if abs(found) > level else (low, middle)
    return low / (2 * math.pi)


def test_gain_times_bandwidth_needs_no_output_resistance() -> None:
    """gm/(2π·CL), of either half of the input pair (common practice)."""
    from big_stages import folded_cascode

    stage = folded_cascode()
    found = make_shortest(stage, 0.10, quantities=["gain.gain_bandwidth"], points=16).found[0]
    assert found.shape is not None
    assert found.shape.text() in ("gm1/(2*pi*CL)", "gm2/(2*pi*CL)")


def test_what_is_no_quotient_of_coefficients_says_what_is() -> None:
    from big_stages import folded_cascode

    found = make_shortest(folded_cascode(), 0.05, quantities=["gain.p2"], points=16).found[0]
    assert found.shape is None
    assert "dc, p1, z1, bandwidth, gain_bandwidth have" in found.why
