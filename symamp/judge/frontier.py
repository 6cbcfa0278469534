"""The frontier of a claim (room: judge): for each tacit condition the ratio at which the error reaches its bound.

With x = 1/(1 + e) the balance of a claim is Σ c_k·x^k + Σ ±r_i·x^(k_i) = 0, c_k what is common at each power of x
and r_i the tacit ratios. At a bound of the error x is known, and the balance is linear in each ratio.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from flint import fmpz_mpoly

from symamp.circuit.stage import Stage
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import held, lowest_terms
from symamp.exact.shape import Shape, shape_of
from symamp.judge.balance import PI, Comparison, Tacit
from symamp.judge.check import examine
from symamp.judge.claim import Claim
from symamp.judge.examined import Examined

OTHERS_EXCEED = "the other conditions alone make the error larger than it is allowed"
_NOTHING = 1e-12  # a ratio below this is the rounding of the balance
NEVER = "the error stays within its bound however large this ratio is"
NOT_ALONE = "the claim's error is not a function of these ratios alone"


@dataclass(frozen=True)
class Limit:
    """A tacit condition and where it ends. `limit` is with the other ratios at the bias point, `alone` without them.

    `formula` says `alone` as a condition on the ratio turned over, in the grammar of formulas: "gm2/gds2 >= 19";
    `turned` is `ratio` turned over, without its number, and `least` what it has to be at least.
    What does not exist is None, with the words in `why` (of `limit`) and `why_alone`.
    """

    ratio: Shape
    shown: Shape
    at_bias: float | None
    limit: float | None
    alone: float | None
    formula: str | None
    why: str = ""
    why_alone: str = ""
    why_formula: str = ""
    turned: Shape | None = None
    least: float | None = None

    @property
    def margin(self) -> float | None:
        """How many times its bias value the ratio may become, the others staying."""
        return None if not self.at_bias or self.limit is None else self.limit / self.at_bias


@dataclass(frozen=True)
class ClaimFrontier:
    """One claim's limits, in the order of its conditions; `why` says so where there are none."""

    claim: Claim
    error: float | complex | None
    limits: tuple[Limit, ...]
    why: str = ""


def make_frontiers(stage: Stage, claims: Sequence[Claim] | None = None) -> tuple[ClaimFrontier, ...]:
    """The frontiers of all claims of a stage, or of those given. Errors as in `make_check`."""
    return tuple(frontier_of(each) for each in examine(stage, claims))


def frontier_of(claim: Examined) -> ClaimFrontier:
    """The frontier of one claim."""
    if claim.mismatch:
        return ClaimFrontier(claim.claim, None, (), f"the claim is wrong: {claim.mismatch}")
    if claim.off is not None:
        return ClaimFrontier(claim.claim, claim.error, (), f"the claim is wrong: {claim.off.words}")
    balance = claim.balanced.balance
    if balance is None:
        return ClaimFrontier(claim.claim, claim.error, (), f"no tacit conditions: {claim.balanced.why}")
    if balance.comparison.identity:
        return ClaimFrontier(claim.claim, claim.error, (), "nothing is left over: it has no frontier")
    solver = _Solver(claim, balance.comparison)
    limits = [solver.limit(tacit) for tacit in claim.tacit]
    limits.sort(key=lambda each: -abs(each.at_bias or 0.0))
    return ClaimFrontier(claim.claim, claim.error, tuple(limits))


def allowed_ratios(claim: Claim) -> tuple[Fraction, Fraction]:
    """The least and the greatest F/E that the claim's bound allows."""
    if claim.within_unit == "dB":
        up = Fraction(10 ** (claim.within / 20)).limit_denominator(10**12)
        return 1 / up, up
    within = Fraction(claim.within).limit_denominator(10**9)
    return 1 - within, 1 + within


class _Solver:
    """Solves the balance for one ratio at the two bounds of the error."""

    def __init__(self, claim: Examined, comparison: Comparison) -> None:
        self.claim, self.comparison = claim, comparison
        self.levels = comparison.levels(claim.values)
        low, high = allowed_ratios(claim.claim)
        self.bounds = [1 / ratio for ratio in (low, high) if ratio > 0]  # x at each

    def limit(self, tacit: Tacit) -> Limit:
        values = self.claim.values
        at_bias = tacit.value(values)
        known = Limit(
            shape_of(tacit.numerator, tacit.denominator, weights=values),
            shape_of(*tacit.shown(values), weights=values),
            at_bias if math.isfinite(at_bias) else None,
            None,
            None,
            None,
        )
        if not self.claim.balanced.whole:
            return replace(known, why=NOT_ALONE, why_alone=NOT_ALONE, why_formula=NOT_ALONE)
        others = [(t, t.value(values)) for t in self.claim.tacit if t is not tacit]
        direction = -1 if at_bias < 0 or (not at_bias > 0 and self._written_negative(tacit)) else 1
        alone = self._solved(tacit, direction, [])
        limit, why = None, OTHERS_EXCEED
        if self._others_within(others):
            limit = self._solved(tacit, direction, others)
            why = "" if limit is not None else NEVER
        exact = self._exactly(tacit, direction)
        return replace(
            known,
            limit=limit,
            alone=alone if exact is None else float(exact),
            formula=None if exact is None else turned_over((tacit.numerator, tacit.denominator), exact)[0],
            turned=None if exact is None else turned_over((tacit.numerator, tacit.denominator), exact)[1],
            least=None if exact is None else turned_over((tacit.numerator, tacit.denominator), exact)[2],
            why=why,
            why_alone="" if alone is not None else NEVER,
            why_formula=""
            if exact is not None
            else NEVER
            if alone is None
            else "it depends on the bias point",
        )

    @staticmethod
    def _written_negative(tacit: Tacit) -> bool:
        return all(c < 0 for c in tacit.numerator.coeffs())

    def _rest(self, x: float, others: Sequence[tuple[Tacit, float]]) -> float:
        """The balance at x without the ratio in question."""
        common = sum(level * x**k for k, level in self.levels.items())
        return common + sum(t.sign * value * _power_of(t, x) for t, value in others)

    def _others_within(self, others: Sequence[tuple[Tacit, float]]) -> bool:
        """Whether the others alone keep the error within its bound: then the balance changes sign between both."""
        if len(self.bounds) < 2:
            return True
        ends = [self._rest(float(x), others) for x in self.bounds]
        return ends[0] * ends[1] < 0

    def _solved(self, tacit: Tacit, direction: int, others: Sequence[tuple[Tacit, float]]) -> float | None:
        found = []
        for x in map(float, self.bounds):
            ratio = -self._rest(x, others) / (tacit.sign * _power_of(tacit, x))
            if ratio * direction > _NOTHING and math.isfinite(ratio):
                found.append(ratio)
        return min(found, key=abs, default=None)

    def _exactly(self, tacit: Tacit, direction: int) -> Fraction | None:
        """`alone` as an exact number, where what is common stands at each power in a fixed share."""
        levels = self._fixed_levels()
        if levels is None:
            return None
        found = []
        for x in self.bounds:
            share = sum(Fraction(part).limit_denominator(10**6) * x**k for k, part in tacit.powers.items())
            rest = sum((level * x**k for k, level in levels.items()), start=Fraction(0))
            ratio = -rest / (tacit.sign * share) if share else Fraction(0)
            if ratio * direction > 0:
                found.append(ratio)
        return min(found, key=abs, default=None)

    def _fixed_levels(self) -> dict[int, Fraction] | None:
        levels: dict[int, Fraction] = {}
        for sign, side in ((1, self.comparison.matched_above), (-1, self.comparison.matched_below)):
            for k, part in side.items():
                share = _number(part, self.comparison.common)
                if share is None:
                    return None
                levels[k] = levels.get(k, Fraction(0)) + sign * share
        return levels


def _power_of(tacit: Tacit, x: float) -> float:
    return sum(share * x**k for k, share in tacit.powers.items())


def _number(part: fmpz_mpoly, whole: fmpz_mpoly) -> Fraction | None:
    """part/whole where that is a number."""
    above, below = lowest_terms(part, whole)
    if held(above, below):
        return None
    return Fraction(int(above.coeffs()[0]), int(below.coeffs()[0]))


def turned_over(ratio: PolyRatio, limit: Fraction) -> tuple[str, Shape, float]:
    """The condition that a ratio stay below a limit, said of it turned over: ("gm2/gds2 >= 19", gm2/gds2, 19)."""
    above, below = ratio
    number = Fraction(int(above.coeffs()[0]))
    shared = Fraction(1)
    if len(below) == 1:
        shared = Fraction(int(below.coeffs()[0]))
        below = below / int(below.coeffs()[0])
    least = number / shared / limit  # of the ratio turned over without its number
    shape = shape_of(below, above / int(above.coeffs()[0]))
    return f"{shape.text()} >= {_written(least)}", shape, float(least)


def _written(number: Fraction) -> str:
    if number.denominator == 1:
        return str(number.numerator)
    return f"{float(number):.4g}"


def balance_error(claim: Examined, values: Mapping[str, float]) -> float:
    """The error of a claim at a bias point, from its balance alone: the root x nearest to 1, less 1 over it."""
    balance = claim.plain.balance
    assert balance is not None
    at = {**values, PI: math.pi}
    x, step = 1.0, 1e-6
    for _ in range(60):
        slope = (balance.value(x + step, at) - balance.value(x - step, at)) / (2 * step)
        change = balance.value(x, at) / slope
        x -= change
        if abs(change) < 1e-14:
            break
    return 1 / x - 1
