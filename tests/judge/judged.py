"""Stages that the tests of the ledger share, and the same ledger worked out slowly, point by point and set by set."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import combinations, permutations
from pathlib import Path
from typing import Any

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import parse_stage

CASCODE = """\
title = "Cascode into a capacitive load"

[mosfet]
M1 = { gate = "in",  drain = "x",   source = "gnd" }
M2 = { gate = "gnd", drain = "out", source = "x" }

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
mid  = { from = "VIN", to = "x" }

[bias]
M1 = { gm = "4.1 mS", gds = "0.21 mS" }
M2 = { gm = "3.9 mS", gds = "0.24 mS", gmb = "0.62 mS" }
CL = "3.3 pF"
"""

SMALL_GDS = """
[[assumption]]
name = "gds against gm"
small = ["gds"]
against = ["gm"]
"""

NO_BODY = """
[[assumption]]
name = "no body effect"
neglect = ["gmb"]
"""

# A common-source stage behind a resistance, with the two poles and the zero of every text book.
COMMON_SOURCE = """\
title = "Common-source stage behind a resistance"

[mosfet]
M1 = { gate = "g", drain = "out", source = "gnd" }

[resistor]
RS = ["in", "g"]
RL = ["out", "gnd"]

[capacitor]
CL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
M1 = { gm = "5 mS", gds = "0.2 mS", cgs = "0.4 pF", cgd = "0.1 pF" }
RS = "20 kohm"
RL = "4 kohm"
CL = "0.7 pF"
"""

# Two resistors, an inductor and a capacitor in a row: its poles meet and part as R1 moves.
RESONATOR = """\
title = "Series resonator"

[resistor]
R1 = ["in", "a"]
R2 = ["a", "b"]

[inductor]
L1 = ["b", "out"]

[capacitor]
C1 = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
R1 = "300 ohm"
R2 = "30 ohm"
L1 = "10 uH"
C1 = "1 nF"
"""

NO_R2 = """
[[assumption]]
name = "R2 is a short"
short = ["R2"]
"""


def stage_of(*texts: str, folder: Path = Path()) -> Stage:
    """A stage from the pieces of its file."""
    return parse_stage("".join(texts).encode(), file="my.stage.toml", folder=folder)


Errors = Callable[[frozenset[int]], Any]  # e(S), None where the quantity has no value


def slow_figures(count: int, error: Errors) -> dict[tuple[int, str], Any]:
    """alone, added, last and share of every assumption by their definitions, and ("all" as (−1, "all"))."""
    whole = frozenset(range(count))

    def difference(larger: frozenset[int], smaller: frozenset[int]) -> Any:
        above, below = error(larger), error(smaller)
        return None if above is None or below is None else above - below

    found: dict[tuple[int, str], Any] = {(-1, "all"): error(whole)}
    for k in range(count):
        found[k, "alone"] = error(frozenset({k}))
        found[k, "added"] = difference(frozenset(range(k + 1)), frozenset(range(k)))
        found[k, "last"] = difference(whole, whole - {k})
        increments = []
        for order in permutations(range(count)):
            before = frozenset(order[: order.index(k)])
            increments.append(difference(before | {k}, before))
        missing = any(x is None for x in increments)
        found[k, "share"] = None if missing else sum(increments) / len(increments)
    return found


def slow_partner(
    exact: Sequence[Any], approximate: Sequence[Any], index: int, log_size: Callable[[Any], float]
) -> Any:
    """The partner of exact[index], over all pairings of as many as can be; `log_size` is |Log| of a ratio."""
    few = min(len(exact), len(approximate))
    best, partner = None, None
    for rows in combinations(range(len(exact)), few):
        for columns in permutations(range(len(approximate)), few):
            total = sum(log_size(approximate[j] / exact[i]) for i, j in zip(rows, columns, strict=True))
            if best is None or total < best - 1e-12:
                best = total
                partner = dict(zip(rows, columns, strict=True)).get(index)
    return None if partner is None else approximate[partner]


def extremes(values: Sequence[Any]) -> tuple[float, float] | None:
    """Least and greatest, of the modulus as soon as one is complex; None where there is no value at all."""
    known = [v for v in values if v is not None]
    if not known:
        return None
    if any(isinstance(v, complex) and v.imag for v in known):
        sizes = [abs(v) for v in known]
        return min(sizes), max(sizes)
    real = [float(v.real) for v in known]
    return min(real), max(real)


def floats(bias: Mapping[str, Any]) -> dict[str, float]:
    """Values as floats."""
    return {name: float(value) for name, value in bias.items()}
