"""Cones of exponent vectors: membership against linear programming, contradiction against a sum of zero."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from symamp.assumptions.cone import Cone, cone_of, without_columns

vectors = st.integers(2, 4).flatmap(
    lambda size: st.tuples(
        st.lists(
            st.tuples(*[st.integers(-2, 2)] * size).filter(any),
            min_size=1,
            max_size=6,
        ),
        st.lists(st.tuples(*[st.integers(-3, 3)] * size), min_size=1, max_size=8),
    )
)


def inside(cone: Cone, vector: tuple[int, ...]) -> bool:
    return all(np.dot(f, vector) >= 0 for f in cone.faces) and all(
        np.dot(p, vector) == 0 for p in cone.planes
    )


def reachable(generators: list[tuple[int, ...]], vector: tuple[int, ...]) -> bool:
    """Whether the vector is a non-negative sum of the generators, by linear programming."""
    matrix = np.array(generators, dtype=float).T
    found = linprog(np.ones(len(generators)), A_eq=matrix, b_eq=np.array(vector, dtype=float), method="highs")
    return bool(found.status == 0)


@given(vectors)
@settings(max_examples=200, deadline=None)
def test_membership(drawn):
    generators, others = drawn
    cone = cone_of(generators)
    for vector in others:
        assert inside(cone, vector) == reachable(generators, vector)


@given(vectors)
@settings(max_examples=100, deadline=None)
def test_generators_and_their_sums_lie_in_their_cone(drawn):
    generators, _ = drawn
    cone = cone_of(generators)
    assert all(inside(cone, g) for g in generators)
    assert inside(cone, tuple(np.sum(generators, axis=0)))


@given(vectors, st.data())
@settings(max_examples=150, deadline=None)
def test_without_columns_is_the_part_where_they_are_zero(drawn, data):
    generators, others = drawn
    columns = data.draw(st.sets(st.integers(0, len(generators[0]) - 1)))
    left = without_columns({g: frozenset([str(i)]) for i, g in enumerate(generators)}, columns)
    for vector in others:
        flat = tuple(0 if i in columns else x for i, x in enumerate(vector))
        if any(flat):
            assert reachable(generators, flat) == bool(left and reachable(list(left), flat))


@given(vectors)
@settings(max_examples=150, deadline=None)
def test_what_adds_up_to_zero_is_named(drawn):
    generators, _ = drawn
    names = {g: frozenset([str(i)]) for i, g in reversed(list(enumerate(generators)))}
    left = without_columns(names, range(len(generators[0])))
    undone = any(reachable(generators, tuple(-x for x in g)) for g in generators)
    assert bool(left) == undone
    for vector, found in left.items():
        assert not any(vector)
        named = [generators[int(i)] for i in found]
        assert any(reachable(named, tuple(-x for x in g)) for g in named)


@given(vectors, st.randoms())
@settings(max_examples=100, deadline=None)
def test_the_order_of_generators_does_not_matter(drawn, random):
    generators, others = drawn
    mixed = generators[:]
    random.shuffle(mixed)
    one, other = cone_of(generators), cone_of(mixed)
    assert [inside(one, v) for v in others] == [inside(other, v) for v in others]


def test_small_against_large_has_few_faces():
    """Every gds against every gm of eight transistors: 64 vectors, 16 faces (f ≥ 0 on gds, ≤ 0 on gm)."""
    size = 16
    generators = [
        tuple((i == small) - (i == large) for i in range(size))
        for small in range(8)
        for large in range(8, 16)
    ]
    cone = cone_of(generators)
    assert (len(cone.faces), len(cone.planes)) == (16, 1)
    assert without_columns({g: frozenset() for g in generators}, range(size)) == {}


def test_three_tiers_of_eight_are_turned_quickly():
    """gds ≪ gmb ≪ gm: a face for every set of gmb, since these are not compared with one another."""
    tiers = [[tuple(int(i == 8 * tier + k) for i in range(24)) for k in range(8)] for tier in range(3)]
    generators = [
        tuple(x - y for x, y in zip(small, large, strict=True))
        for tier in (0, 1)
        for small in tiers[tier]
        for large in tiers[tier + 1]
    ]
    cone = cone_of(generators)
    assert (len(cone.faces), len(cone.planes)) == (2**8 - 2 + 16, 1)


@pytest.mark.parametrize("generators", [[(1, -1), (-1, 1)], [(1, -1, 0), (0, 1, -1), (-1, 0, 1)]])
def test_a_ring_is_made_of_all_its_members(generators):
    names = {g: frozenset([str(i)]) for i, g in enumerate(generators)}
    (found,) = without_columns(names, range(len(generators[0]))).values()
    assert found == {str(i) for i in range(len(generators))}
