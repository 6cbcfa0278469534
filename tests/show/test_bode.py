"""Bode plots: curves and marks where they belong, phase without jumps, and every odd response drawn."""

from __future__ import annotations

import math
import random
from typing import Any

import numpy as np
import pytest
from scipy import signal

from symamp.circuit.builder import StageBuilder
from symamp.exact.derive import derive
from symamp.exact.response import Response
from symamp.show.bode import bode, bode_of, mark_places
from symamp.show.curve import Curve, continuous_phase, curve_of, frequency_range
from tests.assumptions.assumed_stages import cascode, common_source, follower, two_stage, under
from tests.show.drawn import assert_same_bytes, assert_whole, legend_words, lines_of


def response(builder: StageBuilder, name: str = "gain") -> Response:
    stage = builder.stage()
    return derive(stage, stage.asked[name])


def tank(loss: str | None = None) -> StageBuilder:
    """A resonant circuit with a series-resonant branch beside it."""
    b = StageBuilder("Tank")
    b.current_source("II", "gnd", "a")
    b.inductor("L1", "a", "gnd", "1 uH")
    b.capacitor("C2", "a", "gnd", "1 nF")
    b.inductor("L3", "a", "c", "1 uH")
    b.capacitor("C4", "c", "gnd", "5 pF")
    if loss:
        b.resistor("R5", "a", "gnd", loss)
    b.response("z", source="II", to="a")
    return b


def approximate_cascode() -> tuple[Response, Response]:
    b = cascode()
    found = under(b, small=["gds"], against=["gm"]).response
    assert found is not None
    return response(cascode()), found


def test_the_curve_is_the_response() -> None:
    exact = response(common_source())
    low, high = frequency_range(exact)
    curve = curve_of(exact, low, high)
    assert (curve.hz[0], curve.hz[-1]) == (low, high)
    assert (np.diff(curve.hz) > 0).all()
    values = exact.at(curve.hz)
    assert np.allclose(10 ** (curve.db / 20), np.abs(values), rtol=1e-12)
    turned = np.exp(1j * np.radians(curve.deg))
    assert np.allclose(turned, values / np.abs(values), atol=1e-9)
    assert np.allclose(curve.poles, np.abs(exact.poles()) / (2 * math.pi), rtol=1e-12)
    for root in (*curve.poles, *curve.zeros):
        assert root in curve.hz


def test_the_range_goes_two_decades_beyond() -> None:
    """A common source, by hand: the lowest pole and the unity-gain frequency are inside with two decades to spare."""
    exact = response(two_stage())
    low, high = frequency_range(exact)
    roots = np.abs([*exact.poles(), *exact.zeros()]) / (2 * math.pi)
    assert 1.4 < math.log10(roots.min() / low) < 2.6
    assert 1.4 < math.log10(high / roots.max()) < 2.6
    assert math.log10(low) == round(math.log10(low))


@pytest.mark.parametrize("seed", range(25))
def test_phase_as_a_general_library_has_it(seed: int) -> None:
    """Against scipy.signal's Bode data of the same roots on a fine grid, where unwrapping is safe."""
    draw = random.Random(seed)

    def roots(count: int) -> list[complex]:
        found: list[complex] = []
        while len(found) < count:
            size = 2 * math.pi * 10 ** draw.uniform(2, 6)
            angle = (
                math.radians(draw.uniform(100, 180))
                if draw.random() < 0.7
                else math.radians(draw.uniform(0, 80))
            )
            r = size * complex(math.cos(angle), math.sin(angle))
            found += [r, r.conjugate()] if draw.random() < 0.5 else [complex(r.real)]
        return found

    poles, zeros, gain = roots(4), roots(2), draw.choice([-1.0, 1.0]) * 1e9
    fine = np.geomspace(1, 1e8, 200_001)
    _, _, expected = signal.bode((zeros, poles, gain), 2 * np.pi * fine)
    coarse = fine[::5000]  # a few points a decade: whole turns lie between some of them
    values = gain * np.prod([2j * np.pi * coarse - z for z in zeros], axis=0)
    values = values / np.prod([2j * np.pi * coarse - p for p in poles], axis=0)
    found = continuous_phase(coarse, values, poles, zeros)
    assert -181 < found[0] <= 181
    difference = found - expected[::5000]
    assert np.allclose(difference, difference[0], atol=1e-4)
    assert math.isclose(difference[0] / 360, round(difference[0] / 360), abs_tol=1e-6)


def test_phase_starts_within_half_a_turn() -> None:
    for builder, name, start in [
        (common_source(), "gain", 180),
        (follower(), "gain", 0),
        (common_source(), "zin", -90),  # a pole at 0 Hz
        (tank(), "z", 90),  # a zero there
    ]:
        exact = response(builder, name)
        curve = curve_of(exact, *frequency_range(exact))
        assert curve.deg[0] == pytest.approx(start, abs=4)


def test_an_inverting_stage_starts_at_plus_180_whichever_way_it_turns() -> None:
    """−(1 + s/z) leads from its start, −1/(1 + s/p) lags: both start from 180, and go on from there."""
    hz = np.geomspace(1, 1e5, 100)
    for zeros, poles, end in (([-1e3 + 0j], [], 270), ([], [-1e3 + 0j], 90)):
        values = -np.prod([1 - 2j * np.pi * hz / z for z in zeros], axis=0) * np.ones(hz.size)
        values = values / np.prod([1 - 2j * np.pi * hz / p for p in poles], axis=0)
        found = continuous_phase(hz, values, poles, zeros)
        assert found[0] == pytest.approx(180, abs=1)
        assert found[-1] == pytest.approx(end, abs=1)


def test_exact_and_approximate_lie_together_behind_a_coupling_capacitor() -> None:
    """A zero at 0 Hz makes the exact phase of an inverting stage start from −90°, its approximation's from 180°."""
    hz = np.geomspace(1, 1e6, 200)
    s = 2j * np.pi * hz
    inverting = -10 / (1 + s / 1e5)
    exact = inverting * s / (s + 50)
    curves = []
    for values, poles, zeros in ((exact, [-50 + 0j, -1e5 + 0j], [0j]), (inverting, [-1e5 + 0j], [])):
        deg = continuous_phase(hz, values, poles, zeros)
        curves.append(Curve(hz, 20 * np.log10(np.abs(values)), deg))
    assert curves[0].deg[0] == pytest.approx(-90, abs=8)
    assert curves[1].deg[0] == pytest.approx(180, abs=1)
    lines = lines_of(bode(*curves).figure().axes[1])
    apart = lines["approximate"].get_ydata() - lines["exact"].get_ydata()
    assert abs(apart[-1]) < 1
    assert np.abs(apart).max() < 91


def test_a_pair_of_poles_is_two() -> None:
    exact = response(tank("1 kohm"), "z")
    curve = curve_of(exact, *frequency_range(exact))
    assert len(curve.poles) == len(exact.poles()) == 4
    assert "(2 of them)" in bode_of(exact).alt


def test_an_undamped_pole_turns_back_by_180_and_a_zero_forward() -> None:
    curve = curve_of(response(tank(), "z"), 1e5, 1e10)
    assert len(curve.undamped) == 3  # a pair stands once
    assert np.isfinite(curve.db).all()
    seen = set(np.round(curve.deg).astype(int))
    assert seen == {90, -90}
    steps = np.diff(curve.deg)
    turns = [round(float(s)) for s in steps if abs(s) > 1]
    assert turns == [-180, 180, -180]  # pole, zero, pole


@pytest.mark.parametrize("loss", [None, "1 Mohm", "100 kohm"])
def test_a_peak_without_end_leaves_the_panel_readable(loss: str | None) -> None:
    picture = bode_of(response(tank(loss), "z"))
    assert_whole(picture)
    upper, lower = picture.figure().axes
    if loss is None:
        assert upper.get_ylim()[1] - upper.get_ylim()[0] < 120
    assert lower.get_ylim()[0] > -120
    assert lower.get_ylim()[1] < 120


def test_exact_is_solid_and_approximate_dashed() -> None:
    exact, approximate = approximate_cascode()
    picture = bode_of(exact, approximate)
    assert_whole(picture)
    assert_same_bytes(picture)
    figure = picture.figure()
    upper, lower = figure.axes
    for axes in (upper, lower):
        lines = lines_of(axes)
        assert lines["exact"].get_linestyle() == "-"
        assert lines["approximate"].get_linestyle() == "--"
    assert upper.get_ylabel() == "magnitude in dB"
    assert lower.get_ylabel() == "phase in degrees"
    assert lower.get_xlabel() == "frequency in Hz"
    assert legend_words(figure)[:2] == ["exact", "approximate"]
    assert picture.name == "gain-bode"
    hz = lines_of(upper)["exact"].get_xdata()
    assert np.allclose(lines_of(upper)["exact"].get_ydata(), 20 * np.log10(np.abs(exact.at(hz))))
    hz = lines_of(upper)["approximate"].get_xdata()
    assert np.allclose(lines_of(upper)["approximate"].get_ydata(), 20 * np.log10(np.abs(approximate.at(hz))))


@pytest.mark.parametrize(
    ("builder", "name"),
    [
        (common_source, "gain"),
        (common_source, "rout"),
        (common_source, "zin"),
        (follower, "gain"),
        (two_stage, "gain"),
    ],
)
def test_marks_lie_on_the_exact_curve(builder: Any, name: str) -> None:
    exact = response(builder(), name)
    picture = bode_of(exact)
    assert_whole(picture)
    upper = picture.figure().axes[0]
    marks = [line for line in upper.get_lines() if line.get_linestyle() == "None"]
    kinds = {"x": exact.poles(), "o": exact.zeros()}
    assert marks
    for line in marks:
        roots = kinds[line.get_marker()]
        for x, y in zip(line.get_xdata(), line.get_ydata(), strict=True):
            assert y == pytest.approx(20 * math.log10(abs(exact.at(x))), abs=1e-6)
            sizes = [abs(r) / (2 * math.pi) for r in roots if r]
            assert any(math.isclose(x, s, rel_tol=1e-9) for s in sizes) or x == upper.get_xlim()[0]
    if exact.unit:
        assert upper.get_ylabel() == "magnitude in dB over 1 Ω"


def test_a_root_at_0_hz_stands_at_the_left_edge() -> None:
    picture = bode_of(response(common_source(), "zin"))
    figure = picture.figure()
    assert any("0 Hz: left edge" in words for words in legend_words(figure))
    marks = lines_of(figure.axes[0])["poles (0 Hz: left edge)"]
    assert marks.get_xdata()[0] == figure.axes[0].get_xlim()[0]
    assert "0 Hz" in picture.alt


def test_a_flat_response_and_none_at_all() -> None:
    b = StageBuilder("Flat")
    b.current_source("II", "gnd", "a")
    b.resistor("R1", "a", "gnd", "1 kohm")
    b.response("z", source="II", to="a")
    flat = bode_of(response(b, "z"))
    assert_whole(flat)
    assert legend_words(flat.figure()) == ["exact"]
    hz = np.geomspace(1, 1e3, 10)
    nothing = bode(Curve(hz, np.full(10, -np.inf), np.full(10, np.nan)))
    assert_whole(nothing)
    assert "The exact response is 0." in nothing.alt


def test_hostile_curves_are_drawn() -> None:
    hz = np.array([1.0, 2.0])
    for curve in (
        Curve(hz, np.array([np.inf, 0.0]), np.array([0.0, np.nan]), "S", (0.0, 5.0), (1.5,), (1.5,)),
        Curve(hz, np.array([np.nan, np.nan]), np.array([np.nan, np.nan]), "", (1.0,)),
        Curve(hz, np.array([-3e3, 3e3]), np.array([-1e4, 1e4])),
        Curve(
            np.array([1e-9, 1e15]),
            np.array([1.0, 1.0]),
            np.array([0.0, -90.0]),
            "ohm",
            tuple(np.geomspace(1, 1e9)),
        ),
    ):
        assert_whole(bode(curve, curve, title="odd_name $x$"))
    with pytest.raises(ValueError, match="two frequencies"):
        bode(Curve(hz[:1], hz[:1], hz[:1]))
    with pytest.raises(ValueError, match="low="):
        curve_of(response(follower()), 10, 1)


def test_roots_outside_the_frequencies_shown_are_left_out() -> None:
    hz = np.array([1.0, 10.0])
    curve = Curve(hz, np.array([0.0, -20.0]), np.zeros(2), "", (0.5, math.sqrt(10), 20.0))
    assert mark_places(curve, curve.poles, (-30.0, 10.0)) == [(math.sqrt(10), pytest.approx(-10))]
