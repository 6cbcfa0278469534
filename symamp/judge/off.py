"""What is off about a wrong claim (room: judge): a factor, a sign, a symbol too many or too few, or two symbols
that would have to be equal.

The largest term of each side of the balance at the bias point says by what factor the claim would have to be
multiplied to be a limit of the exact expression.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations

import numpy as np
from flint import fmpz_mpoly

from symamp.circuit.stage import Stage
from symamp.exact.polys import held
from symamp.exact.tape import term_dict, term_value
from symamp.formula import Dimension, Negate, Node, Number
from symamp.judge.balance import PI, Balance, Comparison
from symamp.values import show_value

_Monomial = dict[str, Fraction]
_LITTLE = 0.2  # what may be left over where symbols are taken as equal
_MOST_SYMBOLS = 24  # of what is left over, up to which any two are tried as one


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
    likely = likely_off(stage, balance, values)
    if likely is not None:
        return likely
    constant = _constant_of_root(balance, values)
    if constant is not None:
        return Off(factor_words(constant), _constant_text(constant))
    (up, high), (down, low) = (_largest(side, values) for side in (balance.above, balance.below))
    step = down - up
    if step == 0:
        return Off("no term of it is a term of the exact expression")
    number, powers, negative = _quotient(high, low, step)
    return _words(stage, number, powers, negative, values)


def likely_off(stage: Stage, balance: Balance, values: Mapping[str, float]) -> Off | None:
    """A plain factor, or two symbols to be equal, that make a limit of a claim that is none; None where there is none.

    It finds factors that leave no pure number over, since some of their terms are found on the other side by chance.
    """
    likely = [*_equal_pairs(stage, balance, values), *_plain_constants(balance, values)]
    return min(likely, key=lambda each: each[0])[1] if likely else None


def _equal_pairs(stage: Stage, balance: Balance, values: Mapping[str, float]) -> Iterator[tuple[float, Off]]:
    """Two symbols of one kind, not far apart, that have to be equal for the claim to be near; how near it then is."""
    comparison = balance.comparison
    if not balance.of_ratios or comparison.common.is_zero() or comparison.is_limit:
        return
    names = sorted(held(*comparison.left_above.values(), *comparison.left_below.values()) - {PI})
    for one, other in combinations(names if len(names) <= _MOST_SYMBOLS else (), 2):
        near = 0.5 <= abs(values.get(one, math.nan) / (values.get(other) or math.nan)) <= 2
        if near and _alike(stage, one, other):
            made = balance.with_equal(one, other).comparison
            left = _left(made, values)
            if not made.common.is_zero() and not made.numbers and left < _LITTLE:
                yield left, Off(_equal_words(one, other, values))


def _left(comparison: Comparison, values: Mapping[str, float]) -> float:
    """The sum of what is left over, over what is common."""
    return sum(abs(each.value(values)) for each in comparison.tacit)


def _alike(stage: Stage, one: str, other: str) -> bool:
    """Whether two symbols are the same parameter of two parts."""
    a, b = stage.symbols[one], stage.symbols[other]
    return a.unit == b.unit and a.parameter.name == b.parameter.name


def _equal_words(one: str, other: str, values: Mapping[str, float]) -> str:
    ratio = values.get(one, math.nan) / values[other] if values.get(other) else math.nan
    return f"{one} and {other} would have to be equal, and {one}/{other} is {show_value(ratio, '')}"


_PLAIN = tuple(
    (Fraction(number) if up else 1 / Fraction(number), pi if up else -pi)
    for number, pi in ((2, 0), (3, 0), (4, 0), (1, 1), (2, 1))
    for up in (True, False)
)


def _plain_constants(balance: Balance, values: Mapping[str, float]) -> list[tuple[float, Off]]:
    """The one of 2, 3, 4, π, 2π, or one over it, that makes the claim a limit; and how near it then is."""
    comparison = balance.comparison
    if comparison.common.is_zero() or comparison.is_limit:
        return []
    found = []
    for factor, pi_power in _PLAIN:
        scaled = balance.scaled(factor, pi_power).comparison
        if not scaled.common.is_zero() and scaled.is_limit:
            constant = float(factor) * math.pi**pi_power
            found.append((_left(scaled, values), Off(factor_words(constant), _constant_text(constant))))
    return found if len(found) == 1 else []


def _constant_of_root(balance: Balance, values: Mapping[str, float]) -> float | None:
    """Of a root of higher degree the factor that is missing whatever the values: x where only numbers are left."""
    comparison = balance.comparison
    levels = None if balance.of_ratios or comparison.common.is_zero() else comparison.fixed_levels()
    if levels is None:
        return None
    powers = {k: float(level) for k, level in levels.items()}
    for each in comparison.numbers:
        for k, share in each.powers.items():
            powers[k] = powers.get(k, 0.0) + each.sign * share * each.value(values)
    roots = np.roots([powers.get(k, 0.0) for k in range(max(powers), -1, -1)])
    real = [float(x.real) for x in roots if x.real > 0 and abs(x.imag) < 1e-9 * abs(x)]
    return min((x for x in real if not math.isclose(x, 1)), key=lambda x: abs(math.log(x)), default=None)


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
    return _equal_words(one, other, values) if power == same and _alike(stage, one, other) else ""


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
    fraction = Fraction(constant).limit_denominator(10**6)
    exact = fraction and math.isclose(fraction, constant, rel_tol=1e-12) and fraction.numerator <= 10**6
    return str(fraction) if exact else f"{constant:.6g}"


def unit_words(claimed: Dimension, wanted: Dimension, unit: str = "") -> str:
    """The words for a formula of another unit than the quantity's, and what kind of factor lies between them.

    `unit` is the quantity's own where it has one: rad/s and Hz are one dimension, and a reader must see which.
    """
    missing = _unit_name(wanted.times(claimed, -1))
    have, want = _in_words(_unit_name(claimed)), _in_words(unit or _unit_name(wanted))
    hint = f"; a factor of {_kind(missing)} is missing or too much" if missing else ""
    return f"the formula is {have}, and the quantity is {want}{hint}"


def cycles_words(node: Node, unit: str) -> str:
    """The words for a plain number in Hz of a quantity in rad/s, or the reverse; "" for all else.

    Both are one dimension, so only what stands beside the number can tell them apart.
    """
    while isinstance(node, Negate):
        node = node.a
    written = node.unit if isinstance(node, Number) else ""
    if {written, unit} != {"Hz", "rad/s"}:
        return ""
    remedy = ".hz may be meant" if written == "Hz" else "divide it by 2*pi"
    return f"the number is in {written}, and the quantity is in {unit}; {remedy}"


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
