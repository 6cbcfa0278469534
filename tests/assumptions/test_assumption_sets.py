"""Sets of assumptions act as sets: no order in them, nothing from symbols that a response lacks, `for`."""

from __future__ import annotations

from fractions import Fraction
from itertools import permutations
from typing import Any

import assumed_stages as stages
import pytest
from flint import fmpq
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.assumptions.apply import Approximator
from symamp.assumptions.merge import pooled
from symamp.assumptions.read import chosen, read_assumptions
from symamp.assumptions.record import Assumption, Pair
from symamp.circuit.builder import StageBuilder
from symamp.errors import StageError

SETS: dict[str, tuple[Any, list[dict[str, Any]]]] = {
    "cascode": (
        stages.cascode,
        [
            {"small": "gds", "against": "gm"},
            {"neglect": "gmb"},
            {"equal": ["M2", "M1"]},
            {"dominant_pole": True},
        ],
    ),
    "common source": (
        stages.common_source,
        [
            {"miller": {"part": "cgd1", "from": "g", "to": "out"}},
            {"set_": {"RL": "1/gds1"}},
            {"open_": "CL"},
            {"small": "1", "against": "gm1*RL"},
        ],
    ),
    "pair": (
        stages.differential_pair,
        [
            {"equal": ["M4", "M3"]},
            {"equal": ["M2", "M1"]},
            {"equal": ["M3", "M2"]},
            {"small": ["gds"], "against": ["gm"]},
        ],
    ),
    "two stages": (
        stages.two_stage,
        [
            {"set_": {"RZ": "1/gm6", "gm6": "5*gm1"}},
            {"set_": {"CL": "2*CC"}},
            {"dominant_capacitor": "CC"},
            {"poles_far_apart": True},
        ],
    ),
    "common emitter": (
        stages.degenerated,
        [{"short": ["CIN", "COUT"]}, {"short": "CE"}, {"neglect": ["go", "cpi"]}, {"band": "1 MHz"}],
    ),
}


@pytest.mark.parametrize("name", SETS)
@pytest.mark.parametrize("nested", [False, True], ids=["written", "nested"])
def test_no_order(name, nested):
    make, listed = SETS[name]
    seen = []
    for order in permutations(range(len(listed))):
        b: StageBuilder = make()
        for k in order:
            b.assume(f"assumption {k}", **listed[k])
        stage = b.stage()
        made = read_assumptions(stage)
        result = Approximator(stages.exact(stage, nested=nested)).under(made)
        assert result.assumptions == tuple(a.name for a in made)
        found = None if result.response is None else outcome(result.response)
        account = {(d.coefficient, d.term, d.against, d.ratio) for d in result.dropped}
        seen.append((result.why, found, account, set(result.remarks), set(result.warnings)))
    assert all(other == seen[0] for other in seen)
    assert seen[0][1] is not None or nested


def outcome(response) -> Any:
    if response.expanded:
        return stages.texts(response, "numerator"), stages.texts(response, "denominator"), response.apart
    above, below = response.exact_coefficients
    return [str(above[k] / below[below.degree()]) for k in range(above.degree() + 1)], response.apart


@pytest.mark.parametrize(
    "assumption",
    [
        {"neglect": "gm9"},
        {"short": "R9"},
        {"open_": "R9"},
        {"equal": ["M9", "M8"]},
        {"set_": {"R9": "1/gm9"}},
        {"small": "gds9", "against": "gm9"},
        {"miller": {"part": "C9", "from": "far", "to": "away"}},
    ],
    ids=lambda a: next(iter(a)),
)
@pytest.mark.parametrize("make", [stages.common_source, stages.cascode, stages.follower])
@pytest.mark.parametrize("nested", [False, True], ids=["written", "nested"])
def test_symbols_that_the_response_lacks_change_nothing(make, assumption, nested):
    b = make()
    b.mosfet("M9", gate="far", drain="far", source="gnd", gm="1 mS", gds="1 uS")
    b.mosfet("M8", gate="away", drain="away", source="gnd", gm="2 mS", gds="1 uS")
    b.resistor("R9", "far", "gnd", "1 kohm")
    b.capacitor("C9", "far", "away", "1 pF")
    b.response("far", looking_into="far")
    b.assume("it", **assumption)
    stage = b.stage()
    exact = stages.exact(stage, nested=nested)
    made = Approximator(exact).under(read_assumptions(stage))
    assert made.response is not None
    if not nested:
        assert made.response is exact
    for hz in (1e3, 1e8):
        assert made.response.at(hz) == pytest.approx(exact.at(hz), rel=1e-9)
    assert made.response.quantity("p1").value == pytest.approx(exact.quantity("p1").value, rel=1e-9)


def test_a_bridge_that_a_response_takes_off_changes_nothing():
    b = stages.two_stage()
    b.response("open_loop", source="VIN", to="out", without=["CC", "RZ"])
    b.assume("it", miller={"part": "CC", "from": "a", "to": "r"})
    stage = b.stage()
    exact = stages.exact(stage, "open_loop")
    assert Approximator(exact).under(read_assumptions(stage)).response is exact


def test_for_limits_an_assumption_to_some_responses():
    b = stages.cascode()
    b.assume("no body effect", neglect="gmb", for_=["gain", "rout"])
    stage = b.stage()
    made = read_assumptions(stage)
    for name in ("gain", "rout", "mid"):
        exact = stages.exact(stage, name)
        result = Approximator(exact).under(made)
        assert result.assumptions == (() if name == "mid" else ("no body effect",))
        assert (result.response is exact) == (name == "mid")


def test_opposite_assumptions_stand_for_different_responses():
    b = stages.degenerated()
    b.assume("bypassed", short="CE", for_="gain")
    b.assume("not bypassed", open_="CE", for_="rout")
    assert len(read_assumptions(b.stage())) == 2


def test_no_assumption_is_the_exact_response():
    stage = stages.cascode().stage()
    exact = stages.exact(stage)
    made = Approximator(exact).under([])
    assert (made.response, made.why, made.dropped, made.remarks) == (exact, "", (), ())


def test_chosen_by_name():
    b = stages.cascode()
    b.assume("one", neglect="gmb")
    b.assume("two", neglect="cdb")
    made = read_assumptions(b.stage())
    assert [a.name for a in chosen(made, ["two", "one"])] == ["one", "two"]
    assert chosen(made, ["all"]) == made
    with pytest.raises(StageError, match="did you mean 'one'"):
        chosen(made, ["ona"])


def test_a_part_of_a_set_that_agrees_only_as_a_whole_says_so():
    """gds1 small against gds2 and the reverse vanish when M1 and M2 are one; without that they contradict."""
    one, two = {"gds1": Fraction(1)}, {"gds2": Fraction(1)}
    there = Assumption("there", ("dominance",), pairs=(Pair(one, two, "there"),))
    back = Assumption("back", ("dominance",), pairs=(Pair(two, one, "back"),))
    same = Assumption("same", ("equal",), equal=(("M1", "M2"),))
    engine = Approximator(stages.exact(stages.cascode().stage()))
    assert engine.under([there, back, same]).response is not None
    alone = engine.under([there, back])
    assert alone.response is None
    assert "'there' and 'back' contradict" in alone.why or "'back' and 'there' contradict" in alone.why


# Limits against the exact response with symbols scaled by t = 10^-40, in rational numbers


LIMITS = {
    stages.common_source: ["cgs1", "cgd1", "gds1", "gm1", "CL", "RS", "RL"],
    stages.cascode: ["gmb2", "gds1", "gds2", "cdb1", "cgs2", "CL", "gm1", "gm2"],
    stages.follower: ["gds1", "gmb1", "cgs1", "cgd1", "RG", "RS", "CL"],
    stages.degenerated: ["go1", "cpi1", "cmu1", "gpi1", "CIN", "COUT", "CE", "RB", "RL"],
    stages.two_stage: ["gds1", "gds6", "C1", "CC", "RZ", "CL"],
}


@given(st.data())
@settings(max_examples=120, deadline=None)
def test_limits_are_limits(data):
    make = data.draw(st.sampled_from(list(LIMITS)))
    ways = data.draw(
        st.dictionaries(st.sampled_from(LIMITS[make]), st.sampled_from([1, -1]), min_size=1, max_size=4)
    )
    ways = {name: 1 if name.startswith("gm") else order for name, order in ways.items()}
    b = make()
    for name, order in ways.items():
        b.assume(name, **{way_of(name, order): name})
    stage = b.stage()
    name = data.draw(st.sampled_from(list(stage.asked)))
    made = Approximator(stages.exact(stage, name)).under(read_assumptions(stage))
    values = [scaled(stage, name, ways, Fraction(1, 10**k)) for k in (40, 60)]
    if made.response is None:
        if "grows" in made.why:
            assert values[0] is None or (values[1] is not None and abs(values[1]) > 1e10 * abs(values[0]))
        else:
            assert "depends on which goes first" in made.why
        return
    s = Fraction(10**7)
    above, below = (p(flint(s)) for p in made.response.exact_coefficients)
    expected = Fraction(int(above.p), int(above.q)) / Fraction(int(below.p), int(below.q))
    assert values[1] is not None
    difference = abs(values[1] - expected)
    assert difference <= Fraction(1, 10**15) * max(abs(expected), Fraction(1, 10**20))


def way_of(name: str, order: int) -> str:
    """The key that takes a symbol to zero (order 1) or without bound."""
    opens = name[0] in "gcC"
    if name[:2] == "gm" and order > 0:
        return "neglect"
    return "open_" if (order > 0) == opens else "short"


def scaled(stage, name, ways, t):
    """The exact response at s = 10^7 with symbols scaled by t or 1/t; None where it is infinite."""
    bias = {n: v * t ** ways.get(n, 0) for n, v in stage.bias.items()}
    above, below = stages.exact(stage, name).form.exact_coefficients(bias)
    top, bottom = above(flint(Fraction(10**7))), below(flint(Fraction(10**7)))
    if bottom == 0:
        return None
    return Fraction(int(top.p), int(top.q)) / Fraction(int(bottom.p), int(bottom.q))


def flint(x: Fraction):
    return fmpq(x.numerator, x.denominator)


# Step 1 against the exact response at values that agree


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_equal_parts_and_set_formulas_are_values_that_agree(data):
    make, asked, agree = data.draw(st.sampled_from(AGREE))
    b = make()
    for number, assumption in enumerate(asked):
        b.assume(f"assumption {number}", **assumption)
    stage = b.stage()
    bias = {n: v * Fraction(data.draw(st.integers(50, 200)), 100) for n, v in stage.bias.items()}
    made = Approximator(stages.exact(stage)).under(read_assumptions(stage))
    changed = dict(bias)
    for name, value in agree.items():
        changed[name] = value(changed)
    one = made.response.form.exact_coefficients(bias)
    other = stages.exact(stage).form.exact_coefficients(changed)
    assert one[0] * other[1] == one[1] * other[0]


AGREE = [
    (
        stages.differential_pair,
        [{"equal": ["M1", "M2"]}],
        {"gm2": lambda v: v["gm1"], "gds2": lambda v: v["gds1"]},
    ),
    (
        stages.differential_pair,
        [{"equal": ["M4", "M1"]}, {"equal": ["M3", "M4"]}],
        {
            "gm3": lambda v: v["gm1"],
            "gds3": lambda v: v["gds1"],
            "gm4": lambda v: v["gm1"],
            "gds4": lambda v: v["gds1"],
            "cgs4": lambda v: v["cgs3"],
        },
    ),
    (stages.two_stage, [{"set_": {"RZ": "1/gm6"}}], {"RZ": lambda v: 1 / v["gm6"]}),
    (
        stages.two_stage,
        [{"set_": {"RZ": "ro6 || (2/gm6) || 1 kohm"}}],
        {"RZ": lambda v: 1 / (v["gds6"] + v["gm6"] / 2 + Fraction(1, 1000))},
    ),
    (
        stages.two_stage,
        [{"set_": {"CL": "3*CC - C1/2", "CC": "2*C1"}}, {"set_": {"C1": "70 fF"}}],
        {
            "C1": lambda v: Fraction(70, 10**15),
            "CC": lambda v: 2 * v["C1"],
            "CL": lambda v: 3 * v["CC"] - v["C1"] / 2,
        },
    ),
]


def test_overlapping_lists_merge_and_the_first_part_of_the_file_leads():
    b = stages.differential_pair()
    b.assume("one", equal=["M4", "M3"])
    b.assume("two", equal=["M2", "M3"])
    stage = b.stage()
    ask = pooled(stage, read_assumptions(stage))
    assert ask.rename == {
        "gm3": "gm2",
        "gds3": "gds2",
        "gm4": "gm2",
        "gds4": "gds2",
        "cgs4": "cgs3",  # M2 has no cgs: M3's stays, and M4's is one with it
    }


def test_a_formula_that_equal_parts_say_already_is_no_ring():
    b = stages.cascode()
    b.assume("one", equal=["M1", "M2"])
    b.assume("two", set_={"gm2": "gm1"})
    stage = b.stage()
    assert pooled(stage, read_assumptions(stage)).replace == {}
