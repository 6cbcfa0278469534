"""Every quantity of a response: by hand, against a dense evaluation, and against published rules of thumb."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.exact.asked_quantity import NAMES, parse_quantity
from symamp.exact.figures import Figures, face
from symamp.exact.missing_figures import remarks_beside, why_missing

TWO_PI = 2 * math.pi


def response(num, den, unit=""):
    return Figures(np.array(num, dtype=float)[:, None], np.array(den, dtype=float)[:, None], unit)


def polynomial(found):
    """Real coefficients ascending, lowest 1, of the polynomial with those roots."""
    return np.real(np.poly(found)[::-1] / np.poly(found)[-1]) if len(found) else np.ones(1)


def with_roots(gain, poles, zeros=()):
    return response(gain * polynomial(zeros), polynomial(poles))


def value(figures, text):
    return figures.value(parse_quantity(text))[0]


def why(figures, text):
    return why_missing(figures, parse_quantity(text))


# By hand


def test_one_pole():
    low_pass = response([100], [1, 1e-6])
    assert value(low_pass, "dc") == 100
    assert value(low_pass, "hf") == 0
    assert value(low_pass, "p1") == pytest.approx(-1e6)
    assert value(low_pass, "p1.hz") == pytest.approx(1e6 / TWO_PI)
    assert value(low_pass, "bandwidth") == pytest.approx(1e6 / TWO_PI, rel=1e-12)
    assert value(low_pass, "high_corner") == pytest.approx(1e6 / TWO_PI, rel=1e-12)
    assert value(low_pass, "unity_gain_frequency") == pytest.approx(1e6 * math.sqrt(9999) / TWO_PI, rel=1e-12)
    assert value(low_pass, "gain_bandwidth") == pytest.approx(1e8 / TWO_PI, rel=1e-12)
    assert value(low_pass, "phase_margin") == pytest.approx(180 - math.degrees(math.atan(math.sqrt(9999))))
    assert (value(low_pass, "peak"), value(low_pass, "peak_frequency")) == (100, 0)
    assert value(low_pass, "at(1 MHz)") == pytest.approx(100 / (1 + TWO_PI * 1j), rel=1e-12)
    assert value(low_pass, "dc.db") == pytest.approx(40)
    assert (value(low_pass, "a0"), value(low_pass, "b0"), value(low_pass, "b1")) == (100, 1, 1e-6)
    assert (value(low_pass, "a1"), value(low_pass, "b2")) == (0, 0)


def test_coefficients_are_over_the_lowest_b():
    integrator = response([4, 2], [0, 2, 6])
    assert [value(integrator, name) for name in ("b0", "b1", "b2", "a0", "a1")] == [0, 1, 3, 2, 1]


def test_band_pass_has_two_corners_about_its_peak():
    band = response([0, 1e-3], [1, 1e-3 + 1e-6, 1e-9])  # 1 krad/s to 1 Mrad/s
    low, high = value(band, "low_corner"), value(band, "high_corner")
    assert value(band, "peak_frequency") == pytest.approx(math.sqrt(1e9) / TWO_PI, rel=1e-9)
    assert math.sqrt(low * high) == pytest.approx(value(band, "peak_frequency"), rel=1e-9)
    assert high - low == pytest.approx((1e6 + 1e3) / TWO_PI, rel=1e-9)  # ω0/Q, exact for two poles
    assert "0 at DC" in why(band, "bandwidth")


def test_high_pass_is_largest_in_the_limit():
    high_pass = response([0, 1], [1, 1])
    assert math.isnan(value(high_pass, "peak"))
    assert "only approached as frequency grows" in why(high_pass, "peak")
    assert value(high_pass, "low_corner") == pytest.approx(1 / TWO_PI)
    assert remarks_beside(high_pass, parse_quantity("low_corner"))
    assert "nothing lies above" in why(high_pass, "high_corner")


def test_three_equal_poles_have_their_textbook_margins():
    # H = K/(1+s)³ reaches −180° at ω = √3, where |1+jω|³ = 8 (common practice).
    for gain in (2.0, 8.0, 20.0):
        loop = with_roots(gain, [-1, -1, -1])
        assert value(loop, "gain_margin") == pytest.approx(20 * math.log10(8 / gain), abs=1e-9)
        omega = math.sqrt(gain ** (2 / 3) - 1)
        margin = 180 - 3 * math.degrees(math.atan(omega))
        assert value(loop, "phase_margin") == pytest.approx(margin, rel=1e-9)


def test_integrators_and_zeros_at_dc_count_a_right_angle():
    assert value(response([1], [0, 1]), "phase_margin") == pytest.approx(90)
    doubled = response([1, 1], [0, 0, 1])
    omega = TWO_PI * value(doubled, "unity_gain_frequency")
    assert value(doubled, "phase_margin") == pytest.approx(math.degrees(math.atan(omega)))
    peaked = response([0, 100], [1, 2, 1])
    omega = TWO_PI * value(peaked, "unity_gain_frequency")
    assert value(peaked, "phase_margin") == pytest.approx(270 - 2 * math.degrees(math.atan(omega)))


def test_a_right_half_plane_pole_leaves_no_margin():
    unstable = response([10], [1, -1])
    assert math.isnan(value(unstable, "phase_margin"))
    assert why(unstable, "phase_margin") == "a pole lies in the right half plane"
    assert value(unstable, "bandwidth") == pytest.approx(1 / TWO_PI)


def test_undamped_poles_have_an_infinite_peak():
    tank = response([1], [1, 0, 1])
    assert math.isnan(value(tank, "peak"))
    assert "imaginary axis" in why(tank, "peak")


def test_peaking_is_remarked():
    resonant = response([5], [1, 0.1, 1])
    (remark,) = remarks_beside(resonant, parse_quantity("bandwidth"))
    assert "20 dB above DC" in remark
    assert not remarks_beside(with_roots(5, [-1, -2]), parse_quantity("bandwidth"))


def test_other_unity_crossings_are_remarked():
    twice = response([0, 10], [1, 2, 1])
    (remark,) = remarks_beside(twice, parse_quantity("unity_gain_frequency"))
    assert "also passes through 1 at" in remark
    every = twice.unity_crossings[:, 0]
    assert np.allclose(every * TWO_PI, [5 - math.sqrt(24), 5 + math.sqrt(24)], rtol=1e-12)  # 1 + ω² = 10ω
    assert all(abs(twice.at(float(f))[0]) == pytest.approx(1, rel=1e-12) for f in every)


def test_a_response_with_a_unit_has_no_unity_gain():
    impedance = response([1e4], [1, 1e-6], unit="ohm")
    for name in ("unity_gain_frequency", "phase_margin", "gain_margin"):
        assert math.isnan(value(impedance, name))
        assert "unit (ohm)" in why(impedance, name)
    assert value(impedance, "bandwidth") == pytest.approx(1e6 / TWO_PI)


def test_a_follower_only_touches_one():
    assert "nowhere above" in why(response([1], [1, 1]), "unity_gain_frequency")
    assert "nowhere above" in why(response([1, -1], [1, 1]), "unity_gain_frequency")


@pytest.mark.parametrize(
    ("num", "den", "name", "words"),
    [
        ([1], [0, 1], "dc", "pole at s = 0"),
        ([0, 1], [1], "hf", "degree"),
        ([1], [1, 1], "p2", "only 1 pole"),
        ([1], [1, 1], "z1", "no zeros"),
        ([0], [1, 1], "z1", "0 at every frequency"),
        ([1], [0, 1], "bandwidth", "infinite"),
        ([1, -1], [1, 1], "bandwidth", "never falls"),
        ([1], [1, 1], "low_corner", "nothing lies below"),
        ([1], [1, 1], "gain_margin", "never reaches"),
        ([0, 1], [1, 1], "dc.db", "is 0"),
        ([1], [0, 0], "dc", "denominator is 0"),
        ([0], [0, 0], "p1", "and the numerator too"),
        ([0, 1], [1], "unity_gain_frequency", "only upwards"),
    ],
)
def test_what_is_missing_says_why(num, den, name, words):
    figures = response(num, den)
    assert np.isnan(value(figures, name))
    assert words in why(figures, name)


def test_common_powers_of_s_cancel_point_by_point():
    figures = Figures(np.array([[0.0, 3.0], [5.0, 1.0]]), np.array([[0.0, 1.0], [1.0, 1.0], [1.0, 0.0]]))
    assert list(figures.value(parse_quantity("dc"))) == [5, 3]
    assert np.allclose(figures.value(parse_quantity("p1")), [-1, -1])
    assert np.isnan(figures.value(parse_quantity("z1"))[0])


def test_points_do_not_disturb_one_another():
    rng = np.random.default_rng(3)
    num, den = rng.normal(size=(3, 40)), rng.uniform(0.1, 3, size=(5, 40))
    num[0, :8], num[2, 4:12], den[0, 6:14], den[4, 10:20] = 0, 0, 0, 0
    together = Figures(num, den)
    for name in (*NAMES, "p1", "z1", "a1", "b2", "at(0.2 Hz)"):
        quantity = parse_quantity(name)
        whole = together.value(quantity)
        alone = np.array([together.at_point(k).value(quantity)[0] for k in range(40)])
        assert np.allclose(whole, alone, rtol=1e-9, equal_nan=True), name
        for k in np.flatnonzero(np.isnan(whole)):
            assert why_missing(together, quantity, int(k)), (name, k)


def test_a_scale_of_frequency_changes_nothing():
    num, den = np.array([[50.0], [-1e-10]]), np.array([[1.0], [2e-6], [3e-15], [1e-25]])
    powers = 1e8 ** np.arange(4)[:, None]
    plain, scaled = Figures(num, den), Figures(num * powers[:2], den * powers, scale=1e8)
    for name in (*NAMES, "p1", "p3", "z1", "a1", "b2", "at(3 MHz)"):
        quantity = parse_quantity(name)
        assert np.allclose(plain.value(quantity), scaled.value(quantity), rtol=1e-10, equal_nan=True), name


def test_given_roots_stand_in_for_those_of_the_coefficients():
    stage = response([10, 1], [1, 1, 1])
    stage.set_roots(np.array([[-9.0]]), np.array([[-1.0], [-2.0]]))
    assert (value(stage, "z1"), value(stage, "p2")) == (-9, -2)
    assert "only 2 poles" in why(stage, "p3")
    assert value(stage, "at(1 Hz)") == value(response([10, 1], [1, 1, 1]), "at(1 Hz)")


def test_one_column_serves_all_points():
    figures = Figures(np.array([10.0]), np.array([[1.0, 1.0], [1.0, 2.0]]))
    assert np.allclose(figures.value(parse_quantity("bandwidth")) * TWO_PI, [1, 0.5])


def test_faces():
    values, quantity = np.array([-1 - 0j, 1j, 0]), parse_quantity("at(1 Hz)")
    assert np.allclose(face(values, "deg", quantity), [180, 90, np.nan], equal_nan=True)
    assert np.allclose(face(values, "db", quantity), [0, 0, np.nan], equal_nan=True)
    assert list(face(values, "im", quantity)) == [0, 1, 0]
    assert list(face(np.array([45.0]), "deg", parse_quantity("phase_margin"))) == [45]


# Against a dense evaluation


def stable_roots(most):
    single = st.floats(-3, 3).map(lambda x: [-(10**x)])
    pair = st.tuples(st.floats(-3, 3), st.floats(0.05, 1.5)).map(
        lambda t: [-(10 ** t[0]) * np.exp(1j * t[1]), -(10 ** t[0]) * np.exp(-1j * t[1])]
    )
    groups = st.lists(st.one_of(single, pair), min_size=1, max_size=most)
    return groups.map(lambda parts: [x for part in parts for x in part])


systems = st.tuples(
    st.floats(-1.5, 3).map(lambda x: 10**x),
    stable_roots(3),
    st.one_of(st.just([]), stable_roots(1), st.floats(-2, 4).map(lambda x: [10**x])),
).filter(lambda system: len(system[2]) < len(system[1]))

OMEGA = np.logspace(-6, 7, 26001)


def on_grid(gain, poles, zeros):
    h = np.full(OMEGA.shape, gain, dtype=complex)
    phase = np.zeros(OMEGA.shape)
    for sign, group in ((1, zeros), (-1, poles)):
        for root in group:
            factor = 1 - 1j * OMEGA / root
            h = h * factor if sign > 0 else h / factor
            phase += sign * np.degrees(np.angle(factor))
    return np.abs(h), phase


def assert_first_fall(found, magnitude, level, exact_magnitude):
    """`found` (rad/s) is the first fall through `level`, as far as a grid can tell."""
    steps = np.flatnonzero((magnitude[:-1] > level * (1 + 1e-9)) & (magnitude[1:] < level * (1 - 1e-9)))
    if steps.size:
        assert found <= OMEGA[steps[0] + 1] * (1 + 1e-9)
    if not math.isnan(found):
        assert exact_magnitude == pytest.approx(level, rel=1e-9)
        assert not steps.size or steps[0] + 1 >= np.searchsorted(OMEGA, found * (1 - 1e-9))


@settings(deadline=None, max_examples=120)
@given(systems)
def test_frequencies_agree_with_a_dense_evaluation(system):
    gain, poles, zeros = system
    figures = with_roots(gain, poles, zeros)
    magnitude, _ = on_grid(gain, poles, zeros)
    for name, level in (("bandwidth", gain / math.sqrt(2)), ("unity_gain_frequency", 1.0)):
        found = value(figures, name)
        there = math.nan if math.isnan(found) else abs(figures.at(found)[0])
        assert_first_fall(found * TWO_PI, magnitude, level, there)


@settings(deadline=None, max_examples=120)
@given(systems)
def test_peak_and_corners_agree_with_a_dense_evaluation(system):
    gain, poles, zeros = system
    figures = with_roots(gain, poles, zeros)
    magnitude, _ = on_grid(gain, poles, zeros)
    peak, where = value(figures, "peak"), value(figures, "peak_frequency")
    assert peak >= magnitude.max() * (1 - 1e-9)
    assert peak == pytest.approx(magnitude.max(), rel=1e-3)
    assert abs(figures.at(where)[0]) == pytest.approx(peak, rel=1e-9)
    level = peak / math.sqrt(2)
    for name, side in (("low_corner", -1), ("high_corner", 1)):
        corner = value(figures, name)
        between = OMEGA[(side * (OMEGA - where * TWO_PI) > 0)]
        if math.isnan(corner):
            assert (magnitude[np.isin(OMEGA, between)] > level * (1 - 1e-6)).all()
            continue
        assert abs(figures.at(corner)[0]) == pytest.approx(level, rel=1e-8)
        inside = (side * (OMEGA - where * TWO_PI) > 0) & (side * (OMEGA - corner * TWO_PI) < 0)
        assert (magnitude[inside] > level * (1 - 1e-6)).all()


@settings(deadline=None, max_examples=120)
@given(systems)
def test_margins_agree_with_a_dense_evaluation(system):
    gain, poles, zeros = system
    figures = with_roots(gain, poles, zeros)
    magnitude, phase = on_grid(gain, poles, zeros)
    unity = value(figures, "unity_gain_frequency")
    if not math.isnan(unity):
        read = np.interp(math.log(unity * TWO_PI), np.log(OMEGA), phase)
        assert value(figures, "phase_margin") == pytest.approx(180 + read, abs=0.2)
    reached = np.flatnonzero(phase <= -180 - 1e-6)
    margin = value(figures, "gain_margin")
    if reached.size and reached[0]:
        read = -20 * math.log10(magnitude[reached[0]])
        assert margin == pytest.approx(read, abs=0.5)
    if not math.isnan(margin):
        assert phase.min() < -180 + 0.2


# Rules of thumb. Two real poles p2 = k·p1: computed; the rule is standard, Gray, Hurst, Lewis & Meyer,
# Analysis and Design of Analog Integrated Circuits, 5th edition, 7.3.1; N equal poles: the same, 7.3.3.


@pytest.mark.parametrize(
    ("k", "taken_as_p1", "taken_as_b1"),
    [
        (1, 55, -22),
        (2, 19, -20),
        (4, 5.8, -15),
        (5, 3.8, -13.5),
        (8, 1.5, -9.8),
        (10, 1.0, -8.2),
        (20, 0.2, -4.5),
        (50, 0, -1.9),
        (100, 0, -1.0),
    ],
)
def test_two_real_poles(k, taken_as_p1, taken_as_b1):
    stage = with_roots(-50, [-1e6, -1e6 * k])
    exact = TWO_PI * value(stage, "bandwidth")
    assert 100 * (1e6 / exact - 1) == pytest.approx(taken_as_p1, abs=0.5 if k < 4 else 0.055)
    by_b1 = 1 / value(stage, "b1")
    assert 100 * (by_b1 / exact - 1) == pytest.approx(taken_as_b1, abs=0.5 if k < 5 else 0.055)


@pytest.mark.parametrize(("count", "share"), [(2, 0.644), (3, 0.510), (4, 0.435)])
def test_equal_poles(count, share):
    stage = with_roots(10, [-1e7] * count)
    exact = TWO_PI * value(stage, "bandwidth") / 1e7
    assert exact == pytest.approx(math.sqrt(2 ** (1 / count) - 1), rel=1e-9)
    assert exact == pytest.approx(share, abs=6e-4)


# Phase margins of p2 = r · GB, with and without a right-half-plane zero at 10 GB; the rule "p2 ≥ 2.2 GB and
# z ≥ 10 GB for 60°" is of Allen & Holberg, CMOS Analog Circuit Design (from memory).
@pytest.mark.parametrize(
    ("r", "zero", "margin"),
    [(1, 0, 51.8), (1.73, 0, 62.8), (2, 0, 65.5), (2.2, 0, 67.3), (3, 0, 72.4), (2.2, 10, 62.0)],
)
def test_phase_margin_against_second_pole(r, zero, margin):
    gain_bandwidth = 1e8
    zeros = [zero * gain_bandwidth] if zero else []
    loop = with_roots(1e6, [-gain_bandwidth / 1e6, -r * gain_bandwidth], zeros)
    # the row with a zero depends on the unnamed DC gain in its last digit: 61.9 at 1e6, 62.0 at 500
    assert value(loop, "phase_margin") == pytest.approx(margin, abs=0.12 if zero else 0.06)


# At the ends of what numbers hold


def test_an_undamped_pole_stands_in_a_remark_beside_the_bandwidth() -> None:
    undamped = response([1], [1, 0, 1])
    assert value(undamped, "bandwidth") == pytest.approx(math.sqrt(1 + math.sqrt(2)) / TWO_PI)
    assert remarks_beside(undamped, parse_quantity("bandwidth")) == [
        "the magnitude is infinite at an undamped pole"
    ]


def test_a_coefficient_too_small_for_a_number_is_no_zero() -> None:
    tiny = Figures(np.array([[1.0]]), np.array([[1.0], [1.0], [1.0]]), "", 1e200)
    assert value(tiny, "b1") == pytest.approx(1e-200)
    assert math.isnan(value(tiny, "b2"))
    assert why(tiny, "b2") == "the coefficient is beyond the range of numbers"
