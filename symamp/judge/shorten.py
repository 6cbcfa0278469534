"""The shortest formula of a quantity whose error stays within a bound all over the span (room: judge)."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from symamp.assumptions.read import read_assumptions
from symamp.circuit.near import propose
from symamp.circuit.stage import Stage
from symamp.errors import InputError, StageError
from symamp.exact.asked_quantity import Quantity, in_decibels_or_degrees, parse_quantity
from symamp.exact.shape import Shape, shape_of
from symamp.formula import parse
from symamp.judge.balance import PI
from symamp.judge.check import judged
from symamp.judge.claim import Claim
from symamp.judge.claim_span import ClaimSpan, claims_over_span
from symamp.judge.errors_at import Progress
from symamp.judge.examined import Examined, Known
from symamp.judge.ledger import POINTS, SEED, make_ledger
from symamp.judge.ledger_tables import default_quantities
from symamp.judge.proving import Prover
from symamp.judge.response_errors import ResponseSpan
from symamp.judge.sample import sample_of
from symamp.judge.shorten_candidates import Candidates
from symamp.judge.shorten_nested import Striking, Struck
from symamp.judge.shorten_response import shortest_response
from symamp.judge.shortening import NO_FORMULA, Search, Tried, pareto
from symamp.judge.shortening_measures import OfQuantity
from symamp.judge.shortest import Shortening, Shortest, TradeOff
from symamp.judge.verdict import HOLDS, Judged

_TRIES = 24  # formulas that are judged over the whole span before the search gives up
_LONGEST = 18_000  # characters of a formula that is read back


def make_shortest(
    stage: Stage,
    within: float,
    *,
    quantities: Sequence[str] = (),
    responses: Sequence[str] = (),
    points: int = POINTS,
    seed: int = SEED,
    progress: Progress | None = None,
) -> Shortening:
    """The shortest formulas within a relative error, of the quantities named ("gain.dc") or of the usual ones.

    Of the `responses` named the shortest N(s)/D(s) too; where these are named and no quantity is, of them alone.
    Raises StageError for an unknown quantity or response, a quantity in dB or degrees, and a missing bias value.
    """
    known = Known(stage, read_assumptions(stage))
    for name in responses:
        _known_response(stage, name, "--response")
    found, spans = [], []
    for response, quantity in () if responses and not quantities else _asked(known, quantities):
        job = _Job(known, response, quantity, within, points, seed, progress)
        found.append(job.shortest())
        spans.append(job.span)
    whole = [
        shortest_response(known, name, within, points, seed, progress) for name in dict.fromkeys(responses)
    ]
    last = _last([*spans, *(each.span for each in whole)])
    return Shortening(
        stage,
        within,
        tuple(found),
        tuple(whole),
        tuple(stage.warnings),
        tuple(stage.remarks),
        last.points if last else 0,
        last.seed if last else None,
        last.method if last else "",
    )


def _last(spans: Sequence[ClaimSpan | ResponseSpan | None]) -> ClaimSpan | ResponseSpan | None:
    """The last of the looks at the span that saw something."""
    return next((span for span in reversed(spans) if span is not None and span.points), None)


def _known_response(stage: Stage, name: str, key: str) -> None:
    if name not in stage.asked:
        raise StageError(f"there is no response {name!r}", propose(name, stage.asked, "responses"), key=key)


def _asked(known: Known, names: Sequence[str]) -> list[tuple[str, Quantity]]:
    if not names:
        return [
            (name, quantity)
            for name in known.stage.asked
            for quantity in default_quantities(known.response(name))
            if quantity.name != "unity_gain_frequency"
        ]
    return list(dict.fromkeys(_quantity(known.stage, text) for text in names))


def _quantity(stage: Stage, text: str) -> tuple[str, Quantity]:
    response, dot, rest = text.partition(".")
    if response not in stage.asked or not dot:
        listed = ", ".join(stage.asked)
        raise StageError(
            f"{text!r} names no quantity of a response",
            f"write RESPONSE.QUANTITY, such as {next(iter(stage.asked))}.dc; responses are {listed}",
            key="--quantity",
        )
    try:
        quantity = parse_quantity(rest)
    except InputError as error:
        raise error.at(key="--quantity") from None
    if quantity.face is not None:
        raise StageError(
            f"{text} is a face of a quantity, and a formula is shortened as it is",
            f"ask for {response}.{replace(quantity, face=None).text}",
            key="--quantity",
        )
    if in_decibels_or_degrees(quantity):
        raise StageError(
            f"{text} is in dB or degrees, and a formula is shortened to a relative error",
            f"ask for {response}.dc or a pole",
            key="--quantity",
        )
    return response, quantity


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
        self.candidates = Candidates(known, response, self.exact)
        self.span: ClaimSpan | None = None

    @property
    def name(self) -> str:
        return f"{self.response}.{self.quantity.text}"

    def shortest(self) -> Shortest:
        """The search, and the first of its formulas, from the shortest on, that holds all over the span."""
        nothing = Shortest(self.name, None, self.exact.terms, None, None)
        value = self.exact.quantity(self.quantity.text)
        if value.value is None:
            return replace(nothing, why=value.why or "it has no value")
        if value.value == 0:
            return replace(nothing, why="it is 0, of which no error is a part")
        return self._written(nothing) if self.exact.expanded else self._nested(nothing)

    def _written(self, nothing: Shortest) -> Shortest:
        measure = OfQuantity(self.exact, self.quantity, sample_of(self.known.stage))
        search = Search(self.exact, measure, self.candidates.all, self.within, self.progress)
        tried = search.run()
        exact_terms = search.of(frozenset()).terms
        exact_terms = self.exact.terms if exact_terms == NO_FORMULA else exact_terms
        tradeoff = tuple(self._step(each) for each in pareto(tried, self.within))
        nothing = replace(nothing, exact_terms=exact_terms, tradeoff=tradeoff)
        within = sorted(
            (each for each in tried if each.worst <= self.within), key=lambda each: (each.terms, each.worst)
        )
        if not within:
            why = "no set of assumptions leads to a formula" + (" within the bound" if tried else "")
            return replace(nothing, why=why)
        for each in within[:_TRIES]:
            verdict = self._judged(each)
            if verdict is not None and verdict.verdict == HOLDS:
                return self._found(nothing, search.pruned(each), verdict)
        return replace(nothing, why="no formula that was tried holds all over the span")

    def _nested(self, nothing: Shortest) -> Shortest:
        """Of a response that is not written out: symbols struck, then its largest terms."""
        parts = self.known.stage.parts
        matched = [
            a
            for a in self.candidates.all
            if a.equal and all(parts[m].kind.prefixed for g in a.equal for m in g)
        ]
        try:
            striking = Striking(self.exact, self.quantity, matched, sample_of(self.known.stage))
        except StageError as error:
            return replace(nothing, why=f"{error.problem}; {error.remedy}")
        first = striking.within(self.within)
        every = [*first, *striking.around(self.within)]
        named = [Tried(each.ratio, frozenset(each.names), each.dropped, each.worst) for each in every]
        steps = pareto(named, self.within)
        nothing = replace(nothing, tradeoff=tuple(self._step(step) for step in steps))
        for found in self._in_turn(striking, every):
            verdict = self._judged(Tried(found.ratio, frozenset(), found.dropped, found.worst))
            if verdict is not None and verdict.verdict == HOLDS:
                return self._struck(nothing, found, verdict)
        return replace(nothing, why="no formula that was tried holds all over the span")

    def _in_turn(self, striking: Striking, every: Sequence[Struck]) -> Iterator[Struck]:
        """Those within the bound, the shortest first; where none of them holds, tighter ones are sought."""
        yield from sorted(
            (each for each in every if each.worst <= self.within), key=lambda each: (each.terms, each.worst)
        )
        yield from striking.tighter(self.within)

    def _struck(self, nothing: Shortest, found: Struck, verdict: Judged) -> Shortest:
        own = sum(1 for name in found.made if name not in self.candidates.tables)
        return replace(
            nothing,
            terms=found.terms,
            shape=self._shape(Tried(found.ratio, frozenset(), found.dropped, found.worst)),
            judged=verdict,
            assumptions=found.names,
            own=own,
            tables=(*self.candidates.tables_of(found.made), *found.tables),
            changes=found.changes,
            dropped=found.dropped,
        )

    def _shape(self, tried: Tried) -> Shape:
        assert tried.ratio is not None
        return shape_of(*tried.ratio, weights={**self.exact.bias_values, PI: 3.141592653589793})

    def _step(self, tried: Tried) -> TradeOff:
        names = self.candidates.in_order(tried.made) if self.exact.expanded else tuple(sorted(tried.made))
        return TradeOff(tried.terms, tried.worst, self._shape(tried), names, tried.dropped)

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
        names = self.candidates.in_order(tried.made)
        account = None
        if names:
            ledger = make_ledger(
                self.known.stage,
                quantities=[self.name],
                assumptions=self.candidates.named(names),
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
            own=self.candidates.own_count(names),
            tables=self.candidates.tables_of(names),
            dropped=tried.dropped,
            account=account,
            formula_exact=verdict.formula_exact,
        )
