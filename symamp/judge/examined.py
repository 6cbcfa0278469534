"""One claim put beside the exact response (room: judge): all about it that needs no span."""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import cached_property

import numpy as np

from symamp.assumptions.catalogue import Entry, catalogue
from symamp.assumptions.read import Assumption
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, is_root
from symamp.exact.derive import dc_alone, derive
from symamp.exact.formulas import Formula, PolyRatio, formula_of, rational_of
from symamp.exact.missing_figures import remarks_beside, why_missing
from symamp.exact.polys import lowest_terms, times_two_pi
from symamp.exact.response import Response
from symamp.formula import Number
from symamp.judge.balance import PI, Tacit
from symamp.judge.claim import Claim
from symamp.judge.claim_errors import ClaimTable, claimed_values, paired_root
from symamp.judge.claimed import (
    NotRational,
    claimed_dimension,
    claimed_ratio,
    claimed_symbols,
    claims_ring,
    wanted_dimension,
)
from symamp.judge.conditions import Balanced, balanced, symbols_of
from symamp.judge.error_formula import ErrorFormula, error_of_ratios
from symamp.judge.errors_at import error_of
from symamp.judge.off import Off, cycles_words, likely_off, unit_words, what_is_off
from symamp.judge.ways import Ways

_RATIONAL = ("dc", "hf", "a", "b")
CONSTANT_PART = "a part of its error is the same whatever the values, and no condition makes it small"


class Known:
    """What the claims of one stage share: its responses, its assumptions, the catalogue."""

    def __init__(self, stage: Stage, assumptions: Sequence[Assumption]) -> None:
        self.stage = stage
        self.assumptions = tuple(assumptions)
        self._responses: dict[str, Response] = {}
        self._at_dc: dict[str, Response | None] = {}
        self._entries: dict[str, tuple[Entry, ...]] = {}
        self._ways: dict[str, Ways] = {}

    def response(self, name: str) -> Response:
        if name not in self._responses:
            exact = derive(self.stage, self.stage.asked[name])
            if exact.missing:
                raise StageError(
                    f"a verdict needs a bias value for {', '.join(exact.missing)}",
                    f'give it in [bias], such as {exact.missing[0]} = "…"',
                    key="bias",
                    file=self.stage.file,
                )
            self._responses[name] = exact
        return self._responses[name]

    def dc_alone(self, name: str) -> Response | None:
        """The dc value of a response that is not written out, where that is."""
        if name not in self._at_dc:
            self._at_dc[name] = dc_alone(self.response(name))
        return self._at_dc[name]

    def entries(self, name: str) -> tuple[Entry, ...]:
        if name not in self._entries:
            self._entries[name] = catalogue(self.stage, self.response(name))
        return self._entries[name]

    def ways(self, name: str) -> Ways:
        """The search for assumptions behind formulas about a response."""
        if name not in self._ways:
            own = [a for a in self.assumptions if a.applies(name)]
            self._ways[name] = Ways(self.response(name), own, self.entries(name))
        return self._ways[name]


class Examined:
    """One claim put beside the exact response: all that needs no span."""

    def __init__(self, known: Known, claim: Claim, with_ways: bool = True) -> None:
        self.known, self.claim, self.with_ways = known, claim, with_ways
        self.exact = known.response(claim.response)
        self.values = {**self.exact.bias_values, PI: math.pi}
        lacking = [
            n for n in sorted(claimed_symbols(known.stage, claim.node)) if n not in self.exact.bias_values
        ]
        if lacking:
            raise StageError(
                f"the claim needs a bias value for {', '.join(lacking)}",
                f'give it in [bias], such as {lacking[0]} = "…"',
                key="bias",
                file=known.stage.file,
            )

    @property
    def quantity(self) -> Quantity:
        return self.claim.quantity

    @cached_property
    def unit(self) -> str:
        return self.exact.unit_of(self.quantity)

    @cached_property
    def mismatch(self) -> str:
        """The words for a formula of another unit than the quantity's, or ""."""
        node = self.claim.node
        if isinstance(node, Number) and not node.value and not node.unit:
            return ""  # nothing is nothing in every unit
        claimed = claimed_dimension(self.known.stage, node)
        wanted = wanted_dimension(self.quantity, self.unit, self.exact.unit, self.claim.decibels)
        own = "" if in_decibels_or_degrees(self.quantity) else self.unit
        if claimed == wanted:
            return cycles_words(node, own)
        return unit_words(claimed, wanted, own)

    @cached_property
    def claimed(self) -> float:
        return float(claimed_values(self.known.stage, self.claim, self.exact.bias_values, 1)[0])

    @cached_property
    def root(self) -> int | None:
        return paired_root(self.exact, self.claim, self.claimed)

    @cached_property
    def balanced(self) -> Balanced:
        return self._compared(balanced(self.exact, self.claim, self.root, self.known.assumptions))

    @cached_property
    def plain(self) -> Balanced:
        """The balance against the exact expression itself."""
        if not self.balanced.taken:
            return self.balanced
        return self._compared(balanced(self.exact, self.claim, self.root))

    def _compared(self, found: Balanced) -> Balanced:
        """The balance, unless it is of a stand-in for the quantity, and the claim is right and no limit of that."""
        if found.balance is None or found.whole or not self._within:
            return found
        comparison = found.balance.comparison
        if comparison.common.is_zero() or comparison.numbers:
            why = f"it is near the {self.quantity.name} as it is, and no limit of a pole"
            return Balanced(None, why, found.taken)
        return found

    @cached_property
    def tacit(self) -> tuple[Tacit, ...]:
        """The tacit ratios that are no pure numbers."""
        found = self.balanced.balance
        return () if found is None else tuple(t for t in found.comparison.tacit if not t.is_number)

    @cached_property
    def off(self) -> Off | None:
        """What is off about a claim that is no limit of the exact expression; None of one that is, or may be."""
        balance = self.balanced.balance
        if balance is None:
            return None
        comparison = balance.comparison
        if comparison.common.is_zero() or comparison.numbers:
            # Of a root of higher degree the terms tell the conditions only; its error decides.
            near = self._within and not balance.of_ratios and not comparison.common.is_zero()
            return None if near else what_is_off(self.known.stage, balance, self.values)
        if self._within or comparison.is_limit:
            return None
        return likely_off(self.known.stage, balance, self.values)

    @cached_property
    def slope(self) -> float:
        """The balance's derivative by x at the bias point (see `Comparison.slope`); nan where there is none."""
        balance = self.balanced.balance
        if balance is None or balance.comparison.common.is_zero():
            return math.nan
        return balance.comparison.slope(self.values)

    @cached_property
    def identity(self) -> bool:
        """Whether the claim is the exact expression."""
        found = self.plain
        return found.balance is not None and found.whole and found.balance.comparison.identity

    @cached_property
    def table(self) -> ClaimTable:
        ratios: list[PolyRatio] = [(t.numerator, t.denominator) for t in self.tacit]
        ratios += [taken.ratio for taken in self.balanced.taken]
        return ClaimTable(self.exact, self.claim, self.root, ratios)

    @cached_property
    def exact_value(self) -> float | complex | None:
        table = ClaimTable(self.exact, self.claim, self.root)
        found = table.exact_values(self.exact.bias_figures)[0]
        if not np.isfinite(found):
            return None
        if np.iscomplexobj(found) and found.imag:
            return complex(found)
        return float(found.real)

    @cached_property
    def error(self) -> float | complex | None:
        """At the bias point; None where the exact value is 0 or does not exist."""
        return 0.0 if self._difference is not None and self.identity else self._difference

    @property
    def _within(self) -> bool:
        """Whether the error at the bias point is what it may be."""
        return self._difference is not None and abs(self._difference) <= self.claim.within

    @cached_property
    def _difference(self) -> float | complex | None:
        """The error in numbers."""
        if self.exact_value is None or not math.isfinite(self.claimed):
            return None
        found = error_of(self.quantity, np.array([self.claimed]), np.array([self.exact_value]))[0]
        if not np.isfinite(found):
            return None
        return complex(found) if np.iscomplexobj(found) and found.imag else float(found.real)

    @cached_property
    def error_formula(self) -> ErrorFormula | None:
        """F/E − 1 in lowest terms, where both are rational."""
        balance = self.plain.balance
        if balance is None or not self.plain.whole or in_decibels_or_degrees(self.quantity):
            return None
        if not balance.of_ratios:
            return None
        one = balance.context.constant(1)
        return error_of_ratios(self.exact, (balance.above[0], one), (balance.below[1], one))

    @cached_property
    def symbols(self) -> frozenset[str]:
        """The symbols that the error depends on; empty where the balance does not say."""
        balance = self.plain.balance
        return frozenset(symbols_of(balance)) if balance is not None and self.plain.whole else frozenset()

    @cached_property
    def error_ratio(self) -> PolyRatio | None:
        """The error as a ratio of polynomials, where both the claim and the exact quantity are rational."""
        balance = self.plain.balance
        if balance is None or not self.plain.whole or self.absolute:
            return None
        if not balance.of_ratios:
            return None
        above, below = balance.above[0], balance.below[1]
        return lowest_terms(below - above, above)

    @cached_property
    def exact_ratio(self) -> PolyRatio | None:
        """The exact quantity without its face as a ratio, where it is rational; of a large response its dc value."""
        if self.quantity.face not in (None, "magnitude", "re") or self.quantity.name not in _RATIONAL:
            return None
        exact = self.known.dc_alone(self.claim.response) if self.quantity.name == "dc" else None
        return rational_of(exact or self.exact, Quantity(self.quantity.name, self.quantity.index))

    @cached_property
    def frequency(self) -> PolyRatio | None:
        """The formula of a frequency in Hz times 2π, where it is rational."""
        if self.unit != "Hz" or is_root(self.quantity):
            return None
        stage = self.known.stage
        context = claims_ring(stage, claimed_symbols(stage, self.claim.node))
        try:
            return times_two_pi(claimed_ratio(stage, self.claim.node, context))
        except NotRational:
            return None

    @property
    def why_missing(self) -> str:
        """Why there is no error at the bias point, or ""."""
        if self.exact_value is None:
            why = why_missing(self.exact.bias_figures, self.quantity)
            return f"the exact {self.quantity.text} has no value" + (f": {why}" if why else "")
        if not math.isfinite(self.claimed):
            return "the formula has no value at the bias point"
        if self.exact_value == 0:
            return "the exact value is 0, so there is no relative error"
        return ""

    @property
    def absolute(self) -> bool:
        """Whether its error is in dB or degrees."""
        return in_decibels_or_degrees(self.quantity)

    @property
    def other_root(self) -> str:
        """The root that the claim is paired with, where that is another than the one claimed."""
        if self.root is None or self.root == self.quantity.index:
            return ""
        return f"{self.quantity.name}{self.root}"

    @property
    def formula_exact(self) -> Formula | None:
        quantity = self.quantity
        if self.root is not None and is_root(quantity):
            quantity = Quantity(quantity.name, self.root, face=quantity.face)
        return formula_of(self.exact, quantity)

    @cached_property
    def target(self) -> tuple[Quantity, PolyRatio] | None:
        """The quantity without its face, and what the claim says that it is, where both are rational."""
        stage, quantity = self.known.stage, self.quantity
        if not is_root(quantity) and quantity.name not in _RATIONAL:
            return None
        context = claims_ring(stage, claimed_symbols(stage, self.claim.node))
        try:
            above, below = claimed_ratio(stage, self.claim.node, context)
        except NotRational:
            return None
        if quantity.face == "hz":
            above, below = times_two_pi((above, below))
        if quantity.face in ("hz", "magnitude", "db") and (self.negative() != (self.claimed < 0)):
            above = -above
        if is_root(quantity):
            return Quantity(quantity.name, self.root), (above, below)
        return Quantity(quantity.name, quantity.index), (above, below)

    def negative(self) -> bool:
        """Whether the quantity without its face is negative at the bias point."""
        if is_root(self.quantity):
            roots = self.exact.poles() if self.quantity.name == "p" else self.exact.zeros()
            return self.root is not None and roots[self.root - 1].real < 0
        whole = Quantity(self.quantity.name, self.quantity.index)
        return bool(self.exact.bias_figures.value(whole)[0].real < 0)

    @property
    def remarks(self) -> tuple[str, ...]:
        found = list(self.balanced.remarks)
        if self.balanced.why and self.balanced.balance is None:
            found.append(f"no tacit conditions: {self.balanced.why}")
        balance = self.balanced.balance
        if balance is not None and balance.comparison.numbers and self.off is None:
            found.append(CONSTANT_PART)
        if self.exact_value is not None:
            found += remarks_beside(self.exact.bias_figures, self.quantity)
        return tuple(dict.fromkeys(found))
