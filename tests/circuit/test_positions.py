"""Lines of keys in a TOML text."""

from __future__ import annotations

import pytest

from symamp.circuit.positions import line_of

POSITIONS = """\
a.b.c = 1
"q u" = 2 # comment
[t]
x = { y = [1, # one
  { z = 3 }], "w" = 4 }
[t.u]
v = 5
[[l]]
n = 1
[[l]]
n = 2
[l.m]
k = 3
"""


@pytest.mark.parametrize(
    ("path", "line"),
    [
        (("a", "b", "c"), 1),
        (("q u",), 2),
        (("t",), 3),
        (("t", "x", "y", 0), 4),
        (("t", "x", "y", 1, "z"), 5),
        (("t", "x", "w"), 5),
        (("t", "u", "v"), 7),
        (("l", 0, "n"), 9),
        (("l", 1, "n"), 11),
        (("l", 1, "m", "k"), 13),
        (("t", "x", "nowhere", 3), 4),
        (("nowhere",), None),
        ((), None),
    ],
)
def test_lines_of_keys(path: tuple[str | int, ...], line: int | None) -> None:
    assert line_of(POSITIONS.encode(), path) == line
