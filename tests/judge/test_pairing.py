"""Partners of roots, against the least sum over every assignment that there is."""

from __future__ import annotations

from itertools import combinations, permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.judge.pairing import left_over, partners

SIZE = st.floats(1.0, 1e10).map(lambda x: float(f"{x:.6g}"))


@st.composite
def roots(draw: st.DrawFn, most: int = 5, zeros: int = 2) -> np.ndarray:
    """Roots of a real polynomial, sorted by magnitude, the upper one of a pair first."""
    found: list[complex] = [0j] * draw(st.integers(0, zeros))
    count = draw(st.integers(0, most - len(found)))
    while len(found) < count:
        size = draw(SIZE)
        if len(found) + 2 <= count and draw(st.booleans()):
            angle = draw(st.floats(0.05, 3.09))
            found += [size * np.exp(1j * angle), size * np.exp(-1j * angle)]
        else:
            found.append(complex(draw(st.sampled_from([-1, -1, -1, 1])) * size))
    return np.array(sorted(found, key=lambda r: (abs(r), -r.imag)), dtype=complex)


def distance(exact: complex, approximate: complex) -> float:
    if exact == 0 and approximate == 0:
        return 0.0
    return 1e6 if exact == 0 or approximate == 0 else abs(np.log(approximate / exact))


def least_sum(exact: np.ndarray, approximate: np.ndarray) -> float:
    """The least sum of |Log(a/e)| over every way to pair as many as can be; pairs of 0 and another do not count."""
    few = min(len(exact), len(approximate))
    if few == 0:
        return 0.0
    return min(
        sum(distance(exact[i], approximate[j]) for i, j in zip(rows, columns, strict=True))
        for rows in combinations(range(len(exact)), few)
        for columns in permutations(range(len(approximate)), few)
    )


def paired(exact: np.ndarray, approximate: np.ndarray) -> np.ndarray:
    return partners(exact.reshape(-1, 1), approximate.reshape(-1, 1))[:, 0]


@settings(max_examples=150, deadline=None)
@given(roots(4), roots(4))
def test_the_sum_of_distances_is_the_least_there_is(exact: np.ndarray, approximate: np.ndarray) -> None:
    found = paired(exact, approximate)
    total = sum(distance(e, a) for e, a in zip(exact, found, strict=True) if not np.isnan(a))
    best = least_sum(exact, approximate)
    unlike = round(best // 1e6)  # pairs of a root at 0 with one elsewhere, which are no pairs
    assert total == pytest.approx(best - 1e6 * unlike, rel=1e-9, abs=1e-6)
    assert np.isnan(found).sum() == len(exact) - min(len(exact), len(approximate)) + unlike


@settings(max_examples=150, deadline=None)
@given(roots(), roots())
def test_each_approximate_root_is_the_partner_of_one_at_most(
    exact: np.ndarray, approximate: np.ndarray
) -> None:
    found = [complex(x) for x in paired(exact, approximate) if not np.isnan(x)]
    among = [complex(x) for x in approximate]
    for root in found:
        among.remove(root)
    lost, new = left_over(exact, approximate)
    assert len(lost) == len(exact) - len(found)
    assert sorted(new, key=repr) == sorted(among, key=repr)


@settings(max_examples=100, deadline=None)
@given(roots())
def test_a_root_that_stays_is_its_own_partner(exact: np.ndarray) -> None:
    assert np.array_equal(paired(exact, exact), exact)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(roots(4, 1), roots(4, 1)), min_size=2, max_size=6))
def test_many_points_at_once_as_one_by_one(pairs: list[tuple[np.ndarray, np.ndarray]]) -> None:
    def stack(rows: list[np.ndarray]) -> np.ndarray:
        full = np.full((max(map(len, rows)), len(rows)), complex(np.nan, np.nan))
        for p, row in enumerate(rows):
            full[: len(row), p] = row
        return full

    exact, approximate = stack([e for e, _ in pairs]), stack([a for _, a in pairs])
    found = partners(exact, approximate)
    for p, (e, a) in enumerate(pairs):
        one = paired(e, a)
        total = sum(distance(x, y) for x, y in zip(e, one, strict=True) if not np.isnan(y))
        same = sum(distance(x, y) for x, y in zip(e, found[: len(e), p], strict=True) if not np.isnan(y))
        assert same == pytest.approx(total, rel=1e-9, abs=1e-9)
        assert np.isnan(found[: len(e), p]).sum() == np.isnan(one).sum()
        assert np.all(np.isnan(found[len(e) :, p]))


def test_an_approximate_root_nearer_to_another_index_is_that_ones_partner() -> None:
    # One root is left, and it stands by the second: the first is lost.
    exact, approximate = np.array([-1e3, -1e6], dtype=complex), np.array([-1.1e6], dtype=complex)
    found = paired(exact, approximate)
    assert np.isnan(found[0])
    assert found[1] == -1.1e6
    lost, new = left_over(exact, approximate)
    assert (lost, new) == ([-1e3 + 0j], [])


def test_roots_at_zero_pair_first() -> None:
    exact = np.array([0, -1e-3, -1e6], dtype=complex)
    approximate = np.array([0, -1e5, -1e7], dtype=complex)
    assert paired(exact, approximate).tolist() == [0, -1e5, -1e7]


def test_a_root_at_zero_has_no_partner_elsewhere() -> None:
    found = paired(np.array([0, -5], dtype=complex), np.array([-1, -5], dtype=complex))
    assert np.isnan(found[0])
    assert found[1] == -5
    lost, new = left_over(np.array([0, -5], dtype=complex), np.array([-1, -5], dtype=complex))
    assert (lost, new) == ([0j], [-1 + 0j])


def test_the_upper_one_of_a_pair_pairs_with_the_upper_one() -> None:
    exact = np.array([-1 + 5j, -1 - 5j])
    approximate = np.array([-2 + 4j, -2 - 4j])
    assert paired(exact, approximate).tolist() == approximate.tolist()


def test_a_pair_that_becomes_real_takes_the_two_in_order() -> None:
    exact, approximate = np.array([-1 + 5j, -1 - 5j]), np.array([-2, -13], dtype=complex)
    assert set(paired(exact, approximate).tolist()) == {-2, -13}


def test_a_zero_that_changes_its_side_is_half_a_turn_away() -> None:
    exact = np.array([-1e6, 1.5e6], dtype=complex)
    approximate = np.array([0.9e6, -1.4e6], dtype=complex)
    assert paired(exact, approximate).tolist() == [-1.4e6, 0.9e6]


def test_seven_roots_by_assignment_as_by_sorted_order() -> None:
    rng = np.random.default_rng(8)
    exact = -np.sort(10 ** rng.uniform(0, 9, (7, 3)), axis=0).astype(complex)
    approximate = exact * rng.uniform(0.9, 1.1, (7, 3))
    bent = np.concatenate([exact, np.full((1, 3), 1e12)])  # a right-half-plane root: no short cut
    found = partners(bent, np.concatenate([approximate, np.full((1, 3), 1.2e12)]))
    assert np.allclose(found[:7], approximate)
    assert np.all(found[7] == 1.2e12)


def test_no_roots_at_all() -> None:
    none = np.empty(0, dtype=complex)
    assert paired(none, none).shape == (0,)
    assert np.isnan(paired(np.array([-1 + 0j]), none)).all()
    assert left_over(none, np.array([-3 + 0j])) == ([], [-3 + 0j])


def test_many_roots_that_could_be_paired_in_two_ways_keep_their_order() -> None:
    """Two roots that move past one another cost the same either way; rounding must not decide."""
    far = np.array([1e6 * np.exp(2j), 1e6 * np.exp(-2j), -1e8, -1e9, -1e10])
    for factor in np.geomspace(2.1, 50, 40):
        first = np.array([-1.7, -3.1])
        exact, approximate = (np.concatenate([low, far]).reshape(-1, 1) for low in (first, first * factor))
        assert partners(exact, approximate)[:2, 0] == pytest.approx(first * factor)
