"""Every benchmark runs at tiny sizes and compares equal results, so that none rots. No time is asserted."""

from __future__ import annotations

import io
import math

import pytest
from rich.console import Console

from symamp.exact.cofactors import ratio_of
from symamp.exact.system import build_system

from .growing import cascade
from .record import QUICK, Row
from .table import BENCHMARKS, printed


@pytest.mark.parametrize("name", BENCHMARKS)
def test_ours_and_theirs_are_the_same_result(name: str) -> None:
    rows = BENCHMARKS[name](QUICK)
    assert rows
    for row in rows:
        assert row.disagreement <= row.tolerance, row
        assert math.isfinite(row.ratio), row
        assert row.ratio >= 0, row


def test_the_table_says_what_was_missed_and_what_disagrees() -> None:
    console = Console(file=io.StringIO(), width=160)
    printed(
        [
            Row("a", "< 1 s", "2 s", 2.0, False, 0.0, 0.0),
            Row("b", "< 1 s", "0.5 s", 0.5, True, 0.1, 1e-9),
        ],
        console,
    )
    text = console.file.getvalue()  # type: ignore[attr-defined]
    lines = {line.split("│")[1].strip(): line for line in text.splitlines() if line.startswith("│")}
    assert "NO" in lines["a"]
    assert "1.0e-01 NO" in lines["b"]
    assert "yes" in lines["b"]


def test_the_graph_of_a_cascade_grows_linearly() -> None:
    minors = {
        n: ratio_of(build_system(stage := cascade(n)), stage.asked["gain"]).graph.minors for n in range(1, 41)
    }
    assert {minors[n] - minors[n - 1] for n in range(3, 41)} == {minors[3] - minors[2]}
