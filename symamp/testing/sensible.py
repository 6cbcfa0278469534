"""Bias values that a real device or part could have (room: testing).

Ratios rather than values: an output conductance is so many times smaller than its transconductance at any
current. The limits are common practice (from memory), and each is widened to hold the stage's own bias.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from symamp.circuit.stage import Stage, Symbol


@dataclass(frozen=True)
class Ratio:
    """A parameter that lies between `low` and `high` times another of the same device."""

    to: str
    low: float
    high: float


# By kind of device and bare parameter name; what a parameter is a ratio of stands before it in the kind.
RATIOS: dict[tuple[str, str], Ratio] = {
    ("mosfet", "gds"): Ratio("gm", 1 / 200, 1 / 5),
    ("mosfet", "gmb"): Ratio("gm", 0.05, 0.4),
    ("mosfet", "cgd"): Ratio("cgs", 0.1, 0.4),
    ("mosfet", "cgb"): Ratio("cgs", 0.02, 0.3),
    ("mosfet", "cdb"): Ratio("cgs", 0.1, 0.5),
    ("mosfet", "csb"): Ratio("cgs", 0.1, 1.0),
    ("bjt", "gpi"): Ratio("gm", 1 / 500, 1 / 20),  # beta from 20 to 500
    ("bjt", "go"): Ratio("gm", 1 / 5000, 1 / 500),
    ("bjt", "cmu"): Ratio("cpi", 0.02, 0.1),
    ("bjt", "ccs"): Ratio("cpi", 0.02, 0.5),
}

# Where no bias says better: by kind and parameter, else by unit.
_RANGES: dict[tuple[str, str], tuple[float, float]] = {
    ("mosfet", "gm"): (10e-6, 50e-3),
    ("mosfet", "cgs"): (2e-15, 1e-12),
    ("bjt", "gm"): (0.4e-3, 0.4),  # some 10 µA to 10 mA
    ("bjt", "rx"): (10.0, 500.0),
    ("bjt", "cpi"): (0.2e-12, 100e-12),
}
_BY_UNIT: dict[str, tuple[float, float]] = {
    "ohm": (100.0, 1e6),
    "F": (10e-15, 100e-12),
    "H": (1e-9, 1e-3),
    "S": (10e-6, 50e-3),
    "": (0.1, 100.0),
}
_AROUND = 10.0  # a bias value is varied by this factor up and down
_DEVICE_FALLBACK = {
    "F": (1e-15, 1e-12),
    "S": (1e-6, 1e-3),
}  # a device's parameter without its ratio's partner


def sensible_range(
    stage: Stage, symbol: Symbol, chosen: Mapping[str, float], base: Mapping[str, float]
) -> tuple[float, float]:
    """Where a symbol's value may lie, once the symbols before it are `chosen`; `base` are the bias values.

    A symbol whose bias is 0 stays 0; one whose bias is negative stays negative.
    """
    bias = base.get(symbol.name)
    if bias == 0:
        return 0.0, 0.0
    part = stage.parts[symbol.part]
    ratio = RATIOS.get((part.kind.name, symbol.parameter.name))
    if ratio is not None and ratio.to in part.parameters:
        partner = part.symbol(ratio.to)
        low, high = ratio.low, ratio.high
        if bias is not None and partner in base:
            low, high = min(low, bias / base[partner]), max(high, bias / base[partner])
        return _rounded(low * chosen[partner]), _rounded(high * chosen[partner])
    if bias is not None:
        ends = _rounded(bias / _AROUND), _rounded(bias * _AROUND)
        return min(ends), max(ends)
    known = _RANGES.get((part.kind.name, symbol.parameter.name))
    if known is None and part.kind.prefixed:
        known = _DEVICE_FALLBACK.get(symbol.unit)
    return known or _BY_UNIT[symbol.unit]


def partners_first(stage: Stage, names: Iterable[str]) -> list[str]:
    """The symbols in the order in which their values can be chosen."""
    wanted = list(names)

    def depends(name: str) -> bool:
        symbol = stage.symbols[name]
        return (stage.parts[symbol.part].kind.name, symbol.parameter.name) in RATIOS

    return sorted(wanted, key=depends)


def _rounded(x: float) -> float:
    """Without the last digits, which are of no product of decimals."""
    return float(f"{x:.12g}")
