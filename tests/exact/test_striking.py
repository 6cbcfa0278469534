"""Symbols struck, and short formulas of nested responses: against exact values and dense nodal analysis."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from functools import cache
from typing import Any

import numpy as np
import pytest
from big_stages import bipolar_opamp, folded_cascode
from hypothesis import HealthCheck, assume, given, settings
from networks import RESPONSE, stages
from test_big_stages import Nodal

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.forms import Nested
from symamp.exact.largest_reduced import Reduced, reduced_over, reduced_response
from symamp.exact.striking import AT_DC, Quotient, Search, strike_order
from symamp.exact.system import build_system

POLE = Quotient(("denominator", 0), ("denominator", 1))
MATCHED = {
    "gm2": "gm1", "gpi2": "gpi1", "go2": "go1", "gm4": "gm3", "gpi4": "gpi3", "go4": "go3",
    "gm6": "gm5", "gpi6": "gpi5", "go6": "go5", "R2": "R1",
}  # fmt: skip


def nested(stage: Stage, name: str) -> Nested:
    return nested_of(stage, ratio_of(build_system(stage, stage.asked[name].without), stage.asked[name]))


@cache
def large(name: str) -> tuple[Stage, Nested]:
    stage = {
        "folded cascode": folded_cascode,
        "op amp": lambda: bipolar_opamp(with_rx=False),
        "op amp with rx": lambda: bipolar_opamp(with_rx=True),
    }[name]()
    return stage, nested(stage, "gain")


def floats(stage: Stage) -> dict[str, float]:
    return {name: float(value) for name, value in stage.bias.items()}


def spread(stage: Stage, points: int, seed: int, sigma: float = 0.15) -> dict[str, np.ndarray]:
    """The bias point, and points around it: each symbol times a factor of its own."""
    draw = np.random.default_rng(seed)
    return {
        name: float(value) * np.exp(np.r_[0.0, draw.normal(0, sigma, points - 1)])
        for name, value in stage.bias.items()
    }


def at_point(stage: Stage, values: Mapping[str, Any], k: int) -> Stage:
    return replace(stage, bias={name: Fraction(float(value[k])) for name, value in values.items()})


def by_nodal_analysis(
    stage: Stage, values: Mapping[str, Any], k: int, quotients: Sequence[Quotient]
) -> list[float]:
    """The gain at DC and −b0/b1 by dense matrices: b1/b0 is the trace of G⁻¹C (expansion of det(G + sC))."""
    nodal = Nodal(at_point(stage, values, k), stage.asked["gain"])
    found = []
    for q in quotients:
        if q == AT_DC:
            found.append(float(nodal.response(np.zeros(1))[0].real))
        else:
            found.append(float(1 / np.trace(np.linalg.solve(nodal.g, nodal.c))))
    return found


def value_of(reduced: Reduced, quotient: Quotient, values: Mapping[str, Any], k: int) -> float:
    point = {name: Fraction(float(value[k])) for name, value in values.items()}
    above, below = reduced.form.exact_coefficients(point)
    sides = {"numerator": above, "denominator": below}
    ratio = sides[quotient.above[0]][quotient.above[1]] / sides[quotient.below[0]][quotient.below[1]]
    return int(ratio.p) / int(ratio.q)


def check_errors(
    reduced: Reduced, stage: Stage, values: Mapping[str, Any], points: int, quotients: Sequence[Quotient]
) -> list[float]:
    """The worst errors over the points, by nodal analysis; they are those that the result states."""
    worst = [0.0] * len(quotients)
    for k in range(points):
        exact = by_nodal_analysis(stage, values, k, quotients)
        for i, q in enumerate(quotients):
            worst[i] = max(worst[i], abs(value_of(reduced, q, values, k) / exact[i] - 1))
    return worst


@pytest.mark.parametrize("name", ["op amp", "op amp with rx"])
def test_the_gain_of_an_op_amp_of_20_transistors_within_10_percent_has_30_terms(name: str) -> None:
    stage, form = large(name)
    start = time.perf_counter()
    found = reduced_response(form, stage.symbols, floats(stage), 1, within=0.1)
    assert time.perf_counter() - start < 60  # 2 s and 5 s on a quiet machine
    assert found.terms <= 31
    values = {n: np.array([v]) for n, v in floats(stage).items()}
    worst = check_errors(found, stage, values, 1, [AT_DC])
    assert worst == pytest.approx(list(found.errors), rel=1e-6)
    assert worst[0] <= 0.1


def test_matched_devices_shorten_it() -> None:
    stage, form = large("op amp")
    points = 6
    values = spread(stage, points, 5)
    for follower, leader in MATCHED.items():
        values[follower] = values[leader] * float(stage.bias[follower] / stage.bias[leader])
    found = reduced_response(form, stage.symbols, values, points, within=0.1, rename=MATCHED)
    assert found.terms <= 25
    assert not set(MATCHED) & found.form.symbols
    # `equal` takes the leader's values: the formula holds no other, and its error counts what that is off.
    worst = check_errors(found, stage, values, points, [AT_DC])
    assert worst == pytest.approx(list(found.errors), rel=1e-6)
    assert worst[0] <= 0.1
    # Devices that do not match cannot be made one within that.
    apart = {**values, "gm6": values["gm6"] * 3}
    with pytest.raises(StageError, match=r"gm6.* one with others puts the quantity off by"):
        reduced_response(form, stage.symbols, apart, points, within=0.1, rename=MATCHED)


def test_at_a_thousand_points_the_worst_become_references() -> None:
    stage, form = large("op amp")
    points = 1000
    values = spread(stage, points, 3, 0.05)
    for follower, leader in MATCHED.items():
        values[follower] = values[leader] * float(stage.bias[follower] / stage.bias[leader])
    start = time.perf_counter()
    found = reduced_over(form, stage.symbols, values, points, within=0.1, rename=MATCHED)
    assert time.perf_counter() - start < 60  # 10 s on a quiet machine
    assert found.error <= 0.1
    assert found.terms <= 30
    led = {name: values[MATCHED.get(name, name)] for name in values}
    short, exact = found.form.coefficients(led, points), form.coefficients(values, points)
    ratio = (short.numerator[0] / short.denominator[0]) / (exact.numerator[0] / exact.denominator[0])
    assert np.abs(ratio - 1).max() == pytest.approx(found.error, rel=1e-6)


@pytest.mark.parametrize("quotients", [(AT_DC,), (POLE,), (AT_DC, POLE)])
def test_gain_and_dominant_pole_of_the_folded_cascode_within_5_percent(
    quotients: tuple[Quotient, ...],
) -> None:
    stage, form = large("folded cascode")
    points = 4
    values = spread(stage, points, 9)
    start = time.perf_counter()
    found = reduced_response(form, stage.symbols, values, points, quotients, within=0.05)
    assert time.perf_counter() - start < 30  # 0.5 s on a quiet machine
    worst = check_errors(found, stage, values, points, quotients)
    assert worst == pytest.approx(list(found.errors), rel=1e-6)
    assert max(worst) == pytest.approx(found.error, rel=1e-6)
    assert max(worst) <= 0.05
    assert found.terms <= 40
    assert {len(row) for row in (found.form.numerator, found.form.denominator)} <= {1, 2}


def test_the_dominant_pole_of_the_folded_cascode_is_the_one_in_text_books() -> None:
    """−p1 = 1/(Rout·CL) with Rout = gm7/(gds7·(gds2 + gds5)) in parallel with the mirror's side (common practice)."""
    stage, form = large("folded cascode")
    found = reduced_response(form, stage.symbols, floats(stage), 1, (POLE,), within=0.2)
    assert str(found.form.denominator[0]) == "gds2*gds7 + gds5*gds7"
    assert str(found.form.denominator[1]) == "gm7*CL"


def test_the_gain_of_a_cascode_is_the_one_in_text_books() -> None:
    """Gain −gm1·gm2/(gds1·gds2), common practice for a cascode under an ideal current source."""
    build = StageBuilder("cascode")
    build.mosfet("M1", gate="in", drain="x", source="gnd", gm="4 mS", gds="40 uS")
    build.mosfet("M2", gate="gnd", drain="out", source="x", body="x", gm="4 mS", gds="40 uS")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    stage = build.stage()
    found = reduced_response(nested(stage, "gain"), stage.symbols, floats(stage), 1, within=0.03)
    assert str(found.form.numerator[0]) == "-gm1*gm2"
    assert str(found.form.denominator[0]) == "gds1*gds2"
    assert found.error == pytest.approx(1 - 1 / 1.01, rel=1e-9)  # gds2/gm2 is 1 %


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(stages(most_nodes=5, most_parts=6))
def test_a_struck_symbol_is_one_at_its_limit(stage: Stage) -> None:
    """By exact numbers, every symbol struck taken far to its limit one after another: the first the farthest."""
    form = nested(stage, RESPONSE)
    assume(min(form.skeleton.degrees) >= 0)
    assume(all(0 in powers for powers in form.skeleton.powers))
    exact = form.exact_coefficients(stage.bias)
    assume(exact[0][0] != 0 and exact[1][0] != 0)
    search = Search(form, floats(stage), 1, (AT_DC,))
    strikes = strike_order(search, within=0.3)
    far = dict(stage.bias)
    for k, strike in enumerate(strikes):
        far[strike.symbol] *= Fraction(10) ** (-strike.limit * 20 * (len(strikes) - k))
    if any(value == 0 for value in far.values()):
        return
    above, below = form.exact_coefficients(far)
    assume(above.degree() >= 0 and below.degree() >= 0)
    ratio = (above[0] / below[0]) / (exact[0][0] / exact[1][0]) - 1
    error = abs(int(ratio.p) / int(ratio.q))
    assert error <= 0.3 + 1e-6
    if strikes:
        assert error == pytest.approx(strikes[-1].error, rel=1e-6, abs=1e-9)


def test_errors_add_up_and_kept_symbols_stay() -> None:
    stage, form = large("op amp")
    search = Search(form, floats(stage), 1, (AT_DC,))
    strikes = strike_order(search, within=0.1)
    assert len(strikes) > 40
    assert all(strike.error <= 0.1 for strike in strikes)
    assert len({strike.symbol for strike in strikes}) == len(strikes)
    assert search.error({s.symbol: s.limit for s in strikes}) == pytest.approx(strikes[-1].error, rel=1e-9)
    kept = frozenset({"go3", "gm12", "RL"})
    assert not kept & {s.symbol for s in strike_order(search, within=0.1, keep=kept)}
