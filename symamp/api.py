"""The front for Python: a stage that answers, and responses that can be put under assumptions.

Thin objects over the rooms below: each method is one call into one of them.
"""

from __future__ import annotations

import os
from collections.abc import Sequence
from functools import cached_property
from pathlib import Path
from typing import Any

from symamp.assumptions.apply import Approximation, Approximator
from symamp.assumptions.read import Assumption, chosen, read_assumptions
from symamp.circuit.builder import StageBuilder as PlainBuilder
from symamp.circuit.stage import Stage as StageData
from symamp.circuit.stagefile import read_stage
from symamp.circuit.writer import save_stage
from symamp.errors import StageError
from symamp.exact.derive import derive
from symamp.exact.response import QuantityValue, Response
from symamp.exact.time_constants import TimeConstant, time_constants
from symamp.judge.check import examine, make_check
from symamp.judge.claim import Claim
from symamp.judge.claim_reading import WITHIN, claim_of
from symamp.judge.error_map import error_map
from symamp.judge.frontier import make_frontiers
from symamp.judge.ledger import POINTS, SEED, make_ledger
from symamp.judge.shorten import make_shortest
from symamp.results import StageCheck, StageFrontier, StageLedger, StageShortening
from symamp.show.bode import bode_of
from symamp.show.maps import map_of
from symamp.show.note_files import write_note
from symamp.show.picture import Picture
from symamp.show.run_note import document_of
from symamp.show.run_shorten import allowed_error
from symamp.span.workers import workers_of
from symamp.values import read_frequency


def load(path: str | os.PathLike[str]) -> Stage:
    """Read a stage file. Raises StageError or ReadError, each naming file, line, key and the way out."""
    return Stage(read_stage(path))


class Stage:
    """A stage: its responses, and the judgements on it. `data` is the plain data underneath."""

    def __init__(self, data: StageData) -> None:
        self.data = data
        self._responses: dict[str, StageResponse] = {}

    @property
    def title(self) -> str:
        return self.data.title

    @property
    def warnings(self) -> tuple[str, ...]:
        return self.data.warnings

    @property
    def symbols(self) -> dict[str, float | None]:
        """Every symbol's bias value in SI units, None for one without."""
        bias = self.data.bias
        return {name: float(bias[name]) if name in bias else None for name in self.data.symbols}

    @property
    def responses(self) -> tuple[str, ...]:
        """The names of the responses."""
        return tuple(self.data.asked)

    @cached_property
    def assumptions(self) -> tuple[Assumption, ...]:
        """The assumptions, read. Raises StageError for one that means nothing or contradicts another."""
        return read_assumptions(self.data)

    def response(self, name: str) -> StageResponse:
        """The exact response of that name, worked out once. Raises StageError for an unknown one."""
        if name not in self.data.asked:
            known = ", ".join(self.data.asked)
            raise StageError(f"there is no response {name!r}", f"this stage has {known}", file=self.data.file)
        if name not in self._responses:
            self._responses[name] = StageResponse(self, derive(self.data, self.data.asked[name]))
        return self._responses[name]

    def ledger(
        self,
        quantities: str | Sequence[str] = (),
        *,
        points: int = POINTS,
        seed: int = SEED,
        workers: int = 1,
    ) -> StageLedger:
        """The errors that the assumptions add, at the bias point and over the span (see `make_ledger`)."""
        wanted = [quantities] if isinstance(quantities, str) else quantities
        given: dict[str, Any] = {"quantities": wanted, "assumptions": self.assumptions}
        with workers_of(workers) as engine:
            return StageLedger(make_ledger(self.data, **given, points=points, seed=seed, executor=engine))

    def check(
        self,
        claim: str | Sequence[str] = (),
        *,
        within: str = WITHIN,
        points: int = POINTS,
        seed: int = SEED,
        workers: int = 1,
    ) -> StageCheck:
        """A verdict on each claim of the stage, or on those given, such as "gain.dc = -gm1*ro1" (see `make_check`)."""
        claims = self._claims(claim, within)
        with workers_of(workers) as engine:
            return StageCheck(make_check(self.data, claims=claims, points=points, seed=seed, executor=engine))

    def frontier(self, claim: str | Sequence[str] = (), *, within: str = WITHIN) -> StageFrontier:
        """Where each claim stops holding: the ratios at which its error reaches what it is allowed."""
        return StageFrontier(self.data, make_frontiers(self.data, self._claims(claim, within)))

    def error_map(self, claim: str, x: str, y: str, *, within: str = WITHIN) -> Picture:
        """The error of a claim such as "gain.dc = -gm1*ro1" over two symbols, with the frontier in it."""
        (examined,) = examine(self.data, [claim_of(self.data, claim, within)])
        return map_of(error_map(examined, x, y))

    def shorten(
        self,
        quantities: str | Sequence[str] = (),
        *,
        within: str,
        responses: str | Sequence[str] = (),
        points: int = POINTS,
        seed: int = SEED,
    ) -> StageShortening:
        """The shortest formulas whose error stays within "5 %", say, all over the span (see `make_shortest`)."""
        wanted, whole = ([x] if isinstance(x, str) else list(x) for x in (quantities, responses))
        bound = allowed_error(within)
        return StageShortening(
            make_shortest(self.data, bound, quantities=wanted, responses=whole, points=points, seed=seed)
        )

    def _claims(self, claim: str | Sequence[str], within: str) -> tuple[Claim, ...] | None:
        texts = [claim] if isinstance(claim, str) else list(claim)
        return tuple(claim_of(self.data, text, within) for text in texts) if texts else None

    def note(self, path: str | os.PathLike[str], *, points: int = POINTS, seed: int = SEED) -> Path:
        """Write a design note by the ending of `path`: .tex, .html or .md; the path.

        Raises InputError for another ending and where nothing can be written.
        """
        return write_note(document_of(self.data, points=points, seed=seed), Path(path))[0]

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Save as a stage file that reads back to the same stage."""
        return save_stage(self.data, path)

    def __repr__(self) -> str:
        return f"<stage {self.title!r}: responses {', '.join(self.responses)}>"


class _Answering:
    """What an exact and an approximate response answer alike."""

    def _response(self) -> Response:
        raise NotImplementedError

    @property
    def numerator(self) -> list[Any] | None:
        """Coefficients of s, ascending, as SymPy expressions; None while nested."""
        return self._response().numerator

    @property
    def denominator(self) -> list[Any] | None:
        """Coefficients of s, ascending, as SymPy expressions; None while nested."""
        return self._response().denominator

    @property
    def unit(self) -> str:
        return self._response().unit

    @property
    def terms(self) -> int:
        """Terms written out, or the product terms that a nested response stands for."""
        return self._response().terms

    def at(self, hz: Any, bias: dict[str, Any] | None = None) -> Any:
        """The complex response at a frequency in Hz, as text such as "10 MHz" too, or an array (see `Response.at`)."""
        return self._response().at(float(read_frequency(hz)) if isinstance(hz, str) else hz, bias)

    def poles(self) -> list[complex]:
        """Poles at the bias point in rad/s, by increasing magnitude."""
        return self._response().poles()

    def zeros(self) -> list[complex]:
        """Zeros at the bias point in rad/s, by increasing magnitude."""
        return self._response().zeros()

    def quantity(self, name: str) -> QuantityValue:
        """A quantity with its value at the bias point and its formula."""
        return self._response().quantity(name)

    def _repr_latex_(self) -> str | None:
        return self._response()._repr_latex_()


class StageResponse(_Answering):
    """An exact response of a stage."""

    def __init__(self, stage: Stage, exact: Response) -> None:
        self.stage = stage
        self.exact = exact
        self._engine = Approximator(exact)

    def _response(self) -> Response:
        return self.exact

    def time_constants(self) -> tuple[TimeConstant, ...]:
        """The open-circuit time constants of the capacitors and inductors."""
        return time_constants(self.stage.data, self.exact.asked)

    def bode(self, *names: str) -> Picture:
        """The Bode plot at the bias point, with names that of the response under these assumptions beside it."""
        return bode_of(self.exact, self.under(*names)._response() if names else None)

    def under(self, *names: str) -> ApproximateResponse:
        """The approximate response under the assumptions of these names ("all" for every one), as a set."""
        return ApproximateResponse(self._engine.under(chosen(self.stage.assumptions, names)))

    def __repr__(self) -> str:
        return f"<response {self.exact.name!r} of {self.stage.title!r}>"


class ApproximateResponse(_Answering):
    """A response under a set of assumptions, with what was dropped.

    It answers as an exact one does. Where the assumptions leave no response, `response` is None, `why` says so, and
    asking raises StageError with those words.
    """

    def __init__(self, made: Approximation) -> None:
        self.response = made.response
        self.assumptions = made.assumptions
        self.why = made.why
        self.dropped = made.dropped
        self.kept = made.kept
        self.warnings = made.warnings
        self.remarks = made.remarks

    def _response(self) -> Response:
        if self.response is None:
            raise StageError(f"these assumptions leave no response: {self.why}", "leave one of them out")
        return self.response

    def __repr__(self) -> str:
        names = ", ".join(repr(name) for name in self.assumptions)
        return (
            f"<{'response' if self.response is not None else 'no response'} under {names or 'no assumption'}>"
        )


class StageBuilder(PlainBuilder):
    """A stage written part by part (see `symamp.circuit.builder`); `build()` gives the stage that answers."""

    def build(self) -> Stage:
        """The stage, checked as if it had been read from a file."""
        return Stage(self.stage())
