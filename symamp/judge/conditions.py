"""The balance of a claim (room: judge): which polynomials are compared for which quantity, and after which
`equal` and `set` assumptions.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from flint import fmpz_mpoly

from symamp.assumptions.apply import Approximator
from symamp.assumptions.merge import Pooled, pooled
from symamp.assumptions.read import Assumption
from symamp.circuit.stage import Stage
from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.formulas import PolyRatio, formula_of, rational_of, root_factor
from symamp.exact.polys import held, into_ring
from symamp.exact.response import Response
from symamp.exact.tape import polynomial_value
from symamp.formula import Name, Node
from symamp.judge.balance import PI, Balance, ratio_balance, root_balance
from symamp.judge.claim import Claim
from symamp.judge.claimed import NotRational, claimed_ratio, claimed_symbols, claims_ring

_RATIONAL = ("dc", "hf", "a", "b")
_BANDS = ("bandwidth", "gain_bandwidth", "unity_gain_frequency")
_MOST_WORK = 200_000  # terms gone through for the list of ratios; about a second
_LARGEST = 6000  # terms of a balance above which it is not multiplied out

NO_FORMULA = "this quantity has no formula that could be compared term by term"


@dataclass(frozen=True)
class Taken:
    """An `equal` or `set` assumption's word on one symbol: it is taken to be `by`, so `ratio` is taken to be 1."""

    assumption: str
    symbol: str
    by: Node
    ratio: PolyRatio


@dataclass(frozen=True)
class Balanced:
    """A claim's balance, or in `why` the words for there being none; `taken` comes first in any case."""

    balance: Balance | None
    why: str = ""
    taken: tuple[Taken, ...] = ()
    remarks: tuple[str, ...] = ()
    whole: bool = True  # whether the claim's error is a function of the balance alone


def balanced(
    exact: Response, claim: Claim, root: int | None, assumptions: Sequence[Assumption] = ()
) -> Balanced:
    """The balance of a claim about an exact response.

    `root` is the index of the pole or zero that the claim is paired with. The response, and the formula with it,
    is put under the `equal` and `set` parts of the assumptions first.
    """
    if not exact.expanded:
        return Balanced(None, "the exact expression is not written out, so no terms can be compared")
    stage = exact.stage
    made = [part for a in assumptions if (part := _merging(a, exact.name)) is not None]
    ask = pooled(stage, made)
    taken = _taken(exact, claim, made)
    under = exact
    if taken:
        found = Approximator(exact).under(made)
        if found.response is None or not found.response.expanded:
            return Balanced(None, f"under the stage's equal and set assumptions: {found.why}", taken)
        under = found.response
    try:
        return _Balancer(stage, under, claim, root, ask if taken else Pooled(), taken).made()
    except NotRational as reason:
        return Balanced(None, str(reason), taken)


def _merging(assumption: Assumption, response: str) -> Assumption | None:
    """The `equal` and `set` of an assumption, without its other kinds."""
    if not assumption.applies(response) or not (assumption.equal or assumption.replace):
        return None
    return Assumption(
        assumption.name, ("equal", "set"), equal=assumption.equal, replace=dict(assumption.replace)
    )


def _taken(exact: Response, claim: Claim, made: Sequence[Assumption]) -> tuple[Taken, ...]:
    """What the assumptions say of each symbol that the exact response or the claim holds."""
    stage = exact.stage
    concerned = exact.form.symbols | claimed_symbols(stage, claim.node)
    found: dict[str, Taken] = {}
    for assumption in made:
        ask = pooled(stage, [assumption])
        for symbol, other in ask.rename.items():
            if symbol in concerned and symbol not in found:
                found[symbol] = _one(stage, assumption.name, symbol, Name(other))
        for symbol, node in ask.replace.items():
            if symbol in concerned and symbol not in found:
                found[symbol] = _one(stage, assumption.name, symbol, node)
    return tuple(found.values())


def _one(stage: Stage, assumption: str, symbol: str, by: Node) -> Taken:
    context = claims_ring(stage, {symbol} | claimed_symbols(stage, by))
    above, below = claimed_ratio(stage, by, context)
    generator = dict(zip(context.names(), context.gens(), strict=True))[symbol]
    return Taken(assumption, symbol, by, (generator * below, above))


@dataclass
class _Balancer:
    """Builds the balance of one claim on the response `under`."""

    stage: Stage
    under: Response
    claim: Claim
    root: int | None
    ask: Pooled
    taken: tuple[Taken, ...]
    remarks: list[str] = field(default_factory=list)

    def made(self) -> Balanced:
        """The balance; of a number that is no limit of the exact expression none: it is judged by its value."""
        found = self._compared()
        if found.balance is None or claimed_symbols(self.stage, self.claim.node):
            return found
        comparison = found.balance.comparison
        if comparison.common.is_zero() or any(tacit.is_number for tacit in comparison.tacit):
            return self._none("a number has no terms to compare")
        return found

    def _compared(self) -> Balanced:
        quantity = self.claim.quantity
        names = set(self.under.form.symbols) | claimed_symbols(self.stage, self.claim.node, self.ask)
        self.context = claims_ring(self.stage, names)
        self.claimed = claimed_ratio(self.stage, self.claim.node, self.context, self.ask)
        if self.claimed[0].is_zero():
            return self._none("the claim is 0")
        if self.claim.decibels:
            return self._none("a number of dB has no terms to compare")
        if quantity.name in _RATIONAL and quantity.face in (None, "magnitude", "re", "db"):
            return self._rational()
        if is_root(quantity) and quantity.face in (None, "magnitude", "re", "hz"):
            return self._root()
        if quantity.name in _BANDS and quantity.face in (None, "magnitude", "hz"):
            return self._band()
        return self._none(NO_FORMULA)

    def _none(self, why: str) -> Balanced:
        return Balanced(None, why, self.taken, tuple(self.remarks))

    def _some(self, balance: Balance, whole: bool = True) -> Balanced:
        if balance.comparison.work > _MOST_WORK:
            raise NotRational("too many terms are left over to list them")
        return Balanced(balance, "", self.taken, tuple(self.remarks), whole)

    def _sign(self, ratio: PolyRatio) -> int:
        values = {**self.under.bias_values, PI: math.pi}
        signs = [np.sign(polynomial_value(p, values)) for p in ratio]
        return -1 if signs[0] * signs[1] < 0 else 1

    def _rational(self) -> Balanced:
        quantity = self.claim.quantity
        exact = rational_of(self.under, replace(quantity, face=None))
        if exact is None:
            return self._none(NO_FORMULA)
        if exact[0].is_zero():
            return self._none("the exact value is 0")
        above, below = (into_ring(p, self.context) for p in exact)
        if quantity.face in ("magnitude", "db"):
            above = above * self._sign((above, below))
        claimed = self.claimed
        if quantity.face == "db":
            claimed = claimed[0] * self._sign(claimed), claimed[1]
        return self._some(ratio_balance((above, below), claimed))

    def _root(self) -> Balanced:
        quantity = self.claim.quantity
        index = self.root or quantity.index or 1
        roots = self.under.poles() if quantity.name == "p" else self.under.zeros()
        if index > len(roots):
            return self._none(f"with these symbols taken as one there is no {quantity.name}{index}")
        if roots[index - 1].imag:
            return self._none("the root is complex, and a formula of real terms is compared with real roots")
        above, below = self.claimed
        if quantity.face in ("magnitude", "hz") and roots[index - 1].real < 0:
            above = -above
        if quantity.face == "hz":
            above = above * 2 * self._pi
        return self._into(Quantity(quantity.name, index=index), (above, below))

    def _band(self) -> Balanced:
        """A band is set by p1 where nothing else is near: |p1|/2π, and of the others |dc·p1|/2π."""
        name = self.claim.quantity.name
        poles = self.under.poles()
        if not poles or poles[0].imag or poles[0].real >= 0:
            return self._none("there is no real p1 that could set the band")
        above, below = self.claimed
        if not self._nearest_first(poles):
            return self._none("the formula lies nearer another pole than p1, with which a band is compared")
        if name != "bandwidth":
            dc = rational_of(self.under, Quantity("dc"))
            if dc is None or dc[0].is_zero():
                return self._none(NO_FORMULA)
            sign = self._sign(dc)
            above = above * into_ring(dc[1], self.context)
            below = below * into_ring(dc[0], self.context) * sign
        found = self._into(Quantity("p", index=1), (-2 * self._pi * above, below))
        if formula_of(self.under, replace(self.claim.quantity, face=None)) is not None:
            return found  # of one pole and no zero it is that, whatever the values
        what = "|p1|/2π" if name == "bandwidth" else "|dc·p1|/2π"
        ratio = f" (p1/p2 is {abs(poles[0] / poles[1]):.2g} at the bias point)" if len(poles) > 1 else ""
        self.remarks.append(
            f"its conditions are those of {what}, which the {name.replace('_', ' ')} is while the other poles and "
            f"zeros lie far above p1{ratio}"
        )
        return replace(found, remarks=tuple(self.remarks), whole=False)

    def _nearest_first(self, poles: Sequence[complex]) -> bool:
        """Whether the claimed frequency, over |dc| where it is a product with it, lies nearest to p1."""
        values = {**self.under.bias_values, PI: math.pi}
        above, below = (polynomial_value(p, values) for p in self.claimed)
        size = 2 * math.pi * abs(above / below) if below else 0.0
        if self.claim.quantity.name != "bandwidth":
            dc = self.under.bias_figures.dc[0]
            size = size / abs(dc) if dc else 0.0
        if not size or not math.isfinite(size):
            return True
        costs = [abs(math.log(size / abs(pole))) if pole else math.inf for pole in poles]
        return costs[0] <= min(costs) * (1 + 1e-9)

    @property
    def _pi(self) -> fmpz_mpoly:
        return self.context.gens()[self.context.names().index(PI)]

    def _into(self, quantity: Quantity, claimed: PolyRatio) -> Balanced:
        coefficients = root_factor(self.under, quantity)
        if coefficients is None:
            return self._none(NO_FORMULA)
        inside = [into_ring(c, self.context) for c in coefficients]
        n = len(inside) - 1
        if n == 1:  # one term of s: the root is a ratio, compared as one
            return self._some(ratio_balance((-inside[0], inside[1]), claimed))
        size = max(map(len, inside)) * max(len(claimed[0]), len(claimed[1])) ** n
        if size > _LARGEST:
            raise NotRational("too many terms to compare")
        return self._some(root_balance(inside, claimed))


def symbols_of(balance: Balance) -> set[str]:
    """The symbols that a balance holds."""
    return held(*balance.above.values(), *balance.below.values()) - {PI}
