"""Formulas over arrays: each element as the float algebra has it, by IEEE 754's rules, broadcast, and silent."""

from __future__ import annotations

import math
import warnings
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.formula import Binary, Call, Name, Negate, Node, Number, Parallel, Pi, Power, evaluate, parse
from symamp.formula_arrays import evaluate_arrays

EDGES = np.array([0.0, 1.0, -2.5, math.inf, -math.inf, math.nan, 1e-300, 1e300, 3.0])


def _trees() -> st.SearchStrategy[Node]:
    leaves = st.one_of(
        st.sampled_from("ab").map(Name),
        st.just(Pi()),
        st.builds(lambda x: Number(Fraction(x, 7)), st.integers(0, 50)),
    )
    exponents = st.sampled_from([Fraction(2), Fraction(3), Fraction(-1), Fraction(1, 2), Fraction(-1, 3)])
    return st.recursive(
        leaves,
        lambda inner: st.one_of(
            st.builds(Binary, st.sampled_from("+-*/"), inner, inner),
            st.builds(Parallel, inner, inner),
            st.builds(Negate, inner),
            st.builds(Power, inner, exponents),
            st.builds(Call, st.sampled_from(["sqrt", "abs"]), inner),
        ),
        max_leaves=6,
    )


@given(_trees())
def test_each_element_is_what_the_float_algebra_says(tree: Node) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        values = {"a": EDGES[:, None], "b": EDGES[None, :]}
        found = np.broadcast_to(evaluate_arrays(tree, values.__getitem__), (EDGES.size, EDGES.size))
    for i, a in enumerate(EDGES):
        for j, b in enumerate(EDGES):
            wanted = evaluate(tree, {"a": float(a), "b": float(b)}.__getitem__)
            assert found[i, j] == pytest.approx(wanted, rel=1e-9, abs=1e-290, nan_ok=True)


@pytest.mark.parametrize(
    ("a", "b", "value"),
    [(0.0, 5.0, 0.0), (0.0, 0.0, 0.0), (math.inf, 5.0, 5.0), (math.inf, math.inf, math.inf), (2.0, 2.0, 1.0),
     (0.0, math.inf, 0.0), (2.0, -2.0, math.inf)],
)  # fmt: skip
def test_in_parallel_with_a_short_or_an_open(a: float, b: float, value: float) -> None:
    tree = parse("a || b")
    assert evaluate_arrays(tree, {"a": a, "b": np.array([b])}.__getitem__).tolist() == [value]
    assert evaluate(tree, {"a": a, "b": b}.__getitem__) == value


def test_shapes_broadcast_and_floats_stay_floats() -> None:
    values = {"a": np.arange(1, 4)[:, None], "b": np.arange(1, 3)}  # whole numbers too
    assert evaluate_arrays(parse("a/b - 2"), values.__getitem__).tolist() == [[-1, -1.5], [0, -1], [1, -0.5]]
    alone = evaluate_arrays(parse("2 kohm*pi"), values.__getitem__)
    assert np.ndim(alone) == 0
    assert float(alone) == pytest.approx(2000 * math.pi, rel=1e-15)


def test_division_by_zero_is_infinite_and_the_root_of_a_negative_is_nan() -> None:
    values = {"a": np.array([0.0, -4.0, 4.0])}
    assert evaluate_arrays(parse("1/a"), values.__getitem__).tolist() == [math.inf, -0.25, 0.25]
    assert np.isnan(evaluate_arrays(parse("a/a"), values.__getitem__)).tolist() == [True, False, False]
    assert np.isnan(evaluate_arrays(parse("sqrt(a)"), values.__getitem__)).tolist() == [False, True, False]
    values = {"a": np.array([-math.inf, math.inf])}  # pow(-inf, -1/2) is 0 in C
    assert np.isnan(evaluate_arrays(parse("a**(-1/2)"), values.__getitem__)).tolist() == [True, False]
