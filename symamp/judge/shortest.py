"""The plain data of shortest formulas (room: judge)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from symamp.circuit.stage import Stage
from symamp.exact.formulas import Formula
from symamp.exact.response import Response
from symamp.exact.shape import Shape
from symamp.judge.ledger import Account
from symamp.judge.response_errors import ResponseSpan
from symamp.judge.verdict import Judged


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
    `dropped` counts single terms left out after them. `tables` are the stage file's tables of the others, as far as
    there are such. `changes` is what each of them changed when it was made (nan: not known), of a response that is
    not written out.
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
class ShortestResponse:
    """The shortest N(s)/D(s) of a response, None where none was found; `error` is the largest at the bias point.

    `figures` are those of a ledger (`alone`, `added`, `last`, `share`) of each assumption, of that error. For the rest
    see `Shortest`.
    """

    name: str
    exact: Response
    response: Response | None = None
    shape: Shape | None = None
    error: float | None = None
    span: ResponseSpan | None = None
    assumptions: tuple[str, ...] = ()
    own: int = 0
    tables: tuple[str, ...] = ()
    dropped: int = 0
    tradeoff: tuple[TradeOff, ...] = ()
    figures: tuple[Mapping[str, float | None], ...] = ()
    why: str = ""

    @property
    def terms(self) -> int | None:
        """Terms of N and D."""
        return None if self.response is None else self.response.terms


@dataclass(frozen=True)
class Shortening:
    """The shortest formulas of all quantities and responses asked for."""

    stage: Stage
    within: float
    found: tuple[Shortest, ...]
    responses: tuple[ShortestResponse, ...] = ()
    warnings: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    points: int = 0
    seed: int | None = None
    method: str = ""
