"""The search for a short formula: its ladder, what it rests on, its trade-off."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from symamp.assumptions.catalogue import catalogue
from symamp.assumptions.read import Assumption, read_assumptions
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.exact.asked_quantity import parse_quantity
from symamp.exact.derive import derive
from symamp.judge.sample import sample_of
from symamp.judge.shorten import make_shortest
from symamp.judge.shortening import Search, Tried, pareto
from symamp.judge.shortening_measures import OfQuantity

RECIPE = Path(__file__).resolve().parents[2] / "recipes" / "the-shortest-formula" / "frontend.stage.toml"
OPAMP = """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "x", drain = "out", source = "gnd" }
[capacitor]
C1 = ["x", "gnd"]
C2 = ["out", "gnd"]
CC = ["x", "out"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "0.5 mS", gds = "4 uS" }
M2 = { gm = "4 mS", gds = "30 uS" }
C1 = "0.2 pF"
C2 = "5 pF"
CC = "2 pF"
[span]
gm2 = "30 %"
C2 = ["2 pF", "8 pF"]
"""


def opamp() -> Stage:
    return parse_stage(OPAMP.encode(), file=None, folder=Path())


def search_of(stage: Stage, about: str, within: float) -> Search:
    name, _, quantity = about.partition(".")
    exact = derive(stage, stage.asked[name])
    candidates: list[Assumption] = list(read_assumptions(stage))
    candidates += [e.assumption for e in catalogue(stage, exact) if e.plausible and not e.assumption.equal]
    measure = OfQuantity(exact, parse_quantity(quantity), sample_of(stage))
    return Search(exact, measure, candidates, within)


def _valued(polynomial: Any, values: Mapping[str, Any]) -> Any:
    """Term by term."""
    total: Any = 0.0
    for exponents, coefficient in polynomial.terms():
        term: Any = float(coefficient)
        for name, power in zip(polynomial.context().names(), exponents, strict=True):
            term = term * values[name] ** int(power) if power else term
        total = total + term
    return total


def tried(terms: int, worst: float) -> Tried:
    context = read_stage(RECIPE)
    form = derive(context, context.asked["gain"]).form.denominator[0]  # type: ignore[union-attr]
    names = form.context()
    monomials = [tuple(int(i == k) for i in range(names.nvars())) for k in range(names.nvars())]
    above = names.from_dict(dict.fromkeys(monomials[: terms - 1], 1))
    return Tried((above, names.constant(1)), frozenset(), 0, worst)


@pytest.mark.parametrize("about", ["gain.dc", "gain.p1", "gain.p2", "gain.z1", "gain.gain_bandwidth"])
def test_a_looser_bound_has_all_formulas_of_a_tighter_one(about: str) -> None:
    """So that it never gives a longer one, whatever the bounds are."""
    before: set[object] = set()
    shortest = 10**9
    for within in (0.004, 0.013, 0.05, 0.07, 0.2):
        search = search_of(opamp(), about, within)
        found = {(str(t.ratio[0]), str(t.ratio[1])) for t in search.run() if t.ratio is not None}
        assert before <= found
        allowed = [t.terms for t in search.tried if t.worst <= within]
        if allowed:
            assert min(allowed) <= shortest
            shortest = min(allowed)
        before = found
    assert shortest < 10**9


def test_what_is_said_of_the_error_is_so() -> None:
    """Every formula tried, valued again at the sample."""
    stage = opamp()
    search = search_of(stage, "gain.p2", 0.05)
    sample = sample_of(stage)
    exact = derive(stage, stage.asked["gain"]).figures(sample.values, sample.points).poles[1]
    for each in search.run():
        assert each.ratio is not None
        above, below = (_valued(side, sample.values) for side in each.ratio)
        worst = float(np.abs(above / below / exact - 1).max())
        assert worst == pytest.approx(each.worst, rel=1e-6, abs=1e-11)


def test_the_same_run_gives_the_same_formulas() -> None:
    runs = [search_of(opamp(), "gain.p2", 0.05).run() for _ in range(2)]
    assert [(str(t.ratio), sorted(t.made), t.dropped, t.worst) for t in runs[0]] == [
        (str(t.ratio), sorted(t.made), t.dropped, t.worst) for t in runs[1]
    ]


def test_no_assumption_that_a_formula_does_not_need() -> None:
    search = search_of(read_stage(RECIPE), "rout.dc", 0.05)
    for each in search.run():
        if each.made and not each.dropped:
            least = search.pruned(each)
            assert search.of(least.made).ratio == each.ratio
            for name in least.made:
                assert search.of(least.made - {name}).ratio != each.ratio


def test_a_general_assumption_stands_for_several_special_ones() -> None:
    search = search_of(read_stage(RECIPE), "rout.dc", 0.05)
    special = frozenset({"the ground strap is a short", "ro1 is small against RL", "ro2 is small against RL"})
    assert search.pruned(search.of(special)).made == {"the ground strap is a short", "ro is small against RL"}


def test_the_trade_off_leaves_out_what_serves_nobody() -> None:
    given = [tried(9, 0.0), tried(8, 0.03), tried(7, 0.031), tried(6, 0.2), tried(5, 0.1), tried(3, 7.0)]
    assert [(t.terms, t.worst) for t in pareto(given, 0.05)] == [(9, 0.0), (7, 0.031), (5, 0.1)]


def test_the_trade_off_has_the_shortest_that_is_allowed() -> None:
    """Though one that is shorter still is off by hardly more than allowed."""
    given = [tried(9, 0.0), tried(7, 0.0499), tried(6, 0.0501)]
    assert [t.terms for t in pareto(given, 0.05)] == [9, 7, 6]


def test_what_is_zero_has_no_short_formula() -> None:
    found = make_shortest(read_stage(RECIPE), 0.05, quantities=["gain.hf"], points=16).found[0]
    assert found.shape is None
    assert found.why.startswith("it is 0")


def test_a_sample_is_thinned_evenly_from_the_bias_point() -> None:
    stage = opamp()
    whole = sample_of(stage)
    few = whole.thinned(50)
    assert few.points == 50
    assert {name: value[0] for name, value in few.values.items()} == {
        name: value[0] for name, value in whole.values.items()
    }
    assert whole.thinned(10**6) is whole
