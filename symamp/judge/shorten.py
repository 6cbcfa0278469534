"""The shortest formula of a quantity whose error stays within a bound all over the span (room: judge)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

from symamp.assumptions.read import Assumption, read_assumptions
from symamp.circuit.stage import Stage
from symamp.errors import InputError, StageError
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, parse_quantity
from symamp.exact.formulas import Formula
from symamp.exact.shape import Shape, shape_of
from symamp.formula import parse
from symamp.judge.balance import PI
from symamp.judge.check import judged
from symamp.judge.claim import Claim
from symamp.judge.claim_span import ClaimSpan, claims_over_span
from symamp.judge.errors_at import Progress
from symamp.judge.examined import Examined, Known
from symamp.judge.ledger import POINTS, SEED, Account, default_quantities, make_ledger
from symamp.judge.proving import Prover
from symamp.judge.sample import Sample, sample_of
from symamp.judge.shorten_nested import short_ratios
from symamp.judge.shortening import NO_FORMULA, Search, Tried
from symamp.judge.verdict import HOLDS, Judged

_TRIES = 24  # formulas that are judged over the whole span before the search gives up
_LONGEST = 18_000  # characters of a formula that is read back


@dataclass(frozen=True)
class TradeOff:
    """A formula on the way from the exact one to the shortest: its terms, and its worst error over the sample."""

    terms: int
    worst: float
    shape: Shape
    assumptions: tuple[str, ...]
    dropped: int


@dataclass(frozen=True)
class Shortest:
    """The shortest formula of one quantity; `judged` is its verdict as a claim, None where none was found.

    `assumptions` are those it rests on, `own` how many of them stand in the stage file (these come first), and
    `dropped` counts single terms left out after them. `tables` are the stage file's tables of the others. `changes` is
    what each of them changed when it was made (nan: not known), of a response that is not written out.
    """

    name: str
    terms: int | None
    exact_terms: int
    shape: Shape | None
    judged: Judged | None
    assumptions: tuple[str, ...] = ()
    own: int = 0
    tables: tuple[str, ...] = ()
    dropped: int = 0
    tradeoff: tuple[TradeOff, ...] = ()
    account: Account | None = None
    changes: tuple[float, ...] = ()
    formula_exact: Formula | None = None
    why: str = ""


@dataclass(frozen=True)
class Shortening:
    """The shortest formulas of all quantities asked for."""

    stage: Stage
    within: float
    found: tuple[Shortest, ...]
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    points: int = 0
    seed: int | None = None
    method: str = ""


def make_shortest(
    stage: Stage,
    within: float,
    *,
    quantities: Sequence[str] = (),
    points: int = POINTS,
    seed: int = SEED,
    progress: Progress | None = None,
) -> Shortening:
    """The shortest formulas within a relative error, of the quantities named ("gain.dc") or of the usual ones.

    Raises StageError for an unknown quantity, one in dB or degrees, and a missing bias value.
    """
    known = Known(stage, read_assumptions(stage))
    found, last = [], None
    for response, quantity in _asked(known, quantities):
        job = _Job(known, response, quantity, within, points, seed, progress)
        found.append(job.shortest())
        last = job.span or last
    return Shortening(
        stage,
        within,
        tuple(found),
        tuple(stage.warnings),
        tuple(stage.remarks),
        last.points if last else 0,
        last.seed if last else None,
        last.method if last else "",
    )


def _asked(known: Known, names: Sequence[str]) -> list[tuple[str, Quantity]]:
    if not names:
        return [
            (name, quantity)
            for name in known.stage.asked
            for quantity in default_quantities(known.response(name))
            if quantity.name != "unity_gain_frequency"
        ]
    found = []
    for text in names:
        response, dot, rest = text.partition(".")
        if response not in known.stage.asked or not dot:
            listed = ", ".join(known.stage.asked)
            raise StageError(
                f"{text!r} names no quantity of a response",
                f"write RESPONSE.QUANTITY, such as {next(iter(known.stage.asked))}.dc; responses are {listed}",
                key="--quantity",
            )
        try:
            quantity = parse_quantity(rest)
        except InputError as error:
            raise error.at(key="--quantity") from None
        if in_decibels_or_degrees(quantity) or quantity.face is not None:
            raise StageError(
                f"{text} is a face of a quantity, and a formula is shortened as it is",
                f"ask for {response}.{replace(quantity, face=None).text}",
                key="--quantity",
            )
        found.append((response, quantity))
    return list(dict.fromkeys(found))


class _Job:
    """One quantity."""

    def __init__(
        self,
        known: Known,
        response: str,
        quantity: Quantity,
        within: float,
        points: int,
        seed: int,
        progress: Progress | None,
    ) -> None:
        self.known, self.response, self.quantity, self.within = known, response, quantity, within
        self.points, self.seed, self.progress = points, seed, progress
        self.exact = known.response(response)
        self.span: ClaimSpan | None = None
        self.tables: dict[str, str] = {}

    @property
    def name(self) -> str:
        return f"{self.response}.{self.quantity.text}"

    def shortest(self) -> Shortest:
        """The search, and the first of its formulas, from the shortest on, that holds all over the span."""
        nothing = Shortest(self.name, None, self.exact.terms, None, None)
        if self.exact.quantity(self.quantity.text).value is None:
            return replace(nothing, why=self.exact.quantity(self.quantity.text).why or "it has no value")
        if not self.exact.expanded:
            return self._nested(nothing)
        search = Search(
            self.exact,
            self.quantity,
            self._candidates(),
            sample_of(self.known.stage),
            self.within,
            self.progress,
        )
        tried = search.run()
        exact_terms = search.of(frozenset()).terms
        exact_terms = self.exact.terms if exact_terms == NO_FORMULA else exact_terms
        tradeoff = tuple(self._step(each) for each in pareto(tried))
        nothing = replace(nothing, exact_terms=exact_terms, tradeoff=tradeoff)
        within = sorted(
            (each for each in tried if each.worst <= self.within), key=lambda each: (each.terms, each.worst)
        )
        if not within:
            return replace(nothing, why="no set of assumptions leads to a formula within the bound")
        for tried_one in within[:_TRIES]:
            each = search.pruned(tried_one)
            verdict = self._judged(each)
            if verdict is not None and verdict.verdict == HOLDS:
                return self._found(nothing, each, verdict)
        return replace(nothing, why="no formula that was tried holds all over the span")

    def _nested(self, nothing: Shortest) -> Shortest:
        """Of a response that is not written out: symbols struck, then its largest terms."""
        parts = self.known.stage.parts
        matched = [
            a
            for a in self._candidates()
            if a.equal and all(parts[m].kind.prefixed for g in a.equal for m in g)
        ]
        try:
            for found in short_ratios(self.exact, self.quantity, matched, self.sample, self.within):
                tried = Tried(found.ratio, frozenset(), found.dropped, found.worst)
                verdict = self._judged(tried)
                if verdict is not None and verdict.verdict == HOLDS:
                    step = TradeOff(found.terms, found.worst, self._shape(tried), found.names, found.dropped)
                    return replace(
                        nothing,
                        terms=found.terms,
                        shape=step.shape,
                        judged=verdict,
                        assumptions=found.names,
                        changes=found.changes,
                        dropped=found.dropped,
                        tradeoff=(step,),
                    )
        except StageError as error:
            return replace(nothing, why=error.problem)
        return replace(nothing, why="no formula that was tried holds all over the span")

    @cached_property
    def sample(self) -> Sample:
        return sample_of(self.known.stage)

    def _candidates(self) -> list[Assumption]:
        own = [a for a in self.known.assumptions if a.applies(self.response)]
        names = {a.name for a in own}
        found = list(own)
        for entry in self.known.entries(self.response):
            # That two parts are alike is for the stage file to say: a formula in the other one's symbols misleads.
            if (
                entry.plausible
                and (not entry.assumption.equal or not self.exact.expanded)
                and entry.assumption.name not in names
            ):
                found.append(entry.assumption)
                self.tables[entry.assumption.name] = entry.toml
        return found

    def _shape(self, tried: Tried) -> Shape:
        assert tried.ratio is not None
        return shape_of(*tried.ratio, weights={**self.exact.bias_values, PI: 3.141592653589793})

    def _step(self, tried: Tried) -> TradeOff:
        return TradeOff(
            tried.terms, tried.worst, self._shape(tried), self._in_order(tried.made), tried.dropped
        )

    def _in_order(self, made: frozenset[str]) -> tuple[str, ...]:
        """Those of the stage file first, as listed there."""
        own = [a.name for a in self.known.assumptions if a.name in made]
        return (*own, *(name for name in self.tables if name in made))

    def _judged(self, tried: Tried) -> Judged | None:
        text = self._shape(tried).text()
        if len(text) > _LONGEST:
            return None
        claim = Claim(self.response, self.quantity, text, parse(text), self.within, key="--within")
        examined = Examined(self.known, claim, with_ways=False)
        if examined.root not in (None, self.quantity.index):
            return None
        self.span = claims_over_span(self.known.stage, [examined.table], self.points, self.seed)
        figures = self.span.figures[0] if self.span else ()
        prover = Prover.of(self.known.stage)
        if prover is not None and figures:
            figures = (prover.claim(examined, figures[0]), *figures[1:])
        return judged(examined, figures)

    def _found(self, base: Shortest, tried: Tried, verdict: Judged) -> Shortest:
        names = self._in_order(tried.made)
        own = sum(1 for name in names if name not in self.tables)
        account = None
        if names:
            candidates = {a.name: a for a in self._candidates()}
            ledger = make_ledger(
                self.known.stage,
                quantities=[self.name],
                assumptions=[candidates[name] for name in names],
                points=self.points,
                seed=self.seed,
            )
            account = ledger.accounts[0]
        return replace(
            base,
            terms=tried.terms,
            shape=self._shape(tried),
            judged=verdict,
            assumptions=names,
            own=own,
            tables=tuple(self.tables[name] for name in names if name in self.tables),
            dropped=tried.dropped,
            account=account,
            formula_exact=verdict.formula_exact,
        )


def pareto(tried: Sequence[Tried]) -> list[Tried]:
    """Of each number of terms the least worst error, as far as that is no larger than that of longer formulas."""
    best: dict[int, Tried] = {}
    for each in tried:
        if each.terms not in best or each.worst < best[each.terms].worst:
            best[each.terms] = each
    kept: list[Tried] = []
    for terms in sorted(best, reverse=True):
        while kept and kept[-1].worst >= best[terms].worst:
            kept.pop()
        kept.append(best[terms])
    return kept
