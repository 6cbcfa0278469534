"""Exact: the names of quantities, what stands after `RESPONSE.`: `dc`, `p1.hz`, `at(10 MHz).db`.

Names only; what the quantities are worth is found in `symamp.exact.figures`.
"""

from __future__ import annotations

import difflib
import re
from dataclasses import dataclass
from fractions import Fraction

from symamp import errors
from symamp.values import read_value, write_value

_LEVELS = ("dc", "hf", "at")  # values of the response itself, which have a phase
_FREQUENCIES = ("bandwidth", "peak_frequency", "low_corner", "high_corner", "unity_gain_frequency")
_MARGINS = {"phase_margin": "deg", "gain_margin": "dB"}
_INDEXED = ("p", "z", "a", "b")
NAMES = ("dc", "hf", "bandwidth", "peak", *_FREQUENCIES[1:], "gain_bandwidth", *_MARGINS)
FACES = ("magnitude", "hz", "db", "deg", "re", "im")

_INDEXED_NAME = re.compile(r"([pzab])(0|[1-9][0-9]{0,3})")
_AT = re.compile(r"at\s*\(([^()]*)\)(.*)", re.DOTALL)


@dataclass(frozen=True)
class Quantity:
    """One number that a response has.

    `name` is one of `NAMES`, or "at" with its `frequency` in Hz, or "p", "z" (index from 1), "a", "b" (index
    from 0) with their `index`. `face` is one of `FACES`, or None for the number itself.
    """

    name: str
    index: int | None = None
    frequency: Fraction | None = None
    face: str | None = None

    @property
    def text(self) -> str:
        """The canonical spelling, which `parse_quantity` reads back: `z2.hz`, `at(10 MHz)`."""
        stem = self.name
        if self.index is not None:
            stem = f"{self.name}{self.index}"
        if self.frequency is not None:
            stem = f"at({_hertz(self.frequency)})"
        return f"{stem}.{self.face}" if self.face else stem


def parse_quantity(text: str) -> Quantity:
    """The quantity of that name, with its face; ReadError names the nearest known one where there is none."""
    text = text.strip()
    at = _AT.fullmatch(text)
    if at:
        return _with_face(Quantity("at", frequency=_read_frequency(at[1])), at[2].strip())
    stem, dot, face = text.partition(".")
    return _with_face(_named(stem.strip()), dot + face.strip())


def unit_of(quantity: Quantity, response_unit: str, first: int = 0) -> str:
    """The unit of the quantity of a response with that unit ("" for a plain ratio).

    `first` is the lowest power of s in the denominator: coefficients count from it, since it is the one made 1.
    """
    by_face = {"hz": "Hz", "db": "dB", "deg": "deg"}
    name = quantity.name
    if quantity.face in by_face:
        return by_face[quantity.face]
    if name in _MARGINS:
        return _MARGINS[name]
    if name in _FREQUENCIES:
        return "Hz"
    if is_root(quantity):
        return "rad/s"
    if name == "gain_bandwidth":
        return _times(response_unit, "Hz")
    if name in ("a", "b"):
        return _in_seconds(response_unit if name == "a" else "", (quantity.index or 0) - first)
    return response_unit


def in_decibels_or_degrees(quantity: Quantity) -> bool:
    """Whether the quantity is in dB or degrees, so that its error is a difference in that unit."""
    return quantity.face in ("db", "deg") or quantity.name in _MARGINS


def is_root(quantity: Quantity) -> bool:
    """Whether the quantity is a pole or a zero, or a face of one."""
    return quantity.name in ("p", "z")


def faces_of(quantity: Quantity) -> tuple[str, ...]:
    """The faces that mean something for this quantity."""
    name = quantity.name
    if name in _LEVELS:
        return ("magnitude", "db", "deg", "re", "im")
    if is_root(quantity):
        return ("magnitude", "hz", "deg", "re", "im")
    if name in _FREQUENCIES:
        return ("magnitude", "hz")
    if name in _MARGINS:
        return (_MARGINS[name].lower(),)
    return ("magnitude", "db") if name == "peak" else ("magnitude",)


def _named(stem: str) -> Quantity:
    if stem in NAMES:
        return Quantity(stem)
    found = _INDEXED_NAME.fullmatch(stem)
    if found and not (found[1] in "pz" and found[2] == "0"):
        return Quantity(found[1], index=int(found[2]))
    if found:
        raise errors.ReadError(f"there is no quantity '{stem}'", f"poles and zeros count from 1: {found[1]}1")
    known = (*NAMES, "p1", "z1", "a0", "b1", "at(10 MHz)")
    near = difflib.get_close_matches(stem, (*NAMES, *_COMMON_WORDS), n=1)
    hint = f"did you mean {_COMMON_WORDS.get(near[0], near[0])}? " if near else ""
    raise errors.ReadError(f"there is no quantity '{stem}'", f"{hint}known are {', '.join(known)}")


# Words that people write for a quantity, and its name here.
_COMMON_WORDS = {
    "pole": "p1",
    "pole1": "p1",
    "pole2": "p2",
    "zero": "z1",
    "zero1": "z1",
    "gain": "dc",
    "dc_gain": "dc",
    "low_frequency": "dc",
    "high_frequency": "hf",
    "gbw": "gain_bandwidth",
    "ugf": "unity_gain_frequency",
    "at": "at(10 MHz)",
}


def _with_face(quantity: Quantity, rest: str) -> Quantity:
    """The quantity with the face that `rest` (".db", or nothing) asks for."""
    if not rest:
        return quantity
    face = rest.removeprefix(".").strip()
    known = faces_of(quantity)
    if not rest.startswith(".") or face not in known:
        near = difflib.get_close_matches(face.lower(), known, n=1)
        hint = f"did you mean {near[0]}? " if near else ""
        listed = ", ".join(f".{name}" for name in known)
        raise errors.ReadError(f"{quantity.text} has no '{rest}'", f"{hint}it has {listed}")
    return Quantity(quantity.name, quantity.index, quantity.frequency, face)


def _read_frequency(text: str) -> Fraction:
    frequency = read_value(text.strip(), "Hz")
    if frequency < 0:
        raise errors.ReadError(f"a frequency cannot be negative, and '{text.strip()}' is", "at(10 MHz)")
    return frequency


def _hertz(frequency: Fraction) -> str:
    """A frequency in full, as `read_value` reads it back."""
    try:
        return write_value(frequency, "Hz")
    except ValueError:  # no finite decimal; it cannot have been read from text
        return f"{float(frequency)!r} Hz"


def _in_seconds(unit: str, power: int) -> str:
    """The unit times seconds to that power: `s`, `ohm·s^2`, `1/s`, `S/s^2`."""
    if not power:
        return unit
    seconds = "s" if abs(power) == 1 else f"s^{abs(power)}"
    return _times(unit, seconds) if power > 0 else f"{unit or '1'}/{seconds}"


def _times(left: str, right: str) -> str:
    return "·".join(part for part in (left, right) if part)
