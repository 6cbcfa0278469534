"""Stage files: what a good one means, and that a mistake is named with line, key and the way out."""

from __future__ import annotations

import subprocess
import sys
import time
from fractions import Fraction
from pathlib import Path

from cascode_file import CASCODE, NO_BIAS, read
from hypothesis import given
from hypothesis import strategies as st

from symamp.circuit.stage import Asked, Follow, Side
from symamp.circuit.stagefile import locate, parse_stage
from symamp.errors import InputError

BIASED = CASCODE[: CASCODE.index("[span]")]


def line_with(text: str, piece: str) -> int:
    return text[: text.index(piece)].count("\n") + 1


def mend(old: str, new: str, text: str = CASCODE) -> str:
    assert old in text
    return text.replace(old, new, 1)


def test_the_cascode_of_the_design_page() -> None:
    stage = read(CASCODE)
    assert stage.title == "Cascode into a capacitive load"
    assert list(stage.parts) == ["M1", "M2", "CL", "VIN"]
    assert stage.parts["M1"].nodes == ("in", "x", "gnd", "gnd")  # body is gnd unless given
    assert list(stage.symbols) == ["gm1", "gds1", "gm2", "gds2", "gmb2", "CL"]
    assert stage.aliases == {"ro1": {"gds1": -1}, "ro2": {"gds2": -1}}
    assert stage.bias["gm1"] == Fraction(41, 10_000)
    assert stage.bias["CL"] == Fraction(33, 10**13)
    assert stage.asked["gain"] == Asked("gain", {"VIN": Fraction(1)}, to=("out", "gnd"))
    assert stage.asked["late"].over == ("x", "gnd")
    assert stage.asked["rout"] == Asked("rout", looking_into=("out", "gnd"))
    low, high = Fraction(147, 10**6), Fraction(273, 10**6)
    assert stage.span.sides == (
        Side("gm1", Fraction(1, 500), Fraction(1, 125), "S", "gm1"),
        Side("gds1", low, high, "S", "gds1"),
    )
    assert stage.span.follows == (Follow("gds2", "gds1", Fraction(24, 21)),)
    assert stage.assumptions[0]["neglect"] == ["gmb"]
    assert stage.claims[0]["within"] == "10 %"
    assert stage.warnings == ()
    assert stage.remarks == ()


ALL_KINDS = """\
[resistor]
RS = ["a", "b"]
RM = ["m", "k"]
[inductor]
LT = ["b", "c"]
[vccs]
G1 = { out = ["c", "gnd"], control = ["a", "gnd"] }
[vcvs]
E1 = { out = ["d", "gnd"], control = ["c", "gnd"] }
[cccs]
F1 = { out = ["e", "gnd"], control = "RS" }
[ccvs]
H1 = { out = ["f", "gnd"], control = ["e", "gnd"] }
[opamp]
A1 = { plus = "f", minus = "g", out = "g" }
[transformer]
T1 = { primary = ["g", "gnd"], secondary = ["h", "gnd"] }
[bjt]
Q1 = { base = "h", collector = "k", emitter = "gnd" }
[mosfet]
Mtail = { gate = "k", drain = "k", source = "gnd", body = "gnd" }
[current_source]
IB = ["k", "gnd"]
[voltage_source]
VP = ["a", "gnd"]
VN = ["m", "gnd"]
[response]
r = { from = { VP = 0.5, VN = "-0.5" }, to = ["k", "h"] }
i = { from = "IB", to = "VP" }
"""


def test_every_kind_of_part() -> None:
    stage = read(ALL_KINDS)
    assert stage.parts["F1"].control == "RS"
    assert stage.parts["F1"].nodes == ("e", "gnd")
    assert stage.parts["H1"].nodes == ("f", "gnd", "e", "gnd")
    assert stage.parts["T1"].nodes == ("g", "gnd", "h", "gnd")
    assert stage.parts["Q1"].parameters == ("gm", "gpi", "go")  # no bias: the kind's own
    assert stage.parts["Mtail"].parameters == ("gm", "gds")  # its body is its source
    assert list(stage.symbols)[-5:] == ["gm1", "gpi1", "go1", "gm_tail", "gds_tail"]
    assert {"ro1", "rpi1", "beta1", "ro_tail"} == set(stage.aliases)
    assert stage.asked["r"].drive == {"VP": Fraction(1, 2), "VN": Fraction(-1, 2)}
    assert stage.asked["r"].to == ("k", "h")
    assert stage.asked["i"].to_source == "VP"
    assert stage.title == "my"  # none given: the file's name
    assert stage.bias == {}


def test_without_bias_a_body_that_is_not_the_source_brings_gmb() -> None:
    stage = read(NO_BIAS)
    assert "gmb2" in stage.symbols
    assert "gmb1" not in stage.symbols
    assert stage.warnings == ()


def test_a_bias_without_gmb_draws_a_warning_that_zero_silences() -> None:
    stage = read(mend(', gmb = "0.62 mS"', "", BIASED))
    assert len(stage.warnings) == 1
    assert "M2" in stage.warnings[0]
    assert "gmb = 0" in stage.warnings[0]
    silent = read(mend('gmb = "0.62 mS"', "gmb = 0", BIASED))
    assert silent.warnings == ()
    assert silent.bias["gmb2"] == 0


def test_bias_takes_aliases_and_plain_symbols() -> None:
    text = mend('M1 = { gm = "4.1 mS", gds = "0.21 mS" }', 'gm1 = "4.1 mS"\nro1 = "5 kohm"', BIASED)
    stage = read(text)
    assert stage.bias["gds1"] == Fraction(1, 5000)
    assert stage.parts["M1"].parameters == ("gm", "gds")
    bjt = read(
        '[bjt]\nQ3 = { base = "b", collector = "c", emitter = "gnd" }\n[resistor]\nRB = ["b", "gnd"]\n'
        'RC = ["c", "gnd"]\n[response]\nr = { looking_into = "c" }\n'
        '[bias]\nQ3 = { gm = "40 mS", beta = 100, ro = "50 k" }\n'
    )
    assert bjt.bias == {"gm3": Fraction(1, 25), "gpi3": Fraction(1, 2500), "go3": Fraction(1, 50_000)}


def test_sides_on_aliases_parts_and_bare_names() -> None:
    stage = read(BIASED + '[span]\nro1 = ["4 kohm", "6 kohm"]\ngm = "50 %"\n')
    by_symbol = {side.symbol: side for side in stage.span.sides}
    assert by_symbol["gds1"] == Side("ro1", Fraction(4000), Fraction(6000), "ohm", "gds1", -1)
    assert by_symbol["gm2"].high == Fraction(585, 100_000)
    part = read(BIASED + '[span]\nM2 = "10 %"\nCL = ["1 pF", "5 pF"]\n')
    assert [side.symbol for side in part.span.sides] == ["gm2", "gds2", "gmb2", "CL"]


def test_a_side_on_beta_sets_gpi() -> None:
    stage = read(
        '[bjt]\nQ1 = { base = "b", collector = "c", emitter = "gnd" }\n[resistor]\nRB = ["b", "gnd"]\n'
        'RC = ["c", "gnd"]\n[response]\nr = { looking_into = "c" }\n'
        '[bias]\nQ1 = { gm = "40 mS", gpi = "0.4 mS", go = "10 uS" }\n[span]\nbeta1 = "50 %"\n'
    )
    assert stage.span.sides == (Side("beta1", Fraction(50), Fraction(150), "", "gpi1", -1, {"gm1": 1}),)


def test_bare_names_follow_device_by_device_and_leaders_come_first() -> None:
    sides = '[span]\nCL = { follows = "gds2" }\ngds = { follows = "gm" }\ngm1 = ["2 mS", "8 mS"]\n'
    follows = read(BIASED + sides).span.follows
    leaders = {follow.symbol: follow.leader for follow in follows}
    assert leaders == {"gds1": "gm1", "gds2": "gm2", "CL": "gds2"}
    assert list(leaders).index("gds2") < list(leaders).index("CL")
    assert follows[list(leaders).index("gds1")].ratio == Fraction(21, 410)
    alias = read(BIASED + '[span]\nro2 = { follows = "ro1" }\n')
    assert alias.span.follows == (Follow("gds2", "gds1", Fraction(24, 21)),)


def test_a_bias_outside_its_side_draws_a_warning() -> None:
    stage = read(mend('["2 mS", "8 mS"]', '["5 mS", "8 mS"]'))
    assert stage.warnings == (
        "gm1: its bias, 4.1 mS, lies outside its side of the span, 5 mS to 8 mS; "
        "the bias point is looked at in any case, and a worst value may be its own",
    )


def test_a_known_parameter_that_no_device_has_draws_a_remark() -> None:
    stage = read(BIASED + '[span]\ncgd = ["1 fF", "2 fF"]\n')
    assert stage.span.empty
    assert "cgd" in stage.remarks[0]


def test_a_node_that_looks_like_signal_ground_draws_a_warning() -> None:
    stage = read(mend('CL = ["out", "gnd"]', 'CL = ["out", "GND"]\nCX = ["GND", "gnd"]', NO_BIAS))
    assert stage.warnings == ("node GND is not signal ground: the only one is gnd",)


def test_a_loose_end_draws_a_warning_with_the_name_that_was_meant() -> None:
    stage = read(mend('CL = ["out", "gnd"]', 'CL = ["ot", "gnd"]\nCX = ["out", "out"]', NO_BIAS))
    assert stage.warnings == (
        "node ot is on CL alone, so that no current flows in it; was out meant?",
        "both ends of CX are on node out: it has no effect",
    )


def test_a_loose_end_that_a_response_asks_about_is_meant() -> None:
    asked = 'probe = { looking_into = "probe" }\nlate ='
    text = mend("late =", asked, NO_BIAS)
    assert (
        read(mend('CL = ["out", "gnd"]', 'CL = ["out", "gnd"]\nCP = ["out", "probe"]', text)).warnings == ()
    )


def test_a_byte_order_mark_and_windows_line_ends_are_read() -> None:
    data = b"\xef\xbb\xbf" + CASCODE.replace("\n", "\r\n").encode()
    assert parse_stage(data, file=None, folder=Path()).bias == read(CASCODE).bias


def test_places_for_later_messages() -> None:
    stage = read(CASCODE)
    place = locate(stage, ("claim", 0, "formula"))
    assert place == {"file": "my.stage.toml", "line": line_with(CASCODE, "formula"), "key": "claim.1.formula"}


def test_reading_is_quick_and_imports_nothing_heavy() -> None:
    code = (
        "import sys, symamp.circuit.stagefile as f, pathlib\n"
        "f.parse_stage(sys.stdin.buffer.read(), file='f', folder=pathlib.Path())\n"
        "print([m for m in ('numpy', 'sympy', 'flint', 'scipy', 'tree_sitter') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], input=CASCODE.encode(), capture_output=True, check=True, timeout=60
    )
    assert done.stdout.split() == [b"[]"]
    start = time.perf_counter()
    for _ in range(20):
        read(CASCODE)
    assert (time.perf_counter() - start) / 20 < 0.02  # about 1 ms; the bound leaves room for a busy machine


@given(st.data())
def test_a_stage_with_something_struck_or_doubled_is_read_or_refused_in_words(data: st.DataObject) -> None:
    lines = CASCODE.splitlines(keepends=True)
    which = data.draw(st.integers(0, len(lines) - 1))
    start = data.draw(st.integers(0, len(lines[which])))
    piece = data.draw(st.sampled_from(["", '"', "{", "]", "gm", "= 3", "gnd", "\n", "[x]\n", "-", "1e999"]))
    text = "".join(lines[:which]) + lines[which][:start] + piece + "".join(lines[which + 1 :])
    try:
        stage = read(text)
    except InputError as error:
        assert error.file == "my.stage.toml"  # noqa: PT017
    else:
        assert stage.symbols


def test_a_supply_that_is_not_written_as_ground_draws_a_warning() -> None:
    text = """\
[mosfet]
M1 = { gate = "in", drain = "vdd", source = "out" }
[resistor]
RL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
[bias]
M1 = { gm = "4 mS", gds = "0.1 mS", gmb = 0 }
RL = "2 kohm"
"""
    stage = parse_stage(text.encode(), file="follower.stage.toml", folder=Path())
    assert any("node vdd is on M1 alone" in warning and "gnd" in warning for warning in stage.warnings)
