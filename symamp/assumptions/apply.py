"""The engine: a set of assumptions put to an exact response, in steps, as a set."""

from __future__ import annotations

from collections.abc import Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property

from symamp.assumptions.dominance import Dominance, idle, pool
from symamp.assumptions.dropping import Dominated, Dropped, Kept, TermTable
from symamp.assumptions.generated import Generator
from symamp.assumptions.merge import Pooled, pooled
from symamp.assumptions.nested import NestedEngine
from symamp.assumptions.record import Assumption, Miller, Pair
from symamp.assumptions.rewrite import symbol_value
from symamp.assumptions.roots import step_on_roots
from symamp.assumptions.written import WrittenEngine, struck_ratio
from symamp.errors import StageError, TooLargeError
from symamp.exact.derive import nested_of
from symamp.exact.forms import Expanded, Nested
from symamp.exact.response import Response

__all__ = ["Approximation", "Approximator", "Dropped", "Kept"]


@dataclass(frozen=True)
class Approximation:
    """A response under a set of assumptions; `response` is None where nothing is left, and `why` says so.

    `left` is there where dominance was put to generated terms: of each coefficient ("b2") that has more, what those
    that were not generated are worth at the bias point, as a part of it.
    """

    assumptions: tuple[str, ...]
    response: Response | None
    why: str = ""
    dominated: Dominated | None = None
    remarks: tuple[str, ...] = ()
    left: Mapping[str, float] = field(default_factory=dict)

    @cached_property
    def dropped(self) -> tuple[Dropped, ...]:
        """What dominance dropped, each term with the one it fell to."""
        return () if self.dominated is None else self.dominated.dropped

    @cached_property
    def kept(self) -> tuple[Kept, ...]:
        """What dominance was put to and left: the terms that none of their coefficient outweighs."""
        return () if self.dominated is None else self.dominated.kept

    @cached_property
    def warnings(self) -> tuple[str, ...]:
        """Where kept terms nearly cancel."""
        return () if self.dominated is None else self.dominated.warnings


class Approximator:
    """Puts sets of assumptions to one exact response; what sets share is worked out once."""

    def __init__(self, exact: Response) -> None:
        self.exact = exact
        self._engine = WrittenEngine(exact) if exact.expanded else NestedEngine(exact)
        self._generator = Generator(exact)
        self._cones: dict[Hashable, Dominance | None] = {}
        self._tables: dict[int, TermTable] = {}
        self._dominated: dict[Hashable, Dominated] = {}
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
                # A stage file is refused for this; here it is a part of a set that agrees only as a whole.
                self._done[key] = Approximation((), None, error.problem)
        return replace(self._done[key], assumptions=names)

    def _under(self, ask: Pooled) -> Approximation:
        remarks = [*ask.remarks, *_idle_words(ask.pairs)]
        bridges = self._live_bridges(ask, remarks)
        try:
            outcome = self._engine.under(ask, bridges)
        except TooLargeError:
            outcome = self._on_graph.under(ask, bridges)
        remarks += outcome.remarks
        form = outcome.form
        if form is None:
            return Approximation((), None, outcome.why, remarks=_once(remarks))
        cone_key = _cone_key(ask.pairs)
        dominance = self._pool(cone_key, ask.pairs)
        dominated = None
        left: Mapping[str, float] = {}
        if dominance is not None:
            if isinstance(form, Nested):
                generated = self._generator.of(form, ask)
                if isinstance(generated, str):
                    return Approximation((), None, generated, remarks=_once(remarks))
                form, left = generated.form, generated.left
                remarks += generated.remarks
            try:
                dominated = self._dominate(form, cone_key, dominance)
            except TooLargeError as error:
                return Approximation((), None, str(error), remarks=_once(remarks))
            form = dominated.form
        response, why, more = self._on_roots(ask, form)
        return Approximation((), response, why, dominated, _once([*remarks, *more]), left)

    @cached_property
    def _on_graph(self) -> NestedEngine:
        """The engine for sets under which the response grows too large to be written out."""
        exact = self.exact
        ratio = struck_ratio(exact.stage, exact.asked, frozenset())
        return NestedEngine(replace(exact, form=nested_of(exact.stage, ratio)))

    def _live_bridges(self, ask: Pooled, remarks: list[str]) -> tuple[Miller, ...]:
        """The bridges that the response has, and that are still there after step 2."""
        live = []
        for bridge in ask.miller:
            if not self._engine.depends_on(bridge.symbol):
                continue
            order, (value, _) = symbol_value(self.exact.stage, bridge.symbol, ask)
            if order or value.is_zero():
                remarks.append(f"{bridge.symbol} is taken to its limit, so there is no bridge to split")
            else:
                live.append(bridge)
        return tuple(live)

    def _pool(self, key: Hashable, pairs: Sequence[Pair]) -> Dominance | None:
        if key not in self._cones:
            self._cones[key] = pool(pairs)
        return self._cones[key]

    def _dominate(self, form: Expanded, cone_key: Hashable, dominance: Dominance) -> Dominated:
        """The form after step 4; forms and their tables are kept, so that their identity stands for them."""
        if id(form) not in self._tables:
            self._tables[id(form)] = TermTable(form)
        key = (id(form), cone_key)
        if key not in self._dominated:
            self._dominated[key] = Dominated.of(self._tables[id(form)], dominance, self.exact)
        return self._dominated[key]

    def _on_roots(self, ask: Pooled, form: Expanded | Nested) -> tuple[Response | None, str, list[str]]:
        whole = (id(form), ask.dominant_pole, ask.poles_far_apart, ask.band)
        if whole not in self._rooted:
            response = self.exact if form is self.exact.form else replace(self.exact, form=form)
            self._rooted[whole] = step_on_roots(response, ask)
        return self._rooted[whole]


def _cone_key(pairs: Iterable[Pair]) -> Hashable:
    return frozenset(pair.key for pair in pairs)


def _idle_words(pairs: Sequence[Pair]) -> list[str]:
    return [f"{name!r} compares something with itself, and that has no effect" for name in idle(pairs)]


def _once(remarks: Iterable[str]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(remarks))
