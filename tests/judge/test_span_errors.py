"""Figures over a span, against the same worked out point by point from the written-out formulas, slowly."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import sympy
from judged import (
    CASCODE,
    COMMON_SOURCE,
    NO_BODY,
    NO_R2,
    RESONATOR,
    SMALL_GDS,
    extremes,
    slow_figures,
    slow_partner,
    stage_of,
)

from symamp.assumptions.apply import Approximator
from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.exact.derive import derive
from symamp.exact.response import Response
from symamp.judge import span_errors as module
from symamp.judge.ledger import Account, make_ledger
from symamp.span.points import Box, Rows

NO_CGD_LOAD = """
[[assumption]]
name = "cgd against cgs"
small = ["cgd"]
against = ["cgs"]

[[assumption]]
name = "one pole"
dominant_pole = true
"""

FAST = """
[[assumption]]
name = "no gate capacitance"
neglect = ["cgs"]
"""

Point = dict[str, float]
Values = list[dict[str, float]]
GRID = np.geomspace(1e2, 1e13, 3000)


class Slow:
    """One response under every set: coefficients by SymPy's lambdify, roots by numpy, all else by definition."""

    def __init__(self, stage: Stage, name: str) -> None:
        exact = derive(stage, stage.asked[name])
        self.made = [a for a in read_assumptions(stage) if a.applies(name)]
        engine = Approximator(exact)
        self.count = len(self.made)
        self.sets = [
            frozenset(k for k in range(self.count) if mask >> k & 1) for mask in range(1 << self.count)
        ]
        responses = {s: engine.under([self.made[k] for k in sorted(s)]).response for s in self.sets}
        self.ratios = {s: None if r is None else ratio_of(r) for s, r in responses.items()}
        # With a dominant pole z1 comes from a numerator of its own.
        self.own = {
            s: ratio_of(replace(r, form=r.first_zero)) for s, r in responses.items() if r and r.first_zero
        }

    def figures(self, quantity: str, point: Point) -> dict[tuple[int, str], Any]:
        exact = self.ratios[frozenset()]
        assert exact is not None
        truth = value(quantity, *exact(point))

        @cache
        def error(s: frozenset[int]) -> Any:
            ratio = self.own.get(s, self.ratios[s]) if quantity[0] == "z" else self.ratios[s]
            if ratio is None or truth is None:
                return None
            root = quantity[0] in "pz"
            found = partner(quantity, exact(point), ratio(point)) if root else value(quantity, *ratio(point))
            return None if found is None or truth == 0 else (found - truth) / truth

        return slow_figures(self.count, error)


Ratio = Callable[[Point], tuple[list[float], list[float]]]


def ratio_of(response: Response) -> Ratio:
    """The coefficients of a response as functions of a bias point."""
    rows = [[sympy.sympify(c) for c in row or []] for row in (response.numerator, response.denominator)]
    symbols = sorted({x for row in rows for c in row for x in c.free_symbols}, key=str)
    functions = [sympy.lambdify(symbols, row, "math") for row in rows]

    def at(point: Point) -> tuple[list[float], list[float]]:
        above, below = (f(*(point[str(x)] for x in symbols)) for f in functions)
        return [float(c) for c in above], [float(c) for c in below]

    return at


def roots(row: list[float]) -> list[complex]:
    found = np.roots(row[::-1]) if len(row) > 1 else []
    return sorted((complex(r) for r in found), key=lambda r: (abs(r), -r.imag))


def value(quantity: str, above: list[float], below: list[float]) -> Any:
    if quantity[0] in "pz":
        found = roots(below if quantity[0] == "p" else above)
        index = int(quantity[1:]) - 1
        return found[index] if index < len(found) else None
    if quantity == "dc":
        return None if below[0] == 0 else above[0] / below[0]
    level = abs(above[0] / below[0]) / math.sqrt(2) if quantity == "bandwidth" else 1.0
    return first_fall(above, below, level)


def first_fall(above: list[float], below: list[float], level: float) -> float | None:
    """Lowest frequency at which the magnitude falls through a level: a fine grid, then bisection."""

    def excess(w: Any) -> Any:
        s = 1j * w
        return abs(np.polyval(above[::-1], s) / np.polyval(below[::-1], s)) - level

    sizes = excess(GRID)
    falls = np.flatnonzero((sizes[:-1] > 0) & (sizes[1:] <= 0))
    if not falls.size:
        return None
    low, high = float(GRID[falls[0]]), float(GRID[falls[0] + 1])
    for _ in range(45):
        middle = math.sqrt(low * high)
        low, high = (middle, high) if excess(middle) > 0 else (low, middle)
    return low / (2 * math.pi)


def partner(quantity: str, exact: tuple[list[float], ...], approximate: tuple[list[float], ...]) -> Any:
    which = 1 if quantity[0] == "p" else 0
    mine, other = roots(exact[which]), roots(approximate[which])
    index = int(quantity[1:]) - 1
    if index >= len(mine):
        return None
    return slow_partner(mine, other, index, lambda r: abs(np.log(complex(r))))


def points_of(stage: Stage, sampled: int, seed: int) -> Values:
    """All bias points of the span but those of the search, each as {symbol: value}."""
    if stage.span.table is not None:
        blocks = [values for _, values in Rows(stage).blocks()]
    else:
        box = Box.of(stage)
        blocks = [box.values(u) for u in box.blocks(sampled, seed)]
    found: Values = []
    for block in blocks:
        size = max(np.size(v) for v in block.values())
        found += [{n: float(np.broadcast_to(v, size)[i]) for n, v in block.items()} for i in range(size)]
    return found


def compare(
    stage: Stage, quantities: list[str], monkeypatch: pytest.MonkeyPatch, sampled: int = 24
) -> list[Account]:
    """Without its search, every figure over the span is that of the slow way."""
    monkeypatch.setattr(module, "compass_search", lambda *_: 0)
    made = make_ledger(stage, quantities=[f"gain.{q}" for q in quantities], points=sampled, seed=5)
    slow, points = Slow(stage, "gain"), points_of(stage, sampled, 5)
    assert made.points == len(points)
    for account, quantity in zip(made.accounts, quantities, strict=True):
        columns = [slow.figures(quantity, point) for point in points]
        any_complex = any(
            isinstance(v, complex) and abs(v.imag) > 1e-9 * abs(v) for c in columns for v in c.values()
        )
        wanted = {key: [plain(c[key], any_complex) for c in columns] for key in columns[0]}
        same_span(account.span, wanted[-1, "all"], quantity)
        for k, share in enumerate(account.assumptions):
            for name in ("alone", "added", "last", "share"):
                same_span(share.span.get(name), wanted[k, name], f"{quantity} {share.name} {name}")
        if account.span is not None:
            assert account.modulus == any_complex
    return list(made.accounts)


def plain(error: Any, any_complex: bool) -> Any:
    if error is None:
        return None
    return abs(error) if any_complex else float(error.real)


def same_span(figure: Any, wanted: list[Any], what: str) -> None:
    best = extremes(wanted)
    if best is None:
        assert figure is None, what
        return
    assert figure is not None, what
    assert (figure.least, figure.greatest) == pytest.approx(best, rel=1e-6, abs=1e-9), what
    assert figure.missing == sum(x is None for x in wanted), what


def test_a_cascode_over_a_box(monkeypatch: pytest.MonkeyPatch) -> None:
    span = '\n[span]\ngm2 = ["2 mS", "8 mS"]\ngds1 = "30 %"\ngds2 = { follows = "gds1" }\ngmb2 = ["0.1 mS", "1 mS"]\n'
    loaded = CASCODE.replace('gmb = "0.62 mS"', 'gmb = "0.62 mS", csb = "60 fF"')
    stage = stage_of(loaded, span, SMALL_GDS, NO_BODY)
    compare(stage, ["dc", "p1", "p2", "bandwidth"], monkeypatch)


def test_a_stage_whose_roots_go_and_come_over_a_box(monkeypatch: pytest.MonkeyPatch) -> None:
    span = '\n[span]\ngm1 = ["1 mS", "10 mS"]\nRS = ["100 ohm", "20 kohm"]\nCL = ["0.1 pF", "5 pF"]\n'
    stage = stage_of(COMMON_SOURCE, span, NO_CGD_LOAD, FAST)
    accounts = compare(stage, ["dc", "p1", "p2", "z1", "unity_gain_frequency"], monkeypatch)
    # The zero keeps its place under every set; one of the two poles is lost to the dominant one.
    by_name = {account.name: account for account in accounts}
    assert by_name["gain.z1"].error == 0
    assert by_name["gain.p2"].error is None


def test_a_resonator_that_turns_complex(monkeypatch: pytest.MonkeyPatch) -> None:
    span = '\n[span]\nR1 = ["40 ohm", "400 ohm"]\nR2 = ["10 ohm", "60 ohm"]\n'
    accounts = compare(stage_of(RESONATOR, span, NO_R2), ["p1", "p2", "bandwidth"], monkeypatch)
    assert [account.modulus for account in accounts] == [True, True, False]


def test_a_table_row_by_row(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    rows = [",".join(f"{x:.4g}" for x in rng.uniform(0.2, 5, 3)) for _ in range(20)]
    (tmp_path / "t.csv").write_text("gm1 [mS],CL [pF],RS [kohm]\n" + "\n".join(rows) + "\n")
    stage = stage_of(COMMON_SOURCE, '\n[span]\ntable = "t.csv"\n', NO_CGD_LOAD, FAST, folder=tmp_path)
    for account in compare(stage, ["p1", "bandwidth"], monkeypatch):
        assert account.span is not None
        assert set(account.span.where_least) == {"row"}


def test_where_is_the_point_that_has_the_value() -> None:
    span = '\n[span]\ngm2 = ["2 mS", "8 mS"]\ngds1 = "30 %"\ngds2 = { follows = "gds1" }\n'
    stage = stage_of(CASCODE, span, SMALL_GDS, NO_BODY)
    account = make_ledger(stage, quantities=["gain.dc"], points=32)["gain.dc"]
    assert account.span is not None
    slow, bias = Slow(stage, "gain"), {n: float(v) for n, v in stage.bias.items()}
    for value_there, where in (
        (account.span.least, account.span.where_least),
        (account.span.greatest, account.span.where_greatest),
    ):
        assert set(where) == {"gm2", "gds1", "gds2"}
        assert slow.figures("dc", {**bias, **where})[-1, "all"] == pytest.approx(value_there)
        assert where["gds2"] / where["gds1"] == pytest.approx(0.24 / 0.21)


def test_the_search_finds_a_worst_point_that_lies_inside_the_box() -> None:
    # error of the bandwidth is largest where the two poles meet, which is at no corner
    span = '\n[span]\nR1 = ["40 ohm", "400 ohm"]\n'
    found = [
        make_ledger(stage_of(RESONATOR, span, NO_R2), quantities=["gain.p1"], points=n)["gain.p1"].span
        for n in (0, 20000)
    ]
    assert found[0] is not None
    assert found[1] is not None
    assert found[0].greatest == pytest.approx(found[1].greatest, rel=2e-2)


def test_the_same_at_any_number_of_points_in_a_block() -> None:
    calls: list[tuple[str, int, int]] = []
    stage = stage_of(CASCODE, '\n[span]\ngm1 = "50 %"\n', NO_BODY)
    make_ledger(stage, quantities=["gain.dc"], points=20000, progress=lambda *call: calls.append(call))
    assert [call for call in calls if call[0] == "sets of assumptions"] == [
        ("sets of assumptions", 1, 2),
        ("sets of assumptions", 2, 2),
    ]
    seen = [(done, total) for what, done, total in calls if what == "bias points"]
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)
    assert (20003, 20003) in seen
    assert seen[-1][0] == seen[-1][1] > 20003  # the search


def test_where_sets_and_points_are_many_shares_are_looked_at_in_fewer_points(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    span = '\n[span]\ngm1 = ["1 mS", "10 mS"]\nRS = ["100 ohm", "20 kohm"]\nCL = ["0.1 pF", "5 pF"]\n'
    stage = stage_of(COMMON_SOURCE, span, NO_CGD_LOAD, FAST)
    names = ["gain.p1", "gain.bandwidth"]
    monkeypatch.setattr(module, "compass_search", lambda *_: 0)  # it would begin elsewhere
    every = make_ledger(stage, quantities=names, points=256)
    monkeypatch.setattr(module, "_ENOUGH", 8 * 40)  # 8 sets at some 40 points
    monkeypatch.setattr(module, "_AT_ONCE", 8 * 7)
    fewer = make_ledger(stage, quantities=names, points=256)
    assert every.share_points == every.points
    assert 20 < (fewer.share_points or 0) < 150
    assert fewer.points == every.points
    for one, other in zip(every.accounts, fewer.accounts, strict=True):
        assert one.span == other.span
        assert one.error == other.error
        for mine, theirs in zip(one.assumptions, other.assumptions, strict=True):
            for figure in ("alone", "added", "last"):
                assert mine.span[figure] == theirs.span[figure]
            here, there = mine.span["share"], theirs.span["share"]
            assert here.least <= there.least <= there.greatest <= here.greatest
            at_bias = mine.figures["share"]
            assert isinstance(at_bias, float)
            assert there.least <= at_bias <= there.greatest
