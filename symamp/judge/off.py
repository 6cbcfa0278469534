"""What is off about a wrong claim (room: judge): a factor, a sign, a symbol too many or too few, or two symbols
that would have to be equal.

The largest term of each side of the balance at the bias point says by what factor the claim would have to be
multiplied to be a limit of the exact expression.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from flint import fmpz_mpoly

from symamp.circuit.stage import Stage
from symamp.exact.tape import term_dict, term_value
from symamp.formula import Dimension
from symamp.judge.balance import PI, Balance
from symamp.values import show_value

_Monomial = dict[str, Fraction]


@dataclass(frozen=True)
class Off:
    """What is off, in words; `factor` is what the claim would have to be multiplied by, "" where none is seen."""

    words: str
    factor: str = ""


def what_is_off(stage: Stage, balance: Balance, values: Mapping[str, float]) -> Off:
    """What is off about a claim of which its balance has no common term, or a pure number left over.

    `values` are the bias values, pi among them.
    """
    if not balance.two_sided:
        return Off("its sign is wrong", "-1")
    (up, high), (down, low) = (_largest(side, values) for side in (balance.above, balance.below))
    step = down - up
    if step == 0:
        return Off("no term of it is a term of the exact expression")
    number, powers, negative = _quotient(high, low, step)
    return _words(stage, number, powers, negative, values)


def _largest(
    side: Mapping[int, fmpz_mpoly], values: Mapping[str, float]
) -> tuple[int, tuple[dict[str, int], int]]:
    """(power of x, (monomial, coefficient)) of the largest term at the bias point."""
    terms = [
        (k, dict(monomial), coefficient)
        for k, polynomial in side.items()
        for monomial, coefficient in term_dict(polynomial).items()
    ]
    k, monomial, coefficient = max(terms, key=lambda t: abs(term_value(tuple(t[1].items()), t[2], values)))
    return k, (monomial, coefficient)


def _quotient(
    high: tuple[dict[str, int], int], low: tuple[dict[str, int], int], step: int
) -> tuple[float, _Monomial, bool]:
    """(number, powers of symbols, whether negative) of the factor x with high = low·x^step."""
    powers: _Monomial = {}
    for sign, (monomial, _) in ((1, high), (-1, low)):
        for name, power in monomial.items():
            powers[name] = powers.get(name, Fraction(0)) + Fraction(sign * power, step)
    ratio = Fraction(high[1], low[1])
    number = abs(float(ratio)) ** (1 / step)
    return number, {n: p for n, p in powers.items() if p}, ratio < 0


def _words(
    stage: Stage, number: float, powers: _Monomial, negative: bool, values: Mapping[str, float]
) -> Off:
    pi_power = powers.pop(PI, Fraction(0))
    constant = number * math.pi ** float(pi_power)
    found: list[str] = ["its sign is wrong"] if negative else []
    if not math.isclose(constant, 1, rel_tol=1e-12):
        found.append(factor_words(constant))
    above = {n: p for n, p in powers.items() if p > 0}
    below = {n: -p for n, p in powers.items() if p < 0}
    if above or below:
        found.append(_symbol_words(stage, above, below, values))
    if not found:
        return Off("it leaves out a term that is no smaller than what it keeps")
    return Off(" and ".join(found), _factor_text(powers, constant, negative))


def factor_words(constant: float) -> str:
    """The claim times `constant` would be right."""
    factor, word = (1 / constant, "large") if constant < 1 else (constant, "small")
    for turns, text in ((2 * math.pi, "2π"), (math.pi, "π"), (4 * math.pi**2, "4π²")):
        if math.isclose(factor, turns, rel_tol=1e-9):
            hint = ": Hz and rad/s are mixed up" if text == "2π" else ""
            return f"it is too {word} by a factor of {text}{hint}"
    return f"it is too {word} by a factor of {show_value(factor, '')}"


def _symbol_words(stage: Stage, above: _Monomial, below: _Monomial, values: Mapping[str, float]) -> str:
    equal = _would_be_equal(stage, above, below, values)
    if equal:
        return equal
    missing = _product(above)
    surplus = _product(below)
    if missing and surplus:
        return f"it has {surplus} where the exact expression has {missing}"
    return f"the factor {missing} is missing in it" if missing else f"the factor {surplus} is too much in it"


def _would_be_equal(stage: Stage, above: _Monomial, below: _Monomial, values: Mapping[str, float]) -> str:
    """Words for two symbols of one kind that would have to be equal, or ""."""
    if len(above) != 1 or len(below) != 1:
        return ""
    (one, power), (other, same) = next(iter(above.items())), next(iter(below.items()))
    if power != same or stage.symbols[one].unit != stage.symbols[other].unit:
        return ""
    if stage.symbols[one].parameter.name != stage.symbols[other].parameter.name:
        return ""
    ratio = values.get(one, math.nan) / values[other] if values.get(other) else math.nan
    return f"{one} and {other} would have to be equal, and {one}/{other} is {show_value(ratio, '')}"


def _product(powers: _Monomial) -> str:
    return "·".join(
        n if p == 1 else f"{n}^{p}" if p.denominator == 1 else f"{n}^({p})" for n, p in powers.items()
    )


def _factor_text(powers: _Monomial, constant: float, negative: bool) -> str:
    """The factor in the grammar of formulas; powers that are no whole numbers in brackets."""
    above = [_powered(name, power) for name, power in powers.items() if power > 0]
    below = [_powered(name, -power) for name, power in powers.items() if power < 0]
    if not math.isclose(constant, 1, rel_tol=1e-12):
        above.insert(0, _constant_text(constant))
    bottom = "*".join(below)
    bottom = f"({bottom})" if len(below) > 1 else bottom
    return ("-" if negative else "") + ("*".join(above) or "1") + (f"/{bottom}" if bottom else "")


def _powered(name: str, power: Fraction) -> str:
    if power == 1:
        return name
    return f"{name}**{power}" if power.denominator == 1 else f"{name}**({power})"


def _constant_text(constant: float) -> str:
    for text, value in (
        ("2*pi", 2 * math.pi),
        ("1/(2*pi)", 0.5 / math.pi),
        ("pi", math.pi),
        ("1/pi", 1 / math.pi),
    ):
        if math.isclose(constant, value, rel_tol=1e-9):
            return text
    return str(Fraction(constant).limit_denominator(1000)) if constant < 1000 else f"{constant:.6g}"


def unit_words(claimed: Dimension, wanted: Dimension, unit: str = "") -> str:
    """The words for a formula of another unit than the quantity's, and what kind of factor lies between them.

    `unit` is the quantity's own where it has one: rad/s and Hz are one dimension, and a reader must see which.
    """
    missing = _unit_name(wanted.times(claimed, -1))
    have, want = _in_words(_unit_name(claimed)), _in_words(unit or _unit_name(wanted))
    hint = f"; a factor of {_kind(missing)} is missing or too much" if missing else ""
    return f"the formula is {have}, and the quantity is {want}{hint}"


def _in_words(unit: str) -> str:
    return f"in {unit}" if unit else "a pure number"


def _unit_name(dimension: Dimension) -> str:
    """A dimension's unit as units are printed: "ohm/s", "S/s^2"; "" of a pure number. Of 1/s, which both rad/s
    and Hz are, "1/s"."""
    if not (dimension.siemens or dimension.volts) and dimension.seconds == -1:
        return "1/s"
    named = dimension.unit
    if "*" not in named:
        return named
    powers = {"S": dimension.siemens, "s": dimension.seconds, "V": dimension.volts}
    if powers["S"] < 0:
        powers = {"ohm": -powers.pop("S"), **powers}
    above = "·".join(_raised(name, power) for name, power in powers.items() if power > 0)
    below = "·".join(_raised(name, -power) for name, power in powers.items() if power < 0)
    if not below:
        return above
    return f"{above or '1'}/({below})" if "·" in below else f"{above or '1'}/{below}"


def _raised(unit: str, power: Fraction) -> str:
    return unit if power == 1 else f"{unit}^{power}" if power.denominator == 1 else f"{unit}^({power})"


def _kind(unit: str) -> str:
    words = {
        "ohm": "a resistance",
        "S": "a conductance",
        "F": "a capacitance",
        "s": "a time",
        "1/s": "a frequency",
    }
    return words.get(unit, unit)
