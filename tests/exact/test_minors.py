"""The minor graph against the definition of a determinant: a signed sum over permutations."""

from __future__ import annotations

from fractions import Fraction
from itertools import permutations
from math import prod

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.errors import TooLargeError
from symamp.exact import minors
from symamp.exact.minors import minor_graph, row_order
from symamp.exact.system import Entry, Term

Rows = list[dict[int, Entry]]
NAMES = ("x", "y", "z", "w")

terms = st.builds(
    Term,
    st.sampled_from((-2, -1, 1, 3)),
    st.sampled_from((*NAMES, None)),
    st.just(1),
    st.integers(0, 1),
)
entries = st.lists(terms, min_size=1, max_size=3).map(tuple)


@st.composite
def matrices(draw: st.DrawFn, most: int = 5, extra: int = 0) -> Rows:
    """Rows of a sparse matrix with `extra` columns more than rows."""
    size = draw(st.integers(1, most))
    columns = st.lists(st.integers(0, size + extra - 1), min_size=1, max_size=size + extra, unique=True)
    return [{column: draw(entries) for column in sorted(draw(columns))} for _ in range(size)]


def expansion(rows: Rows, columns: list[int]) -> list[tuple[int, list[Entry]]]:
    """The products of the determinant of these columns: sign, and an entry from each row."""
    found = []
    for order in permutations(range(len(rows))):
        product = [rows[i].get(columns[k]) for i, k in enumerate(order)]
        if all(product):
            inversions = sum(a > b for i, a in enumerate(order) for b in order[i + 1 :])
            found.append(((-1) ** inversions, [entry for entry in product if entry]))
    return found


def value(entry: Entry, at: dict[str, Fraction], s: Fraction) -> Fraction:
    return sum(
        (c * (at[x] ** p if x else 1) * (s if s_power else 1) for c, x, p, s_power in entry),
        start=Fraction(0),
    )


def mask(columns: list[int]) -> int:
    return sum(1 << column for column in columns)


@settings(deadline=None)
@given(matrices(extra=1), st.data())
def test_sums_of_minors_equal_the_permutation_expansion(rows: Rows, data: st.DataObject) -> None:
    size = len(rows)
    numbers = st.fractions(-5, 5, max_denominator=7)
    at, s = {name: data.draw(numbers) for name in NAMES}, data.draw(numbers)
    sets = [[c for c in range(size + 1) if c != left_out] for left_out in (size, 0)]
    numerator, denominator = [(3, mask(sets[0])), (-2, mask(sets[1]))], [(1, mask(sets[0]))]
    graph = minor_graph(rows, numerator, denominator)
    determinants = [
        sum((sign * prod(value(e, at, s) for e in product) for sign, product in expansion(rows, columns)), 0)
        for columns in sets
    ]
    # The order of rows that the graph chose is the same in every sum: a common sign.
    found = graph.walk([value(e, at, s) for e in graph.entries], Fraction(1), Fraction(0))
    wanted = (3 * determinants[0] - 2 * determinants[1], determinants[0])
    order = row_order([mask(list(row)) for row in rows])
    sign = (-1) ** sum(a > b for i, a in enumerate(order) for b in order[i + 1 :])
    assert found == (sign * wanted[0], sign * wanted[1])


@given(matrices())
def test_terms_are_counted_as_the_expansion_has_them(rows: Rows) -> None:
    columns = list(range(len(rows)))
    graph = minor_graph(rows, [(1, mask(columns))], [(2, mask(columns))])
    count = sum(prod(len(entry) for entry in product) for _, product in expansion(rows, columns))
    assert graph.count_terms() == (count, count)


@settings(max_examples=25, deadline=None)
@given(matrices(most=4))
def test_walk_over_sympy_expressions_equals_its_determinant(rows: Rows) -> None:
    size, s = len(rows), sympy.Symbol("s")
    matrix = sympy.zeros(size, size)
    for i, row in enumerate(rows):
        for column, entry in row.items():
            matrix[i, column] = written(entry, s)
    everything = [(1, (1 << size) - 1)]
    graph = minor_graph(rows, everything, everything)
    found = graph.walk([written(e, s) for e in graph.entries], sympy.Integer(1), sympy.Integer(0))[0]
    determinant = matrix.det(method="berkowitz")
    assert sympy.expand(found - determinant) == 0 or sympy.expand(found + determinant) == 0


def written(entry: Entry, s: sympy.Symbol) -> sympy.Expr:
    return sympy.Add(*(c * (sympy.Symbol(x) ** p if x else 1) * s**s_power for c, x, p, s_power in entry))


@given(matrices())
def test_the_graph_is_in_order_level_by_level(rows: Rows) -> None:
    everything = [(1, (1 << len(rows)) - 1)]
    graph = minor_graph(rows, everything, everything)
    bounds = [*graph.levels, len(graph.edges)]
    assert len(graph.levels) == len(rows) + 1
    for k in range(1, len(graph.levels)):
        for node in range(bounds[k], bounds[k + 1]):
            assert graph.edges[node]
            for child, entry, sign in graph.edges[node]:
                assert bounds[k - 1] <= child < bounds[k]
                assert 0 <= entry < len(graph.entries)
                assert sign in (-1, 1)
    assert sorted(set(graph.entry_rows)) == list(range(len(rows)))


@given(st.lists(st.integers(1, 255), min_size=1, max_size=9))
def test_an_order_holds_every_row_once(masks: list[int]) -> None:
    assert sorted(row_order(masks)) == list(range(len(masks)))


def test_a_determinant_that_is_zero_by_structure_has_no_minor() -> None:
    one: Entry = (Term(1, "x", 1, 0),)
    graph = minor_graph([{0: one}, {0: one}], [(1, 3)], [(1, 3)])
    assert graph.numerator == graph.denominator == ()
    assert graph.count_terms() == (0, 0)
    assert graph.walk([5] * len(graph.entries), 1, 0) == (0, 0)


def test_a_minor_that_recurs_is_worked_out_once() -> None:
    one: Entry = (Term(1, "x", 1, 0),)
    size = 8
    dense = [dict.fromkeys(range(size), one) for _ in range(size)]
    everything = [(1, (1 << size) - 1)]
    graph = minor_graph(dense, everything, everything)
    assert graph.count_terms()[1] == 40320  # 8!
    assert graph.minors == 2**size - 1  # one for each set of columns that is not empty


def test_a_graph_that_grows_too_large_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(minors, "EDGE_LIMIT", 1000)
    one: Entry = (Term(1, "x", 1, 0),)
    dense = [dict.fromkeys(range(12), one) for _ in range(12)]
    with pytest.raises(TooLargeError, match="1,000 edges"):
        minor_graph(dense, [(1, 4095)], [(1, 4095)])
