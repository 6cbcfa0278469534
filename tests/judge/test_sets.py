"""Figures of a ledger as weighted sums over sets: against their definitions, written out."""

from __future__ import annotations

from itertools import permutations
from statistics import fmean

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.judge.sets import SHARES_LIMIT, Plan, names_of

NAMES = ("first", "second", "third", "fourth", "fifth")


@st.composite
def errors_of_sets(draw: st.DrawFn, most: int = 5) -> tuple[int, dict[int, float]]:
    """n, and an error for every set of n assumptions; that of the empty set is 0."""
    n = draw(st.integers(1, most))
    number = st.floats(-1e3, 1e3, allow_nan=False).map(lambda x: round(x, 4))
    drawn = draw(st.lists(number, min_size=2**n - 1, max_size=2**n - 1))
    return n, {0: 0.0, **dict(enumerate(drawn, start=1))}


def figures_of(n: int, errors: dict[int, float]) -> tuple[Plan, dict[tuple[int, str], float], float]:
    plan = Plan(n)
    found = plan.figures(np.array([[errors[mask]] for mask in plan.masks]))[:, 0]
    return plan, dict(zip(plan.rows, found[1:], strict=True)), float(found[0])


def mean_increment(n: int, errors: dict[int, float], k: int) -> float:
    """k's increment averaged over every order in which the n assumptions can be made."""
    increments = []
    for order in permutations(range(n)):
        before = sum(1 << j for j in order[: order.index(k)])
        increments.append(errors[before | 1 << k] - errors[before])
    return fmean(increments)


@settings(deadline=None)
@given(errors_of_sets())
def test_share_is_the_mean_increment_over_all_orders(given_errors: tuple[int, dict[int, float]]) -> None:
    n, errors = given_errors
    _, figures, _ = figures_of(n, errors)
    for k in range(n):
        assert figures[k, "share"] == pytest.approx(mean_increment(n, errors, k), abs=1e-8)


@given(errors_of_sets())
def test_shares_and_added_add_up_to_the_error_of_all(given_errors: tuple[int, dict[int, float]]) -> None:
    n, errors = given_errors
    _, figures, whole = figures_of(n, errors)
    assert whole == errors[2**n - 1]
    assert sum(figures[k, "share"] for k in range(n)) == pytest.approx(whole, abs=1e-8)
    assert sum(figures[k, "added"] for k in range(n)) == pytest.approx(whole, abs=1e-8)


@given(errors_of_sets())
def test_alone_added_and_last_are_as_defined(given_errors: tuple[int, dict[int, float]]) -> None:
    n, errors = given_errors
    _, figures, _ = figures_of(n, errors)
    whole = 2**n - 1
    for k in range(n):
        upto = 2 ** (k + 1) - 1
        assert figures[k, "alone"] == pytest.approx(errors[1 << k], abs=1e-9)
        assert figures[k, "added"] == pytest.approx(errors[upto] - errors[upto ^ 1 << k], abs=1e-9)
        assert figures[k, "last"] == pytest.approx(errors[whole] - errors[whole ^ 1 << k], abs=1e-9)


@pytest.mark.parametrize("n", [SHARES_LIMIT, SHARES_LIMIT + 1, 20])
def test_up_to_twelve_assumptions_all_sets_are_made_and_above_the_few_that_are_needed(n: int) -> None:
    plan = Plan(n)
    assert plan.shares == (n <= SHARES_LIMIT)
    assert len(plan.masks) == (2**n if plan.shares else len(set(plan.masks)))
    assert len(plan.masks) <= max(2**SHARES_LIMIT, 3 * n + 2)
    assert plan.masks[0] == 0
    assert plan.masks[-1] == 2**n - 1


def test_with_thirteen_assumptions_the_other_figures_are_right() -> None:
    n = 13
    rng = np.random.default_rng(4)
    weight, pairs = rng.normal(size=n), rng.normal(size=(n, n))

    def error(mask: int) -> float:
        inside = [k for k in range(n) if mask >> k & 1]
        return float(
            sum(weight[k] for k in inside) + sum(pairs[i, j] for i in inside for j in inside if i < j)
        )

    plan = Plan(n)
    found = plan.figures(np.array([[error(mask)] for mask in plan.masks]))[:, 0]
    rows = dict(zip(plan.rows, found[1:], strict=True))
    assert {name for _, name in plan.rows} == {"alone", "added", "last"}
    whole = 2**n - 1
    assert found[0] == pytest.approx(error(whole))
    for k in range(n):
        upto = 2 ** (k + 1) - 1
        assert rows[k, "alone"] == pytest.approx(weight[k])
        assert rows[k, "added"] == pytest.approx(error(upto) - error(upto ^ 1 << k))
        assert rows[k, "last"] == pytest.approx(error(whole) - error(whole ^ 1 << k))


def test_complex_errors_are_summed_as_complex_numbers() -> None:
    plan = Plan(2)
    errors = np.array([[0], [1 + 1j], [2j], [3 - 1j]])
    rows = dict(zip(plan.rows, plan.figures(errors)[1:, 0], strict=True))
    assert rows[1, "added"] == 2 - 2j
    assert rows[0, "share"] + rows[1, "share"] == pytest.approx(3 - 1j)


def test_several_points_are_worked_out_side_by_side() -> None:
    plan = Plan(2)
    errors = np.array([[0.0, 0.0], [1.0, 10.0], [2.0, 20.0], [5.0, 50.0]])
    assert plan.figures(errors)[:, 1] == pytest.approx(10 * plan.figures(errors)[:, 0])


@given(st.integers(2, 4), st.data())
def test_a_figure_is_nan_just_where_it_needs_a_set_without_value(n: int, data: st.DataObject) -> None:
    gone = data.draw(st.integers(1, 2**n - 1))
    plan = Plan(n)
    errors = np.ones((2**n, 1))
    errors[0], errors[gone] = 0.0, np.nan
    found = plan.figures(errors)[:, 0]
    whole = 2**n - 1
    for row, (k, name) in enumerate(plan.rows, start=1):
        upto = 2 ** (k + 1) - 1
        needs = {
            "alone": {1 << k},
            "added": {upto, upto ^ 1 << k},
            "last": {whole, whole ^ 1 << k},
            "share": set(range(2**n)),
        }[name]
        assert np.isnan(found[row]) == (gone in needs), (k, name)
    assert np.isnan(found[0]) == (gone == whole)


def test_why_names_the_smallest_set_and_of_equals_the_first_listed() -> None:
    plan = Plan(3)
    errors = np.zeros(8)
    errors[[0b111, 0b110, 0b101]] = np.nan
    row = 1 + plan.rows.index((0, "share"))
    assert plan.smallest_missing(row, errors) == 0b101
    assert names_of(0b101, NAMES) == ("first", "third")
    alone = 1 + plan.rows.index((0, "alone"))
    assert plan.smallest_missing(alone, errors) is None
    last = 1 + plan.rows.index((0, "last"))
    assert plan.smallest_missing(last, errors) == 0b110
