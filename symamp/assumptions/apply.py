"""The engine: a set of assumptions put to an exact response, in steps, as a set."""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

from flint import fmpz_mpoly

from symamp.assumptions.dominance import Dominance, Fall, idle, pool
from symamp.assumptions.merge import Pooled, pooled
from symamp.assumptions.nested import NestedEngine
from symamp.assumptions.record import Assumption, Miller, Pair
from symamp.assumptions.rewrite import symbol_value, tidy
from symamp.assumptions.roots import step_on_roots
from symamp.assumptions.written import WrittenEngine
from symamp.errors import StageError
from symamp.exact.forms import Expanded, Nested, expanded_of
from symamp.exact.polys import from_coefficients, lowest_terms
from symamp.exact.response import Response
from symamp.exact.shape import polynomial_text

_CANCELLING = 10.0  # Σ|term|/|Σ term| above which kept terms are said to nearly cancel


@dataclass(frozen=True)
class Dropped:
    """A dropped term of a coefficient ("denominator s^1"), and the term of it to which it fell."""

    coefficient: str
    polynomials: tuple[fmpz_mpoly, fmpz_mpoly]
    ratio: float | None
    size: float | None

    @cached_property
    def term(self) -> str:
        """The dropped term."""
        return polynomial_text(self.polynomials[0])

    @cached_property
    def against(self) -> str:
        """The term that outweighs it; `ratio` is their ratio at the bias point, `size` the dropped one's value."""
        return polynomial_text(self.polynomials[1])


@dataclass(frozen=True)
class Approximation:
    """A response under a set of assumptions; `response` is None where nothing is left, and `why` says so."""

    assumptions: tuple[str, ...]
    response: Response | None
    why: str = ""
    dropped: tuple[Dropped, ...] = ()
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()


@dataclass(frozen=True)
class _Dominated:
    """A form after step 4."""

    form: Expanded
    dropped: tuple[Dropped, ...] = ()
    warnings: tuple[str, ...] = ()


class Approximator:
    """Puts sets of assumptions to one exact response; what sets share is worked out once."""

    def __init__(self, exact: Response) -> None:
        self.exact = exact
        self._engine = WrittenEngine(exact) if exact.expanded else NestedEngine(exact)
        self._cones: dict[Hashable, Dominance | None] = {}
        self._dominated: dict[Hashable, _Dominated] = {}
        self._rooted: dict[Hashable, tuple[Response | None, str, list[str]]] = {}
        self._done: dict[frozenset[str], Approximation] = {}

    def under(self, assumptions: Iterable[Assumption]) -> Approximation:
        """The response under these assumptions; those that are made for other responses are passed over."""
        made = [a for a in assumptions if a.applies(self.exact.name)]
        names = tuple(a.name for a in made)
        key = frozenset(names)
        if key not in self._done:
            try:
                self._done[key] = self._under(pooled(self.exact.stage, made))
            except StageError as error:
                # Sets that a stage file cannot hold as a whole, such as a part of one whose whole agrees.
                self._done[key] = Approximation((), None, error.problem)
        return replace(self._done[key], assumptions=names)

    def _under(self, ask: Pooled) -> Approximation:
        remarks = [*ask.remarks, *_idle_words(ask.pairs)]
        bridges = self._live_bridges(ask, remarks)
        outcome = self._engine.under(ask, bridges)
        remarks += outcome.remarks
        if outcome.form is None:
            return Approximation((), None, outcome.why, remarks=_once(remarks))
        cone_key = tuple(sorted({tuple(sorted(pair.difference.items())) for pair in ask.pairs}))
        if cone_key not in self._cones:
            self._cones[cone_key] = pool(ask.pairs)
        dominance = self._cones[cone_key]
        key = (id(outcome.form), cone_key)
        if dominance is not None and not isinstance(outcome.form, Expanded):
            return Approximation((), None, self._not_written(), remarks=_once(remarks))
        if key not in self._dominated and isinstance(outcome.form, Expanded):
            self._dominated[key] = self._dominate(outcome.form, dominance)
        found = self._dominated.get(key)
        response, why, more = self._on_roots(ask, key, outcome.form if found is None else found.form)
        remarks += more
        if found is None:
            return Approximation((), response, why, remarks=_once(remarks))
        return Approximation((), response, why, found.dropped, found.warnings, _once(remarks))

    # Steps 1 to 3

    def _live_bridges(self, ask: Pooled, remarks: list[str]) -> tuple[Miller, ...]:
        """The bridges that the response has, and that are still there after step 2."""
        live = []
        for bridge in ask.miller:
            if not self._engine.depends_on(bridge.symbol):
                continue
            if symbol_value(self.exact.stage, bridge.symbol, ask)[0]:
                remarks.append(f"{bridge.symbol} is taken to its limit, so there is no bridge to split")
            else:
                live.append(bridge)
        return tuple(live)

    def _not_written(self) -> str:
        return (
            f"dominance compares written-out terms, and this response stands for {self.exact.terms:,} product "
            "terms that are not written out"
        )

    # Step 4

    def _dominate(self, form: Expanded, dominance: Dominance | None) -> _Dominated:
        if dominance is None:
            return _Dominated(form)
        dropped: list[Dropped] = []
        warnings: list[str] = []
        kept: list[list[fmpz_mpoly]] = []
        for where, coefficients in (("numerator", form.numerator), ("denominator", form.denominator)):
            row = []
            for power, coefficient in enumerate(coefficients):
                stays, falls = dominance.judge(coefficient)
                name = f"{where} s^{power}"
                records = [self._record(name, coefficient, fall) for fall in falls]
                warnings += self._nearly_cancelling(name, stays, records)
                dropped += records
                row.append(stays)
            kept.append(row)
        if not dropped:
            return _Dominated(form)
        ratio = lowest_terms(from_coefficients(kept[0]), from_coefficients(kept[1]))
        return _Dominated(expanded_of(*tidy(self.exact.stage, ratio)), tuple(dropped), tuple(warnings))

    def _record(self, name: str, coefficient: fmpz_mpoly, fall: Fall) -> Dropped:
        context = coefficient.context()
        term = context.from_dict({fall.term: fall.factor})
        against = context.from_dict({fall.against: fall.against_factor})
        above, below = self._number(term), self._number(against)
        ratio = above / below if above is not None and below else None
        return Dropped(name, (term, against), ratio, above)

    def _number(self, term: fmpz_mpoly) -> float | None:
        """A single term's value at the bias point."""
        total = 1.0
        names = term.context().names()
        for exponents, coefficient in term.terms():
            total = float(coefficient)
            for name, exponent in zip(names, exponents, strict=True):
                if exponent:
                    if name not in self.exact.bias_values:
                        return None
                    total *= self.exact.bias_values[name] ** int(exponent)
        return total

    def _nearly_cancelling(self, name: str, stays: fmpz_mpoly, dropped: Sequence[Dropped]) -> list[str]:
        if not dropped or len({c > 0 for c in stays.coeffs()}) < 2:
            return []
        context = stays.context()
        values = [self._number(context.from_dict({e: c})) for e, c in stays.terms()]
        known = [v for v in values if v is not None]
        if len(known) < len(values) or sum(map(abs, known)) <= _CANCELLING * abs(sum(known)):
            return []
        largest = max(dropped, key=lambda d: abs(d.size or 0.0))
        return [
            f"{self.exact.name}: kept terms of the {name} nearly cancel at the bias point, so the dropped term "
            f"{largest.term} may matter"
        ]

    # Step 5

    def _on_roots(
        self, ask: Pooled, key: Hashable, form: Expanded | Nested
    ) -> tuple[Response | None, str, list[str]]:
        whole = (key, ask.dominant_pole, ask.poles_far_apart, ask.band)
        if whole not in self._rooted:
            same = form is self.exact.form
            response = self.exact if same else replace(self.exact, form=form)
            self._rooted[whole] = step_on_roots(response, ask)
        return self._rooted[whole]


def _idle_words(pairs: Sequence[Pair]) -> list[str]:
    return [f"{name!r} compares something with itself, and that has no effect" for name in idle(pairs)]


def _once(remarks: Iterable[str]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(remarks))
