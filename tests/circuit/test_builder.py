"""A stage written in Python is the stage that its file says, and a saved stage reads back as an equal one."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Callable
from dataclasses import replace
from decimal import Decimal
from fractions import Fraction
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from symamp.circuit.builder import StageBuilder
from symamp.circuit.schema import stage_schema
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.circuit.writer import document_of, save_stage, stage_toml, write_whole
from symamp.errors import InputError, StageError

# The example of the design's section 3, but for its second assumption.
CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd", body = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x",   body = "gnd" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
late = { from = "VIN", to = "out", over = "x" }
rout = { looking_into = "out" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"

[span]
gm1  = ["2 mS", "8 mS"]
gds1 = "30 %"
gds2 = { follows = "gds1" }

[[assumption]]
name = "output conductance is negligible against transconductance"
small = ["gds"]
against = ["gm"]

[[claim]]
about = "gain.dc"
formula = "-gm1*gm2*ro1*ro2"
within = "10 %"
"""


def cascode() -> StageBuilder:
    b = StageBuilder("Cascode into a capacitive load")
    b.mosfet("M1", gate="in", drain="x", source="gnd", gm="4.1 mS", gds="0.21 mS")
    b.mosfet("M2", gate="gnd", drain="out", source="x", gm="3.9 mS", gds="0.24 mS", gmb="0.62 mS")
    b.capacitor("CL", "out", "gnd", "3.3 pF")
    b.voltage_source("VIN", "in", "gnd")
    b.response("gain", source="VIN", to="out")
    b.response("late", source="VIN", to="out", over="x")
    b.response("rout", looking_into="out")
    b.span("gm1", "2 mS", "8 mS")
    b.span_percent("gds1", "30 %")
    b.follows("gds2", "gds1")
    b.assume("output conductance is negligible against transconductance", small=["gds"], against=["gm"])
    b.claim("gain.dc", "-gm1*gm2*ro1*ro2", within="10 %")
    return b


def everything() -> StageBuilder:
    """A stage with every kind of part, of response and of assumption."""
    b = StageBuilder('Every "kind" of part\nand more: Ω')
    b.voltage_source("VP", "inp", "gnd")
    b.voltage_source("VN", "inn", "gnd")
    b.current_source("IT", "gnd", "tail")
    b.mosfet("M1", gate="inp", drain="outn", source="tail", gm=4e-3, ro="3 kohm", cgs="20 fF", gmb=0)
    b.mosfet("M2", gate="inn", drain="outp", source="tail", body="tail")
    b.bjt("Q3", base="outp", collector="c", emitter="gnd", gm="40 mS", beta=300, ro="7 kohm", rx="50 ohm")
    b.resistor("RL", "outp", "gnd", "1 kohm")
    b.resistor("RN", "outn", "gnd", Fraction(1, 8))
    b.resistor("RC", "c", "gnd", 1000)
    b.inductor("LT", "tail", "gnd", "1 uH")
    b.capacitor("CC", "outp", "c", "1 pF")
    b.vccs("GA", out=("c", "gnd"), control=("outp", "outn"), value="-1 mS")
    b.vcvs("EA", out=("e", "gnd"), control=("outp", "outn"), value=2)
    b.cccs("FA", out=("f", "gnd"), control="RL", value=Fraction(1, 2))
    b.ccvs("HA", out=("h", "gnd"), control=("e", "f"), value="10 ohm")
    b.opamp("AA", plus="h", minus="m", out="m")
    b.transformer("TA", primary=("m", "gnd"), secondary=("t", "gnd"), value="0.5")
    b.resistor("RT", "t", "gnd", "50 ohm")
    b.response("diff", source={"VP": Fraction(1, 2), "VN": -0.5}, to=("outp", "outn"), without="RC")
    b.response("current", source="IT", to="VP")
    b.response("zt", looking_into="VP")
    b.response("zd", looking_into=("outp", "outn"), without=["CC"])
    b.span("RL", Fraction(500), 2000)
    b.assume("pair", equal=["M1", "M2"])
    b.assume("set", set_={"RN": "2*RL"}, for_="diff")
    b.assume("negl", neglect="gmb")
    b.assume("op", open_=["RL"], for_=["diff", "zt"])
    b.assume("sh", short=["CC"])
    b.assume("domc", dominant_capacitor="CC")
    b.assume("mil", miller={"part": "CC", "from": "outp", "to": "c", "ends": "both"})
    b.assume("dp", dominant_pole=True)
    b.assume("pf", poles_far_apart=True)
    b.assume("bd", band="10 MHz", for_="diff")
    return b


def same(one: Stage, other: Stage) -> bool:
    return replace(one, file=None) == replace(other, file=None)


def read(text: str) -> Stage:
    return parse_stage(text.encode(), file="a.stage.toml", folder=Path())


# The builder ------------------------------------------------------------------------------------------------


def test_the_text_is_that_of_a_stage_file() -> None:
    assert cascode().toml() == CASCODE


def test_both_ways_mean_the_same() -> None:
    assert same(cascode().stage(), read(CASCODE))
    assert cascode().stage().file is None


@pytest.mark.parametrize("builder", [cascode, everything])
def test_the_schema_accepts_what_is_built(builder: Callable[[], StageBuilder]) -> None:
    jsonschema.validate(tomllib.loads(builder().toml()), stage_schema())


def test_every_kind_arrives() -> None:
    stage = everything().stage()
    assert stage.title == 'Every "kind" of part\nand more: Ω'
    assert len(stage.parts) == 18
    assert stage.parts["FA"].control == "RL"
    assert stage.parts["HA"].nodes == ("h", "gnd", "e", "f")
    assert stage.bias["gds1"] == Fraction(1, 3000)
    assert stage.bias["gpi3"] == Fraction(40, 300_000)
    assert stage.bias["RN"] == Fraction(1, 8)
    assert stage.asked["diff"].drive == {"VP": Fraction(1, 2), "VN": Fraction(-1, 2)}
    assert stage.asked["diff"].without == ("RC",)
    assert stage.asked["current"].to_source == "VP"
    assert [table["name"] for table in stage.assumptions][:3] == ["pair", "set", "negl"]
    assert stage.assumptions[2]["neglect"] == ["gmb"]
    assert stage.assumptions[7] == {"name": "dp", "dominant_pole": True}


def test_errors_are_those_of_a_stage_file() -> None:
    b = cascode()
    b.capacitor("CX", "out", "gnd", "3 mS")
    with pytest.raises(InputError) as in_python:
        b.stage()
    with pytest.raises(InputError) as in_file:
        read(b.toml())
    assert in_python.value.problem == in_file.value.problem
    assert in_python.value.key == in_file.value.key == "bias.CX"


def test_nothing_is_given_twice() -> None:
    b = cascode()
    with pytest.raises(StageError, match="CL is there already, as a capacitor") as caught:
        b.resistor("CL", "out", "gnd")
    assert caught.value.key == "resistor.CL"
    with pytest.raises(StageError, match="gain is given twice"):
        b.response("gain", source="VIN", to="x")
    with pytest.raises(StageError, match="gm1 is given twice"):
        b.span_percent("gm1", "10 %")
    assert b.toml() == CASCODE


def test_a_fraction_with_no_decimal_is_refused() -> None:
    b = cascode()
    with pytest.raises(StageError, match="1/3 ohm has no finite decimal") as caught:
        b.resistor("RX", "out", "gnd", Fraction(1, 3))
    assert caught.value.key == "bias.RX"
    assert b.toml() == CASCODE


# Saving -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("builder", [cascode, everything])
def test_saved_and_read_again(builder: Callable[[], StageBuilder], tmp_path: Path) -> None:
    path = builder().save(tmp_path / "a.stage.toml")
    assert path.read_text("utf-8") == builder().toml()
    assert same(read_stage(path), builder().stage())
    assert os.listdir(tmp_path) == ["a.stage.toml"]


@pytest.mark.parametrize("builder", [cascode, everything])
def test_a_stage_without_its_text_is_written_from_its_data(
    builder: Callable[[], StageBuilder], tmp_path: Path
) -> None:
    stage = replace(builder().stage(), source=None)
    assert same(read_stage(save_stage(stage, tmp_path / "a.stage.toml")), stage)


def test_a_stage_keeps_its_text_and_comments(tmp_path: Path) -> None:
    text = "# mine\n" + CASCODE
    saved = save_stage(read(text), tmp_path / "a.stage.toml")
    assert saved.read_text("utf-8") == text
    assert document_of(read(text)) == tomllib.loads(text)


def test_an_untitled_stage_keeps_its_files_name_as_title(tmp_path: Path) -> None:
    stage = read(CASCODE.split("\n", 1)[1])
    assert stage.title == "a"
    assert same(read_stage(save_stage(stage, tmp_path / "b.stage.toml")), stage)


DECIMALS = st.integers(1, 9999).map(lambda n: Fraction(n, 10**6))


@given(st.data())
@settings(max_examples=40, deadline=None)
def test_values_come_back_exactly_from_data_alone(data: st.DataObject) -> None:
    conductance, resistance = data.draw(DECIMALS), data.draw(DECIMALS)
    b = StageBuilder("values")
    b.voltage_source("VIN", "in", "gnd")
    if data.draw(st.booleans()):
        b.bjt("Q1", base="in", collector="out", emitter="gnd", gm=conductance, beta=resistance, ro=resistance)
    else:
        b.bjt("Q1", base="in", collector="out", emitter="gnd", gm=conductance, rpi=resistance, go=conductance)
    b.vcvs("EX", out=("e", "gnd"), control=("in", "gnd"), value=-conductance)
    b.response("gain", source="VIN", to="out")
    b.span_percent(data.draw(st.sampled_from(["go", "ro1"])), "20 %")
    b.span_percent(data.draw(st.sampled_from(["gpi1", "rpi1", "beta1"])), "12.5 %")
    b.span_percent("EX", "7 %")
    stage = replace(b.stage(), source=None)
    assert same(read(stage_toml(document_of(stage))), stage)


def test_a_value_with_no_decimal_cannot_be_written() -> None:
    stage = cascode().stage()
    with pytest.raises(StageError, match=r"1/7 S has no finite decimal") as caught:
        document_of(replace(stage, bias={**stage.bias, "gm1": Fraction(1, 7)}))
    assert caught.value.key == "bias.M1.gm"


def test_a_changed_stage_is_not_saved_as_it_was(tmp_path: Path) -> None:
    stage = read(CASCODE)
    changed = replace(stage, bias={**stage.bias, "CL": Fraction(5, 10**12)})
    assert read_stage(save_stage(changed, tmp_path / "a.stage.toml")).bias["CL"] == Fraction(5, 10**12)


def test_an_interrupted_save_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = cascode().save(tmp_path / "a.stage.toml")

    def interrupted(file: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupted)
    with pytest.raises(KeyboardInterrupt):
        everything().save(path)
    assert path.read_text("utf-8") == CASCODE
    assert os.listdir(tmp_path) == ["a.stage.toml"]


def test_a_link_and_its_files_rights_stay(tmp_path: Path) -> None:
    real = tmp_path / "real.stage.toml"
    real.write_text("")
    real.chmod(0o640)
    link = tmp_path / "link.stage.toml"
    link.symlink_to(real)
    cascode().save(link)
    assert link.is_symlink()
    assert real.read_text("utf-8") == CASCODE
    assert real.stat().st_mode & 0o777 == 0o640


@pytest.mark.parametrize("name", ["a.toml", "a", ".stage.toml"])
def test_the_name_ends_as_it_should(name: str, tmp_path: Path) -> None:
    with pytest.raises(StageError, match=r"\.stage\.toml"):
        cascode().save(tmp_path / name)
    assert os.listdir(tmp_path) == []


def test_a_tables_path_follows_the_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "corners.csv").write_text("gm1 [mS],gds1 [mS]\n4,0.2\n5,0.3\n")
    (tmp_path / "deep").mkdir()
    monkeypatch.chdir(tmp_path)
    b = StageBuilder("from a table")
    b.mosfet("M1", gate="in", drain="out", source="gnd", body="gnd", gm="4 mS", gds="0.2 mS")
    b.voltage_source("VIN", "in", "gnd")
    b.response("gain", source="VIN", to="out")
    b.table("corners.csv")
    first = read_stage(b.save("deep/a.stage.toml"))
    assert tomllib.loads(Path("deep/a.stage.toml").read_text())["span"]["table"] == "../corners.csv"
    second = read_stage(save_stage(first, "b.stage.toml"))
    assert tomllib.loads(Path("b.stage.toml").read_text())["span"]["table"] == "corners.csv"
    third = read_stage(save_stage(replace(second, source=None), "deep/c.stage.toml"))
    fourth = read_stage(save_stage(replace(third, source=None), tmp_path / "d.stage.toml"))
    for stage in (first, second, third, fourth, b.stage()):
        assert stage.span.table is not None
        assert stage.span.table.rows == (
            (Fraction(1, 250), Fraction(1, 5000)),
            (Fraction(1, 200), Fraction(3, 10000)),
        )


# The writer -------------------------------------------------------------------------------------------------


KEYS = st.text(st.characters(codec="utf-8"), min_size=1, max_size=6)
SCALARS = (
    st.text(st.characters(codec="utf-8"), max_size=12)
    | st.integers(-(10**18), 10**18)
    | st.floats(allow_nan=False)
    | st.booleans()
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=3),
    max_leaves=8,
)


@given(st.dictionaries(KEYS, VALUES, max_size=5))
@settings(max_examples=200, deadline=None)
def test_what_is_written_reads_back(document: dict[str, Any]) -> None:
    text = stage_toml(document)
    assert tomllib.loads(text) == document
    assert stage_toml(document) == text


def test_long_lists_take_a_line_an_item() -> None:
    document = {"assumption": [{"name": "n", "neglect": [f"a_long_symbol_{n}" for n in range(12)]}]}
    text = stage_toml(document)
    assert max(map(len, text.splitlines())) < 100
    assert tomllib.loads(text) == document


@pytest.mark.parametrize(
    ("value", "written"),
    [
        (Decimal("0.10"), "0.10"),
        (Decimal("1E-12"), "1E-12"),
        (Decimal(3), "3.0"),
        (1e-12, "1e-12"),
        (2.0, "2.0"),
    ],
)
def test_numbers(value: Any, written: str) -> None:
    assert stage_toml({"a": value}) == f"a = {written}\n"


@pytest.mark.parametrize("value", [None, 1j, b"x", {"b": [Fraction(1, 2)]}, "\ud800"])
def test_what_no_file_can_hold(value: Any) -> None:
    with pytest.raises(StageError) as caught:
        stage_toml({"a": value})
    assert caught.value.key is not None
    assert caught.value.key.startswith("a")


def test_bytes_are_written_as_they_are(tmp_path: Path) -> None:
    assert write_whole(tmp_path / "a.stage.toml", b"a = 1\r\n").read_bytes() == b"a = 1\r\n"
