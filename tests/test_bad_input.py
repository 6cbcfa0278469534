"""Wrong input, through the command: exit 2, one message that says where and what would be right, and no traceback."""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from symamp.cli import cli

CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x", body = "gnd" }

[capacitor]
CL = ["out", "gnd"]

[resistor]
RL = ["out", "gnd"]

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
RL = "1 Mohm"

[span]
gm1  = ["2 mS", "8 mS"]
gds1 = "30 %"
gds2 = { follows = "gds1" }

[[assumption]]
name = "gds against gm"
small = ["gds"]
against = ["gm"]

[[assumption]]
name = "no body effect"
neglect = ["gmb"]
"""

SPAN = CASCODE[CASCODE.index("[span]") : CASCODE.index("[[assumption]]")]
TABLE = CASCODE.replace(SPAN, '[span]\ntable = "corners.csv"\n\n')


def command(*arguments: str) -> Result:
    return CliRunner().invoke(cli, list(arguments))


def saved(folder: Path, text: str | bytes, name: str = "my.stage.toml") -> str:
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return str(path)


def refused(*arguments: str) -> str:
    """The message with which the command is refused."""
    result = command(*arguments)
    assert isinstance(result.exception, SystemExit), result.exception
    assert result.exit_code == 2, result.stdout
    assert result.stdout == ""
    assert "Traceback" not in result.stderr
    assert result.stderr.endswith("\n")
    assert result.stderr.count("\n") == 1, "one message, on one line"
    return result.stderr.rstrip("\n")


def mended(old: str, new: str, text: str = CASCODE) -> str:
    assert old in text
    return text.replace(old, new, 1)


def line_with(text: str, piece: str) -> int:
    return text[: text.index(piece)].count("\n") + 1


# (in place of, this is written, command, key, words of the message, piece of the line that the message names)
M1 = 'M1 = { gate = "in",  drain = "x",   source = "gnd" }'
WRONG = {
    "unknown section": ("[capacitor]", "[capacitors]", "capacitors", "capacitor", "[capacitors]"),
    "unknown key": ('to = "out" }', 'two = "out" }', "response.gain.two", "to", "two ="),
    "unknown terminal": ('gate = "in"', 'gait = "in"', "mosfet.M1.gait", "gate", "gait"),
    "unknown bias key": ('gmb = "0.62', 'gmd = "0.62', "bias.M2.gmd", "gm", "gmd"),
    "unknown selector": ('neglect = ["gmb"]', 'neglect = ["gmbb"]', "neglect", "is gmb", "neglect ="),
    "unknown symbol in span": ("gm1  =", "gm9  =", "span.gm9", "gm1", "gm9  ="),
    "missing terminal": (M1, 'M1 = { drain = "x", source = "gnd" }', "mosfet.M1", "gate", "M1 ="),
    "one symbol twice": (
        "[capacitor]",
        '[bjt]\nQ1 = { base = "in", collector = "x", emitter = "gnd" }\n\n[capacitor]',
        "bjt.Q1",
        "Q3",
        "Q1 =",
    ),
    "wrong unit": ('"3.3 pF"', '"3.3 mS"', "bias.CL", "F", "CL = "),
    "no SI prefix": ('"3.3 pF"', '"3.3 xF"', "bias.CL", "F", "CL = "),
    "NaN": ('"3.3 pF"', "nan", "bias.CL", "finite", "CL = nan"),
    "infinite": ('"3.3 pF"', "-inf", "bias.CL", "finite", "CL = -inf"),
    "negative": ('"3.3 pF"', '"-3.3 pF"', "bias.CL", "positive", 'CL = "-'),
    "zero": ('"3.3 pF"', "0", "bias.CL", "positive", "CL = 0"),
    "node that hangs on nothing": (
        'RL = ["out", "gnd"]',
        'RL = ["out", "gnd"]\nR2 = ["a", "b"]',
        None,
        "a",
        None,
    ),
    "response into a shorted node": ('looking_into = "out"', 'looking_into = "in"', "response.rout", "VIN", "rout ="),
    "span with ends reversed": ('["2 mS", "8 mS"]', '["8 mS", "2 mS"]', "span.gm1", "2 mS", "gm1  ="),
    "two spans": ("gm1  =", 'table = "t.csv"\ngm1  =', "span", "table", "gm1  ="),
    "no TOML": ('title = "', "title = ", None, "TOML", "title"),
    "the same key twice": ("[bias]\n", '[bias]\nCL = "1 pF"\n', None, "twice", 'CL = "3.3 pF"'),
}  # fmt: skip


@pytest.mark.parametrize("asked", ["derive", "ledger"])
@pytest.mark.parametrize("what", WRONG)
def test_a_wrong_stage_file_is_refused_with_file_line_and_key(what: str, asked: str, tmp_path: Path) -> None:
    old, new, key, words, piece = WRONG[what]
    # CL stands among the parts too, so a piece of the bias is looked for from there on.
    text = mended(old, new, CASCODE)
    path = saved(tmp_path, text)
    message = refused(asked, path)
    assert message.startswith(path), message
    if piece is not None:
        start = text.index("[bias]") if piece.startswith("CL =") else 0
        line = text[: text.index(piece, start)].count("\n") + 1
        assert message.startswith(f"{path}:{line}: "), message
    if key is not None:
        assert f": {key}" in message or f".{key}" in message, message
    assert words in message
    assert ";" in message, "what would be right comes after a semicolon"


def test_assumptions_that_contradict_one_another_are_named(tmp_path: Path) -> None:
    text = CASCODE + '\n[[assumption]]\nname = "the other way"\nsmall = ["gm"]\nagainst = ["gds"]\n'
    path = saved(tmp_path, text)
    message = refused("ledger", path)
    assert message.startswith(f"{path}:")
    assert "gds against gm" in message
    assert "the other way" in message


def test_a_loop_of_voltage_sources_is_named_by_its_parts(tmp_path: Path) -> None:
    text = mended('VIN = ["in", "gnd"]', 'VIN = ["in", "gnd"]\nVB = ["in", "b"]\nVC = ["b", "gnd"]')
    message = refused("derive", saved(tmp_path, text))
    assert all(label in message for label in ("VIN", "VB", "VC"))
    assert "my.stage.toml" in message


def test_a_cut_of_current_sources_is_named_by_its_parts(tmp_path: Path) -> None:
    text = mended("[response]", '[current_source]\nI1 = ["q", "gnd"]\nI2 = ["q", "out"]\n\n[response]')
    message = refused("derive", saved(tmp_path, text))
    assert "I1" in message
    assert "I2" in message


def test_a_response_that_is_identically_zero_says_which_and_why(tmp_path: Path) -> None:
    text = mended("[response]", 'VB = ["far", "gnd"]\n\n[response]')
    text = mended("[capacitor]", '[capacitor]\nCF = ["far", "gnd"]', text)
    text = mended('gain = { from = "VIN"', 'gain = { from = "VB"', text)
    text = mended("[bias]", '[bias]\nCF = "1 pF"', text)
    path = saved(tmp_path, text)
    for asked in ("derive", "ledger"):
        message = refused(asked, path)
        assert message.startswith(f"{path}:{line_with(text, 'gain =')}: response.gain: ")
        assert "'gain' is identically zero" in message
        assert "VB" in message


def test_a_response_that_is_identically_infinite_says_which_and_why(tmp_path: Path) -> None:
    text = mended("[response]", 'VB = ["far", "gnd"]\n\n[response]')
    text = mended("[capacitor]", '[capacitor]\nCF = ["far", "gnd"]', text)
    text = mended("[bias]", '[bias]\nCF = "1 pF"', mended('over = "x"', 'over = "far"', text))
    path = saved(tmp_path, text)
    message = refused("derive", path)
    assert message.startswith(f"{path}:{line_with(text, 'late =')}: response.late: ")
    assert "'late' is identically infinite" in message


def test_a_bias_value_that_the_ledger_needs_is_asked_for_where_it_belongs(tmp_path: Path) -> None:
    text = mended('CL = "3.3 pF"\n', "")
    path = saved(tmp_path, text)
    message = refused("ledger", path)
    assert message.startswith(f"{path}:{line_with(text, '[bias]')}: bias: ")
    assert "CL" in message


def test_a_stage_without_assumptions_has_no_ledger(tmp_path: Path) -> None:
    path = saved(tmp_path, CASCODE[: CASCODE.index("[[assumption]]")])
    message = refused("ledger", path)
    assert message.startswith(f"{path}: assumption: this stage makes no assumption")


# Tables


@pytest.mark.parametrize(
    ("table", "line", "words"),
    [
        ("gm1 [mS],gds1 [mS]\n1,0.1\n2,\n", 3, "gds1"),
        ("gm1 [mS],gds1 [mS]\n1,0.1\n2\n", 3, "2"),
        ("gm1 [mS],gds9 [mS]\n1,0.1\n", 1, "gds9"),
        ("gm1 [mS],gds1 [pF]\n1,0.1\n", 1, "pF"),
        ("gm1 [mS],gds1 [mS]\n1,x\n", 2, "x"),
        ("gm1 [mS],gds1 [mS]\n1,-3\n", 2, "positive"),
        ("gm1 [mS],gds1 [mS]\n1,nan\n", 2, "nan"),
        ("gm1 [mS],gm1 [mS]\n1,2\n", 1, "gm1"),
    ],
)
def test_a_wrong_table_is_refused_with_its_row(tmp_path: Path, table: str, line: int, words: str) -> None:
    saved(tmp_path, table, "corners.csv")
    message = refused("ledger", saved(tmp_path, TABLE))
    assert f"corners.csv:{line}: " in message, message
    assert words in message


@pytest.mark.parametrize("table", ["", "gm1 [mS]\n", "\n\n", None])
def test_a_table_without_rows_or_without_file_is_refused(tmp_path: Path, table: str | None) -> None:
    if table is not None:
        saved(tmp_path, table, "corners.csv")
    assert "corners.csv" in refused("ledger", saved(tmp_path, TABLE))


def test_a_table_that_is_not_text_is_refused(tmp_path: Path) -> None:
    saved(tmp_path, b"gm1 [mS]\n\xff\xfe\n", "corners.csv")
    assert "UTF-8" in refused("ledger", saved(tmp_path, TABLE))


# Files


def test_a_file_that_is_not_there_is_refused_with_the_nearest_one(tmp_path: Path) -> None:
    saved(tmp_path, CASCODE)
    message = refused("derive", str(tmp_path / "mi.stage.toml"))
    assert "mi.stage.toml: there is no such file" in message
    assert "my.stage.toml" in message


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"\xff\xfe\x00", "UTF-8"),
        (b"title = \x00", "TOML"),
        (b"#" * 1_000_001, "1 MB"),
        (b"", "part"),
        (b"x = " + b"[" * 2000, "nested"),
        (b"x = " + b"{a=" * 200_000, ""),
        (b"[mosfet]\nM1 = 3\n", "M1"),
        (b"mosfet = 3\n", "mosfet"),
        (b"[[mosfet]]\nM1 = 3\n", "mosfet"),
    ],
)
def test_a_file_that_is_no_stage_is_refused(tmp_path: Path, content: bytes, words: str) -> None:
    path = saved(tmp_path, content)
    message = refused("derive", path)
    assert message.startswith(path)
    assert words in message


def test_a_folder_is_refused(tmp_path: Path) -> None:
    assert "folder" in refused("derive", str(tmp_path))


@pytest.mark.skipif(not Path("/dev/zero").exists(), reason="no such device here")
def test_an_endless_file_is_refused() -> None:
    assert "/dev/zero" in refused("derive", "/dev/zero")


def test_a_file_that_may_not_be_read_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = saved(tmp_path, CASCODE)

    def forbidden(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied", path)

    monkeypatch.setattr(Path, "open", forbidden)
    monkeypatch.setattr(Path, "read_bytes", forbidden)
    monkeypatch.setattr("builtins.open", forbidden)
    assert "Permission denied" in refused("derive", path)


def test_more_than_two_hundred_nodes_are_refused(tmp_path: Path) -> None:
    ladder = "\n".join(f'R{k} = ["n{k}", "n{k + 1}"]' for k in range(1, 202))
    text = f"""\
[resistor]
{ladder}
[voltage_source]
VIN = ["n1", "gnd"]
[response]
gain = {{ from = "VIN", to = "n202" }}
"""
    assert "200" in refused("derive", saved(tmp_path, text))


# What is typed


@pytest.mark.parametrize(
    ("arguments", "key", "words"),
    [
        (("ledger", "--quantity", "gain.bandwith"), "--quantity", "bandwidth"),
        (("ledger", "--quantity", "gane.dc"), "--quantity", "gain, late, rout"),
        (("ledger", "--quantity", "gain"), "--quantity", "gain.dc"),
        (("ledger", "--quantity", "gain.p0"), "--quantity", "p1"),
        (("ledger", "--quantity", "gain.at(10 mS)"), "--quantity", "Hz"),
        (("derive", "--assume", "no boy effect"), "--assume", "'no body effect'"),
        (("derive", "--at", "10 MS"), "--at", "Hz"),
        (("derive", "--at", "-3 MHz"), "--at", "negative"),
        (("derive", "--at", "ten"), "--at", "Hz"),
        (("derive", "--response", "gian"), "--response", "gain, late, rout"),
    ],
)
def test_an_unknown_name_is_refused_with_what_is_known(
    tmp_path: Path, arguments: tuple[str, ...], key: str, words: str
) -> None:
    message = refused(arguments[0], saved(tmp_path, CASCODE), *arguments[1:])
    assert f"{key}: " in message
    assert words in message


@pytest.mark.parametrize(
    "arguments",
    [
        ("ledger", "--points", "-1"),
        ("ledger", "--points", "many"),
        ("ledger", "--points", "1000000000000"),
        ("ledger", "--seed", "-1"),
        ("derive", "--colour"),
        ("dervie",),
        ("ledger", "second.stage.toml"),
    ],
)
def test_a_wrong_option_is_refused(tmp_path: Path, arguments: tuple[str, ...]) -> None:
    result = command(arguments[0], saved(tmp_path, CASCODE), *arguments[1:])
    assert isinstance(result.exception, SystemExit)
    assert (result.exit_code, result.stdout) == (2, "")
    assert "Error: " in result.stderr


def test_what_a_terminal_would_obey_is_taken_out_of_messages(tmp_path: Path) -> None:
    message = refused("derive", saved(tmp_path, mended('"3.3 pF"', '"3.3 \\u001b[31mpF\\u0007"')))
    assert message.isprintable()
    assert "\x1b" not in refused("derive", str(tmp_path / "no\x1b[31m.stage.toml"))


def test_json_does_not_change_a_refusal(tmp_path: Path) -> None:
    path = saved(tmp_path, mended('"3.3 pF"', '"3.3 mS"'))
    assert refused("ledger", path, "--json") == refused("ledger", path)
