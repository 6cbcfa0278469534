"""What formulas are evaluated over: floats, exact numbers, units, and text again.

A module below all rooms of the house; other rooms bring algebras of their own to `formula_tree.fold`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

from symamp.errors import ReadError
from symamp.formula_tree import Binary, Call, Name, Negate, Node, Number, Parallel, Pi, Power, fold
from symamp.values import write_value


def evaluate(node: Node, value_of_name: Callable[[str], float]) -> float:
    """The value over real floats. 1/0 is infinite, 0/0 and the root of a negative number are NaN."""
    return fold(node, _Floats(value_of_name))


def write(node: Node) -> str:
    """The formula as text, with `**` and few brackets; `parse` reads it back to the same value."""
    return fold(node, _Writer())[0]


def constant(node: Node) -> Fraction:
    """The exact number that a formula of pure numbers is. Raises NotConstant for all else."""
    return fold(node, _Exact())


def dimension_of(node: Node, unit_of_name: Callable[[str], str]) -> Dimension:
    """The dimension of a formula whose names have the units that `unit_of_name` gives.

    Raises ReadError where a sum, a difference or a parallel joins unlike units, and names the two.
    """
    return fold(node, _Dimensions(unit_of_name))[0]


def dimension_of_unit(unit: str) -> Dimension:
    """The dimension of a unit ("S", "ohm", "F", "H", "Hz", "s", "V", "A", "rad/s" or "")."""
    return _OF_UNIT[unit]


@dataclass(frozen=True)
class Dimension:
    """Powers of siemens, second and volt: ohm is S**-1, F is S*s, H is s/S, Hz is 1/s, A is S*V."""

    siemens: Fraction = Fraction(0)
    seconds: Fraction = Fraction(0)
    volts: Fraction = Fraction(0)

    def times(self, other: Dimension, power: int = 1) -> Dimension:
        """This dimension times another one raised to a power."""
        return Dimension(
            self.siemens + power * other.siemens,
            self.seconds + power * other.seconds,
            self.volts + power * other.volts,
        )

    def to(self, power: Fraction) -> Dimension:
        """This dimension raised to a power."""
        return Dimension(self.siemens * power, self.seconds * power, self.volts * power)

    @property
    def unit(self) -> str:
        """The unit by name where it has one ("" for a pure number), else as powers, such as S**2*s."""
        for unit, dimension in _OF_UNIT.items():
            if dimension == self:
                return unit
        powers = (("S", self.siemens), ("s", self.seconds), ("V", self.volts))
        return "*".join(_raised(unit, power) for unit, power in powers if power)


def _raised(unit: str, power: Fraction) -> str:
    if power == 1:
        return unit
    return f"{unit}**{power}" if power.denominator == 1 else f"{unit}**({power})"


def _dimension(siemens: int, seconds: int = 0, volts: int = 0) -> Dimension:
    return Dimension(Fraction(siemens), Fraction(seconds), Fraction(volts))


_OF_UNIT = {
    "": _dimension(0),
    "S": _dimension(1),
    "ohm": _dimension(-1),
    "F": _dimension(1, 1),
    "H": _dimension(-1, 1),
    "s": _dimension(0, 1),
    "Hz": _dimension(0, -1),
    "rad/s": _dimension(0, -1),
    "V": _dimension(0, 0, 1),
    "A": _dimension(1, 0, 1),
    "dB": _dimension(0),
    "deg": _dimension(0),
}

_Sized = tuple[Dimension, Node]  # with the formula so far, for messages


class _Dimensions:
    """Units; a formula and its dimension go together, so that an error can show what does not fit."""

    def __init__(self, unit_of_name: Callable[[str], str]) -> None:
        self.unit_of_name = unit_of_name

    def number(self, value: Fraction, unit: str) -> _Sized:
        return _OF_UNIT[unit], Number(value, unit)

    def pi(self) -> _Sized:
        return Dimension(), Pi()

    def name(self, text: str) -> _Sized:
        return _OF_UNIT[self.unit_of_name(text)], Name(text)

    def add(self, a: _Sized, b: _Sized) -> _Sized:
        return _alike(a, b, Binary("+", a[1], b[1]))

    def subtract(self, a: _Sized, b: _Sized) -> _Sized:
        return _alike(a, b, Binary("-", a[1], b[1]))

    def parallel(self, a: _Sized, b: _Sized) -> _Sized:
        return _alike(a, b, Parallel(a[1], b[1]))

    def multiply(self, a: _Sized, b: _Sized) -> _Sized:
        return a[0].times(b[0]), Binary("*", a[1], b[1])

    def divide(self, a: _Sized, b: _Sized) -> _Sized:
        return a[0].times(b[0], -1), Binary("/", a[1], b[1])

    def power(self, base: _Sized, exponent: Fraction) -> _Sized:
        return base[0].to(exponent), Power(base[1], exponent)

    def negate(self, a: _Sized) -> _Sized:
        return a[0], Negate(a[1])

    def call(self, function: str, argument: _Sized) -> _Sized:
        power = Fraction(1, 2) if function == "sqrt" else Fraction(1)
        return argument[0].to(power), Call(function, argument[1])


def _alike(a: _Sized, b: _Sized, joined: Node) -> _Sized:
    if a[0] != b[0]:
        one, other = (size[0].unit or "a pure number" for size in (a, b))
        whole = write(joined)
        shown = whole if len(whole) <= 80 else f"{whole[:77]}..."
        raise ReadError(f"{shown} joins {one} with {other}", "both must have one unit, such as gm1 + gds1")
    return a[0], joined


class NotConstant(Exception):
    """An exponent that is no exact number."""


class _Exact:
    """Exact numbers, for exponents; all else is refused."""

    def number(self, value: Fraction, unit: str) -> Fraction:
        return self.refuse() if unit else value

    def refuse(self, *_: object) -> Fraction:
        raise NotConstant

    pi = name = call = refuse

    def add(self, a: Fraction, b: Fraction) -> Fraction:
        return a + b

    def subtract(self, a: Fraction, b: Fraction) -> Fraction:
        return a - b

    def multiply(self, a: Fraction, b: Fraction) -> Fraction:
        return a * b

    def divide(self, a: Fraction, b: Fraction) -> Fraction:
        return a / b if b else self.refuse()

    def power(self, base: Fraction, exponent: Fraction) -> Fraction:
        if exponent.denominator != 1 or (not base and exponent < 0):
            self.refuse()
        return base**exponent.numerator

    def parallel(self, a: Fraction, b: Fraction) -> Fraction:
        return self.divide(a * b, a + b)

    def negate(self, a: Fraction) -> Fraction:
        return -a


class _Floats:
    """Real floats by IEEE 754's rules, where Python's own would raise."""

    def __init__(self, value_of_name: Callable[[str], float]) -> None:
        self.value_of_name = value_of_name

    def number(self, value: Fraction, unit: str) -> float:
        return float(value)

    def pi(self) -> float:
        return math.pi

    def name(self, text: str) -> float:
        return float(self.value_of_name(text))

    def add(self, a: float, b: float) -> float:
        return a + b

    def subtract(self, a: float, b: float) -> float:
        return a - b

    def multiply(self, a: float, b: float) -> float:
        return a * b

    def divide(self, a: float, b: float) -> float:
        if b:
            return a / b
        return math.nan if not a or math.isnan(a) else math.copysign(math.inf, a) * math.copysign(1, b)

    def power(self, base: float, exponent: Fraction) -> float:
        if base < 0 and exponent.denominator != 1:
            return math.nan
        if not base and exponent < 0:
            return self.divide(1.0, self.power(base, -exponent))
        try:
            return base ** (exponent.numerator if exponent.denominator == 1 else float(exponent))
        except OverflowError:
            return -math.inf if base < 0 and exponent.numerator % 2 else math.inf

    def parallel(self, a: float, b: float) -> float:
        return self.divide(1.0, self.divide(1.0, a) + self.divide(1.0, b))  # right for 0 and infinity too

    def negate(self, a: float) -> float:
        return -a

    def call(self, function: str, argument: float) -> float:
        if function == "abs":
            return abs(argument)
        return math.sqrt(argument) if argument >= 0 else math.nan


_Written = tuple[str, int]  # text and how firmly it holds together


class _Writer:
    """Text in the grammar of formulas. Firmness: 1 a sum, 2 a product or sign, 5 a power, 6 an atom."""

    def number(self, value: Fraction, unit: str) -> _Written:
        if unit in ("dB", "deg", "rad/s"):  # units that are written without a prefix
            text, firmness = self.number(value, "")
            return f"{text} {unit}", firmness
        try:
            return write_value(value, unit), 6 if value >= 0 else 2
        except ValueError:
            text = f"{value.numerator}/{value.denominator}"
            return (f"{text}*1 {unit}" if unit else text), 2

    def pi(self) -> _Written:
        return "pi", 6

    def name(self, text: str) -> _Written:
        return text, 6

    def add(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 1)} + {_within(b, 2)}", 1

    def subtract(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 1)} - {_within(b, 2)}", 1

    def multiply(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 2)}*{_within(b, 3)}", 2

    def divide(self, a: _Written, b: _Written) -> _Written:
        return f"{_within(a, 2)}/{_within(b, 3)}", 2

    def power(self, base: _Written, exponent: Fraction) -> _Written:
        text = str(exponent) if exponent.denominator == 1 and exponent >= 0 else f"({exponent})"
        return f"{_within(base, 6)}**{text}", 5

    def parallel(self, a: _Written, b: _Written) -> _Written:
        return f"({_within(a, 5)} || {_within(b, 5)})", 6

    def negate(self, a: _Written) -> _Written:
        return f"-{_within(a, 2)}", 2

    def call(self, function: str, argument: _Written) -> _Written:
        return f"{function}({argument[0]})", 6


def _within(part: _Written, firmness: int) -> str:
    return part[0] if part[1] >= firmness else f"({part[0]})"
