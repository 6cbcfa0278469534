"""The ledger of the cascode, 32 sets and 6 quantities, against the plain loop; and the memory that it takes."""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np

import symamp
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.derive import derive
from symamp.judge.errors_at import ErrorTable
from symamp.judge.ledger import make_ledger
from symamp.span.points import Box

from .loop import Loop
from .record import Row, Sizes, seconds, shown
from .stages import QUANTITIES, cascode

_ROUNDS = 5


def ledger(sizes: Sizes) -> list[Row]:
    """The whole ledger over the points, against the loop extrapolated from fewer of them."""
    stage = cascode()
    names = [f"gain.{name}" for name in QUANTITIES]
    make_ledger(stage, quantities=names, points=16)
    table = ErrorTable(
        derive(stage, stage.asked["gain"]),
        read_assumptions(stage),
        [parse_quantity(name) for name in QUANTITIES],
    )
    responses = [table.response(mask) for mask in table.plan.masks]
    loop = Loop([response for response in responses if response is not None])
    points = _points(stage, sizes.loop_points)
    loop(points[0])
    plain: list[np.ndarray] = []
    spent = []
    rounds = min(_ROUNDS, sizes.runs)
    for some in (points[k::rounds] for k in range(rounds)):  # by turns, so that a busy moment falls on both
        mine = seconds(lambda: make_ledger(stage, quantities=names, points=sizes.points))
        loops = seconds(lambda some=some: plain.extend(loop(point) for point in some))  # type: ignore[misc]
        spent.append((mine, loops * sizes.points / len(some)))
    ours, theirs = (statistics.median(column) for column in zip(*spent, strict=True))
    points = [point for k in range(rounds) for point in points[k::rounds]]  # in the order of `plain`
    ratio = theirs / ours
    return [
        Row(
            f"ledger of the cascode, 32 sets, 6 quantities, {sizes.points:,} points, against a Python loop",
            "≥ 100 times faster",
            f"{shown(ours)} against {shown(theirs)} (from {len(points):,} points)",
            ratio,
            ratio >= 100,
            _disagreement(table, points, np.array(plain)),
            1e-7,
        )
    ]


def _points(stage: Stage, count: int) -> list[dict[str, float]]:
    """The first points of the box, each as {symbol: value}."""
    box = Box.of(stage)
    u = np.hstack(list(box.blocks(count, seed=1)))[:, -count:]
    columns = {name: np.broadcast_to(value, (count,)).tolist() for name, value in box.values(u).items()}
    return [{name: column[k] for name, column in columns.items()} for k in range(count)]


def _disagreement(table: ErrorTable, points: list[dict[str, float]], plain: np.ndarray) -> float:
    """The largest relative difference of a quantity under any set, between the table and the loop."""
    values = {name: np.array([point[name] for point in points]) for name in points[0]}
    found = table.at(values, len(points))
    worst = 0.0
    for column, quantity in enumerate(table.quantities):
        ours, theirs = found[quantity][0], plain[:, :, column].T
        if (np.isnan(ours) != np.isnan(theirs)).any():
            return float("inf")
        known = ~np.isnan(theirs)
        worst = max(worst, float(np.max(np.abs(ours[known] / theirs[known] - 1), initial=0.0)))
    return worst


def memory(sizes: Sizes) -> list[Row]:
    """Peak memory of a whole process that makes the ledger, at many points and at ten times as many."""
    few, many = (_worker(points, sizes) for points in (sizes.points, sizes.many_points))
    growth = many["bytes"] / few["bytes"]
    drift = max(
        abs(b / a - 1) for a, b in zip(few["at_bias"], many["at_bias"], strict=True)
    )  # what does not depend on the points
    return [
        Row(
            f"ledger of the cascode, peak memory at {sizes.points:,} points",
            "< 1.5 GB",
            f"{few['bytes'] / 1e6:.0f} MB",
            few["bytes"] / 1.5e9,
            few["bytes"] < 1.5e9,
            drift,
            0.0,
        ),
        Row(
            f"the same at {sizes.many_points:,} points",
            "no more (within 5 %)",
            f"{many['bytes'] / 1e6:.0f} MB, {shown(many['seconds'])}",
            growth,
            growth <= 1.05,
            drift,
            0.0,
        ),
    ]


def _worker(points: int, sizes: Sizes) -> Any:
    done = subprocess.run(
        [sys.executable, str(Path(__file__).with_name("one_ledger.py")), str(points)],
        capture_output=True,
        text=True,
        timeout=sizes.patience,
        check=True,
        env=environment(),
    )
    return json.loads(done.stdout)


def environment() -> dict[str, str]:
    """The environment of another process: it finds this symamp, and may keep its bytecode."""
    kept = {key: value for key, value in os.environ.items() if key != "PYTHONDONTWRITEBYTECODE"}
    return kept | {"PYTHONPATH": str(Path(symamp.__file__).parents[1])}
