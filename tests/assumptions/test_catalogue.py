"""The catalogue for a stage: what it lists, in which order, as what table, and how plausible each entry is."""

from __future__ import annotations

import os
import random
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import assumed_stages as stages
import pytest

from symamp.assumptions.apply import Approximator
from symamp.assumptions.catalogue import Entry, catalogue
from symamp.assumptions.read import read_assumptions
from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.exact.derive import derive
from symamp.exact.time_constants import time_constants

ROOT = Path(__file__).resolve().parents[2]
RECIPES = sorted((ROOT / "recipes").glob("*/*.stage.toml"))
BUILT: tuple[Callable[[], StageBuilder], ...] = (
    stages.common_source,
    stages.cascode,
    stages.follower,
    stages.degenerated,
    stages.differential_pair,
    stages.two_stage,
)
TEXTS = {
    **{build.__name__: (build().toml(), ROOT) for build in BUILT},
    **{path.parent.name: (path.read_text(encoding="utf-8"), path.parent) for path in RECIPES},
}


def read(name: str, *more: str) -> Stage:
    text, folder = TEXTS[name]
    return parse_stage("\n\n".join([text, *more]).encode(), file="my.stage.toml", folder=folder)


def entries(name: str, response: str = "gain") -> dict[str, Entry]:
    stage = read(name)
    return {entry.name: entry for entry in catalogue(stage, derive(stage, stage.asked[response]))}


@pytest.mark.parametrize("name", TEXTS)
def test_every_table_reads_back_from_the_stage_file_as_the_same_assumption(name: str) -> None:
    stage = read(name)
    own = {a.name for a in read_assumptions(stage)}
    bare = replace(stage, assumptions=())
    found = [entry for entry in catalogue(stage) if entry.name not in own]
    assert len(found) > 10
    for entry in found:
        # Some contradict what the stage assumes: they stand alone there.
        written = parse_stage(
            f"{_without_assumptions(name)}\n\n{entry.toml}\n".encode(), file=None, folder=ROOT
        )
        (assumption,) = read_assumptions(written)
        assert assumption == entry.assumption
        assert read_assumptions(replace(bare, assumptions=(dict(entry.table),))) == (entry.assumption,)


def _without_assumptions(name: str) -> str:
    """The stage file's text up to its first assumption or claim, without its span, which may name a table."""
    text = TEXTS[name][0]
    for section in ("[[assumption]]", "[[claim]]", "[span]"):
        text = text.split(section)[0]
    return text


@pytest.mark.parametrize("name", TEXTS)
def test_entries_hold_symbols_of_the_stage_alone_and_concern_the_response(name: str) -> None:
    stage = read(name)
    for response, asked in stage.asked.items():
        exact = derive(stage, asked)
        for entry in catalogue(stage, exact):
            assert entry.symbols <= set(stage.symbols), entry.name
            made = entry.assumption
            if made.equal or made.dominant_pole or made.poles_far_apart:
                continue
            assert entry.symbols & exact.form.symbols, (response, entry.name)
            if made.pairs:
                assert any(pair.difference.keys() <= exact.form.symbols for pair in made.pairs), entry.name


@pytest.mark.parametrize("name", TEXTS)
def test_names_are_one_each_and_no_two_entries_say_the_same(name: str) -> None:
    found = catalogue(read(name))
    said = [
        (e.assumption.orders, e.assumption.equal, e.assumption.miller, _vectors(e))
        for e in found
        if e.symbols
    ]
    names = [entry.name for entry in found]
    assert len(set(names)) == len(names)
    doubles = [names[i] for i, one in enumerate(said) if one in said[:i]]
    # One device, or one capacitance in the devices, makes the general entry and its own one say the same.
    assert len(doubles) <= 4, doubles


def _vectors(entry: Entry) -> frozenset[object]:
    return frozenset(pair.key for pair in entry.assumption.pairs)


@pytest.mark.parametrize("name", TEXTS)
def test_the_order_does_not_hang_on_the_order_of_mappings(name: str) -> None:
    stage = read(name)
    exact = derive(stage, next(iter(stage.asked.values()))) if name != "differential_pair" else None
    expected = [(e.name, e.ratio) for e in catalogue(stage, exact)]
    for seed in range(3):
        draw = random.Random(seed)
        shuffled = {
            key: dict(draw.sample(list(getattr(stage, key).items()), len(getattr(stage, key))))
            for key in ("bias", "aliases")
        }
        other = replace(stage, **shuffled)
        again = catalogue(other, exact and replace(exact, stage=other))
        assert [e.name for e in again] == [name for name, _ in expected]
        assert [e.ratio for e in again] == pytest.approx([ratio for _, ratio in expected])


def test_the_same_entries_in_another_process() -> None:
    script = (
        "import sys; sys.path.insert(0, sys.argv[1])\n"
        "import assumed_stages as stages\n"
        "from symamp.assumptions.catalogue import catalogue\n"
        "for b in (stages.degenerated(), stages.two_stage(), stages.differential_pair()):\n"
        "    print([e.toml for e in catalogue(b.stage())])\n"
    )
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    found = {
        subprocess.run(
            [sys.executable, "-c", script, str(Path(__file__).parent)],
            env={**environment, "PYTHONHASHSEED": seed},
            capture_output=True,
            text=True,
            check=True,
            timeout=120,
        ).stdout
        for seed in ("1", "2")
    }
    assert len(found) == 1


def test_the_most_general_first() -> None:
    names = list(entries("cascode"))
    assert names[:3] == ["gds is small against gm", "gmb is small against gm", "gds is small against gmb"]
    assert names.index("no body effect") < names.index("gds2 is small against gm2")
    assert names.index("gds is small against gm") < names.index("gds1 is small against gm")


def test_what_the_trade_says_of_a_follower() -> None:
    """Common practice."""
    found = entries("follower")
    for name, table in {
        "no body effect": {"neglect": ["gmb"]},
        "gmb is small against gm": {"small": ["gmb"], "against": ["gm"]},
        "gds is small against gm": {"small": ["gds"], "against": ["gm"]},
        "RS is open: an ideal current source as tail": {"open": ["RS"]},
        "degeneration of M1 by RS is large": {"small": ["1"], "against": ["gm1*RS"]},
        "CL is the only capacitance that counts": {"dominant_capacitor": "CL"},
        "no capacitances in the devices": {"neglect": ["cgs", "cgd"]},
        "cgd1 is neglected": {"neglect": ["cgd1"]},
        "ro is small against RS": {"small": ["ro"], "against": ["RS"]},
        "one pole is dominant": {"dominant_pole": True},
        "poles and zeros lie far apart": {"poles_far_apart": True},
    }.items():
        assert found[name].table == {"name": name, **table}


def test_miller_at_what_bridges_a_gain_with_the_gain_the_right_way_round() -> None:
    bridge = entries("common_source")["Miller's theorem on cgd1, at both ends"]
    assert bridge.table["miller"] == {"part": "cgd1", "from": "g", "to": "out", "ends": "both"}
    # The compensation stands behind a resistor: its own nodes are named.
    stage = read("two_stage")
    named = {entry.name: entry for entry in catalogue(stage)}
    assert named["Miller's theorem on CC, at the input alone"].table["miller"] == {
        "part": "CC", "from": "a", "to": "r", "ends": "from"
    }  # fmt: skip
    # A driven gate has no impedance that an effective capacitance would load.
    assert not any("Miller" in name for name in entries("cascode"))


def test_matched_parts_are_those_of_one_kind_with_nearly_the_same_bias() -> None:
    named = {entry.name: entry for entry in catalogue(read("differential_pair"))}
    pair = named["M1 and M2 are matched"]
    assert pair.assumption.equal == (("M1", "M2"),)
    assert pair.ratio == pytest.approx((44 - 40) / 44)
    assert "M3 and M4 are matched" in named
    assert "M1 and M3 are matched" not in named


def test_a_resistor_at_two_sources_degenerates_each_of_their_devices() -> None:
    b = stages.differential_pair()
    b.resistor("RT", "t", "gnd", "100 kohm")
    tables = {entry.name: entry.table for entry in catalogue(b.stage())}
    assert tables["degeneration of M1 by RT is large"]["against"] == ["gm1*RT"]
    assert tables["degeneration of M2 by RT is large"]["against"] == ["gm2*RT"]


def test_ratios_are_those_of_the_bias_point() -> None:
    found = entries("cascode-neglects")
    assert found["no body effect"].ratio == pytest.approx(0.62 / 3.9)
    assert found["gds is small against gm"].ratio == pytest.approx(0.24 / 3.9)
    assert found["gds1 is small against gm1"].ratio == pytest.approx(0.21 / 4.1)
    assert found["RL is small against ro"].ratio == pytest.approx(470e3 * 0.24e-3)
    assert not found["RL is small against ro"].plausible
    assert found["ro is small against RL"].plausible


def test_an_open_resistor_is_compared_with_what_the_network_shows_without_it() -> None:
    """Against the exact impedance of the stage with the resistor taken off, which is another derivation."""
    rest = '[response]\nrest = { looking_into = "out", without = ["RL"] }'
    text = TEXTS["cascode-neglects"][0].split("[span]")[0].replace("[response]", rest)
    stage = parse_stage(text.encode(), file=None, folder=ROOT)
    without = derive(stage, stage.asked["rest"]).quantity("dc").value
    assert isinstance(without, float)
    named = {entry.name: entry for entry in catalogue(stage)}
    assert named["RL is open: an ideal current source as load"].ratio == pytest.approx(
        without / 470e3, rel=1e-9
    )


def test_shares_of_capacitances_are_those_of_the_time_constants() -> None:
    """Against the open-circuit time constants that `derive` lists (Cochrun and Grabel 1973)."""
    stage = read("common_source")
    taus = {t.part: t.seconds for t in time_constants(stage, stage.asked["gain"])}
    total = sum(tau for tau in taus.values() if tau)
    found = entries("common_source")
    for name, tau in taus.items():
        assert tau is not None
        assert found[f"{name} is neglected"].ratio == pytest.approx(tau / (total - tau), rel=1e-9)
        assert found[f"{name} is the only capacitance that counts"].ratio == pytest.approx(
            (total - tau) / tau
        )


def test_a_symbol_that_is_zero_at_the_bias_point_gives_no_entry() -> None:
    b = stages.cascode()
    text = b.toml().replace('gmb = "0.62 mS"', 'gmb = "0 mS"')
    assert text != b.toml()
    stage = parse_stage(text.encode(), file=None, folder=ROOT)
    assert not any("gmb" in entry.name or "body" in entry.name for entry in catalogue(stage))


def test_without_a_bias_the_entries_stand_and_their_ratios_are_unknown() -> None:
    bare = replace(read("follower"), bias={})
    named = {entry.name: entry for entry in catalogue(bare)}
    assert named["gds is small against gm"].ratio is None
    assert named["gds is small against gm"].plausible
    assert {"RG is small against RS", "RS is small against RG"} <= set(named)


def test_entries_of_a_nested_response_are_had_without_its_roots() -> None:
    stage = read("two_stage")
    nested = stages.exact(stage, "gain", nested=True)
    plain = stages.exact(stage, "gain")
    assert {e.name for e in catalogue(stage, plain)} == {e.name for e in catalogue(stage, nested)}


@pytest.mark.parametrize("name", ["cascode", "follower", "degenerated"])
def test_a_comparison_holds_as_its_small_side_shrinks(name: str) -> None:
    """With the small side made 1e6 times smaller the exact response is nearly the approximate one."""
    stage = read(name)
    exact = derive(stage, stage.asked["rout"])
    if exact.missing:
        pytest.skip("no bias")
    tried = 0
    for entry in catalogue(stage, exact):
        made = entry.assumption
        if len(made.pairs) != 1 or len(made.pairs[0].small) != 1:
            continue
        ((symbol, power),) = made.pairs[0].small.items()
        if symbol in made.pairs[0].against:
            continue
        approximate = Approximator(exact).under([made]).response
        if approximate is None:
            continue
        values = {
            **exact.bias_values,
            symbol: exact.bias_values[symbol] * float(Fraction(10) ** (-6 * power)),
        }
        left, right = (r.at(0.0, {symbol: values[symbol]}) for r in (exact, approximate))
        if abs(left) < 1e300 and left:
            tried += 1
            assert abs(right / left - 1) < 1e-3, entry.name
    assert tried > 3
