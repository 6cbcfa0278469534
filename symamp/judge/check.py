"""The verdict on each claim (room: judge): its error, its tacit conditions, and what it stands on."""

from __future__ import annotations

import math
from collections.abc import Sequence
from concurrent.futures import Executor

import numpy as np

from symamp.assumptions.read import read_assumptions
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.exact.formulas import formula_of
from symamp.exact.shape import shape_of
from symamp.judge.balance import Tacit
from symamp.judge.claim import Claim
from symamp.judge.claim_errors import error_with
from symamp.judge.claim_reading import read_claims
from symamp.judge.claim_span import claims_over_span
from symamp.judge.conditions import Taken
from symamp.judge.errors_at import Progress
from symamp.judge.examined import Examined, Known
from symamp.judge.ledger import POINTS, SEED
from symamp.judge.proving import Prover
from symamp.judge.span_errors import SpanFigure
from symamp.judge.verdict import WRONG, Check, Condition, Judged, Way
from symamp.judge.verdict_words import verdict_of
from symamp.span.executing import Engine

_Figures = Sequence[SpanFigure | None]


def make_check(
    stage: Stage,
    *,
    claims: Sequence[Claim] | None = None,
    points: int = POINTS,
    seed: int = SEED,
    prove: bool = True,
    progress: Progress | None = None,
    executor: Executor | Engine | None = None,
) -> Check:
    """The verdicts on all claims of a stage, or on those given.

    `points` Sobol points are drawn from a box with that seed; with `prove` errors are then proved where a proof ends
    within its budget. An executor, or an engine of `span.workers`, looks at the points, with the same bits. Raises
    StageError where there is no claim, or a bias value is missing; ReadError where a formula joins unlike units; and
    as `claims_over_span`.
    """
    examined = examine(stage, claims)
    alike = [each for each in examined if not each.mismatch]
    span = claims_over_span(stage, [each.table for each in alike], points, seed, progress, executor)
    prover = Prover.of(stage) if prove else None
    figures: dict[int, _Figures] = {}
    for each, found in zip(alike, span.figures if span else (), strict=False):
        figures[id(each)] = found if prover is None else (prover.claim(each, found[0]), *found[1:])
    return Check(
        stage,
        tuple(judged(each, figures.get(id(each), ())) for each in examined),
        tuple(stage.warnings),
        tuple(stage.remarks),
        span.points if span else 0,
        span.seed if span else None,
        span.method if span else "",
    )


def examine(stage: Stage, claims: Sequence[Claim] | None = None) -> list[Examined]:
    """All claims of a stage, or those given, each beside its exact response. Errors as in `make_check`."""
    made = read_claims(stage) if claims is None else tuple(claims)
    if not made:
        raise StageError(
            "this stage makes no claim, so there is nothing to judge",
            'add one, such as [[claim]] with about = "gain.dc", formula = "-gm1*ro1" and within = "10 %"',
            key="claim",
            file=stage.file,
        )
    known = Known(stage, read_assumptions(stage))
    return [Examined(known, claim) for claim in made]


def judged(claim: Examined, figures: _Figures = ()) -> Judged:
    """The verdict on a claim; `figures` are those of its table's rows over the span, empty where there is none."""
    if claim.mismatch:
        return _of_another_unit(claim)
    over = figures[0] if figures else None
    verdict, why = verdict_of(claim, over)
    conditions = _conditions(claim, figures)
    return Judged(
        claim=claim.claim,
        unit=claim.unit,
        exact=claim.exact_value,
        claimed=claim.claimed if math.isfinite(claim.claimed) else None,
        error=claim.error,
        verdict=verdict,
        why=why,
        formula_exact=claim.formula_exact,
        error_formula=claim.error_formula,
        span=over,
        conditions=conditions,
        ways=_ways(claim),
        root=claim.other_root,
        absolute=claim.absolute,
        modulus=isinstance(claim.error, complex) or (over is not None and over.modulus),
        why_not=claim.why_missing,
        remarks=(*claim.remarks, *_cancelling(claim, conditions)),
        symbols=claim.symbols,
    )


def _cancelling(claim: Examined, conditions: Sequence[Condition]) -> tuple[str, ...]:
    """Words where a claim holds at the bias point only because its conditions' errors cancel."""
    effects = [c.effect for c in conditions if c.effect is not None]
    if claim.error is None or claim.absolute or abs(claim.error) > claim.claim.within or not effects:
        return ()
    above, below = (max(side, default=0.0, key=abs) for side in _by_sign(effects))
    if min(abs(above), abs(below)) <= claim.claim.within:
        return ()
    return (
        f"errors cancel here: single conditions add {100 * above:+.3g} % and {100 * below:+.3g} %".replace(
            "-", "−"
        ),
    )


def _by_sign(effects: Sequence[float]) -> tuple[list[float], list[float]]:
    return [e for e in effects if e > 0], [e for e in effects if e < 0]


def _of_another_unit(claim: Examined) -> Judged:
    found = claim.exact.bias_figures.value(claim.quantity)[0]
    value = None if not np.isfinite(found) else complex(found) if np.iscomplexobj(found) else float(found)
    return Judged(
        claim.claim,
        claim.unit,
        value,
        None,
        None,
        WRONG,
        claim.mismatch,
        formula_of(claim.exact, claim.quantity),
        absolute=claim.absolute,
        why_not=f"{claim.mismatch}, so the two cannot be compared",
    )


def _conditions(claim: Examined, figures: _Figures) -> tuple[Condition, ...]:
    """Most harmful first."""
    found = []
    for row, tacit in enumerate(claim.tacit, start=1):
        found.append(_condition(claim, tacit, figures[row] if figures else None))
    for row, taken in enumerate(claim.balanced.taken, start=1 + len(claim.tacit)):
        found.append(_assumed(claim, taken, figures[row] if figures else None))
    return tuple(sorted(found, key=lambda c: -abs(c.at_bias or 0.0 if c.effect is None else c.effect)))


def _condition(claim: Examined, tacit: Tacit, over: SpanFigure | None) -> Condition:
    value = tacit.value(claim.values)
    with np.errstate(all="ignore"):
        effect = float(np.float64(tacit.sign * value) / claim.slope)
    return Condition(
        ratio=shape_of(tacit.numerator, tacit.denominator, weights=claim.values),
        shown=shape_of(*tacit.shown(claim.values), weights=claim.values),
        at_bias=value if math.isfinite(value) else None,
        effect=effect if math.isfinite(effect) else None,
        span=over,
        why="" if math.isfinite(value) else "a symbol in its denominator is 0",
    )


def _assumed(claim: Examined, taken: Taken, over: SpanFigure | None) -> Condition:
    """What an `equal` or `set` assumption takes to be 1."""
    shape = shape_of(*taken.ratio, weights=claim.values)
    value = Tacit(*taken.ratio, "above", {}).value(claim.values)
    effect = error_with(claim.table, taken, claim.exact.bias_values)
    return Condition(
        shape,
        shape,
        value if math.isfinite(value) else None,
        abs(effect) if isinstance(effect, complex) else effect,
        over,
        assumption=taken.assumption,
    )


def _ways(claim: Examined) -> tuple[Way, ...]:
    """Named assumptions that turn the exact expression into the claim, where its terms can be compared."""
    if not claim.with_ways or claim.identity or claim.target is None:
        return ()
    if claim.plain.balance is None or not claim.plain.whole:
        return ()
    quantity, ratio = claim.target
    # A claim that is no limit of the exact expression comes from no catalogue; from what the stage sets it may.
    return claim.known.ways(claim.claim.response).to(quantity, ratio, wider=claim.off is None)
