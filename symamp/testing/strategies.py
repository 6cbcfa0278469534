"""Hypothesis strategies: bias points of a stage, and the stages of files (room: testing)."""

from __future__ import annotations

import os
from collections.abc import Callable, Collection, Sequence
from pathlib import Path
from typing import Any

from hypothesis import strategies as st

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import ENDING, read_stage
from symamp.errors import StageError
from symamp.testing.bias_point import BiasPoint
from symamp.testing.drawing import Option, Pick, selected, sensible_point, span_point
from symamp.testing.plain import plain
from symamp.testing.printed import PrintedStage


def bias_points(stage: Any, symbols: str | Sequence[str] | None = None) -> st.SearchStrategy[BiasPoint]:
    """Bias points of a stage, each a `BiasPoint`: a mapping from every symbol to its value in SI units.

    With a span, points of it: the sides of the box vary, followers follow, all else keeps its bias; or the rows
    of the table. Without one, physically sensible points around the bias, or anywhere where there is none: gm/gds
    from 5 to 200, gmb/gm from 0.05 to 0.4, beta from 20 to 500, gm/go from 500 to 5000, capacitances in their
    usual ratios, all else over two decades. `symbols` are selectors ("gm1", "M1", "gds"): those alone vary.

    Values are round decimals, and shrink to the bias value, symbol by symbol, so that a counterexample shows
    which symbols matter:

        @given(point=bias_points(stage))
        def test_the_gain_is_at_least_ten(point):
            assert abs(gain.at(0, bias=point)) >= 10

    `stage` is a stage of the Python front, a stage file's path, or plain data. Raises ReadError for an unknown
    selector.
    """
    data = plain(stage)
    return _span_points(data, selected(data, symbols))


def sensible_points(stage: Stage) -> st.SearchStrategy[BiasPoint]:
    """Physically sensible bias points, whatever the span and the bias say."""
    return _sensible_points(stage)


def stages_of(*paths: str | os.PathLike[str]) -> st.SearchStrategy[Stage]:
    """The stages of these stage files; of a folder all that lie in it and below.

        @given(stages_of("stages"))
        def test_every_stage_has_a_bias(stage):
            assert stage.bias

    They are plain data; `stages_of("stages").map(symamp.Stage)` gives those that answer. Raises StageError where
    there is none, and as `symamp.load` does for a file that cannot be read.
    """
    files: list[Path] = []
    for path in map(Path, paths):
        files += sorted(path.rglob(f"*{ENDING}")) if path.is_dir() else [path]
    if not files:
        shown = ", ".join(map(str, paths)) or "nothing"
        raise StageError(f"no stage file in {shown}", f"name a folder with files that end in {ENDING}")
    return st.sampled_from([PrintedStage.of(read_stage(path)) for path in dict.fromkeys(files)])


@st.composite
def _span_points(draw: st.DrawFn, stage: Stage, chosen: Collection[str]) -> BiasPoint:
    return span_point(_picking(draw), stage, chosen)


@st.composite
def _sensible_points(draw: st.DrawFn, stage: Stage) -> BiasPoint:
    return sensible_point(_picking(draw), stage)


def _picking(draw: Callable[[st.SearchStrategy[Any]], Any]) -> Pick:
    def pick(options: Sequence[Option], /) -> Option:
        chosen: Option = draw(st.sampled_from(options))
        return chosen

    return pick
