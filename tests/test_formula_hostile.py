"""Formulas that nobody should write: a tree or a clear error, in bounded time, and never anything else."""

from __future__ import annotations

import random
import time
import tracemalloc
from pathlib import Path

import pytest

from symamp.circuit.formulas import read_formula
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage
from symamp.errors import InputError, ReadError
from symamp.formula import evaluate

STAGE = """
[mosfet]
M1 = { gate = "in", drain = "out", source = "gnd" }
Mtail = { gate = "gnd", drain = "out", source = "in" }
[bjt]
Q3 = { base = "in", collector = "out", emitter = "gnd" }
[resistor]
RL = ["out", "gnd"]
[capacitor]
CL = ["out", "gnd"]
[voltage_source]
VIN = ["in", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
"""
PIECES = [
    "gm1", "ro1", "RL", "CL", "beta3", "gm_tail", "gm", "s", "pi", "π", "sqrt", "abs", "(", ")", "[", "]",
    "{", "}", "+", "-", "*", "/", "^", "**", "||", "|", "∥", "−", "·", "×", "√", "²", "⁻³", "0", "1",
    "2.5", "1e9", "9" * 40, "5 kohm", "3.3 pF", "52 dB", "90°", "6 Mrad/s", "4,7", "1e999", "0x10",
    "1_000", "g_{m1}", "r_{o1}", "R_L", "C_L", r"\frac", r"\dfrac{", r"\sqrt", r"\parallel", r"\|", "//",
    r"\cdot", r"\,", r"\left", r"\right", r"\left|", r"\mathrm{", r"\text{", r"\beta_3", r"\pi", r"\Omega",
    r"\begin{array}", r"\\", "\\", "$", "&", "_", "_{", "^{", "__import__", "os.system", "lambda:",
    "eval(", "'", '"', ";", "#", "\n", "\t", "\x00", "\u202e", "\u0430", "\uff47", "\ud83d", "🙂", "ñ", "İ",
    "ǅ", "½", "٣", " ",
]  # fmt: skip


@pytest.fixture(scope="module")
def stage() -> Stage:
    return parse_stage(STAGE.encode(), file=None, folder=Path("."))


def outcome(stage: Stage, text: str) -> str:
    """What comes of a text: "tree" or "error"; anything else is raised."""
    try:
        node = read_formula(stage, text)
    except ReadError:
        return "error"
    evaluate(node, lambda _: 1.5)
    return "tree"


def test_ten_thousand_random_texts_end_in_a_tree_or_a_clear_error(stage: Stage) -> None:
    draw = random.Random(20261201)
    begun = time.monotonic()
    found = {"tree": 0, "error": 0}
    for _ in range(10_000):
        text = "".join(draw.choice(PIECES) for _ in range(draw.randint(1, 14)))
        found[outcome(stage, text)] += 1
    assert found["error"] > 5000
    assert found["tree"] > 100
    assert time.monotonic() - begun < 60


OPENINGS = [
    "(", "{", "-", "sqrt(", r"\frac{", r"\left(", "|", "g_{", r"\sqrt{", "abs(-", r"\sqrt ", r"\frac", r"\frac1", "^",
    "R_L^", r"\left|", r"\left\{", r"\bigl[", r"\lvert ", "√", r"\sqrt[3]", r"g_\text{", "g_\\",
]  # fmt: skip


@pytest.mark.parametrize("opening", OPENINGS)
@pytest.mark.parametrize("many", [65, 1800])
def test_deep_nesting_is_refused(stage: Stage, opening: str, many: int) -> None:
    assert outcome(stage, opening * many + "RL") == "error"
    assert outcome(stage, "{}" + opening * many + "RL") == "error"  # as LaTeX


def test_long_random_texts_take_bounded_time_and_memory(stage: Stage) -> None:
    draw = random.Random(20261202)
    tracemalloc.start()
    for number in range(120):
        few = draw.sample(PIECES, draw.randint(1, 3))  # the fewer, the further the reading goes
        text = "".join(draw.choice(few) for _ in range(20_000))[: 19_990 - number]
        begun = time.monotonic()
        outcome(stage, text)
        assert time.monotonic() - begun < 5, text[:60]
    assert tracemalloc.get_traced_memory()[1] < 200e6
    tracemalloc.stop()


@pytest.mark.parametrize(
    "unit",
    [
        "1 ",
        r"1\,",
        r"\pi ",
        r"\pi",
        "a_",
        "aa_",
        r"1\text{",
        "g_m1 ",
        "R_L2 ",
        "1 k",
        r"\frac12+",
        "||",
        "²",
        "1e9",
    ],
)
@pytest.mark.parametrize("after", ["", "{}"])
def test_no_text_takes_time_by_the_square_of_its_length(stage: Stage, unit: str, after: str) -> None:
    begun = time.monotonic()
    outcome(stage, (unit * 19_000)[:19_990] + after)
    outcome(stage, "1" + " " * 19_000 + after)
    outcome(stage, "g_{" + "m" * 19_000 + "}")
    assert time.monotonic() - begun < 5


@pytest.mark.parametrize(
    "text",
    [
        "9**9**9**9",
        "RL^9^9^9",
        r"R_L^{9^{9^{9}}}",
        "RL**65",
        "RL**-65",
        "(RL**64)**2",
        "RL**(1/65)",
        "RL**1e99",
        "2**RL",
        "RL⁹⁹",
    ],
)
def test_huge_exponents_are_refused(stage: Stage, text: str) -> None:
    assert outcome(stage, text) == "error"


@pytest.mark.parametrize(
    "text",
    [
        "__import__('os').system('true')",
        "eval('1')",
        "gm1.__class__",
        "S.Infinity",
        "lambda: 1",
        "[x for x in (1,)]",
        r"\input{/etc/passwd}",
        r"\write18{true}",
        r"\def\x{1}",
        "gm1; RL",
        "gm1 = RL",
    ],
)
def test_names_of_programs_are_names_that_nobody_knows(stage: Stage, text: str) -> None:
    with pytest.raises(ReadError):
        read_formula(stage, text)


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("gm1*R\u0406", "U+0406"),
        ("\uff47m1", "U+FF47"),
        ("gm\u0661", "U+0661"),
        ("\u0421L", "U+0421"),
        ("gm1\u2010RL", "U+2010"),
    ],
)
def test_look_alikes_are_named_by_their_code(stage: Stage, text: str, code: str) -> None:
    with pytest.raises(ReadError, match=code.replace("+", r"\+")):
        read_formula(stage, text)


def test_long_texts_are_bounded(stage: Stage) -> None:
    assert outcome(stage, "gm1*" * 4000 + "RL") == "tree"
    assert outcome(stage, "gm1*" * 6000 + "RL") == "error"
    assert outcome(stage, r"g_{m1} " * 2500) == "tree"
    assert outcome(stage, "\\" * 19_000) == "error"
    assert outcome(stage, "9" * 19_000) == "error"


@pytest.mark.parametrize("text", [None, 3, 2.5, True, ["gm1"], b"gm1"])
def test_what_is_no_text_is_refused(stage: Stage, text: object) -> None:
    with pytest.raises(InputError):
        read_formula(stage, text)  # type: ignore[arg-type]
