"""Deriving the cascode, against lcapy; and its coefficients at many points, against formulas written by hand."""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
from collections.abc import Mapping
from fractions import Fraction
from pathlib import Path

import numpy as np

from symamp.exact.derive import derive
from symamp.exact.forms import Expanded

from .record import Row, Sizes, median_seconds, shown
from .stages import cascode

_AT = Fraction(10**9)  # a value of s, rad/s


def derivation(sizes: Sizes) -> list[Row]:
    """Exact and written out in lowest terms, in a warm process, against lcapy's transfer function."""
    stage = cascode()
    ours = median_seconds(lambda: derive(stage, stage.asked["gain"]), 20 * sizes.runs)
    form = derive(stage, stage.asked["gain"]).form
    question = {
        "runs": max(1, sizes.runs // 3),
        "values": {name: str(value) for name, value in stage.bias.items()},
        "s": str(_AT),
    }
    worker = Path(__file__).with_name("by_lcapy.py")
    done = subprocess.run(
        [sys.executable, str(worker)],
        input=json.dumps(question),
        capture_output=True,
        text=True,
        timeout=sizes.patience,
        check=True,
    )
    answer = json.loads(done.stdout)
    theirs = statistics.median(answer["seconds"])
    numerator, denominator = (_at(p, _AT) for p in form.exact_coefficients(stage.bias))
    difference = numerator / denominator / Fraction(answer["value"]) - 1
    measured = f"{shown(ours)} against {shown(theirs)}"
    ratio = theirs / ours
    return [
        Row(
            "derive a cascode with all capacitances, against lcapy",
            "≥ 300 times faster",
            measured,
            ratio,
            ratio >= 300,
            abs(float(difference)),
            0.0,
        )
    ]


def _at(polynomial: object, s: Fraction) -> Fraction:
    """An exact polynomial at an exact point."""
    return sum(
        (Fraction(int(c.p), int(c.q)) * s**k for k, c in enumerate(polynomial)),  # type: ignore[call-overload]
        start=Fraction(0),
    )


def coefficients(sizes: Sizes) -> list[Row]:
    """Coefficients of s of the written-out cascode, against the same formulas by hand in numpy."""
    stage = cascode()
    form = derive(stage, stage.asked["gain"]).form
    assert isinstance(form, Expanded)
    draw = np.random.default_rng(3)
    values = {
        name: float(value) * np.exp(draw.uniform(-0.5, 0.5, sizes.points))
        for name, value in stage.bias.items()
    }
    runs = 3 * sizes.runs
    ours = median_seconds(lambda: form.coefficients(values, sizes.points), runs)
    theirs = median_seconds(lambda: by_hand(values), runs)
    found = form.coefficients(values, sizes.points)
    mine = np.vstack([found.numerator, found.denominator])
    hand = np.vstack(by_hand(values))
    mine, hand = mine / mine[2], hand / hand[2]
    ratio = ours / theirs
    return [
        Row(
            f"coefficients of s of the cascode at {sizes.points:,} points, against numpy by hand",
            "≤ 3 times as long",
            f"{shown(ours)} against {shown(theirs)}",
            ratio,
            ratio <= 3,
            float(np.max(np.abs(mine / hand - 1))),
            1e-12,
        )
    ]


def by_hand(values: Mapping[str, np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """The cascode's coefficients as one writes them by hand: a0, a1 and b0, b1, b2."""
    v = values
    into = v["gm2"] + v["gmb2"] + v["gds2"]
    middle = v["cgd1"] + v["cdb1"] + v["cgs2"] + v["csb2"]
    load = v["CL"] + v["cgd2"] + v["cdb2"]
    return (
        np.array([-v["gm1"] * into, v["cgd1"] * into]),
        np.array(
            [
                v["gds1"] * v["gds2"],
                load * (v["gds1"] + into) + middle * v["gds2"],
                middle * load,
            ]
        ),
    )
