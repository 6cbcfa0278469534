"""Ways from an exact expression to a hand formula: which are found, and that each of them is one.

A way of the catalogue is checked twice, both times apart from the search: written into the stage file, whose
response under all of its assumptions is then the formula at random bias points; and, at s = 0, by nodal analysis in
exact fractions at bias points at which all that it takes to be small is very small.
"""

from __future__ import annotations

import random
import time
from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import combinations
from math import pi

import numpy as np
import pytest
from scipy.optimize import linprog
from ways_cases import FORMULAS, about, response_of, stage_named, target_of

from symamp.assumptions.apply import Approximator
from symamp.assumptions.catalogue import catalogue
from symamp.assumptions.read import Assumption, read_assumptions
from symamp.circuit.stage import GROUND, Asked, Part, Stage
from symamp.exact.asked_quantity import is_root, parse_quantity
from symamp.exact.cofactors import ratio_of
from symamp.exact.derive import nested_of
from symamp.exact.polys import held, into_ring, ring_of
from symamp.exact.response import Response
from symamp.exact.system import build_system
from symamp.formula import evaluate, parse
from symamp.judge.error_formula import partner_ratio
from symamp.judge.verdict import Way
from symamp.judge.ways import Ways, ways_to

IDENTITY = ("op amp", "gain.dc", "gm1*gm6/((gds1 + gds3)*(gds6 + gds7))")
_SMALL = 1e-8  # what all that a way takes to be small is brought to


def found_for(name: str, text: str, formula: str, *more: str) -> tuple[Stage, Response, tuple[Way, ...]]:
    stage = stage_named(name, *more)
    response, quantity = about(text)
    exact = response_of(stage, response)
    entries = catalogue(stage, exact)
    own = read_assumptions(stage)
    return stage, exact, ways_to(exact, quantity, target_of(stage, formula), own, entries=entries)


def names_for(name: str, text: str, formula: str) -> list[set[str]]:
    return [set(way.names) for way in found_for(name, text, formula)[2]]


def with_way(name: str, way: Way) -> tuple[Stage, tuple[Assumption, ...]]:
    """The stage with the way's tables in its file."""
    stage = stage_named(name, "\n\n", "\n\n".join(way.keys), "\n")
    return stage, read_assumptions(stage)


def one_for_all(stage: Stage, made: Sequence[Assumption], values: Mapping[str, float]) -> dict[str, float]:
    """The values with those of matched parts made the first one's."""
    equal = dict(values)
    for assumption in made:
        for group in assumption.equal:
            first, *others = (stage.parts[label] for label in group)
            for part in others:
                for parameter in first.parameters:
                    equal[part.symbol(parameter)] = equal[first.symbol(parameter)]
    return equal


def value_of(stage: Stage, formula: str, values: Mapping[str, float]) -> float:
    def look_up(name: str) -> float:
        powers = stage.aliases.get(name, {name: 1})
        return float(np.prod([values[n] ** p for n, p in powers.items()]))

    return evaluate(parse(formula), look_up)


@pytest.mark.parametrize(("name", "text", "formula"), [case for case in FORMULAS if case != IDENTITY])
def test_each_way_written_into_the_stage_file_leads_to_the_formula(
    name: str, text: str, formula: str
) -> None:
    _, _, ways = found_for(name, text, formula)
    assert 1 <= len(ways) <= 3
    draw = random.Random(5)
    for way in ways:
        assert not way.own
        assert len(way.keys) == len(way.names)
        stage, made = with_way(name, way)
        response, quantity = about(text)
        approximate = Approximator(response_of(stage, response)).under(made).response
        assert approximate is not None
        for _ in range(4):
            values = {n: float(v) * 10 ** draw.uniform(-0.3, 0.3) for n, v in stage.bias.items()}
            values = one_for_all(stage, made, values)
            wanted = value_of(stage, formula, values)
            if is_root(quantity):
                figures = approximate.figures({n: np.array([v]) for n, v in values.items()}, 1)
                roots = (figures.poles if quantity.name == "p" else figures.zeros)[:, 0]
                assert np.nanmin(np.abs(roots / wanted - 1)) < 1e-6, way.names
            else:
                given = approximate.at(
                    0.0, {n: v for n, v in values.items() if n in approximate.form.symbols}
                )
                assert given.real == pytest.approx(wanted, rel=1e-9), way.names


@pytest.mark.parametrize(
    ("name", "text", "formula"), [c for c in FORMULAS if c[1].endswith(".dc") and c != IDENTITY]
)
def test_the_network_goes_to_the_formula_where_all_that_a_way_takes_to_be_small_is(
    name: str, text: str, formula: str
) -> None:
    """Nodal analysis in fractions, written for this test; the bias point comes from a linear program (scipy)."""
    _, _, ways = found_for(name, text, formula)
    for way in ways:
        stage, made = with_way(name, way)
        response, _ = about(text)
        values = extreme_values(stage, made)
        given = nodal_dc(stage, stage.asked[response], values)
        wanted = value_of(stage, formula, {n: float(v) for n, v in values.items()})
        assert float(given) == pytest.approx(wanted, rel=1e-3), way.names


def extreme_values(stage: Stage, made: Sequence[Assumption]) -> dict[str, Fraction]:
    """Bias values at which every comparison of the assumptions is below `_SMALL`, and limits far below that."""
    names = list(stage.symbols)
    values = one_for_all(stage, made, {n: float(v) for n, v in stage.bias.items()})
    logs = np.log([values[n] for n in names])
    lead = {n: n for n in names}
    for assumption in made:
        for group in assumption.equal:
            first, *others = (stage.parts[label] for label in group)
            lead.update({part.symbol(p): first.symbol(p) for part in others for p in first.parameters})
    rows, bounds = [], []
    for pair in (pair for a in made for pair in a.pairs):
        row = np.zeros(len(names))
        for n, power in pair.difference.items():
            row[names.index(lead[n])] += float(power)
        if row.any():
            rows.append(row)
            bounds.append(np.log(_SMALL) - row @ logs)
    moved = np.zeros(len(names))
    if rows:
        # Least total change: x = up − down.
        a = np.array(rows)
        solved = linprog(np.ones(2 * len(names)), A_ub=np.hstack([a, -a]), b_ub=bounds, bounds=(0, None))
        assert solved.success
        moved = solved.x[: len(names)] - solved.x[len(names) :]
    limits = {n: order for assumption in made for n, order in assumption.orders.items()}
    final = {}
    for i, n in enumerate(names):
        size = float(np.exp(logs[i] + moved[names.index(lead[n])]))
        final[n] = Fraction(size) * Fraction(10) ** (-60 * limits.get(n, 0))
    return final


def nodal_dc(stage: Stage, asked: Asked, values: Mapping[str, Fraction]) -> Fraction:
    """A response at s = 0; sources are voltage sources to ground, and an impedance is that seen by 1 A."""
    held_at: dict[str, Fraction] = {GROUND: Fraction(0)}
    for part in stage.parts.values():
        if part.kind.name == "voltage_source":
            held_at[part.nodes[0]] = Fraction(asked.drive.get(part.label, 0))
    source = asked.looking_source
    if source is not None:
        held_at[stage.parts[source].nodes[0]] = Fraction(1)
    free = sorted(
        {n for p in stage.parts.values() if p.label not in asked.without for n in p.nodes} - set(held_at)
    )
    free = [n for n in free if n != asked.without]
    rows = {n: {m: Fraction(0) for m in (*free, *held_at)} for n in (*free, *held_at)}
    for part in stage.parts.values():
        if part.label not in asked.without:
            stamp(rows, part, values)
    right = {n: Fraction(0) for n in free}
    if asked.looking_into is not None:
        right[asked.looking_into[0]] = Fraction(1)
    system = [[rows[n][m] for m in free] for n in free]
    known = [right[n] - sum(rows[n][m] * v for m, v in held_at.items()) for n in free]
    volts = {**held_at, **dict(zip(free, solved_exactly(system, known), strict=True))}
    if asked.looking_into is not None:
        return volts[asked.looking_into[0]]
    if source is not None:
        node = stage.parts[source].nodes[0]
        return 1 / sum(rows[node][m] * v for m, v in volts.items())
    assert asked.to is not None
    return volts[asked.to[0]] - volts[asked.to[1]]


def stamp(rows: dict[str, dict[str, Fraction]], part: Part, values: Mapping[str, Fraction]) -> None:
    """Conductances and transconductances of one part: the current out of a node into the part."""

    def current(a: str, b: str, c: str, d: str, g: Fraction) -> None:
        for node, sign in ((a, 1), (b, -1)):
            rows[node][c] += sign * g
            rows[node][d] -= sign * g

    of = {p: values[part.symbol(p)] for p in part.parameters}
    if part.kind.name == "resistor":
        a, b = part.nodes
        current(a, b, a, b, 1 / of["resistor"])
    elif part.kind.name == "vccs":
        current(*part.nodes, of["vccs"])
    elif part.kind.name == "mosfet":
        gate, drain, low, body = part.nodes
        current(drain, low, gate, low, of["gm"])
        current(drain, low, drain, low, of["gds"])
        current(drain, low, body, low, of.get("gmb", Fraction(0)))
    elif part.kind.name == "bjt":
        base, collector, emitter = part.nodes
        current(collector, emitter, base, emitter, of["gm"])
        current(collector, emitter, collector, emitter, of["go"])
        current(base, emitter, base, emitter, of["gpi"])


def solved_exactly(matrix: list[list[Fraction]], right: list[Fraction]) -> list[Fraction]:
    """Gauss-Jordan elimination."""
    rows = [[*row, value] for row, value in zip(matrix, right, strict=True)]
    for k in range(len(rows)):
        pivot = next(i for i in range(k, len(rows)) if rows[i][k])
        rows[k], rows[pivot] = rows[pivot], rows[k]
        rows[k] = [x / rows[k][k] for x in rows[k]]
        for i in range(len(rows)):
            if i != k and rows[i][k]:
                rows[i] = [x - rows[i][k] * y for x, y in zip(rows[i], rows[k], strict=True)]
    return [row[-1] for row in rows]


def test_the_cascode_gain_of_the_text_books() -> None:
    """Gray, Hurst, Lewis, Meyer 5e, 3.4, from memory."""
    assert names_for("cascode", "bare.dc", "-gm1*gm2*ro1*ro2") == [
        {"gds is small against gm", "gmb is small against gm"},
        {"gds is small against gm", "no body effect"},
    ]
    assert names_for("cascode", "bare.dc", "-gm1*(gm2 + gmb2)*ro1*ro2") == [{"gds is small against gm"}]


def test_one_pole_of_two_stages_comes_from_three_silent_assumptions() -> None:
    """Gray, Hurst, Lewis, Meyer 5e, 9.4, from memory."""
    assert names_for("two stages", "gain.p2", "-gm2*CC/(C1*C2 + CC*(C1 + C2))") == [
        {
            "gm2*R1 and gm2*R2 are large",
            "poles and zeros lie far apart",
            "the other capacitances are small against CC times the gain of gm2",
        }
    ]


def test_a_load_small_against_ro_or_no_ro_at_all() -> None:
    """Sedra and Smith, common source, from memory."""
    assert names_for("common source", "gain.dc", "-gm1*RL") == [
        {"no channel-length modulation"},
        {"RL is small against ro"},
    ]


def test_what_the_bias_point_speaks_against_is_named_where_nothing_else_leads_there() -> None:
    """The intrinsic gain is claimed of a stage whose load is a tenth of ro: the formula rests on the contrary."""
    found = names_for("common source", "gain.dc", "-gm1*ro1")
    assert {"ro is small against RL"} in found
    assert {"RL is open: an ideal current source as load"} in found


def test_matched_parts_may_be_named_by_either_of_them() -> None:
    by_first = names_for("pair", "gain.dc", "gm1/(gds2 + gds4)")
    by_second = names_for("pair", "gain.dc", "gm2/(gds1 + gds3)")
    assert by_first == by_second
    assert by_first == [{"gds is small against gm", "M1 and M2 are matched", "M3 and M4 are matched"}]


def test_an_identity_and_a_wrong_formula_need_no_way_and_have_none() -> None:
    assert found_for(*IDENTITY)[2] == ()
    assert found_for("cascode", "bare.dc", "-2*gm1*gm2*ro1*ro2")[2] == ()
    assert found_for("cascode", "bare.dc", "gm1*gm2*ro1*ro2")[2] == ()
    assert found_for("cascode", "bare.dc", "-gm1*ro2*gm2*ro2")[2] == ()
    assert found_for("two stages", "gain.p1", f"-1/(R1*gm2*R2*CC*{2 * pi})")[2] == ()


def test_a_nested_response_and_faces_have_no_ways() -> None:
    stage = stage_named("cascode")
    exact = response_of(stage, "bare")
    target = target_of(stage, "-gm1*gm2*ro1*ro2")
    graph = ratio_of(build_system(stage, exact.asked.without), exact.asked)
    nested = replace(exact, form=nested_of(stage, graph))
    assert ways_to(nested, parse_quantity("dc"), target, ()) == ()
    entries = catalogue(stage, exact)
    assert ways_to(exact, parse_quantity("dc.db"), target, (), entries=entries) == ()
    assert ways_to(exact, parse_quantity("bandwidth"), target, (), entries=entries) == ()


OWN = """
[[assumption]]
name = "gds against gm"
small = ["gds"]
against = ["gm"]

[[assumption]]
name = "no body"
neglect = ["gmb"]

[[assumption]]
name = "body against gm"
small = ["gmb"]
against = ["gm"]

[[assumption]]
name = "one capacitor"
dominant_capacitor = "CL"

[[assumption]]
name = "elsewhere"
open = ["RL"]
for = ["gain"]
"""


def test_the_stages_own_assumptions_come_first_and_none_is_named_that_is_not_needed() -> None:
    _, _, ways = found_for("cascode", "bare.dc", "-gm1*gm2*ro1*ro2", OWN)
    assert ways == (
        Way(("gds against gm", "no body"), own=True),
        Way(("gds against gm", "body against gm"), own=True),
    )
    _, _, ways = found_for("cascode", "gain.dc", "-gm1*gm2*ro1*ro2", OWN)
    assert [way.names for way in ways] == [
        ("gds against gm", "no body", "elsewhere"),
        ("gds against gm", "body against gm", "elsewhere"),
    ]


def test_own_assumptions_that_lead_part_of_the_way_stand_with_the_catalogue() -> None:
    partly = OWN.split("[[assumption]]")[1]
    _, _, ways = found_for("cascode", "bare.dc", "-gm1*gm2*ro1*ro2", "\n[[assumption]]" + partly)
    assert ways[0].names[0] == "gds against gm"
    assert not ways[0].own
    assert len(ways[0].keys) == 1  # the lines of what the stage file lacks


def test_without_the_catalogue_only_the_stages_own() -> None:
    stage = stage_named("cascode")
    exact = response_of(stage, "bare")
    ways = Ways(exact, (), catalogue(stage, exact))
    target = target_of(stage, "-gm1*gm2*ro1*ro2")
    assert ways.to(parse_quantity("dc"), target, wider=False) == ()
    assert ways.to(parse_quantity("dc"), target)


_TABLES = (
    'small = ["gds"]\nagainst = ["gm"]',
    'neglect = ["gmb"]',
    'small = ["gmb"]\nagainst = ["gm"]',
    'small = ["gds1"]\nagainst = ["gm"]',
    'open = ["RL"]',
    'dominant_capacitor = "CL"',
    'small = ["gm2*ro2*ro1"]\nagainst = ["RL"]',
    "dominant_pole = true",
    "poles_far_apart = true",
    'neglect = ["csb", "cdb", "cgd"]',
    'neglect = ["gmb"]\nsmall = ["gds"]\nagainst = ["gm"]\npoles_far_apart = true',
)


@pytest.mark.parametrize("seed", range(10))
def test_minimal_sets_of_own_assumptions_against_all_subsets(seed: int) -> None:
    """By the definition: every subset put to the engine, and of those that lead to the formula the minimal ones."""
    draw = random.Random(seed)
    tables = draw.sample(_TABLES, 6)
    text = "".join(f'\n[[assumption]]\nname = "a{i}"\n{table}\n' for i, table in enumerate(tables))
    stage = stage_named("cascode", text)
    made = read_assumptions(stage)
    exact = response_of(stage, "gain")
    for quantity in (parse_quantity("dc"), parse_quantity("p1"), parse_quantity("b1")):
        outcomes = {}
        for size in range(len(made) + 1):
            for chosen in combinations(made, size):
                response = Approximator(exact).under(chosen).response
                ratio = None if response is None else partner_ratio(exact, response, quantity)
                outcomes[frozenset(a.name for a in chosen)] = ratio
        known = [ratio for names, ratio in outcomes.items() if names and ratio is not None]
        for target in draw.sample(known, min(2, len(known))):
            reach = [n for n, ratio in outcomes.items() if ratio is not None and alike(stage, ratio, target)]
            minimal = {n for n in reach if not any(other < n for other in reach)}
            ways = Ways(exact, made).to(quantity, target)
            found = {frozenset(way.names) for way in ways}
            if frozenset() in minimal:
                assert not found
            else:
                assert len(found) == min(3, len(minimal)), (tables, quantity.text)
                assert found <= minimal


def alike(stage: Stage, one: tuple, other: tuple) -> bool:
    ring = ring_of(stage.symbols, held(*one, *other))
    (a, b), (c, d) = (tuple(into_ring(p, ring) for p in each) for each in (one, other))
    return bool(a * d == c * b)


def test_the_same_ways_each_time_and_within_a_small_budget() -> None:
    stage = stage_named("op amp")
    exact = response_of(stage, "gain")
    entries = catalogue(stage, exact)
    target = target_of(stage, "-(gds1 + gds3)*(gds6 + gds7)/(gm6*CC)")
    first = ways_to(exact, parse_quantity("p1"), target, (), entries=entries)
    assert first == ways_to(exact, parse_quantity("p1"), target, (), entries=entries)
    # No network made of the stage: only comparisons of terms, and what is said of roots.
    for way in ways_to(exact, parse_quantity("p1"), target, (), entries=entries, budget=0):
        assert not any("dominant_capacitor" in key or "neglect" in key or "short" in key for key in way.keys)


def test_a_formula_with_a_symbol_that_the_response_lacks_has_no_way() -> None:
    assert found_for("cascode", "bare.dc", "-gm1*RL")[2] == ()


def test_seven_transistors_with_all_capacitances() -> None:
    """Thousands of terms, a way of three changes of the network, and more comparisons than can be pooled at once."""
    stage, exact, ways = found_for("full op amp", "gain.p1", "-(gds2 + gds4)*(gds6 + gds7)/(gm6*CC)")
    assert exact.form.terms > 5000
    assert set(ways[0].names) == {
        "gds is small against gm",
        "M1 and M2 are matched",
        "M3 and M4 are matched",
        "CC is the only capacitance that counts",
    }
    assert stage.title == "full op amp"


def test_a_formula_of_many_terms_takes_bounded_time_and_memory() -> None:
    """Some 10^4 terms: it is no limit of the exact expression, and is not multiplied out with it."""
    text = "-(gm1 + gds1 + gds2 + gm2 + gmb2)^12/(gm2 + gds1 + gds2 + gmb2 + gm1)^11/gds1"
    start = time.perf_counter()
    assert found_for("cascode", "bare.dc", f"{text} + gds1*gm1/(gds2^2 + gm2*gmb2)")[2] == ()
    assert time.perf_counter() - start < 10
