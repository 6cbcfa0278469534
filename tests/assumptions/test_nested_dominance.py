"""Dominance on responses that are not written out: against the written-out form, and against exact values."""

from __future__ import annotations

import random
import re
import sys
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import assumed_stages as stages
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from symamp.assumptions import generated
from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.nested import NestedEngine
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.errors import InputError
from symamp.exact.derive import derive
from symamp.exact.forms import Expanded, Nested
from symamp.judge.ledger import make_ledger
from symamp.testing import random_stages

sys.path.append(str(Path(__file__).resolve().parents[1] / "exact"))
from big_stages import bipolar_opamp, folded_cascode

Table = dict[str, object]
GDS: Table = {"name": "gds", "small": ["gds"], "against": ["gm"]}
BODY: Table = {"name": "body", "small": ["gmb"], "against": ["gm"]}
POLE: Table = {"name": "one pole", "dominant_pole": True}
KEPT = [
    [GDS],
    [BODY, GDS],
    [GDS, POLE],
    [BODY, {"name": "apart", "poles_far_apart": True}],
    [{"name": "cgd", "small": ["cgd"], "against": ["cgs"]}, {"name": "band", "band": "10 MHz"}],
    [{"name": "go", "small": ["go", "gpi"], "against": ["gm"]}],
]


def with_tables(stage: Stage, tables: list[Table]) -> Stage:
    return replace(stage, assumptions=tuple(tables))


def both_ways(stage: Stage, name: str, tables: list[Table]) -> tuple[Approximation, Approximation]:
    """The set put to the response written out, and put to it as its graph."""
    stage = with_tables(stage, tables)
    made = read_assumptions(stage)
    one, two = (Approximator(stages.exact(stage, name, nested=nested)) for nested in (False, True))
    assert isinstance(one.exact.form, Expanded)
    assert isinstance(two.exact.form, Nested)
    return one.under(made), two.under(made)


def told(found: Approximation) -> list[tuple[str, str]]:
    """What was dropped, without the term it fell to, of which there may be several."""
    return sorted((d.coefficient, d.term) for d in found.dropped)


def check_same(written: Approximation, nested: Approximation) -> None:
    assert nested.left == {}
    assert (nested.response is None) == (written.response is None), (nested.why, written.why)
    if written.response is None or nested.response is None:
        return
    if nested.dominated is None:  # nothing to compare in this stage: the response stays a graph
        assert isinstance(nested.response.form, Nested)
        return
    assert stages.same(written.response, nested.response)
    assert nested.warnings == written.warnings


@pytest.mark.parametrize("tables", KEPT[:5], ids=str)
@pytest.mark.parametrize(
    "make",
    [stages.common_source, stages.cascode, stages.follower, stages.differential_pair, stages.two_stage],
)
def test_small_stages_are_as_when_they_are_written_out(make, tables) -> None:
    written, nested = both_ways(make().stage(), "gain", tables)
    check_same(written, nested)
    if POLE not in tables:
        assert told(nested) == told(written)
        assert len(nested.kept) == len(written.kept)


@settings(max_examples=80, deadline=None, suppress_health_check=list(HealthCheck))
@given(random_stages(max_nodes=4, max_parts=5), st.sampled_from(KEPT))
def test_random_stages_are_as_when_they_are_written_out(stage: Stage, tables: list[Table]) -> None:
    (name,) = stage.asked
    try:
        written, nested = both_ways(stage, name, tables)
    except InputError:  # a capacitance that no device has, a stage without devices
        assume(False)
    # The larger ones among them share more than a power of s, whatever the values: then all terms must be there.
    check_same(written, nested)


@pytest.mark.parametrize(
    "more",
    [
        {"name": "more", "equal": ["M1", "M2"]},
        {"name": "more", "neglect": ["gmb"]},
        {"name": "more", "dominant_capacitor": "CL"},
    ],
    ids=lambda more: list(more)[1],
)
def test_on_the_graph_after_other_steps(more: Table, monkeypatch: pytest.MonkeyPatch) -> None:
    """What a set leaves of a small stage is written out; here it must stay a graph, as it does in a large one."""
    monkeypatch.setattr(NestedEngine, "_write_out", lambda self, ask, bridges, struck: None)
    written, nested = both_ways(stages.cascode().stage(), "gain", [GDS, more])
    assert nested.response is not None
    check_same(written, nested)


def test_a_resistance_in_its_limit_on_the_graph(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(NestedEngine, "_write_out", lambda self, ask, bridges, struck: None)
    tables = [GDS, {"name": "no load", "open": ["RL"]}, {"name": "no source", "short": ["RS"]}]
    written, nested = both_ways(stages.common_source().stage(), "gain", tables)
    assert nested.response is not None
    check_same(written, nested)


def test_a_formula_set_for_a_symbol_is_refused_in_words(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(NestedEngine, "_write_out", lambda self, ask, bridges, struck: None)
    tables = [GDS, {"name": "set", "set": {"gm2": "2*gm1"}}]
    _, nested = both_ways(stages.cascode().stage(), "gain", tables)
    assert nested.response is None
    assert "not written out" in nested.why
    assert "a formula that is set for a symbol" in nested.why


def test_without_a_bias_value_it_says_which_is_missing() -> None:
    b = StageBuilder("no value")
    b.voltage_source("VIN", "in", "gnd")
    b.mosfet("M1", gate="in", drain="out", source="gnd")
    b.resistor("RL", "out", "gnd")
    b.response("gain", source="VIN", to="out")
    _, nested = both_ways(b.stage(), "gain", [{"name": "it", "small": ["gds"], "against": ["1/RL"]}])
    assert nested.response is None
    assert "needs a bias value for RL, gds1, gm1" in nested.why


def folded(*tables: Table) -> Stage:
    return with_tables(folded_cascode(), list(tables))


def test_a_large_stage_and_what_was_not_generated() -> None:
    """10 MOSFETs with all capacitances: of a0, a1, b0 and b1 enough terms are generated for a dominant pole."""
    stage = folded(GDS, POLE)
    exact = derive(stage, stage.asked["gain"])
    found = Approximator(exact).under(read_assumptions(stage))
    assert found.response is not None
    assert set(found.left) == {"a0", "a1", "b0", "b1"}
    assert all(0 < left <= generated.GOAL for left in found.left.values())
    (remark,) = found.remarks
    assert f"{exact.terms:,} product terms" in remark
    assert "0.0098 % of a0" in remark
    assert found.dropped
    # The generated terms, dropped and kept, are the coefficients but for what is left: by exact rational numbers.
    above, below = exact.exact_coefficients
    values = {name: Fraction(value) for name, value in stage.bias.items()}
    for place, whole, row in (("numerator", above, "a"), ("denominator", below, "b")):
        table = found.dominated.table.rows[("numerator", "denominator").index(place)]
        sums = [
            sum(
                Fraction(int(factor)) * product(terms, monomial, values)
                for factor, monomial in zip(terms.factors, terms.monomials, strict=True)
            )
            for terms in table
        ]
        ratio = sums[1] / sums[0] / (fraction(whole[1]) / fraction(whole[0]))
        assert abs(float(ratio) - 1) <= 1.01 * (found.left[f"{row}0"] + found.left[f"{row}1"])


def product(terms, monomial, values: dict[str, Fraction]) -> Fraction:
    total = Fraction(1)
    for name, place in terms.place.items():
        if monomial[place] and name != "s":
            total *= values[name] ** monomial[place]
    return total


def fraction(value) -> Fraction:
    return Fraction(int(value.p), int(value.q))


def test_terms_that_do_not_suffice_are_refused_with_how_far_it_got(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(generated, "TERM_LIMIT", 500)
    stage = folded(GDS)
    found = Approximator(derive(stage, stage.asked["gain"])).under(read_assumptions(stage))
    assert found.response is None
    assert "not written out" in found.why
    assert re.search(r"the 500 largest of [ab][2-5] leave terms worth \d+ % of it", found.why)


def test_the_ledger_has_figures_and_says_what_was_not_generated(monkeypatch: pytest.MonkeyPatch) -> None:
    stage = folded(GDS, POLE)
    ledger = make_ledger(stage, quantities=["gain.dc", "gain.p1", "gain.bandwidth"])
    assert any("not generated" in remark and remark.startswith("gain: ") for remark in ledger.remarks)
    values = {name: float(value) for name, value in stage.bias.items()}
    exact = derive(stage, stage.asked["gain"])
    dc = ledger["gain.dc"]
    assert dc.exact == pytest.approx(exact.quantity("dc").value, rel=1e-9)
    found = Approximator(exact).under(read_assumptions(stage)).response
    assert dc.error == pytest.approx(found.quantity("dc").value / dc.exact - 1, rel=1e-6)
    assert abs(dc.error) < 0.01
    assert abs(ledger["gain.p1"].error) < 0.1
    assert values


def test_what_was_dropped_is_told() -> None:
    stage = folded(GDS, POLE)
    found = Approximator(derive(stage, stage.asked["gain"])).under(read_assumptions(stage))
    bias = {name: float(value) for name, value in stage.bias.items()}
    for dropped in random.Random(2).sample(found.dropped, 20):
        wanted = stages.formula_value(dropped.term, bias) / stages.formula_value(dropped.against, bias)
        assert dropped.ratio == pytest.approx(wanted, rel=1e-9)


def test_an_op_amp_of_20_transistors(monkeypatch: pytest.MonkeyPatch) -> None:
    """Some 10^19 product terms: what is worth 10 % of a coefficient may stay away here, and is named."""
    monkeypatch.setattr(generated, "TERM_LIMIT", 12_000)
    monkeypatch.setattr(generated, "ENOUGH", 0.1)
    tables: list[Table] = [{"name": "go", "small": ["go", "gpi"], "against": ["gm"]}, POLE]
    stage = with_tables(bipolar_opamp(with_rx=False), tables)
    exact = derive(stage, stage.asked["gain"])
    found = Approximator(exact).under(read_assumptions(stage))
    assert found.response is not None
    assert max(found.left.values()) <= 0.1
    assert found.response.quantity("p1").value == pytest.approx(exact.quantity("p1").value, rel=0.2)
