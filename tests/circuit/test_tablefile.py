"""Tables of bias points: columns in any unit, aliases, and mistakes named by row and column."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.errors import InputError

CASCODE = """\
[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x", body = "gnd" }
[capacitor]
CL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
"""
BIAS = """\
[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"
"""


def read(text: str, folder: Path = Path()) -> Stage:
    return parse_stage(text.encode(), file="my.stage.toml", folder=folder)


def mistake(text: str, folder: Path) -> InputError:
    with pytest.raises(InputError) as caught:
        read(text, folder)
    return caught.value


def table_stage(folder: Path, table: str, text: str = CASCODE + BIAS) -> str:
    (folder / "corners.csv").write_text(table, encoding="utf-8")
    return text + '[span]\ntable = "corners.csv"\n'


def test_a_table_in_any_units_and_aliases(tmp_path: Path) -> None:
    text = table_stage(tmp_path, "gm1 [mS], ro1 [kohm], CL [pF]\n4, 5, 1\n\n8, 2.5, 3e0\n")
    table = read(text, tmp_path).span.table
    assert table is not None
    assert table.columns == ("gm1", "gds1", "CL")
    assert table.rows[1] == (Fraction(8, 1000), Fraction(1, 2500), Fraction(3, 10**12))


def test_bare_numbers_under_a_head_without_unit_draw_a_warning(tmp_path: Path) -> None:
    stage = read(table_stage(tmp_path, "gm1, CL [pF], gds1\n0.004, 1, 0.2 mS\n"), tmp_path)
    (warning,) = stage.warnings
    assert "column gm1" in warning
    assert "read in S" in warning


def test_with_no_bias_the_first_row_is_the_bias_and_columns_give_parameters(tmp_path: Path) -> None:
    header = "gm1 [mS],gds1 [mS],cgd1 [fF],gm2 [mS],gds2 [mS],CL\n"
    stage = read(
        table_stage(tmp_path, header + "4,0.2,10,3,0.1,1 pF\n5,0.3,11,4,0.2,2p\n", CASCODE), tmp_path
    )
    assert stage.parts["M1"].parameters == ("gm", "gds", "cgd")
    assert stage.bias["cgd1"] == Fraction(1, 10**14)
    assert stage.bias["CL"] == Fraction(1, 10**12)
    assert "gmb2" not in stage.symbols
    assert "M2" in stage.warnings[0]


BAD_TABLES = [
    ("gm1 [mS]\n4\n4..2\n", 3, "row 2, column gm1", "no SI prefix"),
    ("CL\n1 pF\n1 mS\n", 3, "row 2, column CL", "unit S"),
    ("gm1 [mS],CL [pF]\n4,\n", 2, "row 1, column CL", "cell is empty"),
    ("gm1 [mS],CL [pF]\n4\n", 2, "row 1, column CL", "row ends before"),
    ("gm1 [mS]\n4,5\n", 2, "row 1", "2 cells under 1"),
    ("gm1 [mS]\n-4\n", 2, "row 1, column gm1", "negative"),
    ("ro1 [kohm]\n0\n", 2, "row 1, column ro1", "not positive"),
    ("gm1 [mS]\n4 mS\n", 2, "row 1, column gm1", "no plain number"),
    ("gm1 [mS]\nnan\n", 2, "row 1, column gm1", "no plain number"),
    ("gm1 [pF]\n4\n", 1, "column gm1", "no unit for gm1"),
    ("gm9 [mS]\n4\n", 1, "column gm9", "nearest known one is gm1"),
    ("gds [mS]\n4\n", 1, "column gds", "nearest known one is gds1"),  # a bare name heads no column
    ("cgd1 [fF]\n4\n", 1, "column cgd1", "M1 has no cgd"),
    ("gm1 [mS],gm1 [mS]\n4,4\n", 1, None, "stands twice"),
    ("gds1 [mS],ro1 [kohm]\n4,4\n", 1, "column ro1", "both set gds1"),
    ("gm1 [mS];CL [pF]\n4;5\n", 1, None, "commas"),
    ("gm1 [mS]\n", 1, None, "no rows"),
    ("", 1, None, "empty"),
    ('gm1 [mS]\n"4\n', 2, None, "no CSV"),
]


@pytest.mark.parametrize(("table", "line", "key", "words"), BAD_TABLES)
def test_a_table_names_row_and_column(
    tmp_path: Path, table: str, line: int, key: str | None, words: str
) -> None:
    error = mistake(table_stage(tmp_path, table), tmp_path)
    assert words in str(error)
    assert (error.file, error.line, error.key) == (str(tmp_path / "corners.csv"), line, key)


def test_a_table_that_must_give_the_bias_names_the_missing_column(tmp_path: Path) -> None:
    error = mistake(table_stage(tmp_path, "gm1 [mS]\n4\n", CASCODE), tmp_path)
    assert "missing column" in error.problem
    assert "[bias]" in error.remedy


def test_a_table_must_exist_and_stand_alone(tmp_path: Path) -> None:
    error = mistake(CASCODE + BIAS + '[span]\ntable = "none.csv"\n', tmp_path)
    assert error.key == "span.table"
    assert "does not exist" in str(error)
    assert error.line == (CASCODE + BIAS).count("\n") + 2
    both = mistake(CASCODE + BIAS + '[span]\ntable = "none.csv"\ngm1 = "3 %"\n', tmp_path)
    assert both.key == "span.gm1"
