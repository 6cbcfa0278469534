"""Dominance: "x small against y", as a statement about the terms of one coefficient.

A pair gives the vector exponents(x) − exponents(y). Term A falls to term B of the same coefficient when A − B is
a non-zero sum of such vectors with non-negative factors. Terms that fall to none stay, whatever their numbers.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import lcm

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.cone import Cone, Vector, cone_of
from symamp.errors import StageError

Powers = Mapping[str, Fraction]


@dataclass(frozen=True)
class Pair:
    """One vector and the assumption it comes from: small / against as exponents of symbols."""

    small: Powers
    against: Powers
    assumption: str

    @property
    def difference(self) -> dict[str, Fraction]:
        """exponents(small) − exponents(against), zeros left out."""
        total = {name: Fraction(power) for name, power in self.small.items()}
        for name, power in self.against.items():
            total[name] = total.get(name, Fraction(0)) - power
        return {name: power for name, power in total.items() if power}


@dataclass(frozen=True)
class Fall:
    """A dropped term and the one it fell to: exponents of the coefficient's generators and numeric factors."""

    term: tuple[int, ...]
    factor: int
    against: tuple[int, ...]
    against_factor: int


@dataclass(frozen=True)
class Dominance:
    """Pooled pairs, ready to be put to coefficients."""

    symbols: tuple[str, ...]
    cone: Cone
    idle: tuple[str, ...]  # assumptions of which a vector came out zero

    def judge(self, polynomial: fmpz_mpoly) -> tuple[fmpz_mpoly, list[Fall]]:
        """The terms that stay, and each dropped one with a term that stays and that it fell to."""
        if len(polynomial) < 2:
            return polynomial, []
        names = polynomial.context().names()
        place = {name: i for i, name in enumerate(names)}
        terms = [(tuple(int(x) for x in e), int(c)) for e, c in polynomial.terms()]
        columns = [place.get(name) for name in self.symbols]
        projected = np.array([[e[i] if i is not None else 0 for i in columns] for e, _ in terms], dtype=object)
        planes = projected @ np.array(self.cone.planes, dtype=object).reshape(-1, len(columns)).T
        faces = (projected @ np.array(self.cone.faces, dtype=object).reshape(-1, len(columns)).T).astype(float)
        involved = {i for i in columns if i is not None}
        groups: dict[tuple[object, ...], list[int]] = {}
        for i, (exponents, _) in enumerate(terms):
            outside = tuple(x for k, x in enumerate(exponents) if k not in involved)
            groups.setdefault((outside, tuple(planes[i])), []).append(i)
        falls = {i: j for group in groups.values() for i, j in _fallen(group, faces).items()}
        kept = {e: c for i, (e, c) in enumerate(terms) if i not in falls}
        records = [Fall(*terms[i], *terms[j]) for i, j in falls.items()]
        return polynomial.context().from_dict(kept), records


def _fallen(group: list[int], faces: np.ndarray) -> dict[int, int]:
    """Of terms that differ by the cone's span alone: {term that falls: a term that stays and that it falls to}."""
    if len(group) < 2:
        return {}
    values = faces[group]
    above = np.all(values[:, None, :] >= values[None, :, :], axis=2)
    np.fill_diagonal(above, False)
    stays = ~above.any(axis=1)
    return {
        group[i]: group[int(np.flatnonzero(above[i] & stays)[0])]
        for i in range(len(group))
        if not stays[i]
    }


def pool(pairs: Sequence[Pair]) -> Dominance | None:
    """Pool the pairs of all dominance assumptions; None where no vector is left.

    Raises StageError naming assumptions whose vectors can add up to zero: they contradict one another.
    """
    idle = tuple(dict.fromkeys(pair.assumption for pair in pairs if not pair.difference))
    live = [pair for pair in pairs if pair.difference]
    if not live:
        return None
    symbols = tuple(dict.fromkeys(name for pair in live for name in pair.difference))
    vectors = [_integers(pair.difference, symbols) for pair in live]
    cone = cone_of(vectors)
    if cone.undoing:
        names = list(dict.fromkeys(live[i].assumption for i in cone.undoing))
        quoted = " and ".join(f"{name!r}" for name in names)
        raise StageError(
            f"the assumptions {quoted} contradict one another: together they take a ratio and its inverse to be small",
            "keep the one that holds at your bias point, or limit each to its responses with for = [...]",
            key="assumption",
        )
    return Dominance(symbols, cone, idle)


def _integers(difference: Mapping[str, Fraction], symbols: Sequence[str]) -> Vector:
    factor = lcm(*(Fraction(power).denominator for power in difference.values()))
    return tuple(int(difference.get(name, Fraction(0)) * factor) for name in symbols)
