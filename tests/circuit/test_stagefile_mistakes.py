"""Stage files with mistakes: each is named with its file, line and key, and the way out."""

from __future__ import annotations

from pathlib import Path

import pytest
from cascode_file import CASCODE, NO_BIAS, read

from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.errors import InputError


def mistake(text: str, folder: Path = Path()) -> InputError:
    with pytest.raises(InputError) as caught:
        read(text, folder)
    return caught.value


def line_with(text: str, piece: str) -> int:
    return text[: text.index(piece)].count("\n") + 1


def mend(old: str, new: str, text: str = CASCODE) -> str:
    assert old in text
    return text.replace(old, new, 1)


# (what stands in the cascode, what is put there, key, words of the message); the line is that of the new text
MISTAKES = [
    ("[capacitor]", "[capacitors]", "capacitors", "nearest known one is capacitor"),
    ("title =", "titel =", "titel", "nearest known one is title"),
    ('title = "Cascode into a capacitive load"', "title = 3", "title", "no title"),
    ('gate = "in"', 'gaet = "in"', "mosfet.M1.gaet", "nearest known one is gate"),
    ('gate = "in",', "", "mosfet.M1", "lacks its gate"),
    ('CL = ["out", "gnd"]', 'CL = ["out"]', "capacitor.CL", "1 node given"),
    ('CL = ["out", "gnd"]', 'CL = ["out", "gnd", "x"]', "capacitor.CL", "3 nodes given"),
    ('CL = ["out", "gnd"]', 'CL = "out"', "capacitor.CL", "takes two nodes"),
    ('CL = ["out", "gnd"]', 'CL = ["out", 3]', "capacitor.CL.2", "names no node"),
    ('CL = ["out", "gnd"]', 'CL = ["out", "a b"]', "capacitor.CL.2", "cannot be a node"),
    ('CL = ["out", "gnd"]', 'CL = ["out", ""]', "capacitor.CL.2", "names no node"),
    (
        'M1 = { gate = "in",  drain = "x",   source = "gnd" }',
        'M1 = ["a", "b"]',
        "mosfet.M1",
        "named terminals",
    ),
    ('CL = ["out", "gnd"]', 'M1 = ["out", "gnd"]', "capacitor.M1", "label in [mosfet] already"),
    ('CL = ["out", "gnd"]', 'C = ["out", "gnd"]', "capacitor.C", "such as C2"),
    ('CL = ["out", "gnd"]', 'gds = ["out", "gnd"]', "capacitor.gds", "bare name"),
    ('CL = ["out", "gnd"]', 'pi = ["out", "gnd"]', "capacitor.pi", "meaning of its own"),
    ('CL = ["out", "gnd"]', 'p1 = ["out", "gnd"]', "capacitor.p1", "meaning of its own"),
    ('CL = ["out", "gnd"]', 'bandwidth = ["out", "gnd"]', "capacitor.bandwidth", "meaning of its own"),
    ('CL = ["out", "gnd"]', '"C-L" = ["out", "gnd"]', "capacitor.C-L", "no label"),
    (
        "[capacitor]",
        '[bjt]\nQ1 = { base = "in", collector = "out", emitter = "gnd" }\n[capacitor]',
        "bjt.Q1",
        "call Q1 Q3",
    ),
    (
        'from = "VIN", to = "out" }',
        'from = "VIM", to = "out" }',
        "response.gain.from",
        "nearest known one is VIN",
    ),
    ('from = "VIN", to = "out" }', 'from = "CL", to = "out" }', "response.gain.from", "is a capacitor"),
    ('from = "VIN", to = "out" }', 'to = "out" }', "response.gain", 'has no "from"'),
    ('from = "VIN", to = "out" }', 'from = "VIN" }', "response.gain", 'has no "to"'),
    (
        'from = "VIN", to = "out" }',
        'from = "VIN", to = "ouz" }',
        "response.gain.to",
        "nearest known one is out",
    ),
    ('from = "VIN", to = "out" }', 'from = "VIN", to = "gnd" }', "response.gain.to", "against itself"),
    ('from = "VIN", to = "out" }', 'from = "VIN", to = ["out"] }', "response.gain.to", "1 node given"),
    ('from = "VIN", to = "out" }', 'from = "VIN", at = "out" }', "response.gain.at", "no key"),
    ('from = "VIN", to = "out" }', 'from = { VIN = "x" }, to = "out" }', "response.gain.from.VIN", "number"),
    ('from = "VIN", to = "out" }', 'from = { VIN = 0 }, to = "out" }', "response.gain.from", "weights are 0"),
    ('to = "out", over = "x"', 'to = "VIN", over = "x"', "response.late.over", "leave over out"),
    (
        'looking_into = "out"',
        'looking_into = "oot"',
        "response.rout.looking_into",
        "nearest known one is out",
    ),
    ('looking_into = "out"', 'looking_into = "in"', "response.rout.looking_into", 'looking_into = "VIN"'),
    (
        'looking_into = "out"',
        'looking_into = "out", from = "VIN"',
        "response.rout.from",
        "do not go together",
    ),
    ('looking_into = "out"', 'looking_into = "out", without = ["RL"]', "response.rout.without.1", "nearest"),
    ('looking_into = "out"', 'looking_into = "out", without = "CL"', "response.rout.without", "no list"),
    ('"4.1 mS"', '"4.1 mF"', "bias.M1.gm", "unit F"),
    ('"4.1 mS"', '"4k1"', "bias.M1.gm", "4k1"),
    ('"4.1 mS"', '"-4.1 mS"', "bias.M1.gm", "negative"),
    ('"4.1 mS"', "0", "bias.M1.gm", "is 0"),
    ('"4.1 mS"', "nan", "bias.M1.gm", "nan"),
    ('"4.1 mS"', "true", "bias.M1.gm", "true"),
    ('"4.1 mS"', "2026-01-01", "bias.M1.gm", "no value"),
    ('gm = "4.1 mS"', 'gmm = "4.1 mS"', "bias.M1.gmm", "nearest known one is gm"),
    ('gds = "0.21 mS" }', 'gds = "0.21 mS", ro = "5 kohm" }', "bias.M1.ro", "both gds and ro"),
    ('CL = "3.3 pF"', 'CX = "3.3 pF"', "bias.CX", "nearest known one is CL"),
    ('CL = "3.3 pF"', "VIN = 1", "bias.VIN", "without a value"),
    ('CL = "3.3 pF"', 'gm1 = "1 mS"', "bias.gm1", "given twice"),
    ('CL = "3.3 pF"', "CL = { c = 3 }", "bias.CL", "no value"),
    ('M1 = { gm = "4.1 mS", gds = "0.21 mS" }', 'M1 = "4 mS"', "bias.M1", "by name"),
    ('["2 mS", "8 mS"]', '["8 mS", "2 mS"]', "span.gm1", 'write ["2 mS", "8 mS"]'),
    ('["2 mS", "8 mS"]', '["0 mS", "2 mS"]', "span.gm1.1", "is 0"),
    ('["2 mS", "8 mS"]', '["2 mS"]', "span.gm1", "two ends"),
    ('["2 mS", "8 mS"]', "5", "span.gm1", "no side"),
    ('["2 mS", "8 mS"]', '"2 mS"', "span.gm1", "no percentage"),
    ('["2 mS", "8 mS"]', '"120 %"', "span.gm1", "negative"),
    ('["2 mS", "8 mS"]', '{ follow = "gm2" }', "span.gm1", "no side"),
    ('gm1  = ["2 mS"', 'gm7  = ["2 mS"', "span.gm7", "nearest known one is gm1"),
    ('gm1  = ["2 mS"', 'cgd1 = ["2 mS"', "span.cgd1", "M1 has no cgd"),
    ('gm1  = ["2 mS"', 'M1 = ["2 mS"', "span.M1", "percentage"),
    ('gds1 = "30 %"', 'gds1 = { follows = "gds2" }', "span.gds1", "gds1 follows gds2 follows gds1"),
    ('gds1 = "30 %"', 'gds = "30 %"', "span.gds2", "set by gds already"),
    ('{ follows = "gds1" }', '{ follows = "gdz1" }', "span.gds2.follows", "nearest known one is gds1"),
    ('{ follows = "gds1" }', '{ follows = "ro1" }', "span.gds2.follows", "do not match"),
    ("[[assumption]]", "[assumption]", "assumption", "[[assumption]]"),
    ("[[claim]]", "[claim]", "claim", "[[claim]]"),
]


@pytest.mark.parametrize(("old", "new", "key", "words"), MISTAKES)
def test_a_mistake_is_named_with_file_line_and_key(old: str, new: str, key: str, words: str) -> None:
    text = mend(old, new)
    error = mistake(text)
    assert words in str(error)
    assert error.key == key
    assert error.file == "my.stage.toml"
    assert error.line is not None
    assert error.remedy
    last = key.split(".")[-1]
    shown = text.splitlines()[error.line - 1]
    assert last in shown or last.isdigit()


def test_the_whole_message_reads_well() -> None:
    error = mistake(mend('"4.1 mS"', '"4.1 mF"'))
    assert str(error) == (
        'my.stage.toml:19: bias.M1.gm: "4.1 mF" has the unit F, and S is wanted; '
        'write a number, an SI prefix and the unit S, such as "4.1 mS"'
    )


TAIL = 'Mtail = { gate = "in", drain = "out", source = "gnd" }'


@pytest.mark.parametrize("label", ["gm1", "ro1", "gm_tail"])
def test_a_label_that_is_a_symbol_or_an_alias(label: str) -> None:
    text = NO_BIAS.replace("CL = [", f"{label} = [").replace("[capacitor]", f"{TAIL}\n[capacitor]")
    error = mistake(text)
    assert f"{label} is also a symbol of M" in error.problem
    assert error.key == f"capacitor.{label}"
    assert error.line == line_with(text, f"{label} = [")


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        ("title = 'a'\n[mosfet\n", 2, "not TOML"),
        ("title = 'a'\ntitle = 'b'\n", 2, "defined twice"),
        ("[mosfet]\n[mosfet]\n", 2, "defined twice"),
        ("a = ", 1, "not TOML"),
        ("", None, "no part"),
        ("# nothing\n", None, "no part"),
        ("mosfet = 3\n", 1, "no section"),
        ("a = " + "[" * 15_000, None, "nested too deeply"),
        ("a." * 15_000 + "b = 1", 1, "characters"),
        ("x = " + "9" * 5000, None, "not TOML"),
        ('[[claim]]\nformula = "g_{m1} \\parallel RL"\n', 2, "single quotes"),
        ('[resistor]\nR1 = ["a", "gnd"]\n', None, "no response"),
        ('[resistor]\nR1 = ["a", "gnd"]\nresponse = 3\n', 3, "named terminals|takes two nodes"),
        ('response = 3\n[resistor]\nR1 = ["a", "gnd"]\n', 1, "no section"),
    ],
)
def test_what_is_no_stage_at_all(text: str, line: int | None, words: str) -> None:
    error = mistake(text)
    assert any(each in str(error) for each in words.split("|"))
    assert error.file == "my.stage.toml"
    assert error.line == line


def test_text_that_is_not_utf_8() -> None:
    with pytest.raises(InputError, match="UTF-8") as caught:
        parse_stage(b"title = 'a'\n# \xff\n", file="f", folder=Path())
    assert caught.value.line == 2


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    (tmp_path / "cascode.stage.toml").write_text(CASCODE, encoding="utf-8")
    assert read_stage(tmp_path / "cascode.stage.toml").file == str(tmp_path / "cascode.stage.toml")
    with pytest.raises(InputError, match=r"nearest one there is cascode\.stage\.toml"):
        read_stage(tmp_path / "cascade.stage.toml")
    with pytest.raises(InputError, match="folder"):
        read_stage(tmp_path)
    with pytest.raises(InputError, match="no such file"):
        read_stage(tmp_path / "nowhere" / "a.stage.toml")
    with pytest.raises(InputError, match=r"cannot be read|no such file"):
        read_stage("a\0b")
    with pytest.raises(InputError, match=r"cannot be read|no such file"):
        read_stage("a" * 5000)
    (tmp_path / "big.stage.toml").write_bytes(b"#" * 1_000_001)
    with pytest.raises(InputError, match="1 MB"):
        read_stage(tmp_path / "big.stage.toml")


def test_more_than_200_nodes() -> None:
    ladder = "\n".join(f'R{n} = ["n{n}", "n{n + 1}"]' for n in range(10, 211))
    error = mistake(f'[resistor]\n{ladder}\n[response]\nz = {{ looking_into = "n10" }}\n')
    assert "200 nodes" in error.problem
    assert error.line == 201


CONTROLS = """\
[voltage_source]
VX = ["a", "gnd"]
[resistor]
RA = ["a", "b"]
RB = ["b", "gnd"]
[cccs]
F1 = { out = ["b", "gnd"], control = %s }
[response]
z = { looking_into = "b"%s }
"""


@pytest.mark.parametrize(
    ("control", "words"),
    [
        ('"VZ"', "nearest known one is VX"),
        ('"F1"', "is a cccs"),
        ("3", "no control"),
        ('["a"]', "1 node given"),
    ],
)
def test_what_controls_a_current_controlled_source(control: str, words: str) -> None:
    error = mistake(CONTROLS % (control, ""))
    assert words in str(error)
    assert error.line == 7


def test_errors_of_the_network_get_their_line() -> None:
    error = mistake(CONTROLS % ('"VX"', ', without = ["VX"]'))
    assert error.key == "cccs.F1"
    assert error.line == 7


def test_a_name_that_is_both_node_and_source() -> None:
    error = mistake(NO_BIAS.replace('"x"', '"VIN"').replace('to = "out", over = "VIN"', 'to = "VIN"'))
    assert "both a node and a source" in error.problem
