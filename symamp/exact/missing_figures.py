"""Exact: words for a quantity that has no value, and remarks beside one that has, at one bias point."""

from __future__ import annotations

import math

import numpy as np

from symamp.exact.asked_quantity import Quantity
from symamp.exact.figures import Figures
from symamp.values import show_value

_THREE_DB = 10 ** (3 / 20)


def why_missing(figures: Figures, quantity: Quantity, point: int = 0) -> str:
    """Why the quantity has no value at that bias point, in words; "" where it has one."""
    here = figures.at_point(point)
    if not np.isnan(here.value(quantity)[0]):
        return ""
    if not (np.isfinite(here.num).all() and np.isfinite(here.den).all()):
        return "a coefficient is not finite at this bias point"
    if not here.den.any():
        also = "" if here.num.any() else ", and the numerator too"
        return f"the denominator is 0 at this bias point{also}"
    whole = Quantity(quantity.name, quantity.index, quantity.frequency)
    with np.errstate(all="ignore"):
        if quantity.face and not np.isnan(here.value(whole)[0]):
            return f"{whole.text} is 0, which has no {'phase' if quantity.face == 'deg' else 'value in dB'}"
        return _WORDS[quantity.name](here, quantity)


def remarks_beside(figures: Figures, quantity: Quantity, point: int = 0) -> list[str]:
    """What a reader should know beside the quantity at that bias point."""
    here = figures.at_point(point)
    with np.errstate(all="ignore"):
        if quantity.name in ("bandwidth", "gain_bandwidth"):
            return _peaking(here)
        if quantity.name in ("unity_gain_frequency", "phase_margin"):
            return _other_crossings(here)
        if quantity.name == "low_corner":
            return _against_limit(here)
    return []


def _peaking(here: Figures) -> list[str]:
    size, peak = abs(here.dc[0]), here.peak[0]
    if not size > 0 or math.isnan(here.bandwidth[0]):
        return []
    if here.undamped.any():
        return ["the magnitude is infinite at an undamped pole"]
    if not peak > _THREE_DB * size:
        return []
    above = show_value(20 * math.log10(peak / size), "dB", 3)
    return [f"the magnitude peaks at {show_value(here.peak_frequency[0], 'Hz')}, {above} above DC"]


def _other_crossings(here: Figures) -> list[str]:
    chosen = here.unity_gain_frequency[0]
    if math.isnan(chosen):
        return []
    every = here.unity_crossings[:, 0]
    others = every[~np.isnan(every) & (np.abs(every - chosen) > 1e-6 * chosen)]
    if not others.size:
        return []
    listed = ", ".join(show_value(float(f), "Hz") for f in others)
    return [f"the magnitude also passes through 1 at {listed}"]


def _against_limit(here: Figures) -> list[str]:
    if math.isnan(here.low_corner[0]) or not np.isinf(here.largest[0][0]):
        return []
    return ["the magnitude is largest in the limit of high frequency: the corner is against that limit"]


def _dc(here: Figures, quantity: Quantity) -> str:
    return "infinite: the response has a pole at s = 0"


def _hf(here: Figures, quantity: Quantity) -> str:
    return "infinite: the numerator's degree is higher than the denominator's"


def _root(here: Figures, quantity: Quantity) -> str:
    found = here.poles if quantity.name == "p" else here.zeros
    word = "pole" if quantity.name == "p" else "zero"
    count = int(np.count_nonzero(~np.isnan(found[:, 0])))
    if quantity.name == "z" and not here.num.any():
        return "the response is 0 at every frequency"
    listed = f"only {count} {word}{'s' if count > 1 else ''}" if count else f"no {word}s"
    return f"the response has {listed}"


def _bandwidth(here: Figures, quantity: Quantity) -> str:
    if math.isnan(here.dc[0]):
        return "the magnitude at DC is infinite"
    if here.dc[0] == 0:
        return "the response is 0 at DC"
    return "the magnitude never falls through 1/√2 of its DC value"


def _peak(here: Figures, quantity: Quantity) -> str:
    x, squared = here.largest
    if math.isinf(squared[0]) and here.undamped.any():
        return "infinite: a pole lies on the imaginary axis"
    if math.isinf(squared[0]):
        return "infinite: the magnitude grows without bound " + ("with frequency" if x[0] else "towards DC")
    limit = show_value(abs(here.hf[0]), here.unit)
    return f"the largest magnitude, {limit}, is only approached as frequency grows"


def _corner(here: Figures, quantity: Quantity) -> str:
    x, squared = here.largest
    if math.isinf(squared[0]):
        return "the largest magnitude is infinite"
    low = quantity.name == "low_corner"
    if low and x[0] == 0:
        return "the magnitude is largest at DC, and nothing lies below"
    if not low and math.isinf(x[0]):
        return "the magnitude is largest in the limit of high frequency, and nothing lies above"
    return f"{'below' if low else 'above'} its peak the magnitude never falls to 1/√2 of it"


def _unity(here: Figures, quantity: Quantity) -> str:
    if here.unit:
        return f"the response has a unit ({here.unit}), so a magnitude of 1 means nothing"
    x = here.unity_crossings[:, 0]
    if (~np.isnan(x)).any():
        return "the magnitude passes through 1 only upwards"
    if here.peak[0] <= 1 + 1e-9 or (math.isnan(here.peak[0]) and abs(here.hf[0]) <= 1 + 1e-9):
        return "the magnitude never falls through 1: it is nowhere above it"
    return "the magnitude never falls through 1: it is nowhere below it"


def _phase_margin(here: Figures, quantity: Quantity) -> str:
    if here.right_half_plane[0]:
        return "a pole lies in the right half plane"
    return "there is no unity-gain frequency: " + _unity(here, quantity)


def _gain_margin(here: Figures, quantity: Quantity) -> str:
    if here.unit:
        return f"the response has a unit ({here.unit}), so its gain has no margin in dB"
    if here.right_half_plane[0]:
        return "a pole lies in the right half plane"
    return "the phase never reaches −180 degrees"


def _at(here: Figures, quantity: Quantity) -> str:
    return "infinite: a pole lies at this frequency"


def _coefficient(here: Figures, quantity: Quantity) -> str:
    return "the coefficient is beyond the range of numbers"


_WORDS = {
    "dc": _dc,
    "hf": _hf,
    "p": _root,
    "z": _root,
    "bandwidth": _bandwidth,
    "gain_bandwidth": _bandwidth,
    "peak": _peak,
    "peak_frequency": _peak,
    "low_corner": _corner,
    "high_corner": _corner,
    "unity_gain_frequency": _unity,
    "phase_margin": _phase_margin,
    "gain_margin": _gain_margin,
    "at": _at,
    "a": _coefficient,
    "b": _coefficient,
}
