"""Roots in batches, against mpmath at 50 digits on the very same float coefficients."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.exact.roots import roots
from symamp.exact.simultaneous import simultaneous_roots


def from_roots(found, first=1.0):
    """Coefficients ascending, shape (k + 1, P), of the real polynomials with those roots, shape (k, P)."""
    c = np.ones((1, found.shape[1]), dtype=complex)
    for root in found:
        longer = np.zeros((c.shape[0] + 1, c.shape[1]), dtype=complex)
        longer[:-1] += c
        longer[1:] -= c / root
        c = longer
    return c.real * first


def scattered(degree, pairs, points, spread, middle=1.0, seed=0):
    """Left-half-plane roots, `pairs` conjugate pairs among them, magnitudes over `spread` about `middle`."""
    rng = np.random.default_rng([seed, degree, pairs])
    found = -middle * 10 ** (np.log10(spread) * rng.uniform(-0.5, 0.5, (degree, points))).astype(complex)
    for k in range(0, 2 * pairs, 2):
        found[k] *= np.exp(1j * rng.uniform(0.1, 1.5, points))
        found[k + 1] = found[k].conj()
    return found


def exact_roots(column):
    with mpmath.workdps(50):
        return mpmath.polyroots([mpmath.mpf(float(x)) for x in column[::-1]], maxsteps=500, extraprec=400)


def worst_error(found, column):
    """Largest relative distance of each found root to its own exact one; 0 where roots nearly coincide."""
    exact = [complex(x) for x in exact_roots(column)]
    gaps = [abs(a - b) / abs(a) for i, a in enumerate(exact) for b in exact[i + 1 :]]
    if gaps and min(gaps) < 1e-3:
        return 0.0
    worst = 0.0
    for root in found:
        nearest = min(exact, key=lambda x: abs(x - root) / abs(x))
        exact.remove(nearest)
        worst = max(worst, abs(nearest - root) / abs(nearest))
    return worst


def assert_in_form(found):
    """Sorted by magnitude, pairs exact and side by side with the upper one first, real roots exactly real."""
    size = np.abs(found)
    assert (np.diff(size, axis=0) >= -1e-14 * size[1:]).all()  # equal ones stand as rounding has it
    for column in found.T:
        k = 0
        while k < column.size:
            if column[k].imag == 0:
                k += 1
                continue
            assert column[k].imag > 0
            assert column[k + 1] == column[k].conjugate()
            k += 2


@pytest.mark.parametrize("degree", range(1, 9))
@pytest.mark.parametrize("complex_share", [0, 1])
def test_separated_roots_agree_with_fifty_digits_over_a_spread_of_1e9(degree, complex_share):
    pairs = degree // 2 * complex_share
    c = from_roots(scattered(degree, pairs, 12, 1e9, middle=1e8), first=1e-12)
    found = roots(c)
    assert_in_form(found)
    assert max(worst_error(found[:, k], c[:, k]) for k in range(12)) < 1e-10


@pytest.mark.parametrize("gap", [1e-14, 1e-10, 1e-6])
@pytest.mark.parametrize("sign", [1, -1])
def test_a_nearly_double_quadratic_keeps_its_digits(gap, sign):
    rng = np.random.default_rng(5)
    b, a = rng.uniform(1, 10, 50) * 1e-12, rng.uniform(1, 3, 50) * 1e-25
    c = np.array([b * b / (4 * a) * (1 + sign * gap), b, a])
    found = roots(c)
    for k in range(50):
        with mpmath.workdps(50):
            c0, c1, c2 = (mpmath.mpf(float(x)) for x in c[:, k])
            root = mpmath.sqrt(c1 * c1 - 4 * c0 * c2)
            both = [(-c1 + root) / (2 * c2), (-c1 - root) / (2 * c2)]
            exact = sorted(both, key=lambda x: (abs(x), -x.imag))
            assert all(abs(x - complex(y)) < 1e-12 * abs(x) for x, y in zip(exact, found[:, k], strict=True))


@pytest.mark.parametrize(("degree", "spread"), [(14, 1e10), (24, 1e14)])
def test_high_degrees_and_wide_spreads(degree, spread):
    c = from_roots(scattered(degree, degree // 4, 3, spread))
    found = roots(c)
    assert_in_form(found)
    assert max(worst_error(found[:, k], c[:, k]) for k in range(3)) < 1e-9


@pytest.mark.parametrize("degree", [4, 7])
def test_simultaneous_iteration_alone_finds_the_same_roots(degree):
    c = from_roots(scattered(degree, 2, 10, 1e9))
    found = simultaneous_roots(c)
    assert max(worst_error(found[:, k], c[:, k]) for k in range(10)) < 1e-10


def test_tiny_coefficients_do_not_underflow():
    wanted = scattered(6, 1, 5, 1e4, middle=1e9)
    c = from_roots(wanted)
    shifted = np.ldexp(c, -750)
    assert np.allclose(roots(shifted), roots(c), rtol=1e-12)
    quadratic = np.array([[1e-250], [1e-255], [1e-262]])
    assert np.allclose(roots(quadratic), roots(quadratic * 1e250), rtol=1e-12)


def test_zero_coefficients_at_some_points_only():
    c = np.array([[0, 0, 1, 1, 0, np.nan], [1, 1, 0, 2, 0, 1], [0, 2, 0, 0, 0, 1]])
    found = roots(c)
    assert found[0, 0] == 0
    assert np.isnan(found[1, 0])
    assert list(found[:, 1]) == [0, -0.5]
    assert np.isnan(found[:, 2]).all()
    assert found[0, 3] == -0.5
    assert np.isnan(found[1, 3])
    assert np.isnan(found[:, 4:]).all()


def test_degenerate_shapes():
    assert roots(np.ones((1, 4))).shape == (0, 4)
    assert roots(np.ones((3, 0))).shape == (2, 0)


@pytest.mark.parametrize(
    ("c", "wanted"),
    [
        ([1, 0, 1], [1j, -1j]),
        ([-4, 0, 1], [2, -2]),
        ([1, 3, 3, 1], [-1, -1, -1]),
        ([1, 0, 0, 1], [-1, 0.5 + 0.75**0.5 * 1j, 0.5 - 0.75**0.5 * 1j]),
        ([-6, 11, -6, 1], [1, 2, 3]),
        ([24, -50, 35, -10, 1], [1, 2, 3, 4]),
    ],
)
def test_roots_known_by_hand(c, wanted):
    found = roots(np.array(c, dtype=float)[:, None])
    assert_in_form(found)
    assert np.allclose(found[:, 0], wanted, rtol=1e-12)


@settings(deadline=None, max_examples=150)
@given(st.lists(st.floats(-10, 10).map(lambda x: round(x, 3)), min_size=2, max_size=6))
def test_any_polynomial_is_given_back_by_its_roots(column):
    c = np.array(column)[:, None]
    found = roots(c)
    finite = found[~np.isnan(found)]
    nonzero = np.flatnonzero(column)
    assert finite.size == (nonzero[-1] if nonzero.size else 0)
    size = np.polyval(np.abs(column[::-1]), np.abs(finite))
    assert (np.abs(np.polyval(column[::-1], finite)) <= 1e-9 * size).all()
    assert_in_form(finite[:, None])
