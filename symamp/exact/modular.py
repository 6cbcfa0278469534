"""Identities by random values modulo a prime (room: exact).

A non-zero polynomial of degree d vanishes at a random point with probability d/2^61 at most (Schwartz 1980, Zippel
1979), so what vanishes there is taken to be zero whatever the values.
"""

from __future__ import annotations

import random
from collections.abc import Mapping

from flint import nmod

from symamp.exact.cofactors import entry_symbols
from symamp.exact.minors import MinorGraph
from symamp.exact.system import Entry

PRIME = (1 << 61) - 1


def vanishes(graph: MinorGraph) -> tuple[bool, bool]:
    """Whether numerator and denominator are identically zero."""
    draw = random.Random(61)
    values = {name: draw.randrange(2, PRIME) for name in entry_symbols(graph)}
    s = draw.randrange(2, PRIME)
    entries = [nmod(residue(entry, values, s), PRIME) for entry in graph.entries]
    numerator, denominator = graph.walk(entries, nmod(1, PRIME), nmod(0, PRIME))
    return int(numerator) == 0, int(denominator) == 0


def residue(entry: Entry, values: Mapping[str, int], s: int) -> int:
    """An entry's value modulo the prime."""
    total = 0
    for coefficient, symbol, power, s_power in entry:
        value = coefficient * (s if s_power else 1)
        if symbol is not None:
            value *= values[symbol] if power > 0 else pow(values[symbol], -1, PRIME)
        total += value
    return total % PRIME
