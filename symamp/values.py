"""Values with SI prefix and unit, read exactly and written back: a small module below all rooms of the house.

A value is read to the exact decimal that was written (`Fraction`), never through a binary float. Prefixes are
those of the SI and case-sensitive; whatever else follows the number is an error, because a value that is read
wrongly in silence spoils every figure after it.
"""

from __future__ import annotations

import math
import re
from fractions import Fraction

from symamp.errors import ReadError

# Powers of ten of the SI prefixes (BIPM, The International System of Units, 9th edition, table 7).
# Micro comes as the letter u, as the micro sign U+00B5 and as the Greek mu U+03BC.
PREFIXES: dict[str, int] = {
    "a": -18, "f": -15, "p": -12, "n": -9, "u": -6, "\u00b5": -6, "\u03bc": -6,
    "m": -3, "k": 3, "M": 6, "G": 9, "T": 12,
}  # fmt: skip

# How a unit may be written, and the unit it is. The ohm sign comes as U+03A9 and as U+2126.
UNITS: dict[str, str] = {
    "S": "S", "ohm": "ohm", "\u03a9": "ohm", "\u2126": "ohm", "F": "F", "H": "H", "Hz": "Hz", "s": "s",
    "V": "V", "A": "A",
}  # fmt: skip

_EXAMPLES = {
    "S": "4.1 mS", "ohm": "5 kohm", "F": "3.3 pF", "H": "2.2 uH", "Hz": "10 MHz", "s": "5 ns", "V": "25 mV",
    "A": "0.1 mA", "": "0.5",
}  # fmt: skip

_WRITTEN = {power: letter for letter, power in PREFIXES.items() if letter.isascii()} | {0: ""}
_PREFIXED = {*UNITS.values(), "rad/s"}

_NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_VALUE = re.compile(rf"(?P<number>{_NUMBER})[ \t\u00a0\u2009\u202f]*(?P<rest>.*)", re.DOTALL)
_PARTS = re.compile(r"([+-]?)([0-9]*)\.?([0-9]*)(?:[eE]([+-]?[0-9]+))?")

LONGEST = 200  # characters of one value
LARGEST_POWER = 100  # values lie within 1e-100 and 1e100


def read_value(raw: str | int | float, unit: str) -> Fraction:
    """The exact value, in SI units, of text such as "4.1 mS", "3.3p" or "5kΩ", or of a bare number.

    `unit` is what is wanted: "S", "ohm", "F", "H", "Hz", "s", "V", "A" or "" for a pure number; the text may
    leave it out. A float counts as the shortest decimal that names it, which is what was typed.
    Raises ReadError for all else: wrong units, unknown prefixes, decimal commas, NaN, infinities, booleans
    and magnitudes outside 1e-100 to 1e100.
    """
    if isinstance(raw, bool) or not isinstance(raw, str | int | float):
        raise ReadError(f"{quoted(raw)} is no value", _remedy(unit))
    if isinstance(raw, int):
        return _in_range(Fraction(raw), raw, unit)
    if isinstance(raw, float):
        if not math.isfinite(raw):
            raise ReadError(f"{raw} is no finite value", _remedy(unit))
        return _in_range(_exact(repr(raw), raw), raw, unit)
    match = _VALUE.fullmatch(raw.strip()) if len(raw) <= LONGEST else None
    if match is None:
        raise ReadError(f"{quoted(raw)} does not begin with a number", _remedy(unit))
    power = _power(raw, match["rest"], unit)
    return _in_range(_exact(match["number"], raw) * Fraction(10) ** power, raw, unit)


def read_percent(raw: str | int | float) -> Fraction:
    """The ratio that a percentage such as "30 %" stands for: 3/10. Raises ReadError for all else."""
    remedy = 'write a percentage, such as "30 %"'
    text = raw.strip() if isinstance(raw, str) and len(raw) <= LONGEST else ""
    if not text.endswith("%"):
        raise ReadError(f"{quoted(raw)} is no percentage", remedy)
    number = text[:-1].rstrip()
    if re.fullmatch(_NUMBER, number) is None:
        raise ReadError(f"{quoted(raw)} is no percentage", remedy)
    ratio = _in_range(_exact(number, raw), raw, "") / 100
    if ratio < 0:
        raise ReadError(f"{quoted(raw)} is negative", remedy)
    return ratio


def read_frequency(raw: str | int | float) -> Fraction:
    """A frequency in Hz, by `read_value`."""
    return read_value(raw, "Hz")


def split_unit(text: str) -> tuple[int, str] | None:
    """The power of ten and the unit of a prefix, a unit or both: "kohm" is (3, "ohm"), "p" (-12, "").

    None where the text is neither. "" is (0, "").
    """
    if text == "":
        return 0, ""
    if text in UNITS:
        return 0, UNITS[text]
    if text in PREFIXES:
        return PREFIXES[text], ""
    if text[0] in PREFIXES and text[1:] in UNITS:
        return PREFIXES[text[0]], UNITS[text[1:]]
    return None


def example(unit: str) -> str:
    """A value of that unit, to show in a message what would be right."""
    return _EXAMPLES.get(unit, "1")


def quoted(raw: object) -> str:
    """What the user wrote, as it goes into a message: text in quotes, clipped, no control characters."""
    if isinstance(raw, bool):
        return str(raw).lower()  # as TOML writes it
    if isinstance(raw, int) and raw.bit_length() > 1000:
        return "a number of hundreds of digits"
    text = f'"{raw}"' if isinstance(raw, str) else str(raw)
    text = "".join(c if c.isprintable() else "\ufffd" for c in text[:200])
    return text if len(text) <= 60 else text[:57] + "..."


def show_value(x: float, unit: str, digits: int = 4) -> str:
    """The value as people read it, rounded to so many significant digits: "4.1 mS", "244 kHz", "25.39".

    Pure numbers, and units that take no prefix (dB, deg), are plain between 1e-3 and 1e5, with their whole
    part in full, and in powers of ten outside. NaN is "none".
    """
    if math.isnan(x):
        return "none"
    space = f" {unit}" if unit else ""
    if math.isinf(x):
        return "infinite" if x > 0 else "-infinite"
    if x == 0:
        return "0" + space
    if unit not in _PREFIXED:
        return _plain(x, digits) + space
    mantissa, power = _scientific(x, digits)
    third = 3 * (power // 3)
    if third not in _WRITTEN:
        return _power_text(mantissa, power, digits) + space
    return f"{_trimmed(mantissa * 10 ** (power - third), digits)} {_WRITTEN[third]}{unit}"


def write_value(value: Fraction, unit: str) -> str:
    """Text that `read_value` reads back to exactly this value: "4.1 mS", "3.3 pF", "-0.5", "1e-30 F".

    Raises ValueError where the value has no finite decimal (a third), or one longer than can be read back.
    """
    sign, digits, exponent = _decimal(value)
    if not digits:
        return f"0 {unit}" if unit else "0"
    first = len(digits) + exponent - 1  # power of ten of the first digit
    third = 3 * (first // 3)
    if unit and third in _WRITTEN:
        text = f"{sign}{_shifted(digits, exponent - third)} {_WRITTEN[third]}{unit}"
    elif -4 <= first < 12:
        text = sign + _shifted(digits, exponent) + (f" {unit}" if unit else "")
    else:
        text = f"{sign}{_shifted(digits, 1 - len(digits))}e{first}" + (f" {unit}" if unit else "")
    if len(text) > LONGEST or abs(first) >= LARGEST_POWER:
        raise ValueError(f"{float(value):.6g} is too long to be written out exactly")
    return text


def _remedy(unit: str) -> str:
    if unit:
        return f'write a number, an SI prefix and the unit {unit}, such as "{example(unit)}"'
    return 'write a pure number, such as "0.5"'


def _exact(number: str, raw: object) -> Fraction:
    """The decimal that the text of a number names, with its exponent looked at before it is raised."""
    match = _PARTS.fullmatch(number)
    if match is None:  # pragma: no cover - callers match first
        raise ReadError(f"{quoted(raw)} is no number")
    sign, whole, part, power = match.groups()
    exponent = int(power or 0) if len(power or "") < 8 else 10**7
    if abs(exponent) > LARGEST_POWER + LONGEST:
        raise ReadError(f"{quoted(raw)} has a power of ten that no value has", "stay within 1e-100 and 1e100")
    value = Fraction(int(whole + part or "0")) * Fraction(10) ** (exponent - len(part))
    return -value if sign == "-" else value


def _in_range(value: Fraction, raw: object, unit: str) -> Fraction:
    if value and not Fraction(1, 10**LARGEST_POWER) <= abs(value) <= 10**LARGEST_POWER:
        raise ReadError(f"{quoted(raw)} lies outside 1e-100 to 1e100", _remedy(unit))
    return value


def _power(raw: str, rest: str, unit: str) -> int:
    """The power of ten of what follows the number, which must be of the unit that is wanted."""
    found = split_unit(rest)
    if found is None:
        problem = f"{quoted(raw)} cannot be read: {quoted(rest)} is no SI prefix and unit"
        raise ReadError(problem, _hint(rest, unit))
    power, given = found
    if given not in ("", unit):
        wanted = f"{unit} is wanted" if unit else "a pure number is wanted"
        raise ReadError(f"{quoted(raw)} has the unit {given}, and {wanted}", _remedy(unit))
    return power


def _hint(rest: str, unit: str) -> str:
    """What would be right, with the likely slip named."""
    if rest.startswith(","):
        return "write the decimal mark as a point; " + _remedy(unit)
    if rest[:1] == "K":
        return "kilo is a small k; " + _remedy(unit)
    if rest[:3].lower() == "meg":
        return "mega is M; " + _remedy(unit)
    if rest.lower() in ("ohms", unit.lower()):
        return f"the unit is written {unit}; " + _remedy(unit)
    return _remedy(unit)


def _scientific(x: float, digits: int) -> tuple[float, int]:
    """Mantissa and power of ten after rounding, so that 999.99 becomes 1 and 3."""
    mantissa, power = f"{x:.{max(digits, 1) - 1}e}".split("e")
    return float(mantissa), int(power)


def _trimmed(x: float, digits: int) -> str:
    """Fixed notation of |x| in [1, 1000) to so many digits, the whole part always in full."""
    whole = len(str(int(abs(x))))
    text = f"{x:.{max(digits - whole, 0)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def _power_text(mantissa: float, power: int, digits: int) -> str:
    return f"{_trimmed(mantissa, digits)}e{power}"


def _plain(x: float, digits: int) -> str:
    mantissa, power = _scientific(x, digits)
    if not -3 <= power < 5:
        return _power_text(mantissa, power, digits)
    text = f"{x:.{max(digits - 1 - power, 0)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def _decimal(value: Fraction) -> tuple[str, str, int]:
    """Sign, digits without zeros at either end, and the power of ten of the last digit."""
    rest, twos, fives = value.denominator, 0, 0
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    if rest != 1:
        raise ValueError(f"{value} has no finite decimal")
    places = max(twos, fives)
    whole = abs(value.numerator) * 10**places // value.denominator
    if whole >= 10**LONGEST:
        raise ValueError(f"{float(value):.6g} is too long to be written out exactly")
    digits = str(whole)
    kept = digits.rstrip("0")
    return "-" if value < 0 else "", kept, len(digits) - len(kept) - places


def _shifted(digits: str, exponent: int) -> str:
    """digits · 10**exponent in fixed notation."""
    if exponent >= 0:
        return digits + "0" * exponent
    if -exponent < len(digits):
        return f"{digits[:exponent]}.{digits[exponent:]}"
    return "0." + "0" * (-exponent - len(digits)) + digits
