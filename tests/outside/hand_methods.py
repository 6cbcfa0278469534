"""The assumptions that stand for the hand method behind each published value (`examples.json`).

A method is a list of assumptions, each as a stage file writes it. `READ_AS` names another quantity where the
assumption leaves fewer roots than the circuit has, so that the root asked for has another number.
"""

from __future__ import annotations

from typing import Any

Table = dict[str, Any]

DOMINANT_POLE: Table = {"dominant_pole": True}
FAR_APART: Table = {"poles_far_apart": True}


def miller(part: str, start: str, end: str, ends: str = "both") -> Table:
    return {"miller": {"part": part, "from": start, "to": end, "ends": ends}}


def is_small(small: str | list[str], *against: str) -> Table:
    return {"small": [small] if isinstance(small, str) else small, "against": list(against)}


def much_over_one(*products: str) -> Table:
    """gm·ro ≫ 1 and its like."""
    return is_small("1", *products)


def alone(capacitor: str) -> Table:
    """The pole of one node by itself: every other capacitor is left out."""
    return {"dominant_capacitor": capacitor}


def slope_at(frequency: str) -> Table:
    """The Bode asymptote there. Of one that falls by the first power, the crossing of 1 is |A0|·f(p1)."""
    return {"band": frequency}


# A matched pair with a matched mirror, gm·ro large throughout.
PAIR = [
    {"equal": ["gm1", "gm2"]}, {"equal": ["ro1", "ro2"]},
    {"equal": ["gm3", "gm4"]}, {"equal": ["ro3", "ro4"]},
    much_over_one("gm1*ro1", "gm1*ro3", "gm3*ro1", "gm3*ro3", "gm1*RSS", "gm3*RSS"),
]  # fmt: skip

# The mirror's node with the output shorted by CL: the second pole once CL's is far below.
MIRROR = [*PAIR, is_small("Cm", "CL*gm3*ro1", "CL*gm3*ro3"), FAR_APART]

FOLDED = [much_over_one("gmc*roc", "gmc*roa", "gmc*rob", "gml*rol", "gml*rol0")]

ONE_POLE = [DOMINANT_POLE]

METHODS: dict[str, list[Table]] = {
    "CS1-2": [miller("Cgd", "g", "d", "from")],
    "CS2-2": [],  # a time constant's resistance is that of the network as it is
    "CS2-3": [],
    "CS2-4": ONE_POLE,
    "CS4-1": ONE_POLE,
    "CS4-2": [slope_at("3 GHz")],
    "CS5-2": ONE_POLE,
    "CS5-3": [slope_at("8 GHz")],
    "CS6-2": [miller("Cgd", "g", "d", "from")],
    "CS6-3": ONE_POLE,
    "CS6-4": ONE_POLE,
    "CS7-1": [miller("Cgd", "g", "d")],
    "CS7-2": [miller("Cgd", "g", "d")],
    "CS7-5": ONE_POLE,
    "CS7-6": [FAR_APART],
    "CS11-1": [much_over_one("gmx*RF")],
    "CS11-2": [is_small("RD", "RF")],
    "DG4-2": [{"short": ["Rs"]}, much_over_one("gmx*Rpi", "gmx*RE")],
    "DG5-1": [much_over_one("gm2*ro2")],
    "CB1-1": [alone("Cpi"), {"set": {"Rpi": "150/gmx"}}],
    "CB1-3": [{"set": {"Rpi": "150/gmx"}}],
    "EF1-2": [much_over_one("gmx*Rpi")],
    "EF1-3": [],  # an exact formula; its resistance is rounded from 27.9 to 28 ohm
    "EF1Z-1": [much_over_one("gmx*Rpi")],
    "EF1Z-3": [much_over_one("gmx*Rpi"), slope_at("230 MHz")],
    "EF3-1": [{"set": {"gmx": "150/Rpi"}}],
    "EF3-2": [miller("Cpi", "b", "o", "from"), much_over_one("gmx*Rpi"), DOMINANT_POLE],
    "CE1-2": [miller("Cmu", "bi", "c", "from")],
    "CE2-1": [miller("Cmu", "bi", "c", "from")],
    "CE2-2": ONE_POLE,
    "CE2-3": ONE_POLE,
    "CE3-2": [miller("Cmu", "b", "c", "from")],
    "CE5-2": ONE_POLE,
    "CE6-1": ONE_POLE,
    "CE7-1": [miller("Cmu", "b", "c", "from")],
    "CE8-1": [miller("Cmu", "b", "c", "from")],
    "TS2-1": ONE_POLE,
    "TS2-4": ONE_POLE,
    "TS4-2": ONE_POLE,
    "CAS0-2": ONE_POLE,
    "CAS0-3": ONE_POLE,
    "CAS0-4": [slope_at("500 MHz")],
    "CAS2-3": ONE_POLE,
    "CAS2-4": ONE_POLE,
    "CAS2-5": [slope_at("200 MHz")],
    "CAS3-2": [much_over_one("gm2*ro1", "gm2*ro2")],
    "CAS3-3": [much_over_one("gm2*ro1", "gm2*ro2")],
    "CAS3-4": ONE_POLE,  # the source leaves out ro1 at the inner node and keeps it at the output: 0.05 %
    "CAS4-1": [miller("Cgd1", "g", "x")],
    "CAS4-2": [miller("Cgd1", "g", "x")],
    "CAS5-1": ONE_POLE,
    "CAS11-1": [much_over_one("gm2*ro1", "gm2*ro2", "gm2*rpi2")],
    "CAS12-1": [much_over_one("gm2*ro1", "gm2*ro2")],
    "FC1-1": FOLDED,
    "FC1-2": FOLDED,
    "FC1-3": [*FOLDED, slope_at("1 MHz")],
    "FC1-4": FOLDED,
    "FC3-1": [much_over_one("gm8*ro8", "gm8*ro10")],
    "FC4-1": [much_over_one("gm6*ro6", "gm6*ro4", "gm6*ro1")],
    "DP1-1": PAIR,
    "DP1-2": [*PAIR, alone("CL")],
    "DP1-3": [*MIRROR, {"neglect": ["CSS"]}],
    "DP1-4": [*MIRROR, {"neglect": ["CSS"]}],
    "DP3-1": PAIR,
    "DP3-2": [*PAIR, alone("CL")],
    "DP3-3": MIRROR,
    "DP3-4": MIRROR,
    "OA3-2": [much_over_one("gm2*R1", "gm2*R2"), is_small("C2", "gm2*R1*Cc"), FAR_APART],
    "OA3-4": [much_over_one("gm2*R1", "gm2*R2"), is_small("C2", "gm2*R1*Cc"), slope_at("1 MHz")],
    "MR1-1": [
        {"equal": ["gm1", "gm2", "gm3"]},
        {"equal": ["rpi1", "rpi2", "rpi3"]},
        {"equal": ["ro1", "ro2", "ro3"]},
        much_over_one("gm1*ro1", "gm1*rpi1"), is_small("rpi1", "ro1"),
    ],
    "CS12-3": [],
    "CS12-4": ONE_POLE,
    "CS12-5": ONE_POLE,
}  # fmt: skip

READ_AS: dict[str, str] = {
    "CB1-1": "p1.hz",
    "DP1-4": "z1.hz",  # the tail's zero is gone with CSS
}

# Noise is no response: symamp does not compute it.
NOISE = ("N1-1", "N2-1", "N3-1")

# Hand methods that no kind of assumption says, each with what stands in the way.
NOT_SAID: dict[str, str] = {
    "CAS3-5": "the source rounds its 4.98 ns to 5.0 ns before it divides, and rounding is no assumption",
    "OA2-1": "the design rule reads the true phase where the asymptote crosses 1: two responses at once",
    "SYS1-1": "1/sqrt(sum 1/p^2 - 2 sum 1/z^2) is a formula for the bandwidth, and simplifies no response",
}
