"""Numbers and names as people read them in the terminal."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from symamp.circuit.stage import GROUND, Asked
from symamp.values import show_value

MINUS = "−"
_NOTHING = 1e-8  # an error, in % or in its own unit, that nobody would call one


def value_words(value: complex | float | None, unit: str, digits: int = 4) -> str:
    """A value with its unit: "−387.2", "4.1 mS", "1.2 + 3.4j Mrad/s"; "none" for no value."""
    if value is None:
        return "none"
    if isinstance(value, complex) and value.imag:
        sign = "+" if value.imag > 0 else MINUS
        real, imag = show_value(value.real, unit, digits), show_value(abs(value.imag), unit, digits)
        return f"{_typeset(real, unit)} {sign} j·{_typeset(imag, unit)}"
    real_value = value.real if isinstance(value, complex) else value
    return _typeset(show_value(real_value, unit, digits), unit)


def _typeset(text: str, unit: str) -> str:
    """A true minus, and µ for the u that is typed."""
    text = text.replace("-", MINUS)
    return text.replace(f" u{unit}", f" µ{unit}") if unit else text


def root_words(root: complex) -> tuple[str, str]:
    """A pole or zero's frequency, and its damping: "real", "real, right half plane", or the ratio ζ."""
    size = abs(root)
    frequency = value_words(size / (2 * math.pi), "Hz")
    if size == 0:
        return frequency, "at the origin"
    side = ", right half plane" if root.real > 0 else ""
    if root.imag == 0:
        return frequency, f"real{side}"
    return frequency, f"ζ = {abs(root.real) / size:.3g}{side}"


def error_words(value: complex | float | None, unit: str, *, absolute: bool, modulus: bool = False) -> str:
    """An error: "−5.04 %", or in its unit where it is absolute: "+0.12 dB"."""
    if value is None:
        return "none"
    number = abs(value) if isinstance(value, complex) and value.imag else _real(value)
    scaled = number if absolute else 100 * number
    if abs(scaled) < _NOTHING:
        scaled = 0.0
    tail = f" {unit}" if absolute else " %"
    if scaled == 0:
        return "0" + tail
    sign = "" if modulus or (isinstance(value, complex) and value.imag) else "+" if scaled > 0 else MINUS
    return f"{sign}{_three(abs(scaled))}{tail}"


def ratio_words(ratio: float | None) -> str:
    """A pure ratio to three significant digits: "0.0615", "16.3"."""
    if ratio is None or math.isnan(ratio):
        return "none"
    return "0" if ratio == 0 else f"{MINUS if ratio < 0 else ''}{_three(abs(ratio))}"


def percent_words(ratio: float) -> str:
    """A ratio in percent: "6.15 %"."""
    sign = MINUS if ratio < 0 else ""
    return f"{sign}{_three(abs(100 * ratio))} %" if abs(ratio) > _NOTHING / 100 else "0 %"


def _real(value: complex | float) -> float:
    return float(value.real) if isinstance(value, complex) else float(value)


def _three(x: float) -> str:
    """Three significant digits, in plain figures where they are readable."""
    rounded = f"{x:.2e}"  # of 9.996 it is 1.00e+01: the places are those of what is shown
    exponent = int(rounded.partition("e")[2])
    if not -4 <= exponent < 6:
        return rounded.replace("-", MINUS)
    return f"{x:.{max(0, 2 - exponent)}f}"


def where_words(where: Mapping[str, Any], units: Mapping[str, str], most: int = 4) -> str:
    """A bias point: "gm1 8 mS, gds1 273 µS", or "row 3"."""
    if "row" in where and "row" not in units:
        return f"row {where['row']}"
    shown = [f"{name} {value_words(value, units.get(name, ''), 3)}" for name, value in where.items()]
    if len(shown) > most:
        return ", ".join(shown[:most]) + ", …"
    return ", ".join(shown)


def asked_words(asked: Asked) -> str:
    """What a response is, in a few signs: "V(out) / VIN"."""
    without = f", without {', '.join(asked.without)}" if asked.without else ""
    if asked.looking_source is not None:
        return f"impedance that {asked.looking_source} sees{without}"
    if asked.looking_into is not None:
        return f"impedance at {_pair(asked.looking_into)}{without}"
    above = f"I({asked.to_source})" if asked.to_source is not None else f"V({_pair(asked.to or ('', ''))})"
    single = next(iter(asked.drive)) if list(asked.drive.values()) == [1] else None
    if asked.over is not None:
        return f"{above} / V({_pair(asked.over)}), driven by {single or _weights(asked)}{without}"
    if single:
        return f"{above} / {single}{without}"
    return f"{above} for {_weights(asked)}{without}"


def _pair(pair: tuple[str, str]) -> str:
    return pair[0] if pair[1] == GROUND else ", ".join(pair)


def _weights(asked: Asked) -> str:
    """The drive: "VP = 1/2, VN = −1/2"; the response is the output for this drive."""
    return ", ".join(f"{label} = {weight}".replace("-", MINUS) for label, weight in asked.drive.items())
