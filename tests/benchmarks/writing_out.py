"""Large responses written out term by term, and coefficients of nested ones at many bias points."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np

from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.system import build_system

from . import dense
from .ledgers import environment
from .record import Row, Sizes, median_seconds, shown
from .stages import STAGES, bipolar_opamp


def written_out(sizes: Sizes) -> list[Row]:
    """The folded cascode with all its capacitances, in a process of its own; at small sizes the cascode."""
    name = "folded cascode" if sizes.runs > 1 else "cascode"
    done = subprocess.run(
        [sys.executable, str(Path(__file__).with_name("one_written.py")), name],
        capture_output=True,
        text=True,
        timeout=sizes.patience,
        check=True,
        env=environment(),
    )
    found = json.loads(done.stdout)
    stage = STAGES[name]()
    theirs = dense.response(stage, stage.asked["gain"], np.array([1e-6j]))[0]
    met = found["seconds"] < 10 and found["bytes"] < 4e9
    return [
        Row(
            f"{name} with all capacitances written out, {found['terms']:,} terms",
            "< 10 s and 4 GB",
            f"{shown(found['seconds'])}, {found['bytes'] / 1e9:.2f} GB",
            max(found["seconds"] / 10, found["bytes"] / 4e9),
            met,
            abs(found["dc"] / theirs.real - 1),
            1e-8,
        )
    ]


def nested_coefficients(sizes: Sizes) -> list[Row]:
    """Coefficients of s of the bipolar op amp at 1,000 bias points, against its response by dense nodal analysis."""
    rows = []
    for name, with_rx in (("op amp", False), ("op amp with rx", True)):
        stage = bipolar_opamp(with_rx=with_rx)
        asked = stage.asked["gain"]
        form = nested_of(stage, ratio_of(build_system(stage), asked))
        points = min(1000, sizes.points)
        draw = np.random.default_rng(3)
        values = {n: float(v) * draw.uniform(0.8, 1.25, points) for n, v in stage.bias.items()}
        values = {n: np.asarray(v) for n, v in values.items()}
        spent = median_seconds(lambda f=form, v=values, p=points: f.coefficients(v, p), sizes.runs)  # type: ignore[misc]
        given = form.coefficients(values, points)
        ours = given.numerator[0] / given.denominator[0]
        first = {n: float(v[0]) for n, v in values.items()}
        theirs = form.at(np.array([1e-9j]), first)[0]
        rows.append(
            Row(
                f"{name}: coefficients of s at {points:,} bias points",
                "< 100 ms" if not with_rx else "–",
                shown(spent),
                spent / 0.1,
                spent < 0.1,
                float(abs(ours[0] / theirs.real - 1)),
                1e-6,
            )
        )
    return rows
