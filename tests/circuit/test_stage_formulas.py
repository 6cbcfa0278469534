"""Formulas about a stage: our grammar, the signs of print, LaTeX; names resolved, carets under what is wrong."""

from __future__ import annotations

import re
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from symamp.assumptions.table import TableReader
from symamp.circuit.formulas import read_formula
from symamp.circuit.latex_names import latex_name
from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage, read_stage
from symamp.errors import InputError, ReadError
from symamp.exact.derive import derive
from symamp.exact.shape import Shape
from symamp.formula import (
    Binary,
    Call,
    Name,
    Negate,
    Node,
    Number,
    Parallel,
    Pi,
    Power,
    dimension_of,
    evaluate,
    parse,
    write,
)
from symamp.show.formulas import one_line
from symamp.show.latex_formula import latex_of, latex_value
from symamp.values import read_value

STAGE = """
[mosfet]
M1 = { gate = "in", drain = "x", source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }
Mtail = { gate = "gnd", drain = "out", source = "x" }
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
_STAGE = parse_stage(STAGE.encode(), file=None, folder=Path("."))
RECIPES = Path(__file__).resolve().parents[2] / "recipes"


@pytest.fixture(scope="module")
def stage() -> Stage:
    return _STAGE


@pytest.mark.parametrize(
    ("written", "meant"),
    [
        (r"-g_{m1} r_{o1}", "-gm1*ro1"),
        (r"\frac{g_{m1}}{C_L}", "gm1/CL"),
        (r"g_{m1}(r_{o1} \parallel R_L)", "gm1*(ro1 || RL)"),
        (r"r_{o1}\|R_L", "ro1 || RL"),
        (r"\left(r_{o1} // R_L\right)", "ro1 || RL"),
        (r"\bigl[ r_{o1} || R_L \bigr] g_{m1}", "(ro1 || RL)*gm1"),
        (r"$-\dfrac{g_{m1}\,R_L}{1 + g_{m,\text{tail}} R_L}$", "-gm1*RL/(1 + gm_tail*RL)"),
        (r"\[ \beta_3 + r_{\pi 3} g_{m3} \]", "beta3 + rpi3*gm3"),
        (r"r_{\pi3}g_{m3}", "rpi3*gm3"),
        (r"2\pi R_L C_L", "2*pi*RL*CL"),
        (r"\frac12 g_{m1}R_L", "1/2*gm1*RL"),
        (r"\frac{1}{2\pi R_L C_L}", "1/(2*pi*RL*CL)"),
        (r"g_{m1}^{2} R_L^2", "gm1**2*RL**2"),
        (r"\sqrt{g_{m1} g_{m2}}", "sqrt(gm1*gm2)"),
        (r"\sqrt 4", "sqrt(4)"),
        (r"\left|g_{m1}R_L\right|", "abs(gm1*RL)"),
        (r"\lvert g_{m1} \rvert R_L", "abs(gm1)*RL"),
        (r"|-g_{m1}|\cdot 2", "abs(-gm1)*2"),
        (r"5\,\mathrm{k}\Omega \cdot g_{m1}", "5 kohm*gm1"),
        (r"5~\mathrm{pF}/C_L", "5 pF/CL"),
        (r"g_{m1} \times R_{L} \div 2", "gm1*RL/2"),
        (r"g_{M1} R_l\,", "gm1*RL"),
        (r"\mathrm{R}_L g_{\mathrm{m1}}", "RL*gm1"),
        (r"{gm1} RL", "gm1*RL"),
        (r"gm_tail RL\,", "gm_tail*RL"),
        ("g_m1*R_L", "gm1*RL"),
        ("−gm1·(ro1 ∥ RL)", "-gm1*(ro1 || RL)"),
        ("2·π·RL·CL", "2*pi*RL*CL"),
        ("gm1²·RL⁻²", "gm1**2*RL**(-2)"),
        ("√(gm1·RL) × 3 ÷ 2", "sqrt(gm1*RL)*3/2"),
        ("1⁄RL + 1∕CL", "1/RL + 1/CL"),
    ],
)
def test_what_is_written_is_what_is_meant(stage: Stage, written: str, meant: str) -> None:
    values = {"gm1": 2.0, "gm2": 3.0, "gm3": 5.0, "gm_tail": 0.25, "ro1": 7.0, "RL": 11.0, "CL": 0.5}
    values |= {"beta3": 13.0, "rpi3": 17.0}
    found, wanted = (
        evaluate(node, values.__getitem__) for node in (read_formula(stage, written), parse(meant))
    )
    assert found == pytest.approx(wanted, rel=1e-14)


def test_every_symbol_and_alias_is_known_by_its_latex(stage: Stage) -> None:
    for name in (*stage.symbols, *stage.aliases):
        assert read_formula(stage, "{" + latex_name(name) + "}") == Name(name)
        assert read_formula(stage, name) == Name(name)


@pytest.mark.parametrize("path", sorted(RECIPES.rglob("*.stage.toml")), ids=lambda path: path.name)
def test_our_own_latex_and_print_read_back(path: Path) -> None:
    stage = read_stage(path)
    values = {name: float(value) for name, value in stage.bias.items()}
    count = 0
    for asked in stage.asked.values():
        response = derive(stage, asked)
        for name in ("dc", "hf", "p1", "z1", "p2", "b1", "a1"):
            shape = response.quantity(name).shape
            if not isinstance(shape, Shape) or not shape.coefficient:
                continue
            wanted = evaluate(parse(shape.text()), values.__getitem__)
            for text in (shape.latex(), one_line(shape)):
                found = evaluate(read_formula(stage, f"{text}"), values.__getitem__)
                assert found == pytest.approx(wanted, rel=1e-12), text
                count += 1
    assert count >= 2


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        ("gm1*gm4", 5, 'no symbol "gm4"; the nearest known one is gm1'),
        (r"g_{m1} g_{m4}", 8, r'no symbol "g_\{m4\}"'),
        ("gm*RL", 1, "name one: gm1, gm2, gm_tail, gm3"),
        (r"\frac{g_{m1}}{C_x}", 15, 'no symbol "C_x"'),
        (r"g_{m1} r_{o1} \parallel R_L", 15, "reads two ways"),
        (r"\foo{g_{m1}}", 1, "no meaning"),
        (r"g_{m1", 3, "not closed"),
        (r"(g_{m1}", 1, "not closed"),
        (r"g_{m1}}", 7, "was not opened"),
        (r"\frac{g_{m1}}", 1, "below the bar is missing"),
        (r"g_{m1} = 3", 8, "no meaning"),
        ("gm1 = 3", 5, "write what stands on its right alone"),
        (r"A_v = -g_{m1} R_L", 5, "write what stands on its right alone"),
        (r"5\,\mathrm{kV}/\mathrm{X}", 16, "no symbol"),
        ("gm1 RL", 5, "operator is missing"),
    ],
)
def test_the_caret_stands_under_what_is_wrong_as_it_was_written(
    stage: Stage, text: str, column: int, words: str
) -> None:
    with pytest.raises(ReadError, match=words) as caught:
        read_formula(stage, text)
    *_, shown, caret = str(caught.value).splitlines()
    assert shown.strip() == text
    assert len(caret) - 4 == column


def test_a_symbol_of_two_readings_is_taken_as_it_stands() -> None:
    text = STAGE.replace('RL = ["out", "gnd"]', 'RL = ["out", "gnd"]\nR_L = ["x", "gnd"]')
    stage = parse_stage(text.encode(), file=None, folder=Path("."))
    assert read_formula(stage, "R_L") == Name("R_L")
    assert read_formula(stage, "RL") == Name("RL")
    assert read_formula(stage, r"{R_L}") == Name("RL")  # the first of two that look alike


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("52 dB", Number(Fraction(52), "dB")),
        ("90°", Number(Fraction(90), "deg")),
        ("45 deg", Number(Fraction(45), "deg")),
        ("6.2e6 rad/s", Number(Fraction(6200000), "rad/s")),
        ("3 Mrad/s", Number(Fraction(3000000), "rad/s")),
    ],
)
def test_decibels_degrees_and_angular_frequencies(stage: Stage, text: str, number: Number) -> None:
    assert read_formula(stage, text) == number
    assert parse(write(number)) == number


def test_decibels_and_degrees_are_pure_numbers() -> None:
    assert dimension_of(parse("52 dB + 3"), str).unit == ""
    assert dimension_of(parse("90 deg"), str).unit == ""
    assert dimension_of(parse("3 rad/s"), str).unit == dimension_of(parse("3 Hz"), str).unit


def test_decibels_degrees_and_angular_frequencies_are_no_values_of_parts(stage: Stage) -> None:
    for text, unit in (("52 dB", ""), ("90 deg", ""), ("90°", ""), ("3 rad/s", "Hz"), ("3 rad/s", "")):
        with pytest.raises(ReadError):
            read_value(text, unit)
    for formula in ("6 dB", "90°", "6 dB*gm1"):  # 6 dB was once taken for 6 S
        with pytest.raises(InputError, match="decibels or degrees"):
            TableReader(stage, {"name": "a", "set": {"gm2": formula}}).read()


@pytest.mark.parametrize(
    ("x", "unit"),
    [(4.1e-3, "S"), (470e3, "ohm"), (3.3e-12, "F"), (45.0, "deg"), (6.2e8, "rad/s"), (2e-6, "A"), (1e-30, "F"),
     (1.2e7, ""), (52.0, "dB")],
)  # fmt: skip
def test_values_as_our_notes_write_them_read_back(stage: Stage, x: float, unit: str) -> None:
    node = read_formula(stage, "{" + latex_value(x, unit) + "}")
    assert evaluate(node, lambda _: 1.0) == pytest.approx(x, rel=1e-12)
    wanted = dimension_of(Number(Fraction(1), unit), str)
    assert dimension_of(node, str) == wanted


def _trees() -> st.SearchStrategy[Node]:
    units = st.sampled_from(["", "S", "ohm", "F", "dB", "deg", "rad/s"])
    leaves = st.one_of(
        st.sampled_from(["gm1", "ro1", "RL", "CL", "gm_tail", "beta3", "rpi3"]).map(Name),
        st.just(Pi()),
        st.builds(lambda x, unit: Number(Fraction(x, 100), unit), st.integers(1, 10**6), units),
    )
    exponents = st.sampled_from([Fraction(2), Fraction(-1), Fraction(12), Fraction(1, 2), Fraction(-2, 3)])

    def grow(inner: st.SearchStrategy[Node]) -> st.SearchStrategy[Node]:
        return st.one_of(
            st.builds(Binary, st.sampled_from("+-*/"), inner, inner),
            st.builds(Parallel, inner, inner),
            st.builds(Negate, inner),
            st.builds(Power, leaves, exponents),
            st.builds(Power, st.builds(Negate, leaves), st.just(Fraction(3))),
            st.builds(Call, st.sampled_from(["sqrt", "abs"]), inner),
        )

    return st.recursive(leaves, grow, max_leaves=9)


@given(_trees())
def test_any_formula_set_in_latex_reads_back_to_its_value(tree: Node) -> None:
    values = {"gm1": 1.25, "ro1": 0.75, "RL": 1.5, "CL": 0.5, "gm_tail": 2.5, "beta3": 3.0, "rpi3": 0.875}
    text = "{" + latex_of(tree) + "}"
    if re.search(r"[0-9] \\frac\{[0-9]+\}\{[0-9]+\}", text):
        return  # a whole number before a fraction, which is refused: see test_formula_latex
    found = evaluate(read_formula(_STAGE, text), values.__getitem__)
    assert found == pytest.approx(evaluate(tree, values.__getitem__), rel=1e-9, abs=1e-12, nan_ok=True)
