"""Errors of claims and the values of their tacit ratios, at many bias points at once (room: judge)."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import is_root
from symamp.exact.figures import Figures, face
from symamp.exact.formulas import PolyRatio
from symamp.exact.response import Response
from symamp.exact.tape import Tape
from symamp.formula import Node
from symamp.formula_arrays import evaluate_arrays
from symamp.judge.balance import PI
from symamp.judge.claim import Claim
from symamp.judge.conditions import Taken
from symamp.judge.errors_at import error_of


@dataclass
class ClaimTable:
    """One claim at many bias points: row 0 its error, then its tacit ratios, then the ratios taken to be 1.

    `root` is the index of the pole or zero that it is paired with.
    """

    exact: Response
    claim: Claim
    root: int | None = None
    ratios: Sequence[PolyRatio] = ()
    _tape: Tape | None = field(default=None, init=False, repr=False)

    def __post_init__(self) -> None:
        if self.ratios:
            self._tape = Tape([polynomial for ratio in self.ratios for polynomial in ratio])

    @property
    def rows(self) -> int:
        return 1 + len(self.ratios)

    def figures(self, figures: Figures, values: Mapping[str, Any], points: int) -> np.ndarray:
        """(rows, points); complex where an error is."""
        claimed = claimed_values(self.exact.stage, self.claim, values, points)
        with np.errstate(all="ignore"):
            error = error_of(self.claim.quantity, claimed, self.exact_values(figures))
        return np.concatenate([error[None], self._ratios(values, points)])

    def exact_values(self, figures: Figures) -> np.ndarray:
        """The quantity's exact values: of a root, of that with which the claim is paired."""
        quantity = self.claim.quantity
        if self.root is None:
            return figures.value(quantity)
        roots = figures.poles if quantity.name == "p" else figures.zeros
        if self.root > roots.shape[0]:
            return np.full(figures.points, np.nan)
        found = roots[self.root - 1]
        found = found if np.abs(found.imag).any() else np.ascontiguousarray(found.real)
        with np.errstate(all="ignore"):
            return np.asarray(face(found, quantity.face, quantity))

    def _ratios(self, values: Mapping[str, Any], points: int) -> np.ndarray:
        if self._tape is None:
            return np.empty((0, points))
        found = self._tape({**values, PI: math.pi}, points)
        with np.errstate(all="ignore"):
            return np.array([above / below for above, below in zip(found[::2], found[1::2], strict=True)])


def claimed_values(stage: Stage, claim: Claim, values: Mapping[str, Any], points: int) -> np.ndarray:
    """The formula's values at `points` bias points, in the quantity's unit (dB of a formula that is not in dB)."""
    found = np.broadcast_to(np.asarray(formula_values(stage, claim.node, values), dtype=float), (points,))
    if claim.quantity.face == "db" and not claim.decibels:
        with np.errstate(all="ignore"):
            return np.asarray(20 * np.log10(np.abs(found)))
    return found


def formula_values(stage: Stage, node: Node, values: Mapping[str, Any]) -> Any:
    """A formula's values, symbols and aliases from `values` of the symbols."""
    return evaluate_arrays(node, _named(stage, values))


def _named(stage: Stage, values: Mapping[str, Any]) -> Callable[[str], Any]:
    def value(name: str) -> Any:
        if name in values:
            return values[name]
        found: Any = 1.0
        with np.errstate(all="ignore"):
            for symbol, power in stage.aliases[name].items():
                found = found * np.asarray(values[symbol], dtype=float) ** power
        return found

    return value


def error_with(table: ClaimTable, taken: Taken, values: Mapping[str, float]) -> float | complex | None:
    """The error that one symbol's being taken as its formula makes in the exact quantity, at a bias point."""
    stage = table.exact.stage
    by = float(np.asarray(formula_values(stage, taken.by, values)))
    if not math.isfinite(by):
        return None
    found = table.exact.figures({**values, taken.symbol: by}, 1)
    plain = table.exact.figures(dict(values), 1)
    with np.errstate(all="ignore"):
        error = error_of(table.claim.quantity, table.exact_values(found), table.exact_values(plain))[0]
    if not np.isfinite(error):
        return None
    return complex(error) if np.iscomplexobj(error) and error.imag else float(error.real)


def each_at(
    tables: Sequence[ClaimTable], values: Mapping[str, Any], points: int
) -> Iterator[tuple[int, np.ndarray]]:
    """(number of the table, its figures), each response worked out once."""
    known: dict[int, Figures] = {}
    for number, table in enumerate(tables):
        key = id(table.exact)
        if key not in known:
            with np.errstate(all="ignore"):
                known[key] = table.exact.figures(values, points)
        yield number, table.figures(known[key], values, points)


def paired_root(exact: Response, claim: Claim, value: float) -> int | None:
    """The index of the root that a claim about a pole or zero is paired with at the bias point.

    The least |Log(F/e)|, principal value; of a face that has no sign (magnitude, hz) that of the magnitudes. Of a
    face that tells too little (re, im, deg) the one that is claimed. None where there is no root.
    """
    quantity = claim.quantity
    if not is_root(quantity):
        return None
    roots = exact.poles() if quantity.name == "p" else exact.zeros()
    index = quantity.index or 1
    if index > len(roots):
        return None  # a root that the response does not have is not another one
    if quantity.face in ("re", "im", "deg") or not value or not math.isfinite(value):
        return index
    if quantity.face is None:
        costs = [abs(np.log(complex(value) / r)) if r else math.inf for r in roots]
    else:
        size = abs(value) * (2 * math.pi if quantity.face == "hz" else 1.0)
        costs = [abs(math.log(size / abs(r))) if r else math.inf for r in roots]
    least = min(costs)
    if costs[index - 1] <= least * (1 + 1e-9):
        return index
    return costs.index(least) + 1
