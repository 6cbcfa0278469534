"""What is found out about a claim (room: judge): its verdict, its error, its tacit conditions."""

from __future__ import annotations

from dataclasses import dataclass, replace

from symamp.circuit.stage import Stage
from symamp.exact.formulas import Formula
from symamp.exact.shape import Shape
from symamp.judge.claim import Claim
from symamp.judge.error_formula import ErrorFormula
from symamp.judge.span_errors import SpanFigure

HOLDS = "holds"  # at every point of the span
HOLDS_HERE = "holds here"  # at the bias point, and not all over the span
FAILS = "fails"  # not even at the bias point
WRONG = "wrong"  # no limit of the exact expression


@dataclass(frozen=True)
class Condition:
    """A ratio that a claim takes to be small, or, of an `assumption` of the stage (equal, set), to be 1.

    `ratio` is the whole of it; `shown` has the largest term of its denominator at the bias point alone. `effect`
    is what it adds to the error at the bias point, to first order (of an assumption: the error that it makes
    alone); `span` is over the span, least and greatest.
    """

    ratio: Shape
    shown: Shape
    at_bias: float | None
    effect: float | None
    span: SpanFigure | None = None
    assumption: str = ""
    why: str = ""

    @property
    def target(self) -> int:
        """What the claim takes the ratio to be."""
        return 1 if self.assumption else 0

    @property
    def largest(self) -> float | None:
        """The value over the span that is largest in magnitude; without a span that at the bias point."""
        if self.span is None:
            return self.at_bias
        return max(self.span.least, self.span.greatest, key=abs)


@dataclass(frozen=True)
class Way:
    """A set of named assumptions that turns the exact expression into the claim.

    `own` says that all of them stand in the stage file; else they come from the catalogue for the stage, and
    `keys` are the stage file's lines of each.
    """

    names: tuple[str, ...]
    own: bool
    keys: tuple[str, ...] = ()


@dataclass(frozen=True)
class Judged:
    """A claim with its verdict. `why` is one sentence or more; `error` as the design's section 6 has it.

    `root` names the pole or zero that the claim's error is taken against where that is another than the one
    claimed ("p2"). `conditions` come most harmful first; `ways` shortest first. A figure that does not exist is
    None, and `why_not` says why of it. `symbols` are those that the error depends on; empty where that is not known.
    """

    claim: Claim
    unit: str
    exact: float | complex | None
    claimed: float | complex | None
    error: float | complex | None
    verdict: str
    why: str
    formula_exact: Formula | None = None
    error_formula: ErrorFormula | None = None
    span: SpanFigure | None = None
    conditions: tuple[Condition, ...] = ()
    ways: tuple[Way, ...] = ()
    root: str = ""
    absolute: bool = False
    modulus: bool = False
    why_not: str = ""
    remarks: tuple[str, ...] = ()
    symbols: frozenset[str] = frozenset()

    @property
    def verdict_words(self) -> str:
        """The verdict, with the root it is about where that is another than the one claimed."""
        if not self.root:
            return self.verdict
        named = replace(self.claim.quantity, face=None).text
        return f"{self.verdict} for {self.root}, not {named}"


@dataclass(frozen=True)
class Check:
    """The verdicts on all claims of a stage, with what a reader should know beside them."""

    stage: Stage
    claims: tuple[Judged, ...]
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    points: int = 0
    seed: int | None = None
    method: str = ""

    @property
    def all_hold(self) -> bool:
        """Whether every claim holds over the whole span."""
        return all(judged.verdict == HOLDS for judged in self.claims)
