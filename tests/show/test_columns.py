"""Plain tables: aligned on decimal points, and never wider than they may be."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from symamp.show.columns import LEFT, POINT, table_groups, table_lines

ROWS = [
    ["first", "−387.2", "51.76 dB"],
    ["a longer name", "489.1 kHz", ""],
    ["x", "0", "none"],
    ["y", "none", "z"],
]


def test_numbers_stand_on_their_decimal_points() -> None:
    lines = table_lines(["name", "value", "beside"], ROWS, [LEFT, POINT, LEFT])
    assert lines[1].index("−387") + 4 == lines[1].index(".2")
    assert lines[1].index(".2") == lines[2].index(".1")
    assert lines[3].index("0") == lines[2].index(".1") - 1


def test_columns_begin_under_their_headers() -> None:
    lines = table_lines(["name", "value", "beside"], ROWS, [LEFT, POINT, LEFT])
    assert lines[0] == "  name            value        beside"
    assert lines[1][lines[0].index("beside") :] == "51.76 dB"
    assert all(line == line.rstrip() for line in lines)


def test_a_last_cell_that_does_not_fit_stands_under_its_row() -> None:
    rows = [["a", "1.5", "far out on the right"], ["b", "22", "near"]]
    groups = table_groups(["name", "value", "where"], rows, [LEFT, POINT, LEFT], width=26)
    assert groups[0] == ["  name   value   where"]
    assert groups[1] == ["  a       1.5", "      where: far out on", "      the right"]
    assert groups[2] == ["  b      22      near"]


def test_a_last_column_that_is_empty_then_loses_its_header() -> None:
    rows = [["a", "1.5", "far out on the right"]]
    groups = table_groups(["name", "value", "where"], rows, [LEFT, POINT, LEFT], width=20)
    assert groups[0] == ["  name   value"]


@given(
    st.lists(st.tuples(st.text("ab ", max_size=12), st.floats(-1e4, 1e4)), min_size=1, max_size=5),
    st.integers(40, 90),
)
def test_with_words_short_enough_no_line_is_wider_than_it_may_be(
    rows: list[tuple[str, float]], width: int
) -> None:
    cells = [["row", f"{x:.2f}", "word " * 9 + text] for text, x in rows]
    lines = table_lines(["name", "value", "words"], cells, [LEFT, POINT, LEFT], width=width)
    assert max(map(len, lines)) <= width
    text = " ".join(" ".join(lines).split())
    assert text.count("word ") + text.count("word\n") >= 8 * len(rows)


def test_without_rows_the_headers_stand_alone() -> None:
    assert table_lines(["a", "b"], [], [LEFT, POINT]) == ["  a   b"]
