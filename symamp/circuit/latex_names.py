"""Names of symbols in LaTeX (room: circuit): `gm1` is g_{m1}, `cgd1` C_{gd1}, `CL` C_L."""

from __future__ import annotations

import re

from symamp.circuit.kinds import BARE_PARAMETERS

_GREEK = {"pi": r"\pi", "mu": r"\mu"}
_SPECIAL = {
    "\\": r"\backslash ",
    "^": r"\hat{}",
    "~": r"\sim ",
    **{character: "\\" + character for character in "_#$%&{}"},
}
# The longest name first, so that gmb1 is not read as gm with something after it.
_BARE = "|".join(sorted(map(re.escape, BARE_PARAMETERS), key=len, reverse=True))
_DEVICE = re.compile(rf"({_BARE})(\d\w*|_\w+|)")


def latex_name(symbol: str) -> str:
    """The symbol as a designer writes it, for LaTeX's math mode.

    A device's parameter has its letter (C for a capacitance) with the rest and the device as subscript; any
    other symbol its first letter with the rest as subscript, a joining underscore left out.
    """
    if symbol == "pi":
        return r"\pi"
    device = _DEVICE.fullmatch(symbol)
    if device is None:
        return _escaped(symbol[:1]) + _subscript(_escaped(_rest(symbol[1:])))
    bare, label = device.groups()
    if bare == "beta":
        return r"\beta" + _subscript(_escaped(_rest(label)))
    letter = "C" if bare[0] == "c" else bare[0]
    return letter + _subscript(_device_subscript(bare[1:], label))


def _device_subscript(kind: str, label: str) -> str:
    written = _GREEK.get(kind, kind)
    if not label:
        return written
    if label.startswith("_"):
        return f"{written},{_escaped(label[1:])}"
    space = " " if kind in _GREEK else ""
    return written + space + _escaped(label)


def _rest(text: str) -> str:
    """What follows the first letter, without the underscore that joins it."""
    return text[1:] if text.startswith("_") and len(text) > 1 else text


def _subscript(text: str) -> str:
    if not text:
        return ""
    return f"_{text}" if len(text) == 1 else f"_{{{text}}}"


def _escaped(text: str) -> str:
    return "".join(_SPECIAL.get(character, character) for character in text)
