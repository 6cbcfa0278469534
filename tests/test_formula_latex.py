r"""LaTeX scanned into words and signs: what it means as typeset, and what reads two ways on paper and is refused.

What a bare digit after `^`, `_` or `\frac` takes, and that {} holds nothing but a place, is TeX's own rule (Knuth, The
TeXbook, chapters 16 to 18; from memory). Digits in groups by thin spaces: The International System of Units, 9th
edition, 5.4.4 (from memory).
"""

from __future__ import annotations

import time

import pytest

from symamp.errors import ReadError
from symamp.formula import evaluate, parse, parse_tokens, write
from symamp.formula_latex import is_latex, scan_latex
from symamp.formula_tree import Node

NAMES = {
    ("g", "m1"): "gm1", ("r", "o1"): "ro1", ("R", "L"): "RL", ("C", "L"): "CL", ("beta", "1"): "beta1",
    ("g", "mtail"): "gm_tail", ("r", "pi1"): "rpi1",
}  # fmt: skip
VALUES = {"gm1": 2.0, "ro1": 7.0, "RL": 11.0, "CL": 0.5, "beta1": 13.0, "gm_tail": 0.25, "rpi1": 17.0}


def resolve(letter: str, subscript: str) -> str | None:
    if not subscript:
        return letter if letter in VALUES else None
    return NAMES.get((letter, subscript.replace(",", "")))


def read(text: str) -> Node:
    return parse_tokens(text, scan_latex(text, resolve, lambda name: f"not {name}"))


def value(node: Node) -> float:
    return evaluate(node, VALUES.__getitem__)


@pytest.mark.parametrize(
    ("written", "meant"),
    [
        (r"\sqrt[3]{R_L}", "RL**(1/3)"),
        (r"\sqrt [2] {R_L} g_{m1}", "RL**(1/2)*gm1"),
        (r"{R_L}^{10}", "RL**10"),
        (r"{R_L}^23", None),
        (r"R_L^2 g_{m1}", "RL**2*gm1"),
        (r"{R_L}^{-1}", "1/RL"),
        (r"\left|r_{o1} || R_L\right|", "abs(ro1 || RL)"),
        (r"\bigl| r_{o1} || R_L \bigr|", "abs(ro1 || RL)"),
        (r"\lvert r_{o1} || R_L \rvert", "abs(ro1 || RL)"),
        (r"\vert -R_L \vert", "abs(-RL)"),
        (r"\left\lvert -R_L \right\rvert", "abs(-RL)"),
        (r"\left| 1 - |R_L| \right|", "abs(1 - abs(RL))"),
        (r"|\frac{r_{o1} || R_L}{2}|", "abs((ro1 || RL)/2)"),
        (r"\left\{ R_L + 1 \right\} g_{m1}", "(RL + 1)*gm1"),
        (r"\lbrace R_L \rbrace", "RL"),
        (r"g_\mathrm{m1} R_\text{L}", "gm1*RL"),
        (r"\mathrm{g}_\mathrm{m1}", "gm1"),
        (r"g_{m_1}", "gm1"),
        (r"{}-g_{m1}", "-gm1"),
        (r"R_L \\ & \quad{} + C_L", "RL + CL"),
        (r"R_L \\ & \qquad{} \times (R_L + C_L)", "RL*(RL + CL)"),
        (r"\begin{aligned} R_L & + C_L \end{aligned}", "RL + CL"),
        (r"\frac{g_m1}{R_L}", "gm1/RL"),
        (r"\frac{g_m1r_o1}{R_L}", "gm1*ro1/RL"),
        (r"\frac12 R_L", "RL/2"),
        (r"\frac1{R_L}", "1/RL"),
        (r"\frac\pi2", "pi/2"),
        (r"\frac{1}{2π R_L}", "1/(2*pi*RL)"),
        (r"{R_L}²⋅2", "RL**2*2"),
        (r"{R_L}⁻¹", "1/RL"),
        (r"√{R_L} \cdot √2", "sqrt(RL)*sqrt(2)"),
        (r"r_{π1} + {β_1}", "rpi1 + beta1"),
        (r"R_LC_L\,", "RL*CL"),
        (r"2\frac{g_{m1}}{R_L}", "2*gm1/RL"),
        (r"\frac12/R_L\cdot C_L", "CL/(2*RL)"),
        (r"1/R_L + g_{m1} C_L", "1/RL + gm1*CL"),
        (r"1/(R_L C_L)", "1/(RL*CL)"),
        (r"2\mathrm{g}_{m1}", "2*gm1"),
        (r"2\,\mathrm{CL}", "2*CL"),
    ],
)
def test_what_is_typeset_is_what_is_meant(written: str, meant: str | None) -> None:
    if meant is None:
        with pytest.raises(ReadError):
            read(written)
        return
    assert value(read(written)) == pytest.approx(value(parse(meant)), rel=1e-14)


@pytest.mark.parametrize(
    ("written", "number"),
    [
        (r"5\,\mathrm{k}\Omega", "5 kohm"),
        (r"5\,\mathrm{k\Omega}", "5 kohm"),
        (r"5~k\Omega", "5 kohm"),
        (r"{5 kohm}", "5 kohm"),
        (r"5\,\mathrm{k\,\Omega}", "5 kohm"),
        (r"5\,kΩ", "5 kohm"),
        (r"50\Omega", "50 ohm"),
        (r"3.3\,\text{pF}", "3.3 pF"),
        (r"2\,\mathrm{\mu F}", "2 uF"),
        (r"2\,\mu\mathrm{A}", "2 uA"),
        (r"2\,\mathrm{µA}", "2 uA"),
        (r"40\,\mathrm{dB}", "40 dB"),
        (r"90^\circ", "90 deg"),
        (r"90^{\circ}", "90 deg"),
        (r"90\degree", "90 deg"),
        (r"6.2\,\mathrm{Mrad/s}", "6.2e6 rad/s"),
        (r"5\,\mathrm{k}", "5000"),
    ],
)
def test_numbers_with_units(written: str, number: str) -> None:
    found = read(written)
    assert write(found).strip("()") == write(parse(number))


def test_a_unit_after_a_power_of_ten() -> None:
    assert write(read(r"4.1 \times 10^{-3}\,\mathrm{S}\,R_L")) == "4.1*10**(-3)*1 S*RL"
    assert value(read(r"4.1 \times 10^{-3}\,\mathrm{S}")) == pytest.approx(4.1e-3, rel=1e-15)


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        (r"1/2\pi R_L C_L", 4, "without a sign after / reads two ways"),
        (r"g_{m1}/C_L R_L", 12, "without a sign after / reads two ways"),
        (r"1 \div 2 {R_L}", 10, "without a sign after / reads two ways"),
        (r"1/-R_L {R_L}", 8, "without a sign after / reads two ways"),
        (r"10\,000 R_L", 5, "two numbers stand side by side"),
        (r"{R_L}^10", 6, "several digits needs braces"),
        (r"{R_L}^-1", 7, "needs braces"),
        (r"{R_L}^{2}^٣", 11, "needs braces"),
        (r"{}|r_{o1} || R_L|", 11, r"|| between bars reads two ways"),
        (r"2\frac12", 2, "a whole number before a fraction"),
        (r"2\tfrac{1}{2} R_L", 2, "a whole number before a fraction"),
        (r"\frac{R_L1}{2}", 7, '"R_L1" reads two ways'),
        (r"g_{m1} R_L \parallel r_{o1}", 12, "|| beside * reads two ways"),
        (r"R_L \\ R_L", 8, "without an operator reads two ways"),
        (r"\sqrt[n]{R_L}", 6, "no whole number"),
        (r"\sqrt g_{m1}", 7, "needs braces"),
        (r"(R_L} + 1", 5, "closes what was not opened; add ) before it"),
        (r"\left(R_L\right]", 16, "closes what was not opened"),
        (r"\vert R_L", 1, r"not closed; add \vert"),
        (r"\lvert R_L", 1, r"not closed; add \rvert"),
        (r"\left| R_L |", 12, r"not closed; add |"),
        (r"\left\{ R_L", 6, r"not closed; add \}"),
        (r"\begin{matrix} R_L", 1, r"\begin has no meaning"),
        (r"{R_" + "\u212a" + "}", 4, "(U+212A, kelvin sign)"),
        (r"g_{m" + "\u0661" + "}", 5, "(U+0661, arabic-indic digit one)"),
        (r"g_\text{" + "\u043c" + "1}", 9, "(U+043C, cyrillic small letter em)"),
        ("g_\\" + "\u212a", 4, "U+212A"),
        (r"\unknown{R_L}", 1, r"\unknown has no meaning"),
    ],
)
def test_what_reads_two_ways_or_none_is_refused_where_it_stands(text: str, column: int, words: str) -> None:
    with pytest.raises(ReadError) as caught:
        read(text)
    message, shown, caret = str(caught.value).rsplit("\n", 2)
    assert words in message
    assert shown == "    " + text
    assert caret == "    " + " " * (column - 1) + "^"


@pytest.mark.parametrize(
    "text",
    ["\\sqrt " * 3000, "R_L" + "^" * 3000 + "{2}", r"\frac" * 3000, r"\frac1" * 3000, "√" * 3000 + "{2}"],
)
def test_arguments_without_braces_do_not_nest_without_end(text: str) -> None:
    begun = time.monotonic()
    with pytest.raises(ReadError):
        read(text)
    assert time.monotonic() - begun < 2


def test_what_counts_as_latex() -> None:
    assert all(is_latex(text) for text in (r"\pi", "{a}", "$a$", "a^{2}"))
    assert not any(is_latex(text) for text in ("gm1*ro1", "g_m1", "a^2", "−gm1·(ro1 ∥ RL)"))
