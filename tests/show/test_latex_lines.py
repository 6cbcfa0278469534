"""Long formulas in LaTeX: what is broken says the same as before, and fits where TeX itself sets it."""

from __future__ import annotations

import re
import shutil
import subprocess
from fractions import Fraction
from pathlib import Path

import pytest
from noted import compiled, overfull, stage_of
from shown import CASCODE

from symamp.circuit.latex_names import latex_name
from symamp.circuit.stage import Stage
from symamp.exact.derive import derive
from symamp.exact.response import Response
from symamp.exact.shape import QuadraticRoot, Shape
from symamp.exact.terms import Factor
from symamp.formula import parse
from symamp.formula_algebras import evaluate
from symamp.show.latex_formula import latex_of, latex_value
from symamp.show.latex_lines import PAGE_WIDTH, Sense, formula_display, response_display
from symamp.show.latex_width import math_width
from symamp.show.latex_words import MathLine, aligned, display

TWO_STAGE = """
title = "Two stages and a bridge"
[mosfet]
M1 = { gate = "in", drain = "a", source = "gnd" }
M2 = { gate = "a", drain = "out", source = "gnd" }
[capacitor]
CC = ["a", "z"]
CL = ["out", "gnd"]
[resistor]
RZ = ["z", "out"]
RS = ["drive", "in"]
[voltage_source]
VIN = ["drive", "gnd"]
[response]
gain = { from = "VIN", to = "out" }
zin = { looking_into = "VIN" }
[bias]
M1 = { gm = "1 mS", gds = "20 uS", cgs = "50 fF", cgd = "10 fF", cdb = "20 fF" }
M2 = { gm = "5 mS", gds = "100 uS", cgs = "200 fF", cgd = "30 fF", cdb = "70 fF" }
CC = "2 pF"
CL = "5 pF"
RZ = "200 ohm"
RS = "10 kohm"
"""


def responses() -> list[Response]:
    stages = [stage_of(TWO_STAGE), stage_of(CASCODE)]
    return [derive(stage, asked) for stage in stages for asked in stage.asked.values()]


def displays(width: float) -> list[tuple[MathLine, ...]]:
    found = []
    for response in responses():
        found.append(response_display(response, f"H_{{{response.name}}}(s)", width))
        for name in ("dc", "hf", "p1", "p2", "z1", "b1", "b2", "a1"):
            shape = response.quantity(name).shape
            if shape is not None:
                found.append(formula_display(shape, rf"H_{{{name}}}", width, sense=Sense.of(response)))
    return found


def value_of(text: str, stage: Stage, s: float = 0.0, letters: dict[str, str] | None = None) -> float:
    """What broken lines are worth, read back into our own grammar."""
    for name in sorted(stage.symbols, key=lambda n: -len(latex_name(n))):
        text = text.replace(latex_name(name), f"<{name}>")
    for letter, inner in (letters or {}).items():
        text = text.replace(letter, f"({inner})")
    text = re.sub(r"\\q?quad\{?\}?|\{\}|\\times", " ", text)
    while r"\frac" in text:
        text = re.sub(r"\\frac\{([^{}]*)\}\{([^{}]*)\}", r"((\1)/(\2))", text)
    text = re.sub(r"\bs\b", "<s>", text).replace("[", "(").replace("]", ")")
    text = re.sub(r"([>)]|\^\d|\d)\s*(?=[<(\d])", r"\1*", text)
    values = {name: float(value) for name, value in stage.bias.items()}
    return evaluate(parse(re.sub("[<>]", "", text)), {**values, "s": s}.__getitem__)


def joined(lines: tuple[MathLine, ...]) -> dict[str, str]:
    """{left side: its right side, continuation lines put together}."""
    found: dict[str, str] = {}
    label = ""
    for line in lines:
        label = line.left or label
        found[label] = found.get(label, "") + " " + line.right.removeprefix("=").strip()
    return {label: text.strip() for label, text in found.items()}


def ratio_at(lines: tuple[MathLine, ...], response: Response, s: float) -> float:
    """H(s) from its display: one fraction, or N and D, or their coefficients."""
    parts = joined(lines)
    first, *rest = parts.items()
    stage = response.stage
    letters = {name: text for name, text in rest if name not in ("N(s)", "D(s)")}
    values = {}
    for name in ("N(s)", "D(s)"):
        if name in parts:
            text = parts[name]
            for letter, inner in sorted(letters.items(), key=lambda item: -len(item[0])):
                text = text.replace(letter, f"({inner})")
            values[name] = value_of(text, stage, s)
    if not values:
        return value_of(first[1], stage, s)
    assert re.fullmatch(r"-?\\frac\{N\(s\)\}\{D\(s\)\}", first[1])
    return (-1 if first[1].startswith("-") else 1) * values["N(s)"] / values["D(s)"]


@pytest.mark.parametrize("width", [12.0, 20.0, 33.0, PAGE_WIDTH, 400.0])
@pytest.mark.parametrize("place", range(4))
def test_a_broken_response_is_worth_what_the_response_is(width: float, place: int) -> None:
    response = responses()[place]
    lines = response_display(response, "H(s)", width)
    for s in (1e3, 1e7, 3e9):
        above, below = (
            sum(float(c) * s**k for k, c in enumerate(row)) for row in response.exact_coefficients
        )
        assert ratio_at(lines, response, s) == pytest.approx(above / below, rel=1e-9)


@pytest.mark.parametrize("width", [14.0, 25.0, PAGE_WIDTH])
def test_a_broken_quantity_is_worth_what_the_quantity_is(width: float) -> None:
    seen = 0
    for response in responses():
        for name in ("dc", "hf", "b1", "b2", "a1"):
            found = response.quantity(name)
            if found.shape is None or isinstance(found.shape, QuadraticRoot) or found.value is None:
                continue
            parts = joined(formula_display(found.shape, "Q", width, sense=Sense.of(response)))
            text = parts.pop("Q")
            for letter, inner in parts.items():
                text = text.replace(letter, inner)
            assert value_of(text, response.stage) == pytest.approx(found.value, rel=1e-9, abs=1e-300)
            seen += len(parts)
    assert seen > 3 or width > 30  # some halves of fractions did need a letter


def test_long_sums_are_broken_at_their_signs() -> None:
    for lines in displays(24.0):
        for line in lines:
            if not line.left:
                assert re.match(r"\\q?quad\{\} ([-+]|\\times) ?", line.right), line.right


def test_the_larger_term_at_the_bias_point_comes_first() -> None:
    response = responses()[2]
    text = response_display(response, "H(s)", 400.0)[0].right
    # gm2 = 3.9 mS, gmb2 = 0.62 mS, gds2 = 0.24 mS, gds1 = 0.21 mS; CL = 3.3 pF over csb2 = 60 fF
    assert "g_{m2} + g_{mb2} + g_{ds2} + g_{ds1}" in text
    assert "[C_L (g_{m2} + g_{mb2} + g_{ds2} + g_{ds1}) + g_{ds2} C_{sb2}] s" in text
    assert text.startswith(r"= -\frac{g_{m1} (g_{m2} + g_{mb2} + g_{ds2})}")


def test_a_root_that_is_too_wide_has_letters_for_its_coefficients() -> None:
    response = responses()[2]
    root = response.quantity("p1").shape
    assert isinstance(root, QuadraticRoot)
    lines = formula_display(root, "p_1", 30.0, sense=Sense.of(response))
    assert [line.left for line in lines if line.left] == ["p_1", "a", "b", "c"]
    assert lines[0].right == r"= \frac{-b + \sqrt{b^2 - 4 a c}}{2 a}"
    parts = joined(lines)
    a, b, c = (value_of(parts[letter], response.stage) for letter in "abc")
    assert (-b + (b * b - 4 * a * c) ** 0.5) / (2 * a) == pytest.approx(response.poles()[0].real, rel=1e-5)
    assert "C_L (g_{m2}" in parts["b"]  # grouped by what stands beside the capacitors


def test_names_of_coefficients_give_way_to_symbols_of_the_stage() -> None:
    text = TWO_STAGE.replace("CC", "d1").replace("RZ", "n2")
    response = derive(stage := stage_of(text), stage.asked["gain"])
    left = [line.left for line in response_display(response, "H(s)", 30.0)]
    assert r"\mathcal{D}_0" in left
    assert "d_0" not in left


def test_one_term_wider_than_the_line_is_cut_between_its_factors() -> None:
    shape = Shape(Fraction(3), tuple(Factor(f"R{k}") for k in range(30)))
    lines = formula_display(shape, "A", 15.0)
    assert len(lines) > 2
    assert max(math_width(f"{line.left} {line.right}") for line in lines) <= 15.5
    assert all(f"R_{{{k}}}" in aligned(lines) for k in range(10, 30))


def test_widths_are_those_that_tex_finds(tmp_path: Path) -> None:
    """Against pdflatex's own boxes: never much narrower than they are, and not wasteful."""
    if shutil.which("pdflatex") is None:
        pytest.skip("pdflatex is not installed: apt-get install texlive-latex-base")
    formulas = [line.right for lines in displays(33.0) for line in lines]
    formulas += [
        latex_value(x, unit) for x, unit in ((4.1e-3, "S"), (4.7e5, "ohm"), (-1e-7, "F"), (1e-30, "S"))
    ]
    formulas += [
        latex_of(parse(t)) for t in ("gm1*(ro1 || ro2 || RL)", "sqrt(gm1^3/gds_tail)", "abs(2*pi*beta3)")
    ]
    boxes = "\n".join(rf"\setbox0\hbox{{$\displaystyle {f}$}}\typeout{{WIDTH \the\wd0}}" for f in formulas)
    text = rf"\documentclass{{article}}\usepackage{{amsmath}}\begin{{document}}{boxes} x\end{{document}}"
    (tmp_path / "w.tex").write_text(text)
    subprocess.run(
        ["pdflatex", "-interaction=nonstopmode", "w.tex"], cwd=tmp_path, capture_output=True, check=True
    )
    log = (tmp_path / "w.log").read_text(errors="replace")
    real = [float(x) / 10 for x in re.findall(r"WIDTH ([\d.]+)pt", log)]
    assert len(real) == len(formulas) > 80
    for formula, width in zip(formulas, real, strict=True):
        assert width - 0.3 <= math_width(formula) <= 1.06 * width + 0.6, formula


@pytest.mark.parametrize("width", [18.0, 26.0, PAGE_WIDTH])
def test_no_display_sticks_out_of_its_line(tmp_path: Path, width: float) -> None:
    body = "\n".join(display(lines) for lines in displays(width))
    size = rf"\setlength{{\textwidth}}{{{width + 0.3}em}}"
    head = rf"\documentclass{{article}}\usepackage{{amsmath}}\allowdisplaybreaks{size}"
    (tmp_path / "note.tex").write_text(rf"{head}\begin{{document}}{body}\end{{document}}")
    _, log = compiled(tmp_path)
    assert overfull(log) == []


@pytest.mark.parametrize(
    ("value", "unit", "latex"),
    [
        (4.1e-3, "S", r"4.1\,\mathrm{mS}"),
        (3.3e-12, "F", r"3.3\,\mathrm{pF}"),
        (470e3, "ohm", r"470\,\mathrm{k}\Omega"),
        (50.0, "ohm", r"50\,\Omega"),
        (2.2e-6, "H", r"2.2\,\mu\mathrm{H}"),
        (1e-3, "ohm", r"1\,\mathrm{m}\Omega"),
        (-387.2, "", "-387.2"),
        (1.5e-7, "", r"1.5 \times 10^{-7}"),
        (1e-30, "F", r"1 \times 10^{-30}\,\mathrm{F}"),
        (61.5, "deg", r"61.5^\circ"),
        (10e6, "Hz", r"10\,\mathrm{MHz}"),
        (3 + 4j, "", r"3 + j\,4"),
        (complex(3, -4e6), "rad/s", r"3\,\mathrm{rad/s} - j\,4\,\mathrm{Mrad/s}"),
        (0.0, "S", r"0\,\mathrm{S}"),
        (float("inf"), "", r"\infty"),
    ],
)
def test_values_have_their_unit_upright(value: complex, unit: str, latex: str) -> None:
    assert latex_value(value, unit) == latex


def test_no_number_is_refused() -> None:
    with pytest.raises(ValueError, match="no number"):
        latex_value(float("nan"), "S")


@pytest.mark.parametrize(
    ("text", "latex"),
    [
        ("-gm1*gm2*ro1*ro2", "-g_{m1} g_{m2} r_{o1} r_{o2}"),
        ("gm1*(ro1 || RL)", r"g_{m1} (r_{o1} \parallel R_L)"),
        ("ro1 || ro2 || RL", r"(r_{o1} \parallel r_{o2} \parallel R_L)"),
        ("1/(2*pi*RS*CL)", r"\frac{1}{2 \pi R_S C_L}"),
        ("-gm1/gds1", r"-\frac{g_{m1}}{g_{ds1}}"),
        ("gm1 - (gm2 - gm3)", "g_{m1} - (g_{m2} - g_{m3})"),
        ("2*3", r"2 \cdot 3"),
        ("(gm1 + gm2)^2", "(g_{m1} + g_{m2})^2"),
        ("gm1**-1", "g_{m1}^{-1}"),
        ("sqrt(gm1)*abs(-A1)", r"\sqrt{g_{m1}} \lvert -A_1 \rvert"),
        ("RL*(-gm1)", "R_L (-g_{m1})"),
        ("5 kohm*gm1", r"5\,\mathrm{k}\Omega g_{m1}"),
    ],
)
def test_hand_formulas_stay_as_they_were_written(text: str, latex: str) -> None:
    assert latex_of(parse(text)) == latex


def test_a_width_must_be_positive() -> None:
    with pytest.raises(ValueError, match="width"):
        formula_display(Shape(Fraction(1)), "A", 0)
    with pytest.raises(ValueError, match="width"):
        response_display(responses()[0], "A", -1)
