"""Values and hand formulas in LaTeX (room: show): 4.1 mS with its unit upright, `-gm1*(ro1 || RL)` as a formula."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from symamp.circuit.latex_names import latex_name
from symamp.exact.shape import Shape
from symamp.exact.writing import LATEX, inline_fraction, shape_written
from symamp.formula_tree import Node, fold
from symamp.values import show_value

_IN_LINE = replace(LATEX, fraction=inline_fraction)
_UNITS = {"ohm": r"\Omega", "deg": r"^\circ"}
_PREFIX = {"u": r"\mu"}


def latex_value(x: complex | float, unit: str, digits: int = 4) -> str:
    r"""A value with its unit for LaTeX's math mode: `4.1\,\mathrm{mS}`, `470\,\mathrm{k}\Omega`.

    A complex value is `3 \pm j 4`-like with one sign. NaN raises ValueError.
    """
    if isinstance(x, complex) and x.imag:
        sign = "+" if x.imag > 0 else "-"
        return f"{latex_value(x.real, unit, digits)} {sign} j\\,{latex_value(abs(x.imag), unit, digits)}"
    real = float(x.real) if isinstance(x, complex) else float(x)
    if real != real:
        raise ValueError("a value that is no number cannot be written")
    number, _, rest = show_value(real, unit, digits).partition(" ")
    return _number(number) + _unit(rest, unit)


def _number(text: str) -> str:
    if text.endswith("infinite"):
        return text.replace("infinite", r"\infty")
    mantissa, _, power = text.partition("e")
    return rf"{mantissa} \times 10^{{{int(power)}}}" if power else mantissa


def _unit(text: str, unit: str) -> str:
    """Prefix and unit, upright, after a thin space (degrees without one)."""
    if not text:
        return ""
    prefix = text[: len(text) - len(unit)]
    if unit == "deg":
        return r"^\circ"
    if prefix in _PREFIX:
        return rf"\,{_PREFIX[prefix]}" + (_UNITS.get(unit) or rf"\mathrm{{{unit}}}")
    if unit in _UNITS:
        return r"\," + (rf"\mathrm{{{prefix}}}" if prefix else "") + _UNITS[unit]
    return rf"\,\mathrm{{{text}}}"


def latex_of(node: Node) -> str:
    """A formula as it was written, for LaTeX's math mode: nothing is reordered or cancelled."""
    return fold(node, _Latex())[0]


def latex_in_line(node: Node) -> str:
    """The same for a line of text: fractions with a slash."""
    return fold(node, _InLine())[0]


def shape_in_line(shape: Shape) -> str:
    """A shape for a line of text: `g_{m1}/(g_{ds1} g_{ds2})`."""
    return shape_written(shape, _IN_LINE)


_Piece = tuple[
    str, int
]  # text and how firmly it holds together: 1 a sum, 2 a product, 3 a sign, 5 a power, 6 an atom


class _Latex:
    def number(self, value: Fraction, unit: str) -> _Piece:
        if not unit and value.denominator != 1 and value.denominator % 2 and value.denominator % 5:
            return rf"\frac{{{value.numerator}}}{{{value.denominator}}}", 6
        text = latex_value(float(value), unit, 6)
        return text, 3 if value < 0 else 6 if "times" not in text else 2

    def pi(self) -> _Piece:
        return r"\pi", 6

    def name(self, text: str) -> _Piece:
        return latex_name(text), 6

    def add(self, a: _Piece, b: _Piece) -> _Piece:
        return f"{a[0]} + {_within(b, 2)}", 1

    def subtract(self, a: _Piece, b: _Piece) -> _Piece:
        return f"{a[0]} - {_within(b, 2)}", 1

    def multiply(self, a: _Piece, b: _Piece) -> _Piece:
        left, right = _within(a, 2), _within(b, 4 if b[1] == 3 else 2)
        sign = r" \cdot " if right[0].isdigit() else " "
        return f"{left}{sign}{right}", 3 if a[1] == 3 else 2

    def divide(self, a: _Piece, b: _Piece) -> _Piece:
        if a[0].startswith("-") and a[1] == 3:
            return rf"-\frac{{{a[0][1:]}}}{{{b[0]}}}", 3
        return rf"\frac{{{a[0]}}}{{{b[0]}}}", 4

    def power(self, base: _Piece, exponent: Fraction) -> _Piece:
        text = str(exponent) if exponent.denominator == 1 else f"{exponent.numerator}/{exponent.denominator}"
        raised = text if len(text) == 1 else f"{{{text}}}"
        return f"{_within(base, 6)}^{raised}", 5

    def parallel(self, a: _Piece, b: _Piece) -> _Piece:
        # Of a chain only the outermost brackets are needed.
        inner = [t[0][1:-1] if t[1] == 7 else _within(t, 4) for t in (a, b)]
        return rf"({inner[0]} \parallel {inner[1]})", 7

    def negate(self, a: _Piece) -> _Piece:
        return f"-{_within(a, 2)}" if a[1] != 3 else f"-({a[0]})", 3

    def call(self, function: str, argument: _Piece) -> _Piece:
        if function == "sqrt":
            return rf"\sqrt{{{argument[0]}}}", 6
        return rf"\lvert {argument[0]} \rvert", 6


class _InLine(_Latex):
    def divide(self, a: _Piece, b: _Piece) -> _Piece:
        return f"{_within(a, 2)} / {_within(b, 5)}", 3 if a[1] == 3 else 2


def _within(part: _Piece, firmness: int) -> str:
    return part[0] if part[1] >= firmness else f"({part[0]})"
