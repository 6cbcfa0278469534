"""The frontier of a claim (room: judge): for each tacit condition the ratio at which the error reaches its bound.

With x = E/F = 1/(1 + e) the balance of a claim is Σ c_k·x^k + Σ ±r_i·x^(k_i) = 0, c_k what is common at each power
of x and r_i the tacit ratios. At a bound of the error x is known, and the balance is linear in each ratio. Of several
roots the one is followed that the claim is paired with, since another may reach the bound before.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from symamp.circuit.stage import Stage
from symamp.exact.formulas import PolyRatio
from symamp.exact.polys import held
from symamp.exact.shape import Shape, shape_of
from symamp.judge.balance import PI, Comparison, Tacit
from symamp.judge.check import examine
from symamp.judge.claim import Claim
from symamp.judge.examined import Examined

OTHERS_EXCEED = "the other conditions alone make the error larger than it is allowed"
_NOTHING = 1e-12  # a ratio below this is the rounding of the balance
NEVER = "the error stays within its bound however large this ratio is"
_STEPS = 40  # points at which a root is followed
_LEAST = 1e-9  # of a ratio, where it is followed as far as it matters
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
    limits = _Solver(claim, balance.comparison).limits()
    if not limits:
        return ClaimFrontier(claim.claim, claim.error, (), "its error is the same whatever the values")
    return ClaimFrontier(claim.claim, claim.error, tuple(limits))


def allowed_ratios(claim: Claim) -> tuple[Fraction, Fraction]:
    """The least and the greatest F/E that the claim's bound allows."""
    if claim.within_unit == "dB":
        up = Fraction(10 ** (claim.within / 20)).limit_denominator(10**12)
        return 1 / up, up
    within = Fraction(claim.within).limit_denominator(10**9)
    return 1 - within, 1 + within


class _Solver:
    """Solves the balance for one ratio at the two bounds of the error, with y = F/E: Σ c_k·y^(n − k) = 0."""

    def __init__(self, claim: Examined, comparison: Comparison) -> None:
        self.claim, self.comparison = claim, comparison
        self.levels = comparison.levels(claim.values)
        self.numbers = [(t, t.value(claim.values)) for t in comparison.numbers]
        self.bounds = allowed_ratios(claim.claim)
        powers = [k for each in comparison.tacit for k in each.powers]
        self.degree = max([*self.levels, *powers])
        self.tacit = [(t, t.value(claim.values)) for t in claim.tacit]
        self.alone = self._sum(self.numbers)
        for k, level in self.levels.items():
            self.alone[k] += level
        self.parts = np.array([self._sum([each]) for each in self.tacit]).reshape(-1, self.degree + 1)

    def limits(self) -> list[Limit]:
        """The limits of all conditions, the largest at the bias point first."""
        found = [self._limit(n) for n in range(len(self.tacit))]
        return sorted(found, key=lambda each: -abs(each.at_bias or 0.0))

    def _limit(self, number: int) -> Limit:
        values = self.claim.values
        tacit, at_bias = self.tacit[number]
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
        direction = -1 if at_bias < 0 or (not at_bias > 0 and self._written_negative(tacit)) else 1
        alone, why_alone = self._solved(tacit, direction, self.alone, 1.0)
        rest = self.alone + np.delete(self.parts, number, axis=0).sum(axis=0)
        limit, why = self._solved(tacit, direction, rest, self._without(tacit, rest, at_bias))
        exact = None if alone is None else self._exactly(tacit, direction, alone)
        known = replace(known, limit=limit, alone=alone, why=why, why_alone=why_alone)
        if exact is None:
            return replace(known, why_formula=why_alone or self._why_no_formula())
        formula, turned, least = turned_over((tacit.numerator, tacit.denominator), exact)
        return replace(known, alone=float(exact), formula=formula, turned=turned, least=least)

    def _why_no_formula(self) -> str:
        if self.comparison.fixed_levels() is not None:
            return "the root is complex where its error reaches its bound"
        return "it depends on the bias point"

    @staticmethod
    def _written_negative(tacit: Tacit) -> bool:
        return all(c < 0 for c in tacit.numerator.coeffs())

    def _sum(self, ratios: Sequence[tuple[Tacit, float]]) -> np.ndarray:
        """What ratios add to the balance: coefficients of y, the highest power first."""
        found = np.zeros(self.degree + 1)
        for each, value in ratios:
            for k, share in each.powers.items():
                found[k] += value * each.sign * share
        return found

    def _step(self, tacit: Tacit) -> np.ndarray:
        """What a ratio of 1 adds to it."""
        return self._sum([(tacit, 1.0)])

    def _without(self, tacit: Tacit, rest: np.ndarray, at_bias: float) -> complex:
        """y with the others at the bias point and this ratio 0: from y at the bias point, the ratio taken away."""
        if self.degree == 1 or not (math.isfinite(at_bias) and np.isfinite(rest).all()):
            return 1.0
        error = None if self.claim.balanced.taken else self.claim.error
        path = at_bias * np.linspace(1, 0, _STEPS)
        return complex(_followed(rest, self._step(tacit), path, 1.0 if error is None else 1 + error)[-1])

    def _solved(self, tacit: Tacit, direction: int, rest: np.ndarray, y: complex) -> tuple[float | None, str]:
        """The least ratio at which y is at a bound, from the y that it has at a ratio of 0; or why there is none."""
        if not np.isfinite(rest).all():
            return None, "a symbol in a denominator is 0"
        step = self._step(tacit)
        start = complex(_followed(rest, step, np.zeros(1), y)[0])
        if not self._allowed(start, -1e-9):
            return None, OTHERS_EXCEED
        with np.errstate(all="ignore"):
            ends = [-np.polyval(rest, y) / np.polyval(step, y) for y in map(float, self.bounds)]
        found = sorted(float(direction * r) for r in ends if np.isfinite(r) and direction * r > _NOTHING)
        if self.degree == 1:
            return (direction * found[0], "") if found else (None, NEVER)
        reached = self._left(rest, step, direction, start, found)
        return (None, NEVER) if reached is None else (direction * reached, "")

    def _allowed(self, y: complex, more: float = 1e-9) -> bool:
        """Whether y is within its bounds; of a complex one the modulus of its error counts."""
        if abs(y.imag) > 1e-9 * abs(y):
            return abs(y - 1) <= self.claim.claim.within + more
        low, high = map(float, self.bounds)
        return low - more <= y.real <= high + more

    def _left(
        self, rest: np.ndarray, step: np.ndarray, direction: int, start: complex, ends: Sequence[float]
    ) -> float | None:
        """The size of the ratio at which the root that is followed from `start` leaves its bounds.

        At `ends` some root is at a bound: the first of them is it unless that is another root, or the root that
        is followed becomes complex before.
        """
        for end in ends[:1]:
            path = np.concatenate([[0.0], end * np.geomspace(1e-3, 1, _STEPS)])
            y = _followed(rest, step, direction * path, start)
            at = abs(y[-1] - 1)
            if all(map(self._allowed, y[:-1])) and abs(at - self.claim.claim.within) < 1e-6 * (1 + at):
                return end
        path = np.concatenate([[0.0], np.geomspace(_LEAST, 1 / _LEAST, 10 * _STEPS)])
        y = _followed(rest, step, direction * path, start)
        outside = next((n for n, each in enumerate(y) if not self._allowed(each)), None)
        if outside is None:
            return None
        if outside == 0:
            return float(path[1])
        low, high, inside = path[outside - 1], path[outside], y[outside - 1]
        for _ in range(60):
            middle = (low + high) / 2
            there = _followed(rest, step, np.array([direction * middle]), inside)[0]
            if self._allowed(there, 0.0):
                low, inside = middle, there
            else:
                high = middle
        return float(low)

    def _exactly(self, tacit: Tacit, direction: int, alone: float) -> Fraction | None:
        """`alone` as an exact number, where what is common stands at each power in a fixed share."""
        levels = self.comparison.fixed_levels()
        if levels is None or any(held(t.numerator, t.denominator) for t, _ in self.numbers):
            return None
        powers = dict(levels)
        for each, _ in self.numbers:
            value = Fraction(int(each.numerator.coeffs()[0]), int(each.denominator.coeffs()[0]))
            for k, part in each.powers.items():
                powers[k] = powers.get(k, Fraction(0)) + each.sign * value * _exact_share(part)
        for y in self.bounds:
            share = sum(_exact_share(part) * y ** (self.degree - k) for k, part in tacit.powers.items())
            rest = sum((level * y ** (self.degree - k) for k, level in powers.items()), start=Fraction(0))
            ratio = -rest / (tacit.sign * share) if share else Fraction(0)
            if ratio * direction > 0 and math.isclose(ratio, alone, rel_tol=1e-6):
                return ratio
        return None


def _followed(rest: np.ndarray, step: np.ndarray, path: np.ndarray, y: complex) -> np.ndarray:
    """The root of rest + r·step along the r of a path, each time the one nearest to the one before."""
    found = []
    for roots in _roots(rest + path[:, None] * step):
        y = complex(roots[np.argmin(np.abs(roots - y))]) if len(roots) else complex(math.inf)
        found.append(y)
    return np.array(found)


def _roots(polynomials: np.ndarray) -> list[np.ndarray]:
    """The roots of each, as eigenvalues of companion matrices."""
    first = polynomials[:, 0]
    if not first.all():
        return [np.roots(each) for each in polynomials]
    if polynomials.shape[1] == 2:
        return list(-polynomials[:, 1:] / first[:, None])
    companion = np.zeros((len(polynomials), polynomials.shape[1] - 1, polynomials.shape[1] - 1))
    companion[:, 0] = -polynomials[:, 1:] / first[:, None]
    below = np.arange(1, polynomials.shape[1] - 1)
    companion[:, below, below - 1] = 1
    return list(np.linalg.eigvals(companion))


def _exact_share(part: float) -> Fraction:
    return Fraction(part).limit_denominator(10**6)


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
